//! Alignment of vectors over the whole box, row by row in a fixed order.

use crate::base::real::Real;
use crate::math::stats::row_sum;
use crate::model::rows::Rows;
use crate::model::statistics::Alignment;

/// Adds one derived row.
pub fn add_row<T: Real>(a: &mut Alignment, rows: &Rows<T>) {
    for (c, row) in a.cosines.iter_mut().zip(rows.cosines()) {
        if !row.is_empty() {
            c.add(row);
        }
    }
    a.lamb2 += row_sum(&rows.lamb2);
    a.u2w2 += row_sum(&rows.u2w2);
    a.lorentz2 += row_sum(&rows.lorentz2);
    a.j2b2 += row_sum(&rows.j2b2);
}
