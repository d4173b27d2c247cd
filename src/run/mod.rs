//! Height 6: orders the stages, from a request to a run folder.

pub mod analysis;
pub mod catalogue;
pub mod clock;
pub mod config;
mod criteria;
mod cutouts;
mod files;
pub mod gather;
mod lines;
mod meshes;
pub mod parts;
pub mod passes;
pub mod plan;
mod provenance;
mod ready;
pub mod remarks;
pub mod run_rms;
mod split;
pub mod stream;
mod summary;
mod warnings;
mod whole;
