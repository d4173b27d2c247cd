//! Catalogues of coherent structures from gridded turbulence snapshots.

pub mod base;
pub mod math;
pub mod model;
pub mod space;
