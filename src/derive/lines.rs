//! Exact derivatives that need whole lines: along y of the planes of a block, along z of the whole box.

use std::sync::{Arc, Mutex};

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::par;
use crate::base::real::Real;
use crate::math::lines::{LineDerivative, LineScratch};
use crate::model::source::{Fields, PlaneSource};
use crate::space::grid::Grid;
use crate::space::slab::Block;

/// Planes that go round: a fresh one costs as much in page faults as its transform.
pub type Pool<T> = Arc<Mutex<Vec<Vec<T>>>>;

/// What a block needs before its rows are derived: derivatives along y, where they are transforms.
pub struct Prepared<T> {
    first: usize,
    components: usize,
    /// Plane by plane, component by component; empty where not wanted.
    planes: Vec<Vec<T>>,
    pool: Pool<T>,
}

impl<T: Real> Prepared<T> {
    /// Nothing is needed.
    pub(super) fn nothing(pool: &Pool<T>) -> Self {
        Prepared { first: 0, components: 0, planes: Vec::new(), pool: pool.clone() }
    }

    /// The derivatives along y of the components that are `wanted`.
    pub(super) fn along_lines(line: &LineDerivative<T>, block: &Block<'_, T>, wanted: &[bool], nx: usize, pool: &Pool<T>) -> Self {
        let components = wanted.len();
        let mut free = pool.lock().map(|mut p| std::mem::take(&mut *p)).unwrap_or_default();
        let planes: Vec<Vec<T>> =
            block.z.clone().flat_map(|_| wanted.iter()).map(|&w| if w { free.pop().unwrap_or_default() } else { Vec::new() }).collect();
        if let Ok(mut p) = pool.lock() {
            p.append(&mut free);
        }
        let planes = par::map_owned(planes, |i, mut out| {
            if wanted[i % components] {
                let plane = block.plane(i % components, (block.z.start + i / components) as isize);
                out.resize(plane.len(), T::ZERO);
                let from: Vec<&[T]> = plane.chunks_exact(nx).collect();
                let mut to: Vec<&mut [T]> = out.chunks_exact_mut(nx).collect();
                line.columns(&from, &mut to, &mut LineScratch::default());
            }
            out
        });
        Prepared { first: block.z.start, components, planes, pool: pool.clone() }
    }

    /// Of a component, in plane `z`.
    pub(super) fn along_y(&self, component: usize, z: usize) -> &[T] {
        &self.planes[(z - self.first) * self.components + component]
    }
}

impl<T> Drop for Prepared<T> {
    fn drop(&mut self) {
        if let Ok(mut pool) = self.pool.lock() {
            pool.extend(self.planes.drain(..).filter(|p| !p.is_empty()));
        }
    }
}

/// The derivatives along z of a whole box, by transforms of its z-lines: one array a component.
pub struct ZLines<T> {
    plane_cells: usize,
    components: Vec<Vec<T>>,
}

impl<T> ZLines<T> {
    /// Of a component, in plane `z`.
    pub(super) fn plane(&self, component: usize, z: usize) -> &[T] {
        &self.components[component][z * self.plane_cells..(z + 1) * self.plane_cells]
    }
}

/// Bytes that the derivatives along z of a whole box take.
pub fn z_lines_bytes(grid: &Grid, fields: Fields, value_bytes: usize) -> u64 {
    grid.cells() * fields.components() as u64 * value_bytes as u64
}

/// Reads the snapshot once and derives the components that are `wanted` along z, which must be periodic.
///
/// # Errors
/// Those of the source.
pub fn z_lines<T: Real>(source: &mut dyn PlaneSource<T>, wanted: &[bool], observe: &dyn Observe) -> Result<ZLines<T>> {
    let grid = source.grid().clone();
    let (plane, nz) = (grid.plane_cells(), grid.n[2]);
    let line = LineDerivative::new(nz, grid.spacing[2]);
    let mut components: Vec<Vec<T>> = wanted.iter().map(|&w| vec![T::ZERO; if w { plane * nz } else { 0 }]).collect();
    observe.stage("lines", nz as u64);
    let step = source.natural_planes().max(1);
    let mut unwanted = vec![T::ZERO; if wanted.contains(&false) { plane * step.min(nz) } else { 0 }];
    for z in (0..nz).step_by(step) {
        let end = (z + step).min(nz);
        let mut spare: Vec<&mut [T]> = Vec::new();
        if let Some(i) = wanted.iter().position(|w| !w) {
            // One place serves: buoyancy is the only component that can be unwanted.
            assert!(!wanted[i + 1..].contains(&false), "expected at most one component to be left out");
            spare.push(&mut unwanted[..(end - z) * plane]);
        }
        let parts = components.iter_mut().zip(wanted);
        let mut slices: Vec<&mut [T]> =
            parts.map(|(c, &w)| if w { &mut c[z * plane..end * plane] } else { spare.pop().unwrap_or_default() }).collect();
        source.read(z, end, &mut slices)?;
        observe.advance((end - z) as u64);
    }
    for component in components.iter_mut().filter(|c| !c.is_empty()) {
        let mut rows: Vec<Vec<&mut [T]>> = Vec::new();
        rows.resize_with(grid.n[1], || Vec::with_capacity(nz));
        for (i, row) in component.chunks_exact_mut(grid.n[0]).enumerate() {
            rows[i % grid.n[1]].push(row);
        }
        par::map_owned(rows, |_, mut rows| line.columns_in_place(&mut rows, &mut LineScratch::default()));
    }
    observe.done();
    Ok(ZLines { plane_cells: plane, components })
}
