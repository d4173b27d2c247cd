//! Statistics of the whole box that levels, shares and warnings are made of.

use crate::math::stats::{Cosine, Quantiles};

/// One component as stored.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct ComponentStats {
    /// Sum over cells, weighted by volume over that of the largest cell.
    pub sum: f64,
    /// Sum of squares, weighted likewise.
    pub square_sum: f64,
    /// Smallest value.
    pub min: f64,
    /// Largest value.
    pub max: f64,
}

/// What a reading pass finds before anything is derived.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Scan {
    /// Per component, in source order.
    pub components: Vec<ComponentStats>,
    /// Cells with a NaN or infinite value, counted per component.
    pub not_finite: u64,
    /// The first few of them: component and x, y, z indices.
    pub first_not_finite: Vec<(usize, [usize; 3])>,
    /// Hash over the decoded planes, hexadecimal.
    pub digest: String,
    /// Spectra of sampled lines.
    pub lines: LineSpectra,
}

/// Mean power of sampled lines along each axis.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct LineSpectra {
    /// Per component, in source order, and axis: the mean over the lines of |f̂_m|² + |f̂_-m|² for m from 0 to n/2; missing on axes that
    /// are not periodic.
    pub power: Vec<[Option<Vec<f64>>; 3]>,
}

/// What part of the variance of the derivatives the scheme leaves out: 1 − ⟨k*²E⟩/⟨k²E⟩ with its modified wavenumber k*, by the
/// snapshot's own spectra of lines.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct GradientLoss {
    /// Per component, in source order, and axis; missing where the axis is not periodic or nothing changes along it.
    pub components: Vec<[Option<f64>; 3]>,
    /// All derivatives of the velocity along axes that tell, together.
    pub velocity: Option<f64>,
    /// The same of the magnetic field.
    pub magnetic: Option<f64>,
}

/// Sums of one vector field's gradient over all cells.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct GradientStats {
    /// Sum of |curl|².
    pub curl2: f64,
    /// Largest |curl|².
    pub curl2_max: f64,
    /// Sum of S:S (velocity only).
    pub strain2: f64,
    /// Largest S:S.
    pub strain2_max: f64,
    /// Sum of the squared divergence over cells whose stencils reach no open face: near one the scheme has nothing to compare with.
    pub div2: f64,
    /// Volume of those cells over that of the largest cell.
    pub div_weight: f64,
    /// Sum over the sampled rows of the squared difference that the scheme's comparison makes in the divergence, of the same cells.
    pub div_miss2: f64,
    /// Number of sampled cells.
    pub sampled: u64,
}

impl GradientStats {
    /// Adds sums over other cells.
    pub fn merge(&mut self, o: &GradientStats) {
        self.curl2 += o.curl2;
        self.curl2_max = self.curl2_max.max(o.curl2_max);
        self.strain2 += o.strain2;
        self.strain2_max = self.strain2_max.max(o.strain2_max);
        self.div2 += o.div2;
        self.div_weight += o.div_weight;
        self.div_miss2 += o.div_miss2;
        self.sampled += o.sampled;
    }
}

/// One indicator over all cells.
#[derive(Debug, Clone, PartialEq)]
pub struct IndicatorStats {
    /// Sum.
    pub sum: f64,
    /// Sum of squares.
    pub square_sum: f64,
    /// Smallest value.
    pub min: f64,
    /// Largest value.
    pub max: f64,
    /// Counts for a level by volume, where one was asked for; they are large, so parts of a box share one.
    pub quantiles: Option<Quantiles>,
}

/// Sums over the box of everything derived before levels are known.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Survey {
    /// Cells.
    pub cells: u64,
    /// Their volume over that of the largest cell; the number of cells where all are equal. All sums here are weighted so.
    pub weight: f64,
    /// Velocity gradient.
    pub velocity: GradientStats,
    /// Magnetic gradient.
    pub magnetic: GradientStats,
    /// Indicators, one a family.
    pub indicators: Vec<IndicatorStats>,
    /// Companions.
    pub extras: Vec<IndicatorStats>,
}

/// Alignment of vectors over a set of cells.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Alignment {
    /// Cosines in the order of [`crate::model::contents::COSINES`].
    pub cosines: [Cosine; 5],
    /// Sum of |u×ω|².
    pub lamb2: f64,
    /// Sum of |u|²|ω|².
    pub u2w2: f64,
    /// Sum of |j×b|².
    pub lorentz2: f64,
    /// Sum of |j|²|b|².
    pub j2b2: f64,
    /// Sum of |j×(b − ⟨b⟩)|².
    pub lorentz2_fluct: f64,
    /// Sum of |j|²|b − ⟨b⟩|².
    pub j2b2_fluct: f64,
}

impl Alignment {
    /// Adds other cells.
    pub fn merge(&mut self, o: &Alignment) {
        for (a, b) in self.cosines.iter_mut().zip(&o.cosines) {
            a.merge(b);
        }
        self.lamb2 += o.lamb2;
        self.u2w2 += o.u2w2;
        self.lorentz2 += o.lorentz2;
        self.j2b2 += o.j2b2;
        self.lorentz2_fluct += o.lorentz2_fluct;
        self.j2b2_fluct += o.j2b2_fluct;
    }

    /// The cells that are not among `part`, a subset of them.
    #[must_use]
    pub fn without(&self, part: &Alignment) -> Alignment {
        Alignment {
            cosines: std::array::from_fn(|k| self.cosines[k].without(&part.cosines[k])),
            lamb2: self.lamb2 - part.lamb2,
            u2w2: self.u2w2 - part.u2w2,
            lorentz2: self.lorentz2 - part.lorentz2,
            j2b2: self.j2b2 - part.j2b2,
            lorentz2_fluct: self.lorentz2_fluct - part.lorentz2_fluct,
            j2b2_fluct: self.j2b2_fluct - part.j2b2_fluct,
        }
    }
}
