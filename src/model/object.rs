//! What is known of an object from its cells, and the objects of a family as detection leaves them.

use crate::base::real::Real;
use crate::math::moments::{CellMoments, WeightedMoments};
use crate::model::contents::Contents;
use crate::model::request::Side;
use crate::space::grid::Grid;
use crate::space::patch::Interval;

/// Faces of the box in the order x-, x+, y-, y+, z-, z+, one bit each.
pub type Faces = u8;

/// Where the cells of an object lie and how high they rise; exact, so the order in which cells are added or tallies merged does not
/// matter.
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
}

impl Tally {
    /// No cells yet.
    pub fn empty() -> Tally {
        Tally { moments: CellMoments::default(), weighted: None, first_cell: u64::MAX, peak: f64::NAN, peak_cell: u64::MAX, open_faces: 0 }
    }

    /// Adds the cells from `x0` on of row (y, z): their indicators, and on a stretched grid their volumes over that of the largest cell.
    pub fn add_run<T: Real>(&mut self, grid: &Grid, indicator: &[T], weights: &[f64], side: Side, x0: usize, y: usize, z: usize) {
        let row_start = grid.index(0, y, z);
        self.moments.add_run(x0 as i64, indicator.len() as u32, y as i64, z as i64);
        if !weights.is_empty() {
            self.add_weights(grid, weights, x0, y, z);
        }
        self.first_cell = self.first_cell.min(row_start + x0 as u64);
        self.open_faces |= grid.open_faces((x0, x0 + indicator.len()), y, z);
        for (i, v) in indicator.iter().enumerate() {
            self.offer_peak(v.wide(), row_start + (x0 + i) as u64, side);
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
        self.first_cell = self.first_cell.min(other.first_cell);
        self.offer_peak(other.peak, other.peak_cell, side);
        self.open_faces |= other.open_faces;
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

/// One object: its tally and its cells.
#[derive(Debug, Clone, PartialEq)]
pub struct Object {
    /// Number within snapshot and family, from 1, in the order of the smallest cell index.
    pub id: u64,
    /// Sums; cell coordinates unwrapped in the frame of `intervals`.
    pub tally: Tally,
    /// What its cells hold; missing before they are derived.
    pub contents: Option<Box<Contents>>,
    /// Its level, where it has one of its own (grown from its peak).
    pub level: Option<f64>,
    /// Share of its boundary that is a wall to a touching object.
    pub wall: f64,
    /// Axes along which it closes on itself through the box.
    pub spans: [bool; 3],
    /// Its cells, sorted by (z, y, x). Unwrapped, the centroid lying inside the box; wrapped where it spans an axis.
    pub intervals: Vec<Interval>,
}

impl Object {
    /// What its cells hold.
    ///
    /// # Panics
    /// When that was not derived yet.
    pub fn contents(&self) -> &Contents {
        self.contents.as_ref().expect("the contents of an object are read after the shape pass")
    }
}

/// Objects left out for their size.
#[derive(Debug, Clone, PartialEq)]
pub struct Dropped {
    /// How many.
    pub objects: u64,
    /// Their cells together; coordinates and peak have no meaning.
    pub tally: Tally,
    /// What these hold.
    pub contents: Contents,
}

/// The objects of one family in one snapshot.
#[derive(Debug, Clone, PartialEq)]
pub struct Detected {
    /// Objects of at least the minimum size, by id.
    pub objects: Vec<Object>,
    /// The smaller ones.
    pub dropped: Dropped,
    /// Every cell of both, row by row.
    pub members: Members,
}

impl Detected {
    /// Bytes that the cells take.
    pub fn bytes(&self) -> u64 {
        let intervals: usize = self.objects.iter().map(|o| o.intervals.capacity()).sum();
        (intervals * size_of::<Interval>()) as u64 + self.members.bytes()
    }
}

/// The member of a row that belongs to an object left out for its size.
pub const LEFT_OUT: u32 = u32::MAX;

/// Consecutive cells of a row that belong to one object.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Member {
    /// First cell.
    pub x0: u32,
    /// One past the last cell.
    pub x1: u32,
    /// Index of the object among those listed, or [`LEFT_OUT`].
    pub object: u32,
}

/// The cells of all objects of a family as they lie in the box, row by row.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Members {
    rows_y: usize,
    /// One past the last member of every row, in the order z, y.
    ends: Vec<usize>,
    members: Vec<Member>,
}

impl Members {
    /// No rows yet, of `rows_y` a plane.
    pub fn new(rows_y: usize, members: usize) -> Members {
        Members { rows_y, ends: Vec::new(), members: Vec::with_capacity(members) }
    }

    /// Adds a cell run to the present row.
    pub fn push(&mut self, member: Member) {
        self.members.push(member);
    }

    /// Ends the present row; rows come with y fastest, then z.
    pub fn end_row(&mut self) {
        self.ends.push(self.members.len());
    }

    /// The members of row (y, z), ascending along x.
    pub fn row(&self, y: usize, z: usize) -> &[Member] {
        let k = z * self.rows_y + y;
        let start = k.checked_sub(1).map_or(0, |before| self.ends[before]);
        &self.members[start..self.ends[k]]
    }

    /// Bytes they take.
    pub fn bytes(&self) -> u64 {
        (self.ends.capacity() * size_of::<usize>() + self.members.capacity() * size_of::<Member>()) as u64
    }
}
