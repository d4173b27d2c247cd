//! A file of values for what does not fit in memory: it has no name while it is used, so that nothing is left of it.

use std::fs::File;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicU64, Ordering};

use crate::base::budget::size;
use crate::base::error::{Error, Result};
use crate::base::real::Real;

/// Values on disk, written and read at any place from several threads.
#[derive(Debug)]
pub struct ScratchFile {
    file: place::Placed,
    folder: PathBuf,
    what: String,
    bytes: u64,
}

/// Tells the files of one process apart.
static NEXT: AtomicU64 = AtomicU64::new(0);

impl ScratchFile {
    /// A file in `folder` for `bytes` in all; `what` says of what, for messages.
    ///
    /// # Errors
    /// `Output` when a file of that size cannot be made there. Whether the disk has the room shows when it is written.
    pub fn new(folder: &Path, what: &str, bytes: u64) -> Result<ScratchFile> {
        let failed = |e: &io::Error| fault(folder, what, bytes, e);
        let name = format!(".ropewalk-scratch-{}-{}", std::process::id(), NEXT.fetch_add(1, Ordering::Relaxed));
        let path = folder.join(name);
        let file = File::options().read(true).write(true).create_new(true).open(&path).map_err(|e| failed(&e))?;
        let file = place::Placed::new(file, path).map_err(|e| failed(&e))?;
        // Limits of the file system and of the user show here, before anything is computed.
        file.set_len(bytes).map_err(|e| failed(&e))?;
        Ok(ScratchFile { file, folder: folder.to_path_buf(), what: what.to_string(), bytes })
    }

    /// Writes values from the place on that would be `at` in an array of them.
    ///
    /// # Errors
    /// `Output`, for want of room on the disk mostly.
    pub fn write<T: Real>(&self, at: u64, values: &[T]) -> Result<()> {
        self.file.write_all_at(bytemuck::cast_slice(values), at * size_of::<T>() as u64).map_err(|e| self.fault(&e))
    }

    /// Reads what was written there; zeros where nothing was.
    ///
    /// # Errors
    /// `Output`.
    pub fn read<T: Real>(&self, at: u64, values: &mut [T]) -> Result<()> {
        self.file.read_exact_at(bytemuck::cast_slice_mut(values), at * size_of::<T>() as u64).map_err(|e| self.fault(&e))
    }

    fn fault(&self, e: &io::Error) -> Error {
        fault(&self.folder, &self.what, self.bytes, e)
    }
}

fn fault(folder: &Path, what: &str, bytes: u64, e: &io::Error) -> Error {
    Error::output("cannot put aside what does not fit in memory")
        .at(folder)
        .item(what)
        .expected(format!("a folder to write {} in", size(bytes)))
        .found(e.to_string())
        .hint("name a folder on a disk with more room, or give the run more memory (--memory)")
}

#[cfg(unix)]
mod place {
    use std::fs::File;
    use std::io;
    use std::os::unix::fs::FileExt;
    use std::path::PathBuf;

    /// A file without a name: the system frees it when it is closed, however the process ends.
    #[derive(Debug)]
    pub struct Placed(File);

    impl Placed {
        pub fn new(file: File, path: PathBuf) -> io::Result<Placed> {
            std::fs::remove_file(path)?;
            Ok(Placed(file))
        }

        pub fn set_len(&self, bytes: u64) -> io::Result<()> {
            self.0.set_len(bytes)
        }

        pub fn write_all_at(&self, from: &[u8], at: u64) -> io::Result<()> {
            self.0.write_all_at(from, at)
        }

        pub fn read_exact_at(&self, to: &mut [u8], at: u64) -> io::Result<()> {
            self.0.read_exact_at(to, at)
        }
    }
}

#[cfg(not(unix))]
mod place {
    use std::fs::File;
    use std::io::{self, Read, Seek, SeekFrom, Write};
    use std::path::PathBuf;
    use std::sync::{Mutex, MutexGuard};

    /// A file that is removed when it is done with; one thread at a time moves in it.
    #[derive(Debug)]
    pub struct Placed {
        file: Option<Mutex<File>>,
        path: PathBuf,
    }

    impl Placed {
        pub fn new(file: File, path: PathBuf) -> io::Result<Placed> {
            Ok(Placed { file: Some(Mutex::new(file)), path })
        }

        fn moved(&self, at: u64) -> io::Result<MutexGuard<'_, File>> {
            let file = self.file.as_ref().ok_or(io::ErrorKind::NotFound)?;
            let mut file = file.lock().map_err(|_| io::Error::other("another thread failed"))?;
            file.seek(SeekFrom::Start(at))?;
            Ok(file)
        }

        pub fn set_len(&self, bytes: u64) -> io::Result<()> {
            self.moved(0)?.set_len(bytes)
        }

        pub fn write_all_at(&self, from: &[u8], at: u64) -> io::Result<()> {
            self.moved(at)?.write_all(from)
        }

        pub fn read_exact_at(&self, to: &mut [u8], at: u64) -> io::Result<()> {
            self.moved(at)?.read_exact(to)
        }
    }

    impl Drop for Placed {
        fn drop(&mut self) {
            // Closed first: an open file cannot be removed everywhere. What cannot be removed is left; nobody could act on it here.
            self.file = None;
            let _ = std::fs::remove_file(&self.path);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::error::Kind;
    use crate::base::par;

    #[test]
    fn what_is_written_anywhere_is_read_again_and_nothing_is_left() {
        let folder = tempfile::tempdir().unwrap();
        let file = ScratchFile::new(folder.path(), "squares", 8000).unwrap();
        let square = |i: u64| (i * i) as f64;
        // Backwards, from several threads.
        let written = par::map_range(100, |part| {
            let first = 10 * (99 - part as u64);
            file.write(first, &(first..first + 10).map(square).collect::<Vec<f64>>())
        });
        assert!(written.into_iter().all(|w| w.is_ok()));
        let mut back = [0.0; 300];
        file.read(123, &mut back).unwrap();
        assert!(back.iter().zip(123..).all(|(b, i)| *b == square(i)));
        drop(file);
        let single = ScratchFile::new(folder.path(), "few", 12).unwrap();
        single.write(1, &[2.5f32, -1.0]).unwrap();
        let mut all = [7.0f32; 3];
        single.read(0, &mut all).unwrap();
        assert_eq!(all, [0.0, 2.5, -1.0]);
        if cfg!(unix) {
            assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 0, "a name while it is open");
        }
        drop(single);
        assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 0);
    }

    #[test]
    fn a_place_that_cannot_be_written_is_an_error_with_figures() {
        let folder = tempfile::tempdir().unwrap();
        let missing = folder.path().join("missing");
        for e in [
            ScratchFile::new(&missing, "derivatives along z", 3 << 30).unwrap_err(),
            // No file system holds so much.
            ScratchFile::new(folder.path(), "derivatives along z", u64::MAX >> 1).unwrap_err(),
        ] {
            let told = e.to_string();
            assert_eq!(e.kind(), Kind::Output);
            assert!(told.contains("derivatives along z: expected a folder to write ") && told.contains("--memory"), "{told}");
        }
        let told = ScratchFile::new(&missing, "x", 3 << 30).unwrap_err().to_string();
        assert!(told.contains("missing") && told.contains("to write 3.0 GiB in, found"), "{told}");
        let file = ScratchFile::new(folder.path(), "x", 16).unwrap();
        assert_eq!(file.read(1, &mut [0.0f64; 2]).unwrap_err().kind(), Kind::Output);
    }
}
