//! Sums of gradient quantities and indicators over the box, added up row by row, tile by tile, plane by plane in a fixed order.

use crate::base::real::Real;
use crate::math::stats::{row_max, row_square_sum, row_stats, row_sum};
use crate::model::request::Family;
use crate::model::rows::Rows;
use crate::model::statistics::{GradientStats, IndicatorStats, Survey};

/// Every how many rows the truncation error is sampled.
pub const SAMPLE_ROWS: usize = 4;

/// An empty sum for a list of families.
pub fn empty(families: &[Family]) -> Survey {
    let indicator = IndicatorStats { sum: 0.0, square_sum: 0.0, min: f64::INFINITY, max: f64::NEG_INFINITY, quantiles: None };
    Survey { indicators: vec![indicator; families.len()], ..Survey::default() }
}

/// Adds one derived row. `sampled` rows carry the truncation measure.
pub fn add_row<T: Real>(survey: &mut Survey, rows: &Rows<T>, sampled: bool) {
    gradient(&mut survey.velocity, &rows.w2, Some(&rows.strain2), &rows.div_u, &rows.div_u_miss, sampled);
    gradient(&mut survey.magnetic, &rows.j2, None, &rows.div_b, &rows.div_b_miss, sampled);
    let mut cells = rows.w2.len().max(rows.j2.len());
    for (s, row) in survey.indicators.iter_mut().zip(&rows.indicators) {
        cells = row.len();
        let r = row_stats(row);
        s.sum += r.sum;
        s.square_sum += r.square_sum;
        s.min = s.min.min(r.min);
        s.max = s.max.max(r.max);
    }
    survey.cells += cells as u64;
}

fn gradient<T: Real>(g: &mut GradientStats, curl2: &[T], strain2: Option<&[T]>, div: &[T], miss: &[T], sampled: bool) {
    if curl2.is_empty() {
        return;
    }
    g.curl2 += row_sum(curl2);
    g.curl2_max = g.curl2_max.max(row_max(curl2));
    if let Some(s) = strain2 {
        g.strain2 += row_sum(s);
        g.strain2_max = g.strain2_max.max(row_max(s));
    }
    let div2 = row_square_sum(div);
    g.div2 += div2;
    if sampled {
        g.div2_sampled += div2;
        g.div_miss2 += row_square_sum(miss);
        g.sampled += div.len() as u64;
    }
}

/// Adds the sums over other cells.
pub fn merge(into: &mut Survey, other: &Survey) {
    into.cells += other.cells;
    into.velocity.merge(&other.velocity);
    into.magnetic.merge(&other.magnetic);
    for (a, b) in into.indicators.iter_mut().zip(&other.indicators) {
        a.sum += b.sum;
        a.square_sum += b.square_sum;
        a.min = a.min.min(b.min);
        a.max = a.max.max(b.max);
    }
}
