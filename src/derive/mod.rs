//! From planes of u, b and buoyancy to rows of derived quantities, one row at a time so that gradients never leave the cache.

mod alignment;
mod criteria;
pub mod filter;
mod gradient;
mod group;
mod indicator;
mod invariants;
mod lines;
mod pencils;

use std::ops::Range;
use std::sync::Arc;

use crate::base::error::Result;
use crate::base::real::Real;
use crate::math::diff::{AxisStencil, Pick};
use crate::model::request::{Indicator, Scheme};
use crate::model::rows::{Need, Rows};
use crate::model::source::Fields;
use crate::space::grid::Grid;
use crate::space::slab::Block;

use alignment::pair;
pub use group::Ahead;

use gradient::{Buffers, Gradient, Place};
use indicator::{Sources, Wants};
use lines::{Lines, Pool};
pub use lines::{Prepared, ZLines, z_lines, z_lines_bytes, z_lines_needs, z_lines_stay};
pub use pencils::{Needs, Room};

/// What is derived and how.
#[derive(Debug, Clone, PartialEq)]
pub struct Plan {
    /// Those of the families.
    pub indicators: Vec<Indicator>,
    /// Further ones, derived where [`Need::extras`] asks.
    pub extras: Vec<Indicator>,
    /// How derivatives are taken.
    pub scheme: Scheme,
    /// Velocity to subtract.
    pub frame: [f64; 3],
    /// Mean magnetic field, where the alignments are wanted without it as well.
    pub mean_field: Option<[f64; 3]>,
    /// Kinematic viscosity; counts as 1 where unknown (no indicator that needs it passes the request's checks).
    pub viscosity: Option<f64>,
    /// Magnetic diffusivity, as the viscosity.
    pub resistivity: Option<f64>,
}

/// The fewest samples that an axis of a grid must have for a scheme.
pub fn fewest_samples(scheme: Scheme, grid: &Grid, axis: usize) -> usize {
    if axis == 2 && grid.is_flat() { 1 } else { scheme.fewest_samples() }
}

/// Fills [`Rows`] for a snapshot of given grid and fields.
pub struct Deriver<T> {
    fields: Fields,
    indicators: Vec<Indicator>,
    extras: Vec<Indicator>,
    /// What the indicators take, without and with the extras.
    wants: [Wants; 2],
    stencils: [AxisStencil<T>; 3],
    fallbacks: Vec<String>,
    z_lines: Option<Arc<ZLines<T>>>,
    pool: Pool<T>,
    /// Samples along x, y, z, and which axes end at faces.
    n: [usize; 3],
    open: [bool; 3],
    /// Subtracted from the velocity.
    frame: [T; 3],
    mean_field: Option<[T; 3]>,
    viscosity: T,
    resistivity: T,
}

/// Scratch of one worker.
pub struct Scratch<T> {
    velocity: Gradient<T>,
    magnetic: Gradient<T>,
    buoyancy: [Vec<T>; 3],
    fluctuation: [Vec<T>; 3],
    buffers: Buffers<T>,
    /// The derived row.
    pub rows: Rows<T>,
}

impl<T: Real> Default for Scratch<T> {
    fn default() -> Self {
        Scratch {
            velocity: Gradient::default(),
            magnetic: Gradient::default(),
            buoyancy: Default::default(),
            fluctuation: Default::default(),
            buffers: Buffers::default(),
            rows: Rows::default(),
        }
    }
}

impl<T: Real> Scratch<T> {
    /// What will be asked of a block from now on; asked for in this order, it is made faster.
    pub fn expect(&mut self, ahead: Ahead) {
        self.buffers.groups.expect(ahead);
    }
}

impl<T: Real> Deriver<T> {
    /// # Panics
    /// When an axis has fewer than [`fewest_samples`].
    pub fn new(grid: &Grid, fields: Fields, plan: Plan) -> Self {
        let Plan { indicators, extras, scheme, frame, mean_field, viscosity, resistivity } = plan;
        let stencils = std::array::from_fn(|a| match &grid.stretched[a] {
            _ if a == 2 && grid.is_flat() => AxisStencil::flat(),
            Some(s) => AxisStencil::stretched(scheme, &s.positions),
            None => AxisStencil::new(scheme, grid.n[a], grid.spacing[a], grid.periodic[a]),
        });
        Deriver {
            fields,
            wants: [Wants::of(&indicators), Wants::of(indicators.iter().chain(&extras))],
            indicators,
            extras,
            stencils,
            fallbacks: fallbacks(grid, scheme),
            z_lines: None,
            pool: Pool::default(),
            n: grid.n,
            open: std::array::from_fn(|a| !(grid.periodic[a] || a == 2 && grid.is_flat())),
            frame: frame.map(T::of),
            mean_field: mean_field.map(|m| m.map(T::of)),
            viscosity: T::of(viscosity.unwrap_or(1.0)),
            resistivity: T::of(resistivity.unwrap_or(1.0)),
        }
    }

    /// Where the scheme gives way to another one, in words for the user.
    pub fn fallbacks(&self) -> &[String] {
        &self.fallbacks
    }

    /// The components whose derivatives along z must be given by [`Deriver::with_z_lines`]; none where stencils do.
    pub fn wanted_z_lines(&self) -> Option<Vec<bool>> {
        self.stencils[2].line()?;
        let buoyancy = self.wants[1].buoyancy_gradient;
        let names = self.fields.names();
        Some(names.into_iter().map(|n| n != "buoyancy" || buoyancy).collect())
    }

    /// With the derivatives along z of the whole box.
    #[must_use]
    pub fn with_z_lines(mut self, z_lines: Option<Arc<ZLines<T>>>) -> Self {
        self.z_lines = z_lines;
        self
    }

    /// First and one-past-last plane (unwrapped) that the planes `z` read.
    pub fn reach(&self, z: Range<usize>) -> (isize, isize) {
        z.map(|k| self.stencils[2].reach(k)).fold((isize::MAX, isize::MIN), |a, b| (a.0.min(b.0), a.1.max(b.1)))
    }

    /// Planes of halo that a periodic z-axis needs on each side.
    pub fn halo(&self) -> usize {
        if self.open[2] { 0 } else { self.stencils[2].halo() }
    }

    /// The cells of row (y, z) whose stencils reach no open face.
    pub fn inner(&self, y: usize, z: usize) -> Range<usize> {
        let along = |a: usize| {
            let (n, margin) = (self.n[a], if self.open[a] { self.stencils[a].halo() } else { 0 });
            margin..n.saturating_sub(margin).max(margin)
        };
        if along(1).contains(&y) && along(2).contains(&z) { along(0) } else { 0..0 }
    }

    /// What has to be derived for rows that are needed so.
    fn wants(&self, need: Need) -> Wants {
        let mut w = self.wants[usize::from(need.extras)];
        let gradients = need.divergence || need.truncation;
        w.full |= need.strain || gradients;
        w.strain |= need.strain;
        w.vorticity |= w.full || need.alignment || need.vectors;
        w.current |= gradients || need.alignment || need.vectors;
        w.velocity |= need.alignment || need.vectors;
        w.field |= need.alignment || need.vectors;
        let Fields { velocity, magnetic, buoyancy, .. } = self.fields;
        Wants {
            vorticity: w.vorticity && velocity,
            full: w.full && velocity,
            strain: w.strain && velocity,
            current: w.current && magnetic,
            velocity: w.velocity && velocity,
            field: w.field && magnetic,
            buoyancy_gradient: w.buoyancy_gradient && buoyancy,
        }
    }

    /// Derives what a whole block needs before its rows, of which no more is asked than `need`.
    ///
    /// # Errors
    /// `Output` when what was put aside in a file cannot be read again.
    pub fn prepare(&self, block: &Block<'_, T>, need: Need) -> Result<Prepared<T>> {
        let w = self.wants(need);
        let mut wanted = Vec::new();
        // Of a vector the six that its curl takes, or all nine.
        let vector = |curl: bool, full: bool| (0..3).map(move |c| std::array::from_fn(|a| if a == c { full } else { curl }));
        if self.fields.velocity {
            wanted.extend(vector(w.vorticity, w.full));
        }
        if self.fields.magnetic {
            wanted.extend(vector(w.current, w.current && (need.divergence || need.truncation)));
        }
        if self.fields.buoyancy {
            wanted.push([w.buoyancy_gradient; 3]);
        }
        let z_lines = self.z_lines.as_deref().filter(|z| !z.is_in_memory()).map(Lines::File);
        let lines = [self.stencils[0].line().map(Lines::Rows), self.stencils[1].line().map(Lines::Columns), z_lines];
        Prepared::new(&lines, block, &wanted, self.n[0], &self.pool)
    }

    /// Bytes that [`Deriver::prepare`] takes at most for a block of so many planes; those along z where they are in a file.
    pub fn prepared_bytes(&self, planes: usize, z_in_file: bool) -> u64 {
        let axes = [self.stencils[0].line().is_some(), self.stencils[1].line().is_some(), z_in_file && self.stencils[2].line().is_some()];
        let arrays = self.fields.components() * axes.iter().filter(|a| **a).count() * planes;
        (arrays * self.n[0] * self.n[1] * size_of::<T>()) as u64
    }

    /// Derives the cells `x` of row `y` of plane `z` of the block into `scratch.rows`.
    pub fn row(
        &self,
        block: &Block<'_, T>,
        ready: &Prepared<T>,
        z: usize,
        y: usize,
        x: Range<usize>,
        need: Need,
        scratch: &mut Scratch<T>,
    ) {
        self.pieces(block, ready, z, y, std::slice::from_ref(&x), need, scratch);
    }

    /// The same for several ascending stretches of a row; their cells stand one after the other in `scratch.rows`.
    pub fn pieces(
        &self,
        block: &Block<'_, T>,
        ready: &Prepared<T>,
        z: usize,
        y: usize,
        pieces: &[Range<usize>],
        need: Need,
        scratch: &mut Scratch<T>,
    ) {
        let Scratch { velocity, magnetic, buoyancy, fluctuation, buffers, rows } = scratch;
        let wants = self.wants(need);
        let [nx, ny, _] = self.n;
        let len = pieces.iter().map(ExactSizeIterator::len).sum();
        let place = Place { stencils: &self.stencils, block, ready, z_lines: self.z_lines.as_deref(), z, y, pieces, len, nx, ny };
        if wants.vorticity {
            place.gradient(0, wants.full, buffers, velocity);
            invariants::curl(velocity, &mut rows.w, &mut rows.w2);
        } else {
            rows.w.iter_mut().chain([&mut rows.w2]).for_each(Vec::clear);
        }
        let velocity_full = self.fields.velocity && wants.full;
        filled(wants.strain, &mut rows.strain2, |out| invariants::strain2(velocity, out));
        filled(velocity_full && need.divergence, &mut rows.div_u, |out| invariants::divergence(velocity, out));
        filled(velocity_full && need.truncation, &mut rows.div_u_miss, |out| place.divergence_miss(0, velocity, buffers, out));
        for c in 0..3 {
            rows.u[c].clear();
            if wants.velocity {
                let f = self.frame[c];
                place.values(c).for_each(|part| rows.u[c].extend(part.iter().map(|&v| v - f)));
            }
        }
        let first = self.fields.first_magnetic();
        let magnetic_full = wants.current && (need.divergence || need.truncation);
        if wants.current {
            place.gradient(first, magnetic_full, buffers, magnetic);
            invariants::curl(magnetic, &mut rows.j, &mut rows.j2);
        } else {
            rows.j.iter_mut().chain([&mut rows.j2]).for_each(Vec::clear);
        }
        filled(magnetic_full && need.divergence, &mut rows.div_b, |out| invariants::divergence(magnetic, out));
        filled(magnetic_full && need.truncation, &mut rows.div_b_miss, |out| place.divergence_miss(first, magnetic, buffers, out));
        for c in 0..3 {
            rows.b[c].clear();
            if wants.field {
                place.values(first + c).for_each(|part| rows.b[c].extend_from_slice(part));
            }
        }
        rows.buoyancy.clear();
        if self.fields.buoyancy {
            place.values(self.fields.components() - 1).for_each(|part| rows.buoyancy.extend_from_slice(part));
        }
        if wants.buoyancy_gradient {
            for a in 0..3 {
                place.along(self.fields.components() - 1, a, Pick::Scheme, buffers, &mut buoyancy[a]);
            }
        }
        self.align(need.alignment, rows, fluctuation);
        let sources = Made { velocity, buoyancy, aligned: need.alignment };
        let mut out = std::mem::take(&mut rows.indicators);
        self.evaluate(&self.indicators, &[], rows, &sources, &mut out);
        rows.indicators = out;
        if need.extras {
            let mut out = std::mem::take(&mut rows.extras);
            self.evaluate(&self.extras, &self.indicators, rows, &sources, &mut out);
            rows.extras = out;
        }
    }

    /// Cosines and cross products, with the mean field left out as well where it is known.
    fn align(&self, wanted: bool, rows: &mut Rows<T>, fluctuation: &mut [Vec<T>; 3]) {
        let Fields { velocity, magnetic, .. } = self.fields;
        if wanted && velocity {
            pair(&rows.u, &rows.w, &mut rows.cos_uw, Some((&mut rows.lamb2, &mut rows.u2w2)));
        } else {
            [&mut rows.cos_uw, &mut rows.lamb2, &mut rows.u2w2].into_iter().for_each(Vec::clear);
        }
        if wanted && magnetic {
            pair(&rows.j, &rows.b, &mut rows.cos_jb, Some((&mut rows.lorentz2, &mut rows.j2b2)));
        } else {
            [&mut rows.cos_jb, &mut rows.lorentz2, &mut rows.j2b2].into_iter().for_each(Vec::clear);
        }
        filled(wanted && velocity && magnetic, &mut rows.cos_ub, |out| pair(&rows.u, &rows.b, out, None));
        let mean = self.mean_field.filter(|_| wanted && magnetic);
        if let Some(mean) = mean {
            for c in 0..3 {
                fluctuation[c].clear();
                fluctuation[c].extend(rows.b[c].iter().map(|&v| v - mean[c]));
            }
            pair(&rows.j, fluctuation, &mut rows.cos_jb_fluct, Some((&mut rows.lorentz2_fluct, &mut rows.j2b2_fluct)));
        } else {
            [&mut rows.cos_jb_fluct, &mut rows.lorentz2_fluct, &mut rows.j2b2_fluct].into_iter().for_each(Vec::clear);
        }
        filled(mean.is_some() && velocity, &mut rows.cos_ub_fluct, |out| pair(&rows.u, fluctuation, out, None));
    }

    /// The indicators of a list, each once: one that stands earlier in the list or in `before`, whose rows are there, is copied.
    fn evaluate(&self, list: &[Indicator], before: &[Indicator], rows: &Rows<T>, made: &Made<'_, T>, out: &mut Vec<Vec<T>>) {
        out.resize_with(list.len(), Vec::new);
        let sources = Sources {
            rows,
            velocity: made.velocity,
            buoyancy: made.buoyancy,
            viscosity: self.viscosity,
            resistivity: self.resistivity,
            compressible: self.fields.compressible,
            aligned: made.aligned,
        };
        for (k, &indicator) in list.iter().enumerate() {
            let (done, rest) = out.split_at_mut(k);
            let earlier = list[..k].iter().position(|&i| i == indicator).map(|i| &done[i]);
            let earlier = earlier.or_else(|| before.iter().position(|&i| i == indicator).map(|i| &rows.indicators[i]));
            match earlier {
                Some(same) => rest[0].clone_from(same),
                None => indicator::row(indicator, &sources, &mut rest[0]),
            }
        }
    }
}

/// What indicators take besides [`Rows`].
struct Made<'a, T> {
    velocity: &'a Gradient<T>,
    buoyancy: &'a [Vec<T>; 3],
    aligned: bool,
}

/// Fills a row where it is wanted, else empties it.
fn filled<T>(wanted: bool, out: &mut Vec<T>, fill: impl FnOnce(&mut Vec<T>)) {
    if wanted { fill(out) } else { out.clear() }
}

fn fallbacks(grid: &Grid, scheme: Scheme) -> Vec<String> {
    let mut out = Vec::new();
    for (a, axis) in ["x", "y", "z"].into_iter().enumerate() {
        if a == 2 && grid.is_flat() {
            continue;
        }
        let how = if grid.stretched[a].is_some() { "stretched" } else { "open" };
        let why = match scheme {
            Scheme::Spectral if !grid.periodic[a] => "transforms need a periodic axis",
            Scheme::Opt if grid.stretched[a].is_some() => "the optimised stencil needs equal spacing",
            _ => continue,
        };
        out.push(format!("axis {axis} is {how}, so derivatives along it are differences of order 8 instead of {}: {why}", scheme.name()));
    }
    out
}
