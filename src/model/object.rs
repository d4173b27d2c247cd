//! What is known of an object from sums over its cells, and the objects of a family as detection leaves them.

use crate::base::real::Real;
use crate::math::moments::CellMoments;
use crate::math::stats::{Cosine, Scale};
use crate::model::request::Side;
use crate::model::rows::Rows;
use crate::space::patch::Interval;

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
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scales(pub [Scale; SUMS]);

/// Faces of the box in the order x-, x+, y-, y+, z-, z+, one bit each.
pub type Faces = u8;

/// Sums over the cells of an object; exact, so the order in which cells are added or tallies merged does not matter.
#[derive(Debug, Clone, PartialEq)]
pub struct Tally {
    /// Count, first and second moments in cell coordinates.
    pub moments: CellMoments,
    /// Smallest cell index, x fastest.
    pub first_cell: u64,
    /// Most extreme indicator value.
    pub peak: f64,
    /// Cell of the peak; the smallest index where several are equal.
    pub peak_cell: u64,
    /// Open faces of the box that the object touches.
    pub open_faces: Faces,
    sums: [i128; SUMS],
    /// Cosines in the order of [`COSINES`].
    pub cosines: [Cosine; 5],
}

impl Tally {
    /// No cells yet.
    pub fn empty() -> Tally {
        Tally {
            moments: CellMoments::default(),
            first_cell: u64::MAX,
            peak: f64::NAN,
            peak_cell: u64::MAX,
            open_faces: 0,
            sums: [0; SUMS],
            cosines: Default::default(),
        }
    }

    /// Adds the cells `x0..x1` of row (y, z); `row_start` is the global index of the row's first cell.
    pub fn add_run<T: Real>(
        &mut self,
        rows: &Rows<T>,
        family: usize,
        side: Side,
        scales: &Scales,
        x: (usize, usize),
        y: usize,
        z: usize,
        row_start: u64,
    ) {
        let (x0, x1) = x;
        self.moments.add_run(x0 as i64, (x1 - x0) as u32, y as i64, z as i64);
        self.first_cell = self.first_cell.min(row_start + x0 as u64);
        let indicator = &rows.indicators[family][x0..x1];
        for (i, v) in indicator.iter().enumerate() {
            self.offer_peak(v.wide(), row_start + (x0 + i) as u64, side);
        }
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
                self.sums[k] += column[x0..x1].iter().map(|v| scales.0[k].fix(v.wide())).sum::<i128>();
            }
        }
        for (c, row) in self.cosines.iter_mut().zip(rows.cosines()) {
            if !row.is_empty() {
                c.add_few(&row[x0..x1]);
            }
        }
    }

    fn offer_peak(&mut self, value: f64, cell: u64, side: Side) {
        let beyond = match side {
            Side::Above => value > self.peak,
            Side::Below => value < self.peak,
        };
        if beyond || self.peak_cell == u64::MAX || (value == self.peak && cell < self.peak_cell) {
            self.peak = value;
            self.peak_cell = cell;
        }
    }

    /// Adds another tally whose cell coordinates are to be moved by `shift` cells first.
    pub fn merge(&mut self, other: &Tally, shift: [i64; 3], side: Side) {
        if other.moments.count == 0 {
            return;
        }
        self.moments.merge(&other.moments.shifted(shift));
        self.first_cell = self.first_cell.min(other.first_cell);
        self.offer_peak(other.peak, other.peak_cell, side);
        self.open_faces |= other.open_faces;
        for (a, b) in self.sums.iter_mut().zip(other.sums) {
            *a += b;
        }
        for (a, b) in self.cosines.iter_mut().zip(&other.cosines) {
            // Fields that are not there leave theirs empty.
            if b.defined > 0 {
                a.merge(b);
            }
        }
    }

    /// A sum over the cells.
    pub fn sum(&self, which: Sum, scales: &Scales) -> f64 {
        scales.0[which as usize].value(self.sums[which as usize])
    }
}

/// One object: its tally and its cells.
#[derive(Debug, Clone, PartialEq)]
pub struct Object {
    /// Number within snapshot and family, from 1, in the order of the smallest cell index.
    pub id: u64,
    /// Sums; cell coordinates unwrapped in the frame of `intervals`.
    pub tally: Tally,
    /// Axes along which it closes on itself through the box.
    pub spans: [bool; 3],
    /// Its cells, sorted by (z, y, x). Unwrapped, the centroid lying inside the box; wrapped where it spans an axis.
    pub intervals: Vec<Interval>,
}

/// Objects left out for their size.
#[derive(Debug, Clone, PartialEq)]
pub struct Dropped {
    /// How many.
    pub objects: u64,
    /// Their cells together; coordinates and peak have no meaning.
    pub tally: Tally,
}

/// The objects of one family in one snapshot.
#[derive(Debug, Clone, PartialEq)]
pub struct Detected {
    /// Objects of at least the minimum size, by id.
    pub objects: Vec<Object>,
    /// The smaller ones.
    pub dropped: Dropped,
}
