//! What a file holds, and a guess at how it is to be read.

use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::spec::InputSpec;

/// One array or dataset.
#[derive(Debug, Clone, PartialEq)]
pub struct Item {
    /// Path inside the file, or file name.
    pub name: String,
    /// Samples along every axis, slowest first.
    pub shape: Vec<usize>,
    /// Type of the values, e.g. `float32 little-endian`.
    pub values: String,
    /// How they are stored, e.g. `contiguous` or `chunks 64x64x64, gzip`.
    pub storage: String,
    /// Attributes with their values as text.
    pub attributes: Vec<(String, String)>,
}

/// What a file holds.
#[derive(Debug, Clone, PartialEq)]
pub struct Contents {
    /// The file or folder.
    pub path: PathBuf,
    /// What it is, e.g. `HDF5`.
    pub kind: String,
    /// Bytes on disk.
    pub bytes: u64,
    /// Its arrays.
    pub items: Vec<Item>,
    /// Attributes of the file itself.
    pub attributes: Vec<(String, String)>,
    /// Groups that look like steps of a run.
    pub steps: Vec<String>,
    /// How it would be read; lengths are 2 pi where nothing in the file says otherwise.
    pub guess: InputSpec,
    /// What was guessed and from what, one sentence each.
    pub reasons: Vec<String>,
    /// Time, where one is found.
    pub time: Option<f64>,
}

/// Looks into a file without reading values beyond headers, attributes and coordinates.
///
/// # Errors
/// `Input` when it cannot be read.
pub fn inspect(path: &Path) -> Result<Contents> {
    Err(Error::internal("not there yet").at(path))
}
