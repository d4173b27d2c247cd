//! Which snapshot: a path as given, a group inside the file, a time the user knows.

use std::fmt;
use std::path::PathBuf;

/// One snapshot of a run, before anything is opened.
#[derive(Debug, Clone, PartialEq)]
pub struct SnapshotRef {
    /// A file or folder; `{field}` in it stands for the component's name, where every component has a file of its own.
    pub path: PathBuf,
    /// Group of an HDF5 file that holds one step.
    pub group: Option<String>,
    /// Time, where the user gives it.
    pub time: Option<f64>,
}

impl From<PathBuf> for SnapshotRef {
    fn from(path: PathBuf) -> Self {
        SnapshotRef { path, group: None, time: None }
    }
}

impl fmt::Display for SnapshotRef {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.path.display())?;
        match &self.group {
            Some(g) => write!(f, ":/{}", g.trim_matches('/')),
            None => Ok(()),
        }
    }
}
