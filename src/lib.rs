//! Catalogues of coherent structures from gridded turbulence snapshots.

pub mod base;
pub mod model;
pub mod read;
pub mod space;
