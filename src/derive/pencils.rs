//! A quantity of a whole box, put in and taken out plane by plane, and worked on along z: in memory, or slab by slab in a file.

use std::path::Path;
use std::sync::Arc;

use crate::base::budget::{rounded_up, size};
use crate::base::error::{Error, Result};
use crate::base::pages::Pages;
use crate::base::par;
use crate::base::real::Real;
use crate::base::scratch::ScratchFile;

/// Values read or written by one worker at a time.
const STRETCH: usize = 1 << 18;

/// Where quantities of whole boxes may be kept.
#[derive(Debug, Clone, Copy)]
pub struct Room<'a> {
    /// Bytes of memory that may be taken.
    pub bytes: u64,
    /// A folder for what does not fit.
    pub scratch: Option<&'a Path>,
}

/// What keeping quantities of whole boxes takes, in bytes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Needs {
    /// Memory, with everything in it.
    pub memory: u64,
    /// The least memory where a folder takes what does not fit.
    pub memory_with_scratch: u64,
    /// What that folder must take.
    pub disk: u64,
}

/// Where something is kept.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Choice<'a> {
    Memory,
    Folder(&'a Path),
}

impl Needs {
    /// Where there is room.
    ///
    /// # Errors
    /// `Limit` with the figures where there is none; `what` says for what, `alternative` what else there is.
    pub(super) fn choose<'a>(&self, room: &Room<'a>, what: &str, alternative: &str) -> Result<Choice<'a>> {
        if self.memory <= room.bytes {
            return Ok(Choice::Memory);
        }
        if let Some(folder) = room.scratch
            && self.memory_with_scratch <= room.bytes
        {
            return Ok(Choice::Folder(folder));
        }
        let need = if room.scratch.is_some() { self.memory_with_scratch } else { self.memory };
        let mut hint = format!("a --memory that is larger by {}", rounded_up(need - room.bytes));
        if room.scratch.is_none() {
            let (least, disk) = (size(self.memory_with_scratch), size(self.disk));
            hint += &format!(", or a folder for what does not fit, with which {least} of memory do and {disk} of disk are filled");
        }
        if !alternative.is_empty() {
            hint += &format!(", or {alternative}");
        }
        Err(Error::limit("cannot go on within the memory budget")
            .item(what)
            .expected(format!("at most {}", size(room.bytes)))
            .found(format!("a need of {}", size(need)))
            .hint(hint))
    }
}

/// Rows of `width` values, ordered `[z][y]` as seen from outside.
#[derive(Debug)]
pub(super) struct Pencils<T> {
    /// Width of a row, rows of a plane, planes.
    n: [usize; 3],
    store: Store<T>,
}

#[derive(Debug)]
enum Store<T> {
    Memory(Pages<T>),
    /// Slab by slab, a slab being some rows of all planes: a slab is one stretch of the file, and so are a plane's rows in it.
    File {
        file: Arc<ScratchFile>,
        /// Where it begins, in values.
        first: u64,
        /// Rows of a slab; the last one may have fewer.
        rows: usize,
    },
}

impl<T: Real> Pencils<T> {
    /// Zeros in memory.
    pub fn in_memory(n: [usize; 3]) -> Self {
        Pencils { n, store: Store::Memory(Pages::new(n[0] * n[1] * n[2])) }
    }

    /// In a file from the value `first` on, worked on in slabs of at most `bytes`, but of one row at least.
    pub fn in_file(n: [usize; 3], file: &Arc<ScratchFile>, first: u64, bytes: u64) -> Self {
        let rows = (bytes / Self::slab_bytes(n)).clamp(1, n[1] as u64) as usize;
        Pencils { n, store: Store::File { file: file.clone(), first, rows } }
    }

    /// Bytes of a slab of one row.
    pub fn slab_bytes(n: [usize; 3]) -> u64 {
        (n[0] * n[2] * size_of::<T>()) as u64
    }

    fn plane_len(&self) -> usize {
        self.n[0] * self.n[1]
    }

    /// A plane that is in memory.
    pub fn held(&self, z: usize) -> Option<&[T]> {
        let len = self.plane_len();
        if let Store::Memory(values) = &self.store { Some(&values[z * len..(z + 1) * len]) } else { None }
    }

    /// The planes `z0..z1` to be filled, where they are in memory.
    pub fn held_mut(&mut self, z0: usize, z1: usize) -> Option<&mut [T]> {
        let len = self.plane_len();
        if let Store::Memory(values) = &mut self.store { Some(&mut values[z0 * len..z1 * len]) } else { None }
    }

    /// Where the rows of plane `z` lie: the rows of every slab in the plane, and where in the file.
    fn stretches(&self, z: usize) -> impl Iterator<Item = (std::ops::Range<usize>, u64)> + '_ {
        let [width, ny, nz] = self.n;
        let (first, rows) = if let Store::File { first, rows, .. } = self.store { (first, rows) } else { (0, ny) };
        (0..ny).step_by(rows).map(move |y| {
            let here = rows.min(ny - y);
            (y * width..(y + here) * width, first + ((y * nz + z * here) * width) as u64)
        })
    }

    /// Writes a plane into the file.
    fn write(&self, file: &ScratchFile, z: usize, plane: &[T]) -> Result<()> {
        self.stretches(z).try_for_each(|(part, at)| file.write(at, &plane[part]))
    }

    /// Puts a plane.
    pub fn put(&mut self, z: usize, plane: &[T]) -> Result<()> {
        if let Store::File { file, .. } = &self.store {
            return self.write(file, z, plane);
        }
        if let Some(held) = self.held_mut(z, z + 1) {
            held.copy_from_slice(plane);
        }
        Ok(())
    }

    /// Takes a plane.
    pub fn take(&self, z: usize, plane: &mut [T]) -> Result<()> {
        match &self.store {
            Store::Memory(values) => plane.copy_from_slice(&values[z * plane.len()..(z + 1) * plane.len()]),
            Store::File { file, .. } => self.stretches(z).try_for_each(|(part, at)| file.read(at, &mut plane[part]))?,
        }
        Ok(())
    }

    /// Makes all planes, `together` at a time where they are not in memory.
    pub fn fill(&mut self, together: usize, f: impl Fn(usize, &mut [T]) -> Result<()> + Sync + Send) -> Result<()> {
        let len = self.plane_len();
        if let Store::Memory(values) = &mut self.store {
            return par::map_owned(values.chunks_mut(len).collect(), f).into_iter().collect();
        }
        self.batches(together, |file, z| {
            let mut plane = vec![T::ZERO; len];
            f(z, &mut plane)?;
            self.write(file, z, &plane)
        })
    }

    /// Hands out all planes, `together` at a time where they are not in memory; they may be used as workspace and are lost.
    pub fn empty(&mut self, together: usize, f: impl Fn(usize, &mut [T]) -> Result<()> + Sync + Send) -> Result<()> {
        let len = self.plane_len();
        if let Store::Memory(values) = &mut self.store {
            return par::map_owned(values.chunks_mut(len).collect(), f).into_iter().collect();
        }
        self.batches(together, |_, z| {
            let mut plane = vec![T::ZERO; len];
            self.take(z, &mut plane)?;
            f(z, &mut plane)
        })
    }

    fn batches(&self, together: usize, f: impl Fn(&ScratchFile, usize) -> Result<()> + Sync + Send) -> Result<()> {
        let Store::File { file, .. } = &self.store else { return Ok(()) };
        let planes = self.n[2];
        for z in (0..planes).step_by(together.max(1)) {
            par::map_range(together.max(1).min(planes - z), |k| f(file, z + k)).into_iter().collect::<Result<()>>()?;
        }
        Ok(())
    }

    /// Calls `f` with every y and its rows of all z, which it changes.
    pub fn along_z(&mut self, f: impl Fn(usize, &mut [&mut [T]]) + Sync + Send) -> Result<()> {
        let [width, ny, nz] = self.n;
        let (file, first, rows) = match &mut self.store {
            Store::Memory(values) => {
                worked_on(values, width, ny, 0, &f);
                return Ok(());
            }
            Store::File { file, first, rows } => (file, *first, *rows),
        };
        let mut slab = vec![T::ZERO; rows * width * nz];
        for y in (0..ny).step_by(rows) {
            let here = rows.min(ny - y);
            let slab = &mut slab[..here * width * nz];
            let at = |i: usize| first + (y * width * nz + i * STRETCH) as u64;
            let parts = |slab: &mut [T], f: &(dyn Fn(usize, &mut [T]) -> Result<()> + Sync)| -> Result<()> {
                par::map_owned(slab.chunks_mut(STRETCH).collect(), f).into_iter().collect()
            };
            parts(slab, &|i, part| file.read(at(i), part))?;
            worked_on(slab, width, here, y, &f);
            parts(slab, &|i, part| file.write(at(i), part))?;
        }
        Ok(())
    }
}

/// Calls `f` with every row number, counted from `first`, and the rows of that number of all planes of `ny` rows.
fn worked_on<T: Real>(values: &mut [T], width: usize, ny: usize, first: usize, f: &(impl Fn(usize, &mut [&mut [T]]) + Sync + Send)) {
    let mut rows: Vec<Vec<&mut [T]>> = Vec::new();
    rows.resize_with(ny, Vec::new);
    for (i, row) in values.chunks_exact_mut(width).enumerate() {
        rows[i % ny].push(row);
    }
    par::map_owned(rows, |y, mut rows| f(first + y, &mut rows));
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn planes_and_pencils_are_the_same_in_memory_and_in_slabs_of_any_size() {
        let n = [5, 7, 4];
        let folder = tempfile::tempdir().unwrap();
        let file = Arc::new(ScratchFile::new(folder.path(), "numbers", 4 * (3 + 140)).unwrap());
        let number = |z: usize, i: usize| (1000 * z + i) as f32;
        for bytes in [0, 80, 200, 240, 559, 560, 1 << 20] {
            let mut both = [Pencils::in_memory(n), Pencils::in_file(n, &file, 3, bytes)];
            for p in &mut both {
                p.fill(3, |z, plane| {
                    plane.iter_mut().enumerate().for_each(|(i, v)| *v = number(z, i));
                    Ok(())
                })
                .unwrap();
                p.put(2, &[-1.0; 35]).unwrap();
                p.along_z(|y, rows| {
                    assert_eq!(rows.len(), 4);
                    for (z, row) in rows.iter_mut().enumerate() {
                        for (x, v) in row.iter_mut().enumerate() {
                            assert_eq!(*v, if z == 2 { -1.0 } else { number(z, y * 5 + x) });
                            *v += 0.5;
                        }
                    }
                })
                .unwrap();
                let mut plane = [0.0; 35];
                p.take(3, &mut plane).unwrap();
                assert!(plane.iter().enumerate().all(|(i, v)| *v == number(3, i) + 0.5));
                p.empty(2, |z, plane| {
                    assert_eq!(plane[34], if z == 2 { -0.5 } else { number(z, 34) + 0.5 });
                    Ok(())
                })
                .unwrap();
            }
            assert!(both[0].held(1).is_some() && both[1].held(1).is_none());
        }
    }
}
