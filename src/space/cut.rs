//! The box of cells around one object, across periodic faces where it lies there.

use std::ops::Range;

use crate::space::grid::Grid;
use crate::space::patch::Interval;

/// A box of cells of a grid. All triples are in the order x, y, z.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct CutBox {
    /// First cell, unwrapped: along a periodic axis it may lie below 0, and the box may end beyond the last cell.
    pub start: [i64; 3],
    /// Cells.
    pub n: [usize; 3],
    /// Periodic axes along which the box takes in everything, so that it wraps there as the grid does.
    pub whole: [bool; 3],
    /// Cells of the grid.
    of: [usize; 3],
}

impl CutBox {
    /// The cells of an object and `margin` cells around them, at least `least` along every axis where the grid has as many.
    ///
    /// Clipped at open faces. Along a periodic axis the box holds no cell twice: where object and margins fill the axis, it is the
    /// whole axis from its first cell on. Intervals may be wrapped or unwrapped.
    ///
    /// # Panics
    /// When there are no intervals.
    pub fn around(intervals: &[Interval], margin: usize, least: usize, grid: &Grid) -> CutBox {
        let mut cut = CutBox { start: [0; 3], n: grid.n, whole: [false; 3], of: grid.n };
        for a in 0..3 {
            let along = |i: &Interval| match a {
                0 => (i64::from(i.x), i64::from(i.x) + i64::from(i.len)),
                1 => (i64::from(i.y), i64::from(i.y) + 1),
                _ => (i64::from(i.z), i64::from(i.z) + 1),
            };
            let n = grid.n[a] as i64;
            let (low, high) = if grid.periodic[a] {
                let (low, high) = arc(intervals.iter().map(along), n);
                // Unwrapped, the object's own frame decides which of the images it is.
                let first = intervals.iter().map(|i| along(i).0).min().unwrap_or(0);
                let home = if (first - low).rem_euclid(n) == 0 { first - low } else { 0 };
                (low + home, high + home)
            } else {
                let ends = intervals.iter().map(along).fold((i64::MAX, i64::MIN), |e, (low, high)| (e.0.min(low), e.1.max(high)));
                assert!(ends.0 < ends.1, "a cut-out needs at least one cell");
                ends
            };
            let wanted = (high - low + 2 * margin as i64).max(least as i64);
            if grid.periodic[a] {
                if wanted >= n {
                    cut.whole[a] = true;
                    continue;
                }
                cut.start[a] = low - (wanted - (high - low)) / 2;
                cut.n[a] = wanted as usize;
                continue;
            }
            let (mut from, mut to) = ((low - margin as i64).max(0), (high + margin as i64).min(n));
            // Grow on both sides, beyond a face on the other one, until there are enough.
            let missing = (least as i64).min(n) - (to - from);
            if missing > 0 {
                from = (from - missing / 2).max(0);
                to = (from + (least as i64).min(n)).min(n);
                from = to - (least as i64).min(n);
            }
            cut.start[a] = from;
            cut.n[a] = (to - from) as usize;
        }
        cut
    }

    /// The box as a grid of its own.
    pub fn grid(&self, grid: &Grid) -> Grid {
        let mut own = grid.clone();
        own.n = self.n;
        own.periodic = self.whole;
        for a in 0..3 {
            own.origin[a] = grid.position(a, self.start[a] as f64);
            if grid.stretched[a].is_some() {
                let first = self.start[a] as usize;
                // A single sample has no width of its own, so a flat stretched axis keeps that of the grid.
                if self.n[a] >= 2 {
                    own = own.with_part(a, first..first + self.n[a]);
                }
            }
        }
        own
    }

    /// Cells of the grid along an axis.
    pub fn of(&self, axis: usize) -> usize {
        self.of[axis]
    }

    /// Index in the grid of index `i` of the box.
    pub fn wrapped(&self, axis: usize, i: usize) -> usize {
        (self.start[axis] + i as i64).rem_euclid(self.of[axis] as i64) as usize
    }

    /// Index in the box of an index of the grid, wrapped or not; `None` outside the box.
    pub fn inside(&self, axis: usize, index: i64) -> Option<usize> {
        let i = (index - self.start[axis]).rem_euclid(self.of[axis] as i64) as usize;
        (i < self.n[axis]).then_some(i)
    }

    /// Stretches of a row of the grid that make up a row of the box, in its order.
    pub fn row(&self) -> Vec<Range<usize>> {
        let first = self.wrapped(0, 0);
        let before_the_face = (self.of[0] - first).min(self.n[0]);
        let behind_it = 0..self.n[0] - before_the_face;
        [first..first + before_the_face, behind_it].into_iter().filter(|r| !r.is_empty()).collect()
    }

    /// Planes of the box that are among the planes `z` of the grid: index in the box and in the grid, ascending in the grid.
    pub fn planes(&self, z: Range<usize>) -> impl Iterator<Item = (usize, usize)> + '_ {
        z.filter_map(|z| self.inside(2, z as i64).map(|i| (i, z)))
    }

    /// 1 in the cells of the object, 0 elsewhere; x fastest.
    pub fn mask(&self, intervals: &[Interval]) -> Vec<u8> {
        let mut out = vec![0; self.n.iter().product()];
        for i in intervals {
            let (Some(y), Some(z)) = (self.inside(1, i64::from(i.y)), self.inside(2, i64::from(i.z))) else { continue };
            for x in (0..i64::from(i.len)).filter_map(|k| self.inside(0, i64::from(i.x) + k)) {
                out[(z * self.n[1] + y) * self.n[0] + x] = 1;
            }
        }
        out
    }
}

/// The shortest arc of a ring of `n` indices that holds all the stretches; from 0 to n when it is the whole ring.
fn arc(stretches: impl Iterator<Item = (i64, i64)>, n: i64) -> (i64, i64) {
    let mut taken = vec![false; n as usize];
    for (low, high) in stretches {
        for i in low..high.min(low + n) {
            taken[i.rem_euclid(n) as usize] = true;
        }
    }
    // The longest gap, counted from behind a taken index; the first of equals.
    let Some(first) = taken.iter().position(|t| *t) else { panic!("a cut-out needs at least one cell") };
    let (mut longest, mut after, mut gap) = (0, 0, 0);
    for k in 1..=n {
        let i = (first as i64 + k) % n;
        if !taken[i as usize] {
            gap += 1;
            continue;
        }
        if gap > longest {
            (longest, after) = (gap, i);
        }
        gap = 0;
    }
    (after, after + n - longest)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cells(list: &[[i32; 3]]) -> Vec<Interval> {
        list.iter().map(|&[x, y, z]| Interval { z, y, x, len: 2 }).collect()
    }

    #[test]
    fn across_faces_the_box_stays_small() {
        let g = Grid::periodic([32, 32, 32], [32.0, 16.0, 8.0]).with_periodic([true, false, true]);
        // The same object unwrapped, and wrapped as it is when it closes on itself along another axis.
        let unwrapped = CutBox::around(&cells(&[[-3, 4, 30], [-1, 5, 31], [1, 6, 32]]), 3, 9, &g);
        let wrapped = CutBox::around(&cells(&[[29, 4, 30], [31, 5, 31], [1, 6, 0]]), 3, 9, &g);
        assert_eq!((unwrapped.start, unwrapped.n, unwrapped.whole), ([-6, 1, 27], [12, 9, 9], [false; 3]));
        assert_eq!((wrapped.n, wrapped.whole), (unwrapped.n, unwrapped.whole));
        assert_eq!(wrapped.start.map(|s| s.rem_euclid(32)), unwrapped.start.map(|s| s.rem_euclid(32)));
        assert_eq!(unwrapped.row(), [26..32, 0..6]);
        assert_eq!(unwrapped.planes(0..32).collect::<Vec<_>>()[..5], [(5, 0), (6, 1), (7, 2), (8, 3), (0, 27)]);
        assert_eq!(unwrapped.grid(&g).origin, [-6.0, 0.5, 27.0 * 0.25]);
        assert_eq!(unwrapped.mask(&cells(&[[-3, 4, 30], [-1, 5, 31], [1, 6, 32]])).iter().map(|&m| usize::from(m)).sum::<usize>(), 6);
    }

    #[test]
    fn what_fills_an_axis_takes_all_of_it() {
        let g = Grid::periodic([20; 3], [1.0; 3]);
        let rod: Vec<Interval> = (0..20).map(|z| Interval { z, y: 10, x: 18, len: 2 }).collect();
        let cut = CutBox::around(&rod, 4, 9, &g);
        assert_eq!((cut.n, cut.start, cut.whole), ([10, 9, 20], [14, 6, 0], [false, false, true]));
        assert_eq!(cut.grid(&g).periodic, [false, false, true]);
        // A margin that meets itself, along x and z.
        let cut = CutBox::around(&rod[..3], 9, 9, &g);
        assert_eq!((cut.n, cut.start, cut.whole), ([20, 19, 20], [0, 1, 0], [true, false, true]));
    }

    #[test]
    fn faces_clip_and_small_boxes_grow_to_what_can_be_read() {
        let g = Grid::periodic([30, 12, 9], [1.0; 3]).with_periodic([false; 3]);
        let cut = CutBox::around(&cells(&[[0, 11, 4]]), 1, 9, &g);
        assert_eq!((cut.start, cut.n, cut.whole), ([0, 3, 0], [9; 3], [false; 3]));
        let cut = CutBox::around(&cells(&[[28, 5, 4]]), 20, 9, &g);
        assert_eq!((cut.start, cut.n), ([8, 0, 0], [22, 12, 9]));
    }

    #[test]
    fn stretched_axes_keep_their_positions() {
        let positions: Vec<f64> = (0..16).map(|i| f64::from(i * i)).collect();
        let g = Grid::periodic([16; 3], [16.0; 3]).with_positions(1, positions.clone());
        let cut = CutBox::around(&cells(&[[4, 10, 5]]), 4, 9, &g);
        assert_eq!((cut.start[1], cut.n[1]), (6, 9));
        let own = cut.grid(&g);
        assert_eq!(own.stretched[1].as_ref().map(|s| s.positions.clone()), Some(positions[6..15].to_vec()));
        assert_eq!(own.origin[1], 36.0);
    }
}
