//! Sums of what the cells of an object hold: exact, so the order in which cells are added does not matter.

use crate::base::real::Real;
use crate::math::stats::{Cosine, Scale};
use crate::model::rows::Rows;

/// The pairs of vectors whose cosine is followed, as they appear in column names.
pub const COSINES: [&str; 5] = ["u_vorticity", "current_b", "u_b", "current_b_fluct", "u_b_fluct"];

/// Quantities summed over the cells of an object.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Sum {
    /// The indicator.
    Indicator,
    /// S:S.
    Strain2,
    /// |j|².
    Current2,
    /// |u×ω|².
    Lamb2,
    /// |u|²|ω|².
    Speed2Vorticity2,
    /// |j×b|².
    Lorentz2,
    /// |j|²|b|².
    Current2Field2,
    /// |j×(b − ⟨b⟩)|².
    Lorentz2Fluct,
    /// |j|²|b − ⟨b⟩|².
    Current2Field2Fluct,
}

/// Number of [`Sum`]s.
pub const SUMS: usize = 9;

/// Scales of the exact sums, from the extremes of the survey.
#[derive(Debug, Clone, PartialEq)]
pub struct Scales {
    /// One for each [`Sum`].
    pub sums: [Scale; SUMS],
    /// One for each companion.
    pub extras: Vec<Scale>,
}

/// A companion over the cells of an object.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Extra {
    sum: i128,
    /// Smallest value.
    pub min: f64,
    /// Largest value.
    pub max: f64,
}

/// Sums over the cells of an object.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Contents {
    sums: [i128; SUMS],
    /// Cosines in the order of [`COSINES`], those without the mean field left out.
    pub cosines: [Cosine; 3],
    /// Those, where there is a mean field.
    pub fluctuating: Option<Box<[Cosine; 2]>>,
    /// Sum and extremes of the companions, in their order.
    pub extras: Vec<Extra>,
}

impl Contents {
    /// Adds the cells `x0..x1` of a derived row; places are those in the arrays of `rows`.
    pub fn add_cells<T: Real>(&mut self, rows: &Rows<T>, family: usize, scales: &Scales, (x0, x1): (usize, usize)) {
        let weights = (!rows.weights.is_empty()).then(|| &rows.weights[x0..x1]);
        let columns: [&[T]; SUMS] = [
            &rows.indicators[family],
            &rows.strain2,
            &rows.j2,
            &rows.lamb2,
            &rows.u2w2,
            &rows.lorentz2,
            &rows.j2b2,
            &rows.lorentz2_fluct,
            &rows.j2b2_fluct,
        ];
        for (k, column) in columns.into_iter().enumerate() {
            if !column.is_empty() {
                self.sums[k] += exact_sum(&column[x0..x1], weights, scales.sums[k]);
            }
        }
        let add = |c: &mut Cosine, row: &[T]| match weights {
            _ if row.is_empty() => {}
            Some(weights) => c.add_weighted(&row[x0..x1], weights),
            None => c.add_few(&row[x0..x1]),
        };
        let [first @ .., j_fluct, u_fluct] = rows.cosines();
        self.cosines.iter_mut().zip(first).for_each(|(c, row)| add(c, row));
        if !j_fluct.is_empty() {
            let pair = self.fluctuating.get_or_insert_default();
            pair.iter_mut().zip([j_fluct, u_fluct]).for_each(|(c, row)| add(c, row));
        }
        if self.extras.is_empty() {
            self.extras.resize(scales.extras.len(), Extra { sum: 0, min: f64::INFINITY, max: f64::NEG_INFINITY });
        }
        for ((extra, row), scale) in self.extras.iter_mut().zip(&rows.extras).zip(&scales.extras) {
            let cells = &row[x0..x1];
            extra.sum += exact_sum(cells, weights, *scale);
            for v in cells {
                extra.min = extra.min.min(v.wide());
                extra.max = extra.max.max(v.wide());
            }
        }
    }

    /// Adds the sums over other cells.
    pub fn merge(&mut self, other: &Contents) {
        for (a, b) in self.sums.iter_mut().zip(other.sums) {
            *a += b;
        }
        if let Some(theirs) = &other.fluctuating {
            let ours = self.fluctuating.get_or_insert_default();
            ours.iter_mut().zip(theirs.iter()).for_each(|(a, b)| a.merge(b));
        }
        for (a, b) in self.cosines.iter_mut().zip(&other.cosines) {
            // Fields that are not there leave theirs empty.
            if b.defined > 0 {
                a.merge(b);
            }
        }
        if self.extras.is_empty() {
            self.extras.clone_from(&other.extras);
        } else {
            for (a, b) in self.extras.iter_mut().zip(&other.extras) {
                a.sum += b.sum;
                a.min = a.min.min(b.min);
                a.max = a.max.max(b.max);
            }
        }
    }

    /// All cosines in the order of [`COSINES`].
    pub fn all_cosines(&self) -> [Cosine; 5] {
        let [a, b, c] = self.cosines.clone();
        let [d, e] = self.fluctuating.as_deref().cloned().unwrap_or_default();
        [a, b, c, d, e]
    }

    /// A sum over the cells, each weighted by its volume over that of the largest cell.
    pub fn sum(&self, which: Sum, scales: &Scales) -> f64 {
        scales.sums[which as usize].value(self.sums[which as usize])
    }

    /// The sum of a companion.
    pub fn extra_sum(&self, which: usize, scales: &Scales) -> f64 {
        scales.extras[which].value(self.extras[which].sum)
    }
}

fn exact_sum<T: Real>(cells: &[T], weights: Option<&[f64]>, scale: Scale) -> i128 {
    match weights {
        None => cells.iter().map(|v| scale.fix(v.wide())).sum(),
        Some(weights) => cells.iter().zip(weights).map(|(v, w)| scale.fix(v.wide() * w)).sum(),
    }
}
