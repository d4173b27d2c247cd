//! Rows and meshes as bytes; only [`atomic`] sees a path.

pub mod atomic;
pub mod csv;
pub mod json;
pub mod ply;
