//! From what was typed (paths, patterns, lists, groups of steps) to the snapshots of a run, in order.

use std::path::PathBuf;

use crate::base::error::{Error, Result};
use crate::model::snapshot::SnapshotRef;
use crate::read::spec::InputSpec;

/// Where the snapshots of a run are named.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Series {
    /// Files, folders or patterns (`*`, `?`, `[..]`); `{field}` stands for a component's name; `FILE:/GROUP` for one step of an
    /// HDF5 file.
    pub paths: Vec<String>,
    /// Text files with one path a line; `#` begins a comment, a number behind the path is its time.
    pub lists: Vec<PathBuf>,
    /// Pattern of the groups that are steps of every file, e.g. `step_*`.
    pub steps: Option<String>,
    /// Times in the order of the snapshots, where the user gives them.
    pub times: Vec<f64>,
}

/// The snapshots, in the order named, those of a pattern sorted with numbers in their names compared as numbers.
///
/// # Errors
/// `Usage` for a malformed pattern or a number of times that is not that of the snapshots, `Input` when a pattern matches nothing
/// or a list cannot be read.
pub fn expand(_series: &Series, _spec: &InputSpec) -> Result<Vec<SnapshotRef>> {
    Err(Error::internal("not there yet"))
}
