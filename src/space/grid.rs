//! The box and its samples: counts, spacing or coordinates, origin and which axes are periodic.

use std::ops::Range;
use std::sync::Arc;

/// A rectilinear grid. All triples are in the order x, y, z.
///
/// On an axis of equal spacing sample i sits at `origin + i * spacing` and the box is `n * spacing` long, at open faces too.
/// On a stretched axis samples sit at their coordinates. A grid with one sample along z is flat: a plane snapshot.
#[derive(Debug, Clone, PartialEq)]
pub struct Grid {
    /// Samples along x, y, z.
    pub n: [usize; 3],
    /// Distance between samples, in the user's length unit; of a stretched axis the mean cell width.
    pub spacing: [f64; 3],
    /// Position of the first sample.
    pub origin: [f64; 3],
    /// Whether the axis wraps; a stretched axis never does.
    pub periodic: [bool; 3],
    /// Coordinates of the axes whose spacing is not equal.
    pub stretched: [Option<Arc<Stretched>>; 3],
}

/// Coordinates of an axis with unequal spacing.
#[derive(Debug, Clone, PartialEq)]
pub struct Stretched {
    /// Positions of the samples, strictly ascending.
    pub positions: Vec<f64>,
    /// Largest of the widths.
    pub largest: f64,
    /// Widths of their cells: half the distance between the neighbours; at the ends the distance to the only neighbour, so that
    /// equal spacing gives every sample a whole cell, unless a length of all cells is given.
    pub widths: Vec<f64>,
}

impl Grid {
    /// A periodic grid of `n` samples over a box of the given lengths, first sample at 0.
    pub fn periodic(n: [usize; 3], lengths: [f64; 3]) -> Grid {
        let spacing = std::array::from_fn(|a| lengths[a] / n[a] as f64);
        Grid { n, spacing, origin: [0.0; 3], periodic: [true; 3], stretched: [None, None, None] }
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

    /// The same grid with the samples of one axis, which becomes open, at the given positions; the cells at the ends are as wide as
    /// the distance to the neighbour.
    ///
    /// # Panics
    /// When their number is not that of the samples, is below 2, or they do not ascend strictly.
    #[must_use]
    pub fn with_positions(self, axis: usize, positions: Vec<f64>) -> Grid {
        let reach = ends(&positions).map(|gap| 0.5 * gap);
        self.reaching(axis, positions, reach)
    }

    /// As [`Grid::with_positions`], but all cells together have the given length: those at the two ends reach equally far beyond
    /// their samples. A length of `last - first` gives half cells, as for samples on walls.
    ///
    /// # Panics
    /// As `with_positions`, and when the cells at the ends would reach back, or farther than to their neighbours.
    #[must_use]
    pub fn with_positions_over(self, axis: usize, positions: Vec<f64>, length: f64) -> Grid {
        let span = positions.last().unwrap_or(&0.0) - positions.first().unwrap_or(&0.0);
        let reach = 0.5 * (length - span);
        let most = ends(&positions).into_iter().fold(f64::INFINITY, f64::min);
        let slack = 1e-9 * span;
        assert!(reach >= -slack && reach <= most + slack, "expected a length from {span} to {}, got {length}", span + 2.0 * most);
        self.reaching(axis, positions, [reach.max(0.0); 2])
    }

    /// The same grid with a part of a stretched axis. Where it ends as the axis does, its last cell is that of the axis.
    ///
    /// # Panics
    /// When the axis is not stretched or the part has fewer than 2 samples.
    #[must_use]
    pub fn with_part(mut self, axis: usize, part: Range<usize>) -> Grid {
        let whole = self.stretched[axis].clone().expect("a stretched axis");
        let (positions, n) = (whole.positions[part.clone()].to_vec(), whole.positions.len());
        let [own, all] = [ends(&positions), ends(&whole.positions)];
        let reach = [
            if part.start == 0 { whole.widths[0] - 0.5 * all[0] } else { 0.5 * own[0] },
            if part.end == n { whole.widths[n - 1] - 0.5 * all[1] } else { 0.5 * own[1] },
        ];
        self.n[axis] = positions.len();
        self.reaching(axis, positions, reach)
    }

    /// The samples of one axis at positions, with cells at its ends that reach so far beyond their samples.
    fn reaching(mut self, axis: usize, positions: Vec<f64>, reach: [f64; 2]) -> Grid {
        let n = positions.len();
        assert!(n == self.n[axis] && n >= 2, "expected {} positions, got {n}", self.n[axis]);
        assert!(positions.windows(2).all(|p| p[0] < p[1]), "expected strictly ascending positions");
        let [first, last] = ends(&positions);
        let width = |i: usize| match i {
            0 => reach[0] + 0.5 * first,
            i if i + 1 == n => 0.5 * last + reach[1],
            i => 0.5 * (positions[i + 1] - positions[i - 1]),
        };
        let widths: Vec<f64> = (0..n).map(width).collect();
        let largest = widths.iter().fold(0.0f64, |a, &b| a.max(b));
        self.spacing[axis] = widths.iter().sum::<f64>() / n as f64;
        self.origin[axis] = positions[0];
        self.periodic[axis] = false;
        self.stretched[axis] = Some(Arc::new(Stretched { positions, largest, widths }));
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

    /// Whether it is one plane: derivatives are taken within it, objects are areas.
    pub fn is_flat(&self) -> bool {
        self.n[2] == 1
    }

    /// Whether some axis has unequal spacing.
    pub fn is_stretched(&self) -> bool {
        self.stretched.iter().any(Option::is_some)
    }

    /// Width of the cells at index `i` of an axis; 1 across a flat grid, so that its volumes are areas.
    pub fn width(&self, axis: usize, i: usize) -> f64 {
        match &self.stretched[axis] {
            Some(s) => s.widths[i],
            None if axis == 2 && self.is_flat() => 1.0,
            None => self.spacing[axis],
        }
    }

    /// Largest cell width along an axis.
    pub fn largest_width(&self, axis: usize) -> f64 {
        match &self.stretched[axis] {
            Some(s) => s.largest,
            None => self.width(axis, 0),
        }
    }

    /// Smallest distance between neighbouring samples of any axis that has several.
    pub fn smallest_spacing(&self) -> f64 {
        (0..3)
            .filter(|&a| self.n[a] > 1)
            .map(|a| match &self.stretched[a] {
                Some(s) => s.positions.windows(2).fold(f64::INFINITY, |least, p| least.min(p[1] - p[0])),
                None => self.spacing[a],
            })
            .fold(f64::INFINITY, f64::min)
    }

    /// Volume of the largest cell (of every cell, where spacing is equal); an area on a flat grid.
    pub fn largest_cell(&self) -> f64 {
        (0..3).map(|a| self.largest_width(a)).product()
    }

    /// Volumes of the cells `x` of row (y, z) over that of the largest cell; empty where all cells are equal.
    pub fn relative_weights(&self, x: Range<usize>, y: usize, z: usize, out: &mut Vec<f64>) {
        out.clear();
        if self.is_stretched() {
            let share = |a: usize, i: usize| self.width(a, i) / self.largest_width(a);
            let row = share(1, y) * share(2, z);
            out.extend(x.map(|i| row * share(0, i)));
        }
    }

    /// Position of a cell along an axis in box lengths from the first sample.
    pub fn fraction(&self, axis: usize, i: usize) -> f64 {
        match &self.stretched[axis] {
            Some(s) => (s.positions[i] - s.positions[0]) / self.length(axis),
            None => i as f64 / self.n[axis] as f64,
        }
    }

    /// Box length along an axis.
    pub fn length(&self, axis: usize) -> f64 {
        self.n[axis] as f64 * self.spacing[axis]
    }

    /// Position of a (fractional, possibly unwrapped) index along an axis; linear between samples, and beyond the ends of a
    /// stretched axis.
    pub fn position(&self, axis: usize, index: f64) -> f64 {
        match &self.stretched[axis] {
            None => self.origin[axis] + index * self.spacing[axis],
            Some(s) => {
                let i = (index.floor().max(0.0) as usize).min(s.positions.len() - 2);
                let (a, b) = (s.positions[i], s.positions[i + 1]);
                a + (index - i as f64) * (b - a)
            }
        }
    }

    /// Global cell index, x fastest.
    pub fn index(&self, x: usize, y: usize, z: usize) -> u64 {
        (z as u64 * self.n[1] as u64 + y as u64) * self.n[0] as u64 + x as u64
    }

    /// Open faces that the cells `x.0..x.1` of row (y, z) touch, one bit each in the order x-, x+, y-, y+, z-, z+. The two sides of a
    /// flat grid are no faces.
    pub fn open_faces(&self, x: (usize, usize), y: usize, z: usize) -> u8 {
        let along = |a: usize, first: usize, end: usize| {
            if self.periodic[a] || (a == 2 && self.is_flat()) {
                return 0;
            }
            (u8::from(first == 0) | u8::from(end == self.n[a]) << 1) << (2 * a)
        };
        along(0, x.0, x.1) | along(1, y, y + 1) | along(2, z, z + 1)
    }

    /// Inverse of [`Grid::index`].
    pub fn coordinates(&self, index: u64) -> [usize; 3] {
        let nx = self.n[0] as u64;
        let ny = self.n[1] as u64;
        [(index % nx) as usize, (index / nx % ny) as usize, (index / nx / ny) as usize]
    }
}

/// Distances of the first and the last position to their neighbours.
fn ends(positions: &[f64]) -> [f64; 2] {
    match positions {
        [a, b, ..] => [b - a, positions[positions.len() - 1] - positions[positions.len() - 2]],
        _ => [0.0; 2],
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn equally_spaced_coordinates_are_the_uniform_grid() {
        let uniform = Grid::periodic([5, 4, 3], [10.0, 4.0, 3.0]).with_periodic([false; 3]).with_origin([1.0, 0.0, 0.0]);
        let g = uniform.clone().with_positions(0, (0..5).map(|i| 1.0 + 2.0 * f64::from(i)).collect());
        assert_eq!(g.spacing, uniform.spacing);
        for i in [-0.5, 0.0, 1.25, 3.9, 4.0, 4.5] {
            assert!((g.position(0, i) - uniform.position(0, i)).abs() < 1e-14);
        }
        assert!((0..5).all(|i| g.width(0, i) == 2.0));
        assert_eq!(g.largest_cell(), 2.0);
    }

    #[test]
    fn a_plane_has_areas() {
        let g = Grid::periodic([4, 4, 1], [8.0, 4.0, 7.0]);
        assert!(g.is_flat());
        assert_eq!(g.largest_cell(), 2.0);
    }

    /// Samples of a channel on both walls: the cells fill it exactly, the trapezoidal rule (textbook quadrature).
    #[test]
    fn a_length_settles_the_cells_at_the_ends() {
        let walls = vec![-1.0, -0.75, 0.0, 0.5, 1.0];
        let plain = Grid::periodic([4, 5, 4], [1.0; 3]);
        let g = plain.clone().with_positions_over(1, walls.clone(), 2.0);
        assert_eq!(g.stretched[1].as_ref().unwrap().widths, [0.125, 0.5, 0.625, 0.5, 0.25]);
        assert_eq!((g.length(1), g.origin[1], g.periodic), (2.0, -1.0, [true, false, true]));
        let g = plain.clone().with_positions_over(1, walls.clone(), 2.25);
        assert_eq!(g.stretched[1].as_ref().unwrap().widths, [0.25, 0.5, 0.625, 0.5, 0.375]);
        let part = g.clone().with_part(1, 0..3);
        assert_eq!(part.stretched[1].as_ref().unwrap().widths, [0.25, 0.5, 0.75]);
        assert_eq!(g.clone().with_part(1, 0..5), g);
        assert!(std::panic::catch_unwind(|| plain.with_positions_over(1, walls, 2.6)).is_err());
    }
}
