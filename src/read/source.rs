//! The plane source over the arrays of a snapshot, whatever they are stored in.

use ::hdf5::H5Type;

use crate::base::error::Result;
use crate::base::real::Real;
use crate::model::source::{AnySource, Fields, PlaneSource};
use crate::read::hdf5::ChunkedArray;
use crate::read::header::{Header, Precision};
use crate::read::names::Field;
use crate::read::order::{Axes, End};
use crate::read::raw::RawArray;
use crate::read::reorder::reorder;
use crate::space::grid::Grid;

/// How the values of an array are reached.
pub(super) enum Store {
    /// In one piece, by seeking.
    Raw(RawArray),
    /// Through the HDF5 library.
    Library(ChunkedArray),
}

impl Store {
    fn read_block<T: Real + H5Type>(&mut self, start: &[usize], count: &[usize], out: &mut [T]) -> Result<()> {
        match self {
            Store::Raw(array) => array.read_block(start, count, out),
            Store::Library(array) => array.read_block(start, count, out),
        }
    }
}

/// One array of a snapshot: a component, or three along an axis.
pub(super) struct Array {
    /// What its file says.
    pub header: Header,
    /// Where its axes are.
    pub axes: Axes,
    /// Its values.
    pub store: Store,
    /// Planes that are stored together.
    pub depth: usize,
    /// Whether values are decoded when read.
    pub filtered: bool,
}

/// Everything a snapshot consists of, checked.
pub(super) struct Arrays {
    /// In the order u, v, w, bx, by, bz.
    pub arrays: Vec<Array>,
    /// The fields they make up.
    pub fields: Fields,
    /// Samples along x, y, z.
    pub samples: [usize; 3],
    /// Time of the snapshot, if stated.
    pub time: Option<f64>,
}

impl Arrays {
    /// How the arrays are named to the user.
    pub fn labels(&self) -> Vec<String> {
        self.arrays.iter().map(|a| a.header.label.clone()).collect()
    }
}

/// The fields that were chosen.
pub(super) fn fields_of(chosen: impl Iterator<Item = Field>) -> Fields {
    let mut fields = Fields::default();
    for field in chosen {
        match field {
            Field::Velocity => fields.velocity = true,
            Field::Magnetic => fields.magnetic = true,
        }
    }
    fields
}

/// The source: f64 when any array is, else f32.
pub(super) fn assemble(arrays: Arrays, grid: Grid) -> AnySource {
    if arrays.arrays.iter().any(|a| a.header.precision == Precision::F64) {
        AnySource::F64(Box::new(FileSource::<f64>::new(arrays, grid)))
    } else {
        AnySource::F32(Box::new(FileSource::<f32>::new(arrays, grid)))
    }
}

struct FileSource<T> {
    grid: Grid,
    fields: Fields,
    arrays: Vec<Array>,
    buffer: Vec<T>,
}

impl<T> FileSource<T> {
    fn new(arrays: Arrays, grid: Grid) -> Self {
        FileSource { grid, fields: arrays.fields, arrays: arrays.arrays, buffer: Vec::new() }
    }
}

impl<T: Real + H5Type> PlaneSource<T> for FileSource<T> {
    fn grid(&self) -> &Grid {
        &self.grid
    }

    fn fields(&self) -> Fields {
        self.fields
    }

    fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [T]]) -> Result<()> {
        let [nx, ny, nz] = self.grid.n;
        assert!(z0 <= z1 && z1 <= nz, "planes: expected a range inside 0..{nz}, got {z0}..{z1}");
        assert_eq!(out.len(), self.fields.components(), "slices (left) and components (right)");
        let planes = [nx, ny, z1 - z0];
        let values = nx * ny * (z1 - z0);
        for o in out.iter() {
            assert_eq!(o.len(), values, "length of a slice (left) and values of the planes (right)");
        }
        if z0 == z1 {
            return Ok(());
        }
        let mut next = 0;
        for array in &mut self.arrays {
            let out = &mut out[next..next + array.axes.components()];
            next += out.len();
            // With the components last, one block holds them all; else each has its own.
            let together = array.axes.component == Some(End::Last);
            for c in 0..if together { 1 } else { out.len() } {
                let (start, count) = array.axes.block(self.grid.n, z0, z1, c);
                if array.axes.is_zyx() && !together {
                    array.store.read_block(&start, &count, out[c])?;
                    continue;
                }
                self.buffer.resize(count.iter().product(), T::ZERO);
                array.store.read_block(&start, &count, &mut self.buffer)?;
                let stride = array.axes.space.map(|a| count[a + 1..].iter().product::<usize>());
                if together {
                    for (i, o) in out.iter_mut().enumerate() {
                        reorder(&self.buffer[i..], stride, planes, o);
                    }
                } else {
                    reorder(&self.buffer, stride, planes, out[c]);
                }
            }
        }
        Ok(())
    }

    fn natural_planes(&self) -> usize {
        self.arrays.iter().map(|a| a.depth).max().unwrap_or(1)
    }

    fn is_costly(&self) -> bool {
        self.arrays.iter().any(|a| a.filtered || !a.axes.is_zyx())
    }
}
