//! Sparse storage of the cells around one object: the x-runs of the object dilated by a margin, with field values.

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
