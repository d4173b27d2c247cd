//! From planes of u and b to rows of derived quantities, one row at a time so that gradients never leave the cache.

mod alignment;
mod gradient;
mod indicator;
mod invariants;

use std::ops::Range;

use crate::base::real::Real;
use crate::math::diff::{AxisStencil, HALF};
use crate::model::request::{Indicator, Scheme};
use crate::model::rows::{Need, Rows};
use crate::model::source::Fields;
use crate::space::grid::Grid;
use crate::space::slab::Block;

use gradient::Gradient;

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

/// What must be derived for a whole block of planes before its rows.
pub struct Prepared<T> {
    marker: std::marker::PhantomData<T>,
}

/// Fills [`Rows`] for a snapshot of given grid and fields.
pub struct Deriver<T> {
    fields: Fields,
    indicators: Vec<Indicator>,
    stencils: [AxisStencil<T>; 3],
    /// Subtracted from the velocity.
    frame: [T; 3],
    viscosity: T,
    resistivity: T,
    nx: usize,
    ny: usize,
}

/// Scratch of one worker.
pub struct Scratch<T> {
    gradient: Gradient<T>,
    /// The derived row.
    pub rows: Rows<T>,
}

impl<T: Real> Default for Scratch<T> {
    fn default() -> Self {
        Scratch { gradient: Gradient::default(), rows: Rows::default() }
    }
}

impl<T: Real> Deriver<T> {
    /// # Panics
    /// When an axis has fewer than 9 samples.
    pub fn new(grid: &Grid, fields: Fields, plan: Plan) -> Self {
        let Plan { frame, viscosity, resistivity, .. } = plan;
        Deriver {
            fields,
            indicators: plan.indicators,
            stencils: std::array::from_fn(|a| AxisStencil::new(grid.n[a], grid.spacing[a], grid.periodic[a])),
            frame: frame.map(T::of),
            viscosity: T::of(viscosity.unwrap_or(1.0)),
            resistivity: T::of(resistivity.unwrap_or(1.0)),
            nx: grid.n[0],
            ny: grid.n[1],
        }
    }

    /// First and one-past-last plane (unwrapped) that the planes `z` read.
    pub fn reach(&self, z: Range<usize>) -> (isize, isize) {
        z.map(|k| self.stencils[2].reach(k)).fold((isize::MAX, isize::MIN), |a, b| (a.0.min(b.0), a.1.max(b.1)))
    }

    /// Planes of halo that a periodic z-axis needs on each side.
    pub fn halo(&self) -> usize {
        HALF
    }

    /// Derives what a whole block needs before its rows.
    pub fn prepare(&self, _block: &Block<'_, T>) -> Prepared<T> {
        Prepared { marker: std::marker::PhantomData }
    }

    /// Derives the cells `x` of row `y` of plane `z` of the block into `scratch.rows`.
    pub fn row(
        &self,
        block: &Block<'_, T>,
        _ready: &Prepared<T>,
        z: usize,
        y: usize,
        x: Range<usize>,
        need: Need,
        scratch: &mut Scratch<T>,
    ) {
        let Scratch { gradient, rows } = scratch;
        let mut component = 0;
        let strain = need.strain || self.indicators.iter().any(|i| i.needs_strain());
        if self.fields.velocity {
            gradient.row(&self.stencils, block, component, z, y, &x, self.ny, strain || need.divergence);
            invariants::curl(gradient, &mut rows.w, &mut rows.w2);
            if strain {
                invariants::strain2(gradient, &mut rows.strain2);
            }
            if need.divergence {
                invariants::divergence(gradient, &mut rows.div_u);
            }
            if need.truncation {
                gradient.divergence_miss(&self.stencils, block, component, z, y, &x, self.ny, &mut rows.div_u_miss);
            }
            for c in 0..3 {
                let row = &block.plane(component + c, z as isize)[y * self.nx + x.start..y * self.nx + x.end];
                let f = self.frame[c];
                rows.u[c].clear();
                rows.u[c].extend(row.iter().map(|&v| v - f));
            }
            component += 3;
        }
        if self.fields.magnetic {
            gradient.row(&self.stencils, block, component, z, y, &x, self.ny, need.divergence);
            invariants::curl(gradient, &mut rows.j, &mut rows.j2);
            if need.divergence {
                invariants::divergence(gradient, &mut rows.div_b);
            }
            if need.truncation {
                gradient.divergence_miss(&self.stencils, block, component, z, y, &x, self.ny, &mut rows.div_b_miss);
            }
            for c in 0..3 {
                let row = &block.plane(component + c, z as isize)[y * self.nx + x.start..y * self.nx + x.end];
                rows.b[c].clear();
                rows.b[c].extend_from_slice(row);
            }
        }
        if need.alignment {
            if self.fields.velocity {
                alignment::pair(&rows.u, &rows.w, &mut rows.cos_uw, Some((&mut rows.lamb2, &mut rows.u2w2)));
            }
            if self.fields.magnetic {
                alignment::pair(&rows.j, &rows.b, &mut rows.cos_jb, Some((&mut rows.lorentz2, &mut rows.j2b2)));
            }
            if self.fields.velocity && self.fields.magnetic {
                alignment::pair(&rows.u, &rows.b, &mut rows.cos_ub, None);
            }
        }
        rows.indicators.resize_with(self.indicators.len(), Vec::new);
        for (k, indicator) in self.indicators.iter().enumerate() {
            let mut out = std::mem::take(&mut rows.indicators[k]);
            indicator::row(*indicator, rows, self.viscosity, self.resistivity, &mut out);
            rows.indicators[k] = out;
        }
    }
}
