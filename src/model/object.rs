//! What is known of an object from sums over its cells, and the objects of a family as detection leaves them.

use crate::base::real::Real;
use crate::math::moments::{CellMoments, WeightedMoments};
use crate::math::stats::{Cosine, Scale};
use crate::model::request::Side;
use crate::model::rows::Rows;
use crate::space::grid::Grid;
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
#[derive(Debug, Clone, PartialEq)]
pub struct Scales {
    /// One for each [`Sum`].
    pub sums: [Scale; SUMS],
    /// One for each companion.
    pub extras: Vec<Scale>,
}

/// Faces of the box in the order x-, x+, y-, y+, z-, z+, one bit each.
pub type Faces = u8;

/// Sums over the cells of an object; exact, so the order in which cells are added or tallies merged does not matter.
#[derive(Debug, Clone, PartialEq)]
pub struct Tally {
    /// Count, first and second moments in cell coordinates.
    pub moments: CellMoments,
    /// Weight and moments of cells of unequal volume; only on stretched grids.
    pub weighted: Option<Box<WeightedMoments>>,
    /// Smallest cell index, x fastest.
    pub first_cell: u64,
    /// Most extreme indicator value.
    pub peak: f64,
    /// Cell of the peak; the smallest index where several are equal.
    pub peak_cell: u64,
    /// Open faces of the box that the object touches.
    pub open_faces: Faces,
    sums: [i128; SUMS],
    /// Cosines in the order of [`COSINES`], those without the mean field left out.
    pub cosines: [Cosine; 3],
    /// Those, where there is a mean field.
    pub fluctuating: Option<Box<[Cosine; 2]>>,
    /// Sum and extremes of the companions, in their order.
    pub extras: Vec<Extra>,
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

impl Tally {
    /// No cells yet.
    pub fn empty() -> Tally {
        Tally {
            moments: CellMoments::default(),
            weighted: None,
            extras: Vec::new(),
            first_cell: u64::MAX,
            peak: f64::NAN,
            peak_cell: u64::MAX,
            open_faces: 0,
            sums: [0; SUMS],
            cosines: Default::default(),
            fluctuating: None,
        }
    }

    /// Adds the cells `x0..x1` of row (y, z).
    pub fn add_run<T: Real>(
        &mut self,
        grid: &Grid,
        rows: &Rows<T>,
        family: usize,
        side: Side,
        scales: &Scales,
        x: (usize, usize),
        y: usize,
        z: usize,
    ) {
        let row_start = grid.index(0, y, z);
        let (x0, x1) = x;
        self.moments.add_run(x0 as i64, (x1 - x0) as u32, y as i64, z as i64);
        let weights = (!rows.weights.is_empty()).then(|| &rows.weights[x0..x1]);
        if let Some(weights) = weights {
            self.add_weights(grid, weights, x0, y, z);
        }
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

    fn add_weights(&mut self, grid: &Grid, weights: &[f64], x0: usize, y: usize, z: usize) {
        let moments = self.weighted.get_or_insert_default();
        let own = |a: usize, i: usize| (grid.width(a, i) / grid.length(a)).powi(2) / 12.0;
        for (k, &w) in weights.iter().enumerate() {
            let at = [x0 + k, y, z];
            moments.add_cell(w, std::array::from_fn(|a| grid.fraction(a, at[a])), std::array::from_fn(|a| own(a, at[a])));
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

    /// Adds another tally, its cells moved by whole boxes of `n` cells first.
    pub fn merge(&mut self, other: &Tally, boxes: [i32; 3], n: [usize; 3], side: Side) {
        if other.moments.count == 0 {
            return;
        }
        let shift = std::array::from_fn(|a| i64::from(boxes[a]) * n[a] as i64);
        self.moments.merge(&other.moments.shifted(shift));
        if let Some(weighted) = &other.weighted {
            self.weighted.get_or_insert_default().merge(&weighted.shifted(boxes));
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
        self.first_cell = self.first_cell.min(other.first_cell);
        self.offer_peak(other.peak, other.peak_cell, side);
        self.open_faces |= other.open_faces;
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

    /// Moves the cells by whole boxes so that their mean position lies inside the box; returns by how many.
    pub fn bring_home(&mut self, grid: &Grid) -> [i32; 3] {
        let centre = self.moments.centre();
        let boxes = std::array::from_fn(|a| if grid.periodic[a] { -(centre[a] / grid.n[a] as f64).floor() as i32 } else { 0 });
        self.moments = self.moments.shifted(std::array::from_fn(|a| i64::from(boxes[a]) * grid.n[a] as i64));
        if let Some(weighted) = &mut self.weighted {
            **weighted = weighted.shifted(boxes);
        }
        boxes
    }

    /// Number of cells; on a stretched grid their volume over that of the largest cell.
    pub fn weight(&self) -> f64 {
        self.weighted.as_ref().map_or(self.moments.count as f64, |w| w.weight())
    }
}

fn exact_sum<T: Real>(cells: &[T], weights: Option<&[f64]>, scale: Scale) -> i128 {
    match weights {
        None => cells.iter().map(|v| scale.fix(v.wide())).sum(),
        Some(weights) => cells.iter().zip(weights).map(|(v, w)| scale.fix(v.wide() * w)).sum(),
    }
}

/// One object: its tally and its cells.
#[derive(Debug, Clone, PartialEq)]
pub struct Object {
    /// Number within snapshot and family, from 1, in the order of the smallest cell index.
    pub id: u64,
    /// Sums; cell coordinates unwrapped in the frame of `intervals`.
    pub tally: Tally,
    /// Its level, where it has one of its own (grown from its peak).
    pub level: Option<f64>,
    /// Share of its boundary that is a wall to a touching object.
    pub wall: f64,
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
