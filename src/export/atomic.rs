//! A folder that appears complete or not at all: built under another name, renamed at the end.

use std::fs::{self, File};
use std::io::Write;
use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};

/// A folder under construction. Dropped unfinished, it is removed.
pub struct Folder {
    target: PathBuf,
    building: PathBuf,
    replace: bool,
    finished: bool,
}

fn failed(what: &str, path: &Path, e: &std::io::Error) -> Error {
    Error::output(what).at(path).found(e.to_string())
}

/// Where a folder lies while it is being built.
pub fn unfinished(target: &Path) -> PathBuf {
    beside(target, ".unfinished")
}

/// The path with something appended to its last name.
fn beside(path: &Path, suffix: &str) -> PathBuf {
    let mut name = path.file_name().unwrap_or_default().to_os_string();
    name.push(suffix);
    path.with_file_name(name)
}

impl Folder {
    /// Starts building `target`.
    ///
    /// # Errors
    /// `Output` when it exists and `replace` is false, when another run is building it, or when the place cannot be written.
    pub fn create(target: &Path, replace: bool) -> Result<Folder> {
        if target.file_name().is_none() {
            return Err(Error::output("cannot make the run folder").at(target).expected("a folder name").hint("-o DIR names it"));
        }
        if target.exists() && !replace {
            return Err(Error::output("cannot make the run folder")
                .at(target)
                .expected("nothing there")
                .found("a run folder or file of that name")
                .hint("name another with -o, or pass --replace to put this run in its place once it is complete"));
        }
        if target.exists() && !target.is_dir() {
            return Err(Error::output("cannot replace the run folder").at(target).expected("a folder").found("a file"));
        }
        if target.is_dir() && !is_run_folder(target) {
            return Err(Error::output("cannot replace the run folder")
                .at(target)
                .expected("a run folder (one with run.json) or an empty folder")
                .found("other files")
                .hint("name another folder with -o"));
        }
        let building = unfinished(target);
        if let Some(parent) = target.parent().filter(|p| !p.as_os_str().is_empty()) {
            if parent.is_file() {
                return Err(Error::output("cannot make the run folder").at(target).expected("a folder above it").found("a file"));
            }
            fs::create_dir_all(parent).map_err(|e| failed("cannot make the run folder", parent, &e))?;
        }
        clear_if_orphaned(&building);
        fs::create_dir(&building).map_err(|e| {
            let error = failed("cannot make the run folder", &building, &e);
            if e.kind() == std::io::ErrorKind::AlreadyExists {
                error.hint("another run is writing it, or was killed while it did: remove this folder if none is")
            } else {
                error
            }
        })?;
        let folder = Folder { target: target.to_path_buf(), building, replace, finished: false };
        folder.write(OWNER, owner(std::process::id()).as_bytes())?;
        Ok(folder)
    }

    /// Where a file of the folder lies while it is being built.
    pub fn path(&self, name: &str) -> PathBuf {
        self.building.join(name)
    }

    /// Makes a folder inside.
    ///
    /// # Errors
    /// `Output`.
    pub fn subfolder(&self, name: &str) -> Result<()> {
        let path = self.path(name);
        fs::create_dir_all(&path).map_err(|e| failed("cannot make a folder", &path, &e))
    }

    /// Creates a file for reading and writing; two files of one name are an error.
    ///
    /// # Errors
    /// `Output`.
    pub fn file(&self, name: &str) -> Result<File> {
        let path = self.path(name);
        File::options().read(true).write(true).create_new(true).open(&path).map_err(|e| failed("cannot create a file", &path, &e))
    }

    /// Writes a whole file.
    ///
    /// # Errors
    /// `Output`.
    pub fn write(&self, name: &str, bytes: &[u8]) -> Result<()> {
        let mut file = self.file(name)?;
        file.write_all(bytes).and_then(|()| file.sync_all()).map_err(|e| failed("cannot write a file", &self.path(name), &e))
    }

    /// Writes a whole file that is complete or absent, should the run be killed before the folder has its name.
    ///
    /// # Errors
    /// `Output`.
    pub fn write_whole(&self, name: &str, bytes: &[u8]) -> Result<()> {
        let beside = format!("{name}{WRITING}");
        self.write(&beside, bytes)?;
        let path = self.path(name);
        fs::rename(self.path(&beside), &path).map_err(|e| failed("cannot name a file", &path, &e))
    }

    /// Takes over a file or folder from elsewhere under the name it has here: by another link to the same bytes where the file
    /// system can, else by a copy. What is not there is left out.
    ///
    /// # Errors
    /// `Output`.
    pub fn adopt(&self, from: &Path, name: &str) -> Result<()> {
        let to = self.path(name);
        if from.is_dir() {
            self.subfolder(name)?;
            let entries = fs::read_dir(from).and_then(Iterator::collect::<std::io::Result<Vec<_>>>);
            for entry in entries.map_err(|e| failed("cannot take over a folder", from, &e))? {
                self.adopt(&entry.path(), &format!("{name}/{}", entry.file_name().to_string_lossy()))?;
            }
        } else if from.is_file() && fs::hard_link(from, &to).is_err() {
            fs::copy(from, &to).map_err(|e| failed("cannot take over a file", from, &e))?;
        }
        Ok(())
    }

    /// Removes a folder inside with everything in it, if it is there.
    ///
    /// # Errors
    /// `Output`.
    pub fn remove_folder(&self, name: &str) -> Result<()> {
        let path = self.path(name);
        if path.is_dir() { fs::remove_dir_all(&path).map_err(|e| failed("cannot remove a folder", &path, &e)) } else { Ok(()) }
    }

    /// Removes a helper file.
    ///
    /// # Errors
    /// `Output`.
    pub fn remove(&self, name: &str) -> Result<()> {
        let path = self.path(name);
        fs::remove_file(&path).map_err(|e| failed("cannot remove a file", &path, &e))
    }

    /// Gives the folder its name. An earlier run is moved aside first and removed last, so that one of the two is always there.
    ///
    /// # Errors
    /// `Output`.
    pub fn finish(mut self) -> Result<PathBuf> {
        self.remove(OWNER)?;
        let old = beside(&self.target, ".replaced");
        let had_old = self.replace && self.target.exists();
        if had_old {
            fs::rename(&self.target, &old).map_err(|e| failed("cannot move the earlier run aside", &self.target, &e))?;
        }
        if let Err(e) = fs::rename(&self.building, &self.target) {
            if had_old {
                // Best effort: the error below is what matters.
                let _ = fs::rename(&old, &self.target);
            }
            return Err(failed("cannot name the run folder", &self.target, &e));
        }
        self.finished = true;
        if had_old {
            fs::remove_dir_all(&old).map_err(|e| failed("cannot remove the earlier run", &old, &e))?;
        }
        Ok(self.target.clone())
    }
}

/// Behind the name of a file of which only a part may be there.
const WRITING: &str = ".writing";

/// Says who is building a folder.
const OWNER: &str = "owner";

fn owner(process: u32) -> String {
    let host = fs::read_to_string("/proc/sys/kernel/hostname").unwrap_or_default();
    format!("{process} {}\n", host.trim())
}

/// Removes what a run on this machine left behind when it was killed. Anything doubtful is left for the user to judge.
fn clear_if_orphaned(building: &Path) {
    let Ok(text) = fs::read_to_string(building.join(OWNER)) else { return };
    let Some(process) = text.split_whitespace().next().and_then(|p| p.parse::<u32>().ok()) else { return };
    let processes = Path::new("/proc");
    let gone = processes.join("self").exists() && !processes.join(process.to_string()).exists();
    if gone && text == owner(process) {
        // If it cannot be removed, making the folder fails next and says so.
        let _ = fs::remove_dir_all(building);
    }
}

/// Whether a folder may be replaced: it holds a run, or nothing.
fn is_run_folder(path: &Path) -> bool {
    path.join("run.json").is_file() || fs::read_dir(path).is_ok_and(|mut d| d.next().is_none())
}

impl Drop for Folder {
    fn drop(&mut self) {
        if !self.finished {
            // Nothing to report to: the run already failed for another reason.
            let _ = fs::remove_dir_all(&self.building);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn appears_complete_or_not_at_all() {
        let place = tempfile::tempdir().unwrap();
        let target = place.path().join("run");
        {
            let f = Folder::create(&target, false).unwrap();
            f.write("run.json", b"{}").unwrap();
            assert!(!target.exists());
            let second = Folder::create(&target, false).err().unwrap().to_string();
            assert!(second.contains("another run is writing it"), "{second}");
        }
        assert_eq!(fs::read_dir(place.path()).unwrap().count(), 0, "an unfinished folder leaves nothing");
        let f = Folder::create(&target, false).unwrap();
        f.write("run.json", b"1").unwrap();
        f.finish().unwrap();
        assert!(Folder::create(&target, false).err().unwrap().to_string().contains("--replace"));
        let f = Folder::create(&target, true).unwrap();
        f.write("run.json", b"2").unwrap();
        f.finish().unwrap();
        assert_eq!(fs::read(target.join("run.json")).unwrap(), b"2");
        assert_eq!(fs::read_dir(place.path()).unwrap().count(), 1);
    }

    #[test]
    fn what_a_killed_run_left_is_cleared() {
        let place = tempfile::tempdir().unwrap();
        let target = place.path().join("run");
        let left = place.path().join("run.unfinished");
        fs::create_dir(&left).unwrap();
        assert!(Folder::create(&target, false).is_err(), "nobody knows whose this is");
        // Process numbers stay below 2^22 on Linux.
        fs::write(left.join(OWNER), owner(u32::MAX)).unwrap();
        let f = Folder::create(&target, false).unwrap();
        f.write("run.json", b"{}").unwrap();
        assert_eq!(fs::read_dir(f.finish().unwrap()).unwrap().count(), 1);
    }

    #[test]
    fn never_replaces_what_is_no_run() {
        let place = tempfile::tempdir().unwrap();
        let target = place.path().join("precious");
        fs::create_dir(&target).unwrap();
        fs::write(target.join("thesis.tex"), b"").unwrap();
        let message = Folder::create(&target, true).err().unwrap().to_string();
        assert!(message.contains("found other files"), "{message}");
    }
}
