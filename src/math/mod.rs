//! Height 2: numerics on plain slices.

pub mod diff;
pub mod disjoint;
pub mod moments;
pub mod stats;
