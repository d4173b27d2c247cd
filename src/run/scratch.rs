//! The folder for what does not fit into memory: below the unfinished run folder, or where the user says.

use std::fs;
use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::export::atomic::Folder;

/// Its name inside an unfinished run folder.
const NAME: &str = "scratch";

/// A folder that is removed at the end, with all that is left in it.
pub struct ScratchFolder(PathBuf);

impl ScratchFolder {
    /// Makes one in the folder named, under a name that no other run has, or below the run folder.
    ///
    /// # Errors
    /// `Output` when it cannot be made.
    pub fn new(named: Option<&Path>, run: &Folder) -> Result<ScratchFolder> {
        let path = match named {
            Some(place) => place.join(format!("ropewalk-scratch-{}", std::process::id())),
            None => run.path(NAME),
        };
        fs::create_dir(&path).map_err(|e| failed(&path).found(e.to_string()))?;
        Ok(ScratchFolder(path))
    }

    /// Where it is.
    pub fn path(&self) -> &Path {
        &self.0
    }

    /// Removes it.
    ///
    /// # Errors
    /// `Output` when it cannot be removed.
    pub fn remove(self) -> Result<()> {
        fs::remove_dir_all(&self.0).map_err(|e| Error::output("cannot remove a folder").at(&self.0).found(e.to_string()))
    }
}

impl Drop for ScratchFolder {
    fn drop(&mut self) {
        if self.0.exists() {
            // The run failed for another reason, which is what gets reported.
            let _ = fs::remove_dir_all(&self.0);
        }
    }
}

/// Whether a place can hold one, before anything is read.
///
/// # Errors
/// `Output` when it is no folder.
pub fn check(named: Option<&Path>) -> Result<()> {
    match named {
        Some(place) if !place.is_dir() => {
            let found = if place.exists() { "something else" } else { "nothing" };
            Err(failed(place).expected("a folder").found(found).hint("--scratch DIR names one on a disk with room"))
        }
        _ => Ok(()),
    }
}

fn failed(path: &Path) -> Error {
    Error::output("cannot make the folder for what does not fit into memory").at(path)
}
