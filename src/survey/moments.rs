//! Sums of gradient quantities and indicators over the box, added up row by row, tile by tile, plane by plane in a fixed order.

use std::ops::Range;

use crate::base::real::Real;
use crate::math::stats::{row_max, row_square_sum, row_stats, row_sum, weighted_square_sum, weighted_sum};
use crate::model::request::Family;
use crate::model::rows::Rows;
use crate::model::statistics::{GradientStats, IndicatorStats, Survey};

/// Every how many rows the truncation error is sampled.
pub const SAMPLE_ROWS: usize = 4;

/// An empty sum for a list of families and a number of companions.
pub fn empty(families: &[Family], companions: usize) -> Survey {
    let indicator = IndicatorStats { sum: 0.0, square_sum: 0.0, min: f64::INFINITY, max: f64::NEG_INFINITY, quantiles: None };
    Survey { indicators: vec![indicator.clone(); families.len()], extras: vec![indicator; companions], ..Survey::default() }
}

/// Adds one derived row. `sampled` rows carry the truncation measure; the divergence is judged in the cells `inner`.
pub fn add_row<T: Real>(survey: &mut Survey, rows: &Rows<T>, sampled: bool, inner: Range<usize>) {
    let w = &rows.weights;
    gradient(&mut survey.velocity, &rows.w2, Some(&rows.strain2), w);
    gradient(&mut survey.magnetic, &rows.j2, None, w);
    divergence(&mut survey.velocity, &rows.div_u, &rows.div_u_miss, w, sampled, inner.clone());
    divergence(&mut survey.magnetic, &rows.div_b, &rows.div_b_miss, w, sampled, inner);
    let mut cells = rows.w2.len().max(rows.j2.len());
    let extras = survey.extras.iter_mut().zip(&rows.extras);
    for (s, row) in survey.indicators.iter_mut().zip(&rows.indicators).chain(extras) {
        cells = row.len();
        let r = row_stats(row);
        s.sum += if w.is_empty() { r.sum } else { weighted_sum(row, w) };
        s.square_sum += if w.is_empty() { r.square_sum } else { weighted_square_sum(row, w) };
        s.min = s.min.min(r.min);
        s.max = s.max.max(r.max);
    }
    survey.cells += cells as u64;
    survey.weight += if w.is_empty() { cells as f64 } else { w.iter().sum() };
}

fn gradient<T: Real>(g: &mut GradientStats, curl2: &[T], strain2: Option<&[T]>, weights: &[f64]) {
    if curl2.is_empty() {
        return;
    }
    let sum = |row: &[T]| if weights.is_empty() { row_sum(row) } else { weighted_sum(row, weights) };
    g.curl2 += sum(curl2);
    g.curl2_max = g.curl2_max.max(row_max(curl2));
    if let Some(s) = strain2 {
        g.strain2 += sum(s);
        g.strain2_max = g.strain2_max.max(row_max(s));
    }
}

fn divergence<T: Real>(g: &mut GradientStats, div: &[T], miss: &[T], weights: &[f64], sampled: bool, inner: Range<usize>) {
    if div.is_empty() || inner.is_empty() {
        return;
    }
    let cells = inner.len();
    if weights.is_empty() {
        g.div2 += row_square_sum(&div[inner.clone()]);
        g.div_weight += cells as f64;
    } else {
        g.div2 += weighted_square_sum(&div[inner.clone()], &weights[inner.clone()]);
        g.div_weight += weights[inner.clone()].iter().sum::<f64>();
    }
    if sampled {
        g.div_miss2 += row_square_sum(&miss[inner]);
        g.sampled += cells as u64;
    }
}

/// Adds the sums over other cells.
pub fn merge(into: &mut Survey, other: &Survey) {
    into.cells += other.cells;
    into.weight += other.weight;
    into.velocity.merge(&other.velocity);
    into.magnetic.merge(&other.magnetic);
    let extras = into.extras.iter_mut().zip(&other.extras);
    for (a, b) in into.indicators.iter_mut().zip(&other.indicators).chain(extras) {
        a.sum += b.sum;
        a.square_sum += b.square_sum;
        a.min = a.min.min(b.min);
        a.max = a.max.max(b.max);
    }
}
