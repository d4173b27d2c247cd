//! Alignment of vectors over the whole box, row by row in a fixed order.

use crate::base::real::Real;
use crate::math::stats::{row_sum, weighted_sum};
use crate::model::rows::Rows;
use crate::model::statistics::Alignment;

/// Adds one derived row.
pub fn add_row<T: Real>(a: &mut Alignment, rows: &Rows<T>) {
    for (c, row) in a.cosines.iter_mut().zip(rows.cosines()) {
        match rows.weights.as_slice() {
            _ if row.is_empty() => {}
            [] => c.add(row),
            weights => c.add_weighted(row, weights),
        }
    }
    let sum = |row: &[T]| if rows.weights.is_empty() { row_sum(row) } else { weighted_sum(row, &rows.weights) };
    a.lamb2 += sum(&rows.lamb2);
    a.u2w2 += sum(&rows.u2w2);
    a.lorentz2 += sum(&rows.lorentz2);
    a.j2b2 += sum(&rows.j2b2);
    a.lorentz2_fluct += sum(&rows.lorentz2_fluct);
    a.j2b2_fluct += sum(&rows.j2b2_fluct);
}
