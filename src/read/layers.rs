//! What the sources of a snapshot are built of: layers that read windows of components, and the source that delivers the last one.

use crate::base::error::Result;
use crate::base::real::Real;
use crate::model::source::{Fields, PlaneSource};
use crate::read::order::Window;
use crate::space::grid::Grid;

/// A supplier of components that may be more than those delivered.
pub(super) trait Layer<T>: Send {
    /// Samples along x, y, z.
    fn samples(&self) -> [usize; 3];

    /// Reads a window of the components that have a slice, each filled z slowest and x fastest.
    fn read(&mut self, at: &Window, out: &mut [Option<&mut [T]>]) -> Result<()>;

    /// Planes that are cheapest to read together.
    fn natural_planes(&self) -> usize;

    /// Whether every read costs much more than copying memory.
    fn is_costly(&self) -> bool;

    /// Planes that have to be decoded together, 1 where nothing is decoded.
    fn decoded_planes(&self) -> usize;

    /// Bytes held at most when so many planes are read at a time.
    fn reader_bytes(&self, planes: usize) -> u64;
}

/// The last layer as a source of planes.
pub(super) struct Delivered<T> {
    /// Delivers the components of `fields` on `grid`.
    pub layer: Box<dyn Layer<T>>,
    /// The grid.
    pub grid: Grid,
    /// The fields.
    pub fields: Fields,
}

impl<T: Real> PlaneSource<T> for Delivered<T> {
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
        let values = nx * ny * (z1 - z0);
        for o in out.iter() {
            assert_eq!(o.len(), values, "length of a slice (left) and values of the planes (right)");
        }
        if z0 == z1 {
            return Ok(());
        }
        let mut out: Vec<Option<&mut [T]>> = out.iter_mut().map(|o| Some(&mut **o)).collect();
        self.layer.read(&Window::planes(self.grid.n, z0..z1), &mut out)
    }

    fn natural_planes(&self) -> usize {
        self.layer.natural_planes()
    }

    fn is_costly(&self) -> bool {
        self.layer.is_costly()
    }

    fn decoded_planes(&self) -> usize {
        self.layer.decoded_planes()
    }

    fn reader_bytes(&self, planes: usize) -> u64 {
        self.layer.reader_bytes(planes)
    }
}
