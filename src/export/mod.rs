//! Rows, meshes and volumes as bytes; only [`atomic`] sees a path, and [`hdf5`], whose library opens its files itself.

pub mod atomic;
pub mod csv;
pub mod cutout;
pub mod digits;
pub mod hdf5;
pub mod json;
pub mod jsonl;
pub mod labels;
#[cfg(feature = "parquet")]
pub mod parquet;
pub mod ply;
