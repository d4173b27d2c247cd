//! Height 6: orders the stages, from a request to a run folder.

pub mod analysis;
pub mod passes;
pub mod stream;
