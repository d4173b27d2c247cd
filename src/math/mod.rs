//! Height 2: numerical methods on slices, cells and coordinates; knows no flow.

pub mod contour;
pub mod diff;
pub mod disjoint;
pub mod eigen;
pub mod fft;
pub mod fornberg;
mod isocubes;
mod isomesher;
pub mod isosurface;
mod isotable;
pub mod lanes;
pub mod lines;
pub mod moments;
pub mod planewise;
pub mod scheme;
pub mod stats;
pub mod surface;
mod unwrap;
