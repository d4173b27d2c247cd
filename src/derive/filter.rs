//! Low-pass filtering of all fields of a periodic box, before anything is derived.

use std::f64::consts::PI;
use std::marker::PhantomData;
use std::path::Path;
use std::sync::{Arc, Mutex};

use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::base::par;
use crate::base::real::Real;
use crate::base::scratch::ScratchFile;
use crate::derive::pencils::{Choice, Needs, Pencils, Room};
use crate::math::lines::LineScratch;
use crate::math::planewise::Planewise;
use crate::model::request::{Filter, FilterShape};
use crate::model::source::{Fields, MemorySource, PlaneSource};
use crate::space::grid::Grid;

const WHAT: &str = "a low-pass filter";

/// Planes worked on at a time at most, where they are not in memory.
const MOST_TOGETHER: u64 = 64;

/// Bytes that filtering a snapshot takes in memory: all components as stored, and the spectrum of one in double precision.
pub fn filter_bytes(grid: &Grid, fields: Fields, value_bytes: usize) -> u64 {
    grid.cells() * (fields.components() * value_bytes) as u64 + spectrum_bytes(grid)
}

fn spectrum_bytes(grid: &Grid) -> u64 {
    row_bytes(grid) * (grid.n[1] * grid.n[2]) as u64
}

/// Of a row of a spectrum: the parts of its coefficients.
fn row_bytes(grid: &Grid) -> u64 {
    (2 * (grid.n[0] / 2 + 1) * size_of::<f64>()) as u64
}

/// Of a plane that is transformed: as stored, and its spectrum.
fn plane_bytes(grid: &Grid, value_bytes: usize) -> u64 {
    (grid.plane_cells() * value_bytes) as u64 + row_bytes(grid) * grid.n[1] as u64
}

/// What filtering a snapshot takes; planes are read `together`.
pub fn filter_needs(grid: &Grid, fields: Fields, value_bytes: usize, together: usize) -> Needs {
    let memory = filter_bytes(grid, fields, value_bytes);
    let read = (grid.plane_cells() * together.clamp(1, grid.n[2]) * fields.components() * value_bytes) as u64;
    let slab = row_bytes(grid) * grid.n[2] as u64;
    Needs { memory, memory_with_scratch: read.max(slab).max(plane_bytes(grid, value_bytes)), disk: memory }
}

/// Whether a grid can be filtered: every axis along which it has several samples must be periodic.
///
/// # Errors
/// `Usage`, naming the axis.
pub fn check(grid: &Grid) -> Result<()> {
    for (a, name) in ["x", "y", "z"].into_iter().enumerate() {
        let one_sample = a == 2 && grid.is_flat();
        if !(grid.periodic[a] || one_sample) {
            return Err(Error::usage("cannot filter")
                .item(format!("axis {name}"))
                .expected("periodic axes of equal spacing")
                .found(if grid.stretched[a].is_some() { "a stretched axis" } else { "an open axis" })
                .hint("leave the filter out, or filter the fields before they are stored"));
        }
    }
    Ok(())
}

/// Whether a filter does something to a grid and leaves something.
///
/// # Errors
/// `Usage` when its width is larger than the box or smaller than a cell.
pub fn check_width(grid: &Grid, filter: &Filter) -> Result<()> {
    let axes = || (0..3).filter(|&a| grid.n[a] > 1);
    let least = axes().map(|a| grid.spacing[a]).fold(f64::INFINITY, f64::min);
    let most = axes().map(|a| grid.length(a)).fold(0.0, f64::max);
    if filter.width >= least && filter.width <= most {
        return Ok(());
    }
    Err(Error::usage("cannot filter")
        .item(format!("\"{filter}\""))
        .expected(format!("a width from {least}, one cell, to {most}, the box"))
        .found(filter.width.to_string())
        .hint(if filter.width < least { "a narrower filter changes nothing" } else { "a wider filter leaves nothing but the mean" }))
}

/// The factors of all waves of a box.
struct Factors {
    shape: FilterShape,
    /// The largest wavenumber that a sharp filter keeps.
    edge: f64,
    /// Of the wavenumbers along each axis, in the order they stand in: the factor of a Gaussian, of a sharp filter k².
    axes: [Vec<f64>; 3],
}

impl Factors {
    fn new(filter: &Filter, grid: &Grid, planewise: &Planewise) -> Factors {
        let axes = std::array::from_fn(|a| {
            let unit = if grid.n[a] == 1 { 0.0 } else { 2.0 * PI / grid.length(a) };
            let k2 = planewise.wavenumbers(a).into_iter().map(|m| (unit * m as f64).powi(2));
            match filter.shape {
                FilterShape::Sharp => k2.collect(),
                FilterShape::Gaussian => k2.map(|k2| libm::exp(-k2 * filter.width * filter.width / 24.0)).collect(),
            }
        });
        // A wave that lies on the edge but for rounding is kept.
        Factors { shape: filter.shape, edge: PI / filter.width * (1.0 + 1e-12), axes }
    }

    fn at(&self, x: usize, y: usize, z: usize) -> f64 {
        let [x, y, z] = [self.axes[0][x], self.axes[1][y], self.axes[2][z]];
        match self.shape {
            FilterShape::Sharp => f64::from(u8::from((x + y + z).sqrt() <= self.edge)),
            FilterShape::Gaussian => x * y * z,
        }
    }
}

/// Whether filtered fields stay in memory, where there is `room` for filtering; else they go to a file.
///
/// # Errors
/// `Limit` where there is no room for either.
pub fn stays(grid: &Grid, fields: Fields, value_bytes: usize, together: usize, room: &Room<'_>) -> Result<bool> {
    let needs = filter_needs(grid, fields, value_bytes, together);
    Ok(needs.choose(room, WHAT, "the filter left out")? == Choice::Memory)
}

/// The filtered snapshot: in memory where there is room, else in a file. The bytes are the same.
///
/// # Errors
/// `Usage` when an axis is open, else those of the source; `Limit` where there is no room, `Output` where the file cannot be
/// written.
pub fn filtered<T: Real>(
    source: &mut dyn PlaneSource<T>,
    filter: &Filter,
    room: &Room<'_>,
    observe: &dyn Observe,
) -> Result<Box<dyn PlaneSource<T>>> {
    let grid = source.grid().clone();
    check(&grid)?;
    let fields = source.fields();
    let step = source.natural_planes().clamp(1, grid.n[2]);
    let needs = filter_needs(&grid, fields, size_of::<T>(), step);
    match needs.choose(room, WHAT, "the filter left out")? {
        Choice::Memory => in_memory(source, filter, &grid, fields, step, observe),
        Choice::Folder(folder) => in_files(source, filter, &grid, fields, step, folder, room.bytes, observe),
    }
}

fn in_memory<T: Real>(
    source: &mut dyn PlaneSource<T>,
    filter: &Filter,
    grid: &Grid,
    fields: Fields,
    step: usize,
    observe: &dyn Observe,
) -> Result<Box<dyn PlaneSource<T>>> {
    let (plane, nz) = (grid.plane_cells(), grid.n[2]);
    let mut components = vec![vec![T::ZERO; plane * nz]; fields.components()];
    observe.stage("filter", nz as u64);
    for z in (0..nz).step_by(step) {
        let end = (z + step).min(nz);
        let mut slices: Vec<&mut [T]> = components.iter_mut().map(|c| &mut c[z * plane..end * plane]).collect();
        source.read(z, end, &mut slices)?;
        observe.advance((end - z) as u64);
    }
    let planewise = Planewise::new(grid.n);
    let factors = Factors::new(filter, grid, &planewise);
    let mut spectrum = Pencils::in_memory([planewise.width(), grid.n[1], nz]);
    for c in &mut components {
        spectrum.fill(1, |z, out| {
            planewise.forward(&c[z * plane..(z + 1) * plane], out, &mut LineScratch::default());
            Ok(())
        })?;
        scale(&mut spectrum, &planewise, &factors)?;
        let planes: Vec<Mutex<&mut [T]>> = c.chunks_exact_mut(plane).map(Mutex::new).collect();
        spectrum.empty(1, |z, values| {
            let mut out = planes[z].lock().expect("every plane is made once");
            planewise.inverse(values, &mut out, &mut LineScratch::default());
            Ok(())
        })?;
    }
    observe.done();
    Ok(Box::new(MemorySource::new(grid.clone(), fields, components)))
}

fn in_files<T: Real>(
    source: &mut dyn PlaneSource<T>,
    filter: &Filter,
    grid: &Grid,
    fields: Fields,
    step: usize,
    folder: &Path,
    bytes: u64,
    observe: &dyn Observe,
) -> Result<Box<dyn PlaneSource<T>>> {
    let (plane, nz) = (grid.plane_cells(), grid.n[2]);
    let cells = grid.cells();
    let kept = ScratchFile::new(folder, "filtered fields", cells * (fields.components() * size_of::<T>()) as u64)?;
    let place = |component: usize, z: usize| component as u64 * cells + (z * plane) as u64;
    observe.stage("filter", nz as u64);
    let mut planes = vec![vec![T::ZERO; plane * step]; fields.components()];
    for z in (0..nz).step_by(step) {
        let end = (z + step).min(nz);
        let mut slices: Vec<&mut [T]> = planes.iter_mut().map(|c| &mut c[..(end - z) * plane]).collect();
        source.read(z, end, &mut slices)?;
        let written = par::map(&planes, |c, values| kept.write(place(c, z), &values[..(end - z) * plane]));
        written.into_iter().collect::<Result<()>>()?;
        observe.advance((end - z) as u64);
    }
    drop(planes);
    let planewise = Planewise::new(grid.n);
    let factors = Factors::new(filter, grid, &planewise);
    let file = Arc::new(ScratchFile::new(folder, "the spectrum of a filtered field", spectrum_bytes(grid))?);
    let mut spectrum = Pencils::in_file([planewise.width(), grid.n[1], nz], &file, 0, bytes);
    let together = (bytes / plane_bytes(grid, size_of::<T>())).clamp(1, MOST_TOGETHER) as usize;
    for c in 0..fields.components() {
        spectrum.fill(together, |z, out| {
            let mut values = vec![T::ZERO; plane];
            kept.read(place(c, z), &mut values)?;
            planewise.forward(&values, out, &mut LineScratch::default());
            Ok(())
        })?;
        scale(&mut spectrum, &planewise, &factors)?;
        spectrum.empty(together, |z, values| {
            let mut out = vec![T::ZERO; plane];
            planewise.inverse(values, &mut out, &mut LineScratch::default());
            kept.write(place(c, z), &out)
        })?;
    }
    observe.done();
    Ok(Box::new(FileSource { grid: grid.clone(), fields, file: kept, values: PhantomData }))
}

/// Multiplies a spectrum that is transformed along x and y.
fn scale(spectrum: &mut Pencils<f64>, planewise: &Planewise, factors: &Factors) -> Result<()> {
    spectrum.along_z(|y, rows| planewise.scale_along_z(rows, &mut LineScratch::default(), |x, z| factors.at(x, y, z)))
}

/// Whole components in a scratch file, one after the other.
struct FileSource<T> {
    grid: Grid,
    fields: Fields,
    file: ScratchFile,
    values: PhantomData<T>,
}

impl<T: Real> PlaneSource<T> for FileSource<T> {
    fn grid(&self) -> &Grid {
        &self.grid
    }

    fn fields(&self) -> Fields {
        self.fields
    }

    fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [T]]) -> Result<()> {
        let plane = self.grid.plane_cells();
        assert!(z1 <= self.grid.n[2] && out.iter().all(|o| o.len() == (z1 - z0) * plane), "planes {z0} to {z1}");
        out.iter_mut().enumerate().try_for_each(|(c, o)| self.file.read(c as u64 * self.grid.cells() + (z0 * plane) as u64, o))
    }
}
