//! Sparse storage of the cells around one object: the x-runs of the object dilated by a margin, with field values.

use crate::space::dilate::{self, Axis};

/// A run of consecutive stored cells along x, in the patch's own integer coordinates.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Segment {
    /// Plane.
    pub z: i32,
    /// Row.
    pub y: i32,
    /// First cell.
    pub x: i32,
    /// Number of cells.
    pub len: u32,
    /// Index of the first cell in the value arrays.
    pub start: usize,
}

/// An interval of consecutive cells along x that belong to the object, in the patch's own integer coordinates.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Interval {
    /// Plane.
    pub z: i32,
    /// Row.
    pub y: i32,
    /// First cell.
    pub x: i32,
    /// Number of cells.
    pub len: u32,
}

/// Where an object lies and which cells around it are stored.
///
/// Coordinates are integer cell indices. For an object that does not close on itself they are *unwrapped*: they may lie
/// below 0 or beyond the number of samples, and `period` is `None` on all axes. For an object that closes on itself through
/// the box, coordinates along **all periodic axes** lie in `0..n` and `period` holds `n` there: neighbours are taken modulo `period`.
/// Along open axes cells outside the grid are never stored.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct PatchShape {
    /// Period in cells along x, y, z where coordinates wrap.
    pub period: [Option<i32>; 3],
    /// The object's own cells, sorted by (z, y, x), disjoint and not adjacent along x (except across a period).
    pub object: Vec<Interval>,
    /// Stored cells: the object dilated by the margin in all 26 directions; sorted by (z, y, x), disjoint, not adjacent; `start` ascending and gapless.
    pub stored: Vec<Segment>,
    /// Number of stored cells.
    pub cells: usize,
}

impl PatchShape {
    /// Dilates an object by `margin` cells in all 26 directions.
    ///
    /// `object` is sorted by (z, y, x) with disjoint intervals, in the coordinates described at [`PatchShape`]; `n` and
    /// `periodic` are those of the grid, `period` those of the patch. Along axes with a period the dilation wraps, along
    /// open axes it is clipped to `0..n`, and along periodic axes without a period it goes on beyond the box. The work
    /// is linear in the number of intervals.
    ///
    /// # Panics
    /// When `object` is not sorted and disjoint, `margin` is not below every period, or a period is not that of the grid.
    pub fn around(object: Vec<Interval>, margin: usize, n: [usize; 3], periodic: [bool; 3], period: [Option<i32>; 3]) -> PatchShape {
        for w in object.windows(2) {
            let follows = (w[0].z, w[0].y, w[0].x + w[0].len as i32) <= (w[1].z, w[1].y, w[1].x);
            assert!(follows, "patch: expected sorted, disjoint intervals, got {:?} before {:?}", w[0], w[1]);
        }
        let axes: [Axis; 3] = std::array::from_fn(|a| {
            let n = n[a] as i32;
            if let Some(p) = period[a] {
                assert!(p == n && periodic[a], "patch: expected period {n} of a periodic axis, got {p}");
                assert!(margin < n as usize, "patch: expected a margin below the period {n}, got {margin}");
                Axis::Wrapped(n)
            } else if periodic[a] {
                Axis::Endless
            } else {
                Axis::Open(n)
            }
        });
        dilate::dilate(object, margin as i32, axes, period)
    }
}
