//! Height 6: orders the stages, from a request to a run folder.

pub mod analysis;
pub mod catalogue;
pub mod clock;
mod meshes;
pub mod passes;
mod provenance;
pub mod stream;
mod summary;
