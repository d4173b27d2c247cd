//! The box and its samples: counts, spacing, origin and which axes are periodic.

/// A rectilinear grid with one spacing per axis. All triples are in the order x, y, z.
///
/// Sample (i, j, k) sits at `origin + (i, j, k) * spacing`. The box length along an axis is
/// `n * spacing`, at open faces too.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Grid {
    /// Samples along x, y, z.
    pub n: [usize; 3],
    /// Distance between samples, in the user's length unit.
    pub spacing: [f64; 3],
    /// Position of the first sample.
    pub origin: [f64; 3],
    /// Whether the axis wraps.
    pub periodic: [bool; 3],
}

impl Grid {
    /// A periodic grid of `n` samples over a box of the given lengths, first sample at 0.
    pub fn periodic(n: [usize; 3], lengths: [f64; 3]) -> Grid {
        Grid { n, spacing: std::array::from_fn(|a| lengths[a] / n[a] as f64), origin: [0.0; 3], periodic: [true; 3] }
    }

    /// The same grid with the given axes periodic.
    #[must_use]
    pub fn with_periodic(mut self, periodic: [bool; 3]) -> Grid {
        self.periodic = periodic;
        self
    }

    /// The same grid with another first sample.
    #[must_use]
    pub fn with_origin(mut self, origin: [f64; 3]) -> Grid {
        self.origin = origin;
        self
    }

    /// Number of cells.
    pub fn cells(&self) -> u64 {
        self.n.iter().map(|&n| n as u64).product()
    }

    /// Cells in one z-plane.
    pub fn plane_cells(&self) -> usize {
        self.n[0] * self.n[1]
    }

    /// Volume of one cell.
    pub fn cell_volume(&self) -> f64 {
        self.spacing.iter().product()
    }

    /// Box length along an axis (0 = x).
    pub fn length(&self, axis: usize) -> f64 {
        self.n[axis] as f64 * self.spacing[axis]
    }

    /// Position along an axis of a fractional, possibly unwrapped, index.
    pub fn position(&self, axis: usize, index: f64) -> f64 {
        self.origin[axis] + index * self.spacing[axis]
    }

    /// Global cell index, x fastest.
    pub fn index(&self, x: usize, y: usize, z: usize) -> u64 {
        (z as u64 * self.n[1] as u64 + y as u64) * self.n[0] as u64 + x as u64
    }

    /// Inverse of [`Grid::index`].
    pub fn coordinates(&self, index: u64) -> [usize; 3] {
        let nx = self.n[0] as u64;
        let ny = self.n[1] as u64;
        [(index % nx) as usize, (index / nx % ny) as usize, (index / nx / ny) as usize]
    }
}
