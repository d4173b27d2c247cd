//! Height 6: orders the stages, from a request to a run folder.

pub mod analysis;
pub mod catalogue;
pub mod clock;
mod criteria;
mod cutouts;
mod files;
pub mod gather;
mod meshes;
pub mod parts;
pub mod passes;
mod provenance;
mod ready;
pub mod run_rms;
mod split;
pub mod stream;
mod summary;
mod warnings;
mod whole;
