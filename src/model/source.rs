//! Where planes come from: files, memory or formulas, all behind one trait that nobody downstream looks behind.

use std::marker::PhantomData;
use std::ops::Deref;

use crate::base::error::Result;
use crate::base::real::Real;
use crate::space::grid::Grid;

/// Which fields a snapshot carries. Components are always ordered u, v, w, then bx, by, bz, then buoyancy.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Fields {
    /// Velocity present.
    pub velocity: bool,
    /// Magnetic field present.
    pub magnetic: bool,
    /// Buoyancy present.
    pub buoyancy: bool,
    /// The flow is compressible (a density was given): criteria made for solenoidal flow take the gradient without its trace.
    pub compressible: bool,
}

impl Fields {
    /// A velocity alone.
    pub const VELOCITY: Fields = Fields { velocity: true, magnetic: false, buoyancy: false, compressible: false };
    /// A magnetic field alone.
    pub const MAGNETIC: Fields = Fields { velocity: false, magnetic: true, buoyancy: false, compressible: false };
    /// Velocity and magnetic field.
    pub const BOTH: Fields = Fields { velocity: true, magnetic: true, buoyancy: false, compressible: false };

    /// Number of scalar components.
    pub fn components(self) -> usize {
        3 * (usize::from(self.velocity) + usize::from(self.magnetic)) + usize::from(self.buoyancy)
    }

    /// Names of the components in their order.
    pub fn names(self) -> Vec<&'static str> {
        let sets = [(self.velocity, &["u", "v", "w"][..]), (self.magnetic, &["bx", "by", "bz"]), (self.buoyancy, &["buoyancy"])];
        sets.into_iter().filter(|(there, _)| *there).flat_map(|(_, names)| names.iter().copied()).collect()
    }

    /// Index of the first magnetic component.
    pub fn first_magnetic(self) -> usize {
        if self.velocity { 3 } else { 0 }
    }
}

/// A snapshot as a supplier of z-planes.
pub trait PlaneSource<T: Real>: Send {
    /// The grid.
    fn grid(&self) -> &Grid;

    /// The fields.
    fn fields(&self) -> Fields;

    /// Reads the planes `z0..z1` of every component.
    ///
    /// `out` has one slice a component, each `(z1 - z0) * ny * nx` long, filled z slowest and x fastest.
    ///
    /// # Errors
    /// `Input` when the file cannot be read.
    ///
    /// # Panics
    /// When `z1` exceeds the number of planes or a slice has another length.
    fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [T]]) -> Result<()>;

    /// Planes that are cheapest to read together (the chunk depth of a chunked file), 1 where it does not matter.
    fn natural_planes(&self) -> usize {
        1
    }

    /// Whether every read costs much more than copying memory (decompression, transposition).
    fn is_costly(&self) -> bool {
        false
    }

    /// The whole components, `nz * ny * nx` values each, where they are in memory: nothing has to be read then.
    fn held(&self) -> Option<Vec<&[T]>> {
        None
    }

    /// Planes that have to be decoded together (the depth of a compressed chunk), 1 where nothing is decoded: reading fewer at a
    /// time decodes some values more than once, unless [`reader_bytes`](PlaneSource::reader_bytes) has room for them.
    fn decoded_planes(&self) -> usize {
        1
    }

    /// Bytes the source itself holds at most, besides the slices it fills, when so many planes are read at a time: indices,
    /// buffers, caches. Asked inside the pool that reads it.
    fn reader_bytes(&self, planes: usize) -> u64 {
        let _ = planes;
        0
    }
}

/// A source of either precision.
pub enum AnySource {
    /// Single precision.
    F32(Box<dyn PlaneSource<f32>>),
    /// Double precision.
    F64(Box<dyn PlaneSource<f64>>),
}

impl AnySource {
    /// The grid.
    pub fn grid(&self) -> &Grid {
        match self {
            AnySource::F32(s) => s.grid(),
            AnySource::F64(s) => s.grid(),
        }
    }

    /// The fields.
    pub fn fields(&self) -> Fields {
        match self {
            AnySource::F32(s) => s.fields(),
            AnySource::F64(s) => s.fields(),
        }
    }
}

/// Whole components in memory.
pub struct MemorySource<T, C = Vec<T>> {
    grid: Grid,
    fields: Fields,
    components: Vec<C>,
    values: PhantomData<T>,
}

impl<T: Real, C: Deref<Target = [T]>> MemorySource<T, C> {
    /// Components in the order u, v, w, bx, by, bz (those present), each `nz * ny * nx` long, x fastest.
    ///
    /// # Panics
    /// When the number of components or a length does not fit.
    pub fn new(grid: Grid, fields: Fields, components: Vec<C>) -> Self {
        assert_eq!(components.len(), fields.components(), "number of components");
        for c in &components {
            assert_eq!(c.len() as u64, grid.cells(), "cells of a component");
        }
        MemorySource { grid, fields, components, values: PhantomData }
    }
}

impl<T: Real, C: Deref<Target = [T]> + Send> PlaneSource<T> for MemorySource<T, C> {
    fn grid(&self) -> &Grid {
        &self.grid
    }

    fn fields(&self) -> Fields {
        self.fields
    }

    fn held(&self) -> Option<Vec<&[T]>> {
        Some(self.components.iter().map(|c| &**c).collect())
    }

    fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [T]]) -> Result<()> {
        let p = self.grid.plane_cells();
        for (c, o) in self.components.iter().zip(out) {
            o.copy_from_slice(&c[z0 * p..z1 * p]);
        }
        Ok(())
    }
}

/// Values computed from a formula when asked for: `f(x, y, z)` in physical coordinates returns all components.
pub struct FormulaSource<F> {
    grid: Grid,
    fields: Fields,
    formula: F,
}

impl<F: Fn([f64; 3]) -> [f64; 6] + Sync + Send> FormulaSource<F> {
    /// The formula returns u, v, w, bx, by, bz; only the fields present are used, and a snapshot of b alone takes the last three.
    pub fn new(grid: Grid, fields: Fields, formula: F) -> Self {
        FormulaSource { grid, fields, formula }
    }
}

impl<T: Real, F: Fn([f64; 3]) -> [f64; 6] + Sync + Send> PlaneSource<T> for FormulaSource<F> {
    fn grid(&self) -> &Grid {
        &self.grid
    }

    fn fields(&self) -> Fields {
        self.fields
    }

    fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [T]]) -> Result<()> {
        let g = &self.grid;
        let first = if self.fields.velocity { 0 } else { 3 };
        let mut i = 0;
        for z in z0..z1 {
            for y in 0..g.n[1] {
                for x in 0..g.n[0] {
                    let p = [g.position(0, x as f64), g.position(1, y as f64), g.position(2, z as f64)];
                    let v = (self.formula)(p);
                    for (c, o) in out.iter_mut().enumerate() {
                        o[i] = T::of(v[first + c]);
                    }
                    i += 1;
                }
            }
        }
        Ok(())
    }
}
