//! Exact derivatives that need whole lines: along x and y of the planes of a block, along z of the whole box.

use std::sync::{Arc, Mutex};

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::par;
use crate::base::real::Real;
use crate::base::scratch::ScratchFile;
use crate::derive::pencils::{Choice, Needs, Pencils, Room};
use crate::math::lines::{LineDerivative, LineScratch};
use crate::math::scheme::{Scheme, modified_wavenumber};
use crate::model::source::{Fields, PlaneSource};
use crate::space::grid::Grid;
use crate::space::slab::Block;

/// Planes that go round: a fresh one costs as much in page faults as its transform.
pub type Pool<T> = Arc<Mutex<Vec<Vec<T>>>>;

/// Where the derivatives along an axis come from, plane by plane.
pub(super) enum Lines<'a, T> {
    /// Rows of a plane are transformed.
    Rows(&'a LineDerivative<T>),
    /// Columns of a plane are.
    Columns(&'a LineDerivative<T>),
    /// They were put into a file.
    File(&'a ZLines<T>),
}

/// What a block needs before its rows are derived: derivatives that are transforms, unless they are in memory already.
pub struct Prepared<T> {
    first: usize,
    components: usize,
    /// Plane by plane, component by component, axis by axis; empty where not wanted.
    planes: Vec<Vec<T>>,
    pool: Pool<T>,
}

impl<T: Real> Prepared<T> {
    /// The derivatives along the axes that have `lines`, of the components that are `wanted` along them.
    pub(super) fn new(
        lines: &[Option<Lines<'_, T>>; 3],
        block: &Block<'_, T>,
        wanted: &[[bool; 3]],
        nx: usize,
        pool: &Pool<T>,
    ) -> Result<Self> {
        let components = wanted.len();
        if lines.iter().all(Option::is_none) {
            return Ok(Prepared { first: block.z.start, components, planes: Vec::new(), pool: pool.clone() });
        }
        let is_wanted = |i: usize| lines[i % 3].is_some() && wanted[i / 3 % components][i % 3];
        let mut free = pool.lock().map(|mut p| std::mem::take(&mut *p)).unwrap_or_default();
        let count = 3 * components * block.z.len();
        let planes: Vec<Vec<T>> = (0..count).map(|i| if is_wanted(i) { free.pop().unwrap_or_default() } else { Vec::new() }).collect();
        if let Ok(mut p) = pool.lock() {
            p.append(&mut free);
        }
        let derived = par::map_owned(planes, |i, mut out| {
            let (axis, component, z) = (i % 3, i / 3 % components, block.z.start + i / 3 / components);
            let Some(lines) = lines[axis].as_ref().filter(|_| is_wanted(i)) else { return Ok(out) };
            let plane = block.plane(component, z as isize);
            out.resize(plane.len(), T::ZERO);
            match lines {
                Lines::Rows(line) => line.rows(plane, &mut out, &mut LineScratch::default()),
                Lines::Columns(line) => {
                    let from: Vec<&[T]> = plane.chunks_exact(nx).collect();
                    let mut to: Vec<&mut [T]> = out.chunks_exact_mut(nx).collect();
                    line.columns(&from, &mut to, &mut LineScratch::default());
                }
                Lines::File(z_lines) => z_lines.take(component, z, &mut out)?,
            }
            Ok(out)
        });
        let planes = derived.into_iter().collect::<Result<_>>()?;
        Ok(Prepared { first: block.z.start, components, planes, pool: pool.clone() })
    }

    /// Of a component, along an axis, in plane `z`.
    pub(super) fn along(&self, component: usize, axis: usize, z: usize) -> &[T] {
        &self.planes[((z - self.first) * self.components + component) * 3 + axis]
    }
}

impl<T> Drop for Prepared<T> {
    fn drop(&mut self) {
        if let Ok(mut pool) = self.pool.lock() {
            pool.extend(self.planes.drain(..).filter(|p| !p.is_empty()));
        }
    }
}

/// The derivatives along z of a whole box, by transforms of its z-lines.
#[derive(Debug)]
pub struct ZLines<T> {
    /// Component by component; none where not wanted.
    components: Vec<Option<Pencils<T>>>,
    in_memory: bool,
}

impl<T: Real> ZLines<T> {
    /// Whether they are in memory, not in a file.
    pub fn is_in_memory(&self) -> bool {
        self.in_memory
    }

    fn component(&self, component: usize) -> &Pencils<T> {
        self.components[component].as_ref().expect("a derivative along z that was asked for")
    }

    /// Of a component, in plane `z`, where it is in memory.
    pub(super) fn plane(&self, component: usize, z: usize) -> Option<&[T]> {
        self.component(component).held(z)
    }

    fn take(&self, component: usize, z: usize, out: &mut [T]) -> Result<()> {
        self.component(component).take(z, out)
    }
}

/// What they are called in messages.
const WHAT: &str = "spectral derivatives along z";

/// Bytes that the derivatives along z of a whole box take in memory.
pub fn z_lines_bytes(grid: &Grid, fields: Fields, value_bytes: usize) -> u64 {
    grid.cells() * fields.components() as u64 * value_bytes as u64
}

/// What the derivatives along z of a whole box take; planes are read `together`.
pub fn z_lines_needs(grid: &Grid, fields: Fields, value_bytes: usize, together: usize) -> Needs {
    let whole = z_lines_bytes(grid, fields, value_bytes);
    let read = (grid.plane_cells() * together.clamp(1, grid.n[2]) * fields.components() * value_bytes) as u64;
    let slab = (grid.n[0] * grid.n[2] * value_bytes) as u64;
    Needs { memory: whole, memory_with_scratch: read.max(slab), disk: whole }
}

/// Whether the derivatives along z stay in memory, where there is `room` for them; else they go to a file.
///
/// # Errors
/// `Limit` where there is no room for either.
pub fn z_lines_stay(grid: &Grid, fields: Fields, value_bytes: usize, together: usize, room: &Room<'_>) -> Result<bool> {
    let needs = z_lines_needs(grid, fields, value_bytes, together);
    Ok(needs.choose(room, WHAT, &differences())? == Choice::Memory)
}

/// Reads the snapshot once and derives the components that are `wanted` along z, which must be periodic: in memory where there is
/// room, else in a file. The bytes are the same.
///
/// # Errors
/// Those of the source; `Limit` where there is no room, `Output` where the file cannot be written.
pub fn z_lines<T: Real>(source: &mut dyn PlaneSource<T>, wanted: &[bool], room: &Room<'_>, observe: &dyn Observe) -> Result<ZLines<T>> {
    let (grid, fields) = (source.grid().clone(), source.fields());
    let [nx, ny, nz] = grid.n;
    let plane = nx * ny;
    let step = source.natural_planes().clamp(1, nz);
    let needs = z_lines_needs(&grid, fields, size_of::<T>(), step);
    let choice = needs.choose(room, WHAT, &differences())?;
    let file = match choice {
        Choice::Folder(folder) => Some(Arc::new(ScratchFile::new(folder, WHAT, needs.disk)?)),
        Choice::Memory => None,
    };
    let component = |c: usize| match &file {
        None => Pencils::in_memory(grid.n),
        Some(file) => Pencils::in_file(grid.n, file, c as u64 * grid.cells(), room.bytes),
    };
    let mut components: Vec<Option<Pencils<T>>> = wanted.iter().enumerate().map(|(c, &w)| w.then(|| component(c))).collect();
    observe.stage("lines", nz as u64);
    // What is not read to its place.
    let mut passing: Vec<Vec<T>> =
        components.iter().map(|c| vec![T::ZERO; if c.is_some() && file.is_none() { 0 } else { plane * step }]).collect();
    for z in (0..nz).step_by(step) {
        let end = (z + step).min(nz);
        let places = components.iter_mut().zip(&mut passing).map(|(c, passing)| {
            let passing = &mut passing[..];
            match c.as_mut().and_then(|c| c.held_mut(z, end)) {
                Some(place) => place,
                None => &mut passing[..(end - z) * plane],
            }
        });
        source.read(z, end, &mut places.collect::<Vec<_>>())?;
        if file.is_some() {
            let put = par::map_owned(components.iter_mut().zip(&passing).collect(), |_, (c, planes)| {
                let planes = planes.chunks_exact(plane).zip(z..end);
                c.iter_mut().try_for_each(|c| planes.clone().try_for_each(|(values, z)| c.put(z, values)))
            });
            put.into_iter().collect::<Result<()>>()?;
        }
        observe.advance((end - z) as u64);
    }
    drop(passing);
    let line = LineDerivative::new(nz, grid.spacing[2]);
    for component in components.iter_mut().flatten() {
        component.along_z(|_, rows| line.columns_in_place(rows, &mut LineScratch::default()))?;
    }
    observe.done();
    Ok(ZLines { components, in_memory: file.is_none() })
}

/// What there is instead of transforms, and what it loses.
fn differences() -> String {
    let [up_to, lost] = loss(Scheme::Fd8);
    format!(
        "--derivative fd8, which derives waves up to k dx = {up_to:.2} within 1 % and leaves out {:.0} % of the gradient variance of a \
         k^-5/3 spectrum that reaches up to the cut-off of the grid (run.json of such a run states the share of the snapshot itself)",
        100.0 * lost
    )
}

/// Up to which k Δx a scheme derives waves within 1 %, and which part of the gradient variance of a k^-5/3 spectrum up to π it
/// leaves out.
fn loss(scheme: Scheme) -> [f64; 2] {
    const STEPS: usize = 3000;
    let wave = |i: usize, at: f64| (i as f64 + at) * std::f64::consts::PI / STEPS as f64;
    let made = |k: f64| modified_wavenumber(scheme, k);
    let good = (1..=STEPS).take_while(|&i| (made(wave(i, 0.0)) / wave(i, 0.0) - 1.0).abs() <= 0.01).count();
    let variance = |square: &dyn Fn(f64) -> f64| -> f64 { (0..STEPS).map(|i| wave(i, 0.5)).map(|k| square(k) * k.powf(-5.0 / 3.0)).sum() };
    [wave(good, 0.0), 1.0 - variance(&|k| made(k).powi(2)) / variance(&|k| k * k)]
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Independent figures: numpy and scipy (brentq on the modified wavenumber, quad of both variances).
    #[test]
    fn the_loss_of_differences_is_known() {
        let [up_to, lost] = loss(Scheme::Fd8);
        assert!((up_to - 1.338_248).abs() < 2e-3 && (lost - 0.346_472).abs() < 1e-3, "{up_to} {lost}");
        assert!(differences().contains("fd8"), "{}", differences());
    }
}
