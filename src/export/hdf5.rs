//! HDF5 files to write: attributes, datasets in planes or chunks. The same values give the same bytes.

use std::path::{Path, PathBuf};

use ::hdf5::plist::dataset_create::{AllocTime, FillTime};
use ::hdf5::types::VarLenUnicode;
use ::hdf5::{Dataset, File, Hyperslab, SliceOrIndex};
use ndarray::{ArrayView1, ArrayView3};

use crate::base::error::{Error, Result};
use crate::space::grid::Grid;

/// What can be a value of a dataset.
pub use ::hdf5::H5Type as Storable;

/// How hard chunks are compressed: beyond this, label volumes hardly get smaller.
const DEFLATE: u8 = 4;

/// A file being written.
pub struct Hdf5File {
    file: File,
    path: PathBuf,
}

/// What the values of a dataset are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stored {
    /// Single precision.
    F32,
    /// Double precision.
    F64,
    /// Small whole numbers.
    U8,
}

impl Hdf5File {
    /// Creates a file where there is none.
    ///
    /// # Errors
    /// `Output`.
    pub fn create(path: &Path) -> Result<Hdf5File> {
        let file = File::create_excl(path).map_err(|e| failed(path, "", &e))?;
        Ok(Hdf5File { file, path: path.to_path_buf() })
    }

    /// Opens a file begun earlier, to go on writing.
    ///
    /// # Errors
    /// `Output`.
    pub fn reopen(path: &Path) -> Result<Hdf5File> {
        let file = File::open_rw(path).map_err(|e| failed(path, "", &e))?;
        Ok(Hdf5File { file, path: path.to_path_buf() })
    }

    fn failed(&self, item: &str, e: &::hdf5::Error) -> Error {
        failed(&self.path, item, e)
    }

    /// An attribute of the root group that holds text.
    ///
    /// # Errors
    /// `Output`.
    pub fn text(&self, name: &str, value: &str) -> Result<()> {
        // The library ends text at a NUL.
        let value: VarLenUnicode = value.replace('\0', " ").parse().unwrap_or_default();
        let attribute = self.file.new_attr::<VarLenUnicode>().create(name);
        attribute.and_then(|a| a.write_scalar(&value)).map_err(|e| self.failed(name, &e))
    }

    /// An attribute of the root group that holds one number.
    ///
    /// # Errors
    /// `Output`.
    pub fn number<T: Storable>(&self, name: &str, value: T) -> Result<()> {
        self.file.new_attr::<T>().create(name).and_then(|a| a.write_scalar(&value)).map_err(|e| self.failed(name, &e))
    }

    /// An attribute of the root group that holds three numbers, x first.
    ///
    /// # Errors
    /// `Output`.
    pub fn triple(&self, name: &str, value: [f64; 3]) -> Result<()> {
        let attribute = self.file.new_attr::<f64>().shape(3).create(name);
        attribute.and_then(|a| a.write(ArrayView1::from(&value))).map_err(|e| self.failed(name, &e))
    }

    /// Where the samples lie: attributes `spacing`, `lengths`, `origin` (x first), `periodic`, `order`; datasets x, y, z with
    /// the positions of stretched axes.
    ///
    /// # Errors
    /// `Output`.
    pub fn grid(&self, grid: &Grid) -> Result<()> {
        self.triple("spacing", grid.spacing)?;
        self.triple("lengths", std::array::from_fn(|a| grid.length(a)))?;
        self.triple("origin", grid.origin)?;
        self.text("periodic", &axes(grid.periodic))?;
        self.text("order", "zyx")?;
        for (a, name) in ["x", "y", "z"].into_iter().enumerate() {
            if let Some(s) = &grid.stretched[a] {
                let created = self.file.new_dataset::<f64>().obj_track_times(false).shape(s.positions.len()).create(name);
                created.and_then(|d| d.write(ArrayView1::from(&s.positions))).map_err(|e| self.failed(name, &e))?;
            }
        }
        Ok(())
    }

    /// A dataset of `n` values along x, y, z (z slowest), in one piece, to be written in planes.
    ///
    /// # Errors
    /// `Output`.
    pub fn planes(&self, name: &str, stored: Stored, n: [usize; 3]) -> Result<()> {
        match stored {
            Stored::F32 => self.in_one_piece::<f32>(name, n),
            Stored::F64 => self.in_one_piece::<f64>(name, n),
            Stored::U8 => self.in_one_piece::<u8>(name, n),
        }
    }

    fn in_one_piece<T: Storable>(&self, name: &str, [nx, ny, nz]: [usize; 3]) -> Result<()> {
        // Space is taken at once, so that the file looks the same however its planes come; all of it is written.
        let builder = self.file.new_dataset::<T>().obj_track_times(false).alloc_time(Some(AllocTime::Early)).fill_time(FillTime::Never);
        builder.shape((nz, ny, nx)).create(name).map(|_| ()).map_err(|e| self.failed(name, &e))
    }

    /// A chunked, compressed dataset of `n` values along x, y, z (z slowest), 0 where nothing is written.
    ///
    /// # Errors
    /// `Output`.
    pub fn chunked<T: Storable>(&self, name: &str, [nx, ny, nz]: [usize; 3], [cx, cy, cz]: [usize; 3]) -> Result<()> {
        let builder = self.file.new_dataset::<T>().obj_track_times(false).chunk((cz, cy, cx)).shuffle().deflate(DEFLATE);
        builder.shape((nz, ny, nx)).create(name).map(|_| ()).map_err(|e| self.failed(name, &e))
    }

    /// Writes a block of a dataset: first cell and cells along x, y, z.
    ///
    /// # Errors
    /// `Output`.
    pub fn block<T: Storable>(&self, name: &str, start: [usize; 3], n: [usize; 3], values: &[T]) -> Result<()> {
        let dataset = self.file.dataset(name).map_err(|e| self.failed(name, &e))?;
        self.write(&dataset, name, start, n, values)
    }

    /// Writes planes of a dataset given by their bytes: first plane and cells along x, y, z.
    ///
    /// # Errors
    /// `Output`.
    pub fn plane_bytes(&self, name: &str, stored: Stored, z: usize, n: [usize; 3], bytes: &[u8]) -> Result<()> {
        match stored {
            Stored::F32 => self.block::<f32>(name, [0, 0, z], n, bytemuck::cast_slice(bytes)),
            Stored::F64 => self.block::<f64>(name, [0, 0, z], n, bytemuck::cast_slice(bytes)),
            Stored::U8 => self.block::<u8>(name, [0, 0, z], n, bytes),
        }
    }

    fn write<T: Storable>(&self, dataset: &Dataset, name: &str, start: [usize; 3], n: [usize; 3], values: &[T]) -> Result<()> {
        let view = ArrayView3::from_shape((n[2], n[1], n[0]), values)
            .map_err(|e| Error::internal("cannot write a block").at(&self.path).item(name).found(e.to_string()))?;
        let slices: Vec<SliceOrIndex> = [2, 1, 0].into_iter().map(|a| (start[a]..start[a] + n[a]).into()).collect();
        dataset.write_slice(view, Hyperslab::from(slices)).map_err(|e| self.failed(name, &e))
    }

    /// Completes the file.
    ///
    /// # Errors
    /// `Output`.
    pub fn close(self) -> Result<()> {
        self.file.flush().map_err(|e| failed(&self.path, "", &e))
    }
}

/// Axes by their letters.
pub fn axes(flags: [bool; 3]) -> String {
    let text: String = ["x", "y", "z"].iter().zip(flags).filter(|(_, f)| *f).map(|(a, _)| *a).collect();
    if text.is_empty() { "none".to_string() } else { text }
}

fn failed(path: &Path, item: &str, e: &::hdf5::Error) -> Error {
    // The innermost line of the library's stack of messages tells most.
    let text = e.stack().and_then(|s| s.last().map(|f| f.desc().to_owned())).unwrap_or_else(|| e.to_string());
    let error = Error::output("cannot write the HDF5 file").at(path).found(text.lines().map(str::trim).collect::<Vec<_>>().join(" "));
    if item.is_empty() { error } else { error.item(item) }
}
