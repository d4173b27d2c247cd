//! From objects to rows of the catalogue: sums, surfaces, shapes.

mod classify;
pub mod patches;
pub mod row;
pub mod surface;
