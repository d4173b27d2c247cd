//! Height 2: numerical methods that know cells and coordinates but no flow.

pub mod halfedge;
mod isocubes;
mod isomesher;
pub mod isosurface;
mod isotable;
pub mod surface;
mod unwrap;
