//! Height 1: containers that live in the box.

pub mod cut;
mod dilate;
pub mod grid;
pub mod patch;
pub mod runs;
pub mod slab;
