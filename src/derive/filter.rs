//! Low-pass filtering of all fields of a periodic box, before anything is derived.

use std::f64::consts::PI;

use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::base::par;
use crate::base::real::Real;
use crate::math::fft::{Complex, Fft3};
use crate::model::request::{Filter, FilterShape};
use crate::model::source::{Fields, MemorySource, PlaneSource};
use crate::space::grid::Grid;

/// Bytes that filtering a snapshot takes: all components as stored, one of them in double precision, and its spectrum.
pub fn filter_bytes(grid: &Grid, fields: Fields, value_bytes: usize) -> u64 {
    let spectrum = (grid.n[0] as u64 / 2 + 1) * (grid.n[1] * grid.n[2]) as u64;
    grid.cells() * (fields.components() * value_bytes + size_of::<f64>()) as u64 + spectrum * size_of::<Complex>() as u64
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

/// The factor of a wave of squared wavenumber `k2`.
fn factor(filter: &Filter, k2: f64) -> f64 {
    match filter.shape {
        // A wave that lies on the edge but for rounding is kept.
        FilterShape::Sharp => f64::from(u8::from(k2.sqrt() <= PI / filter.width * (1.0 + 1e-12))),
        FilterShape::Gaussian => (-k2 * filter.width * filter.width / 24.0).exp(),
    }
}

/// The filtered snapshot, in memory.
///
/// # Errors
/// `Usage` when an axis is open, else those of the source.
pub fn filtered<T: Real>(source: &mut dyn PlaneSource<T>, filter: &Filter, observe: &dyn Observe) -> Result<MemorySource<T>> {
    let grid = source.grid().clone();
    check(&grid)?;
    let fields = source.fields();
    let (plane, nz) = (grid.plane_cells(), grid.n[2]);
    let mut components = vec![vec![T::ZERO; plane * nz]; fields.components()];
    observe.stage("filter", nz as u64);
    let step = source.natural_planes().max(1);
    for z in (0..nz).step_by(step) {
        let end = (z + step).min(nz);
        let mut slices: Vec<&mut [T]> = components.iter_mut().map(|c| &mut c[z * plane..end * plane]).collect();
        source.read(z, end, &mut slices)?;
        observe.advance((end - z) as u64);
    }
    let fft = Fft3::new(grid.n);
    let unit: [f64; 3] = std::array::from_fn(|a| if grid.n[a] == 1 { 0.0 } else { 2.0 * PI / grid.length(a) });
    let mut real = vec![0.0; fft.real_len()];
    let mut spectrum = vec![Complex::default(); fft.spectrum_len()];
    for c in &mut components {
        par::for_chunks(&mut real, plane, |z, out| {
            for (o, v) in out.iter_mut().zip(&c[z * plane..]) {
                *o = v.wide();
            }
        });
        fft.forward(&real, &mut spectrum);
        fft.scale(&mut spectrum, |m| factor(filter, (0..3).map(|a| (unit[a] * m[a] as f64).powi(2)).sum()));
        fft.inverse(&mut spectrum, &mut real);
        par::for_chunks(c, plane, |z, out| {
            for (o, &v) in out.iter_mut().zip(&real[z * plane..]) {
                *o = T::of(v);
            }
        });
    }
    observe.done();
    Ok(MemorySource::new(grid, fields, components))
}
