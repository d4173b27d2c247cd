//! Runs and provisional components of one tile: some rows of some consecutive planes, without any wrap.

use crate::base::real::Real;
use crate::model::contents::Scales;
use crate::model::object::Tally;
use crate::model::request::Side;
use crate::space::grid::Grid;
use crate::space::runs::{Connectivity, Run, touching};

/// What makes a cell belong to a family.
#[derive(Debug, Clone)]
pub struct Criterion {
    /// Index of the family in the rows.
    pub family: usize,
    /// Which side of the level is inside.
    pub side: Side,
    /// The absolute level.
    pub level: f64,
    /// The level that an object must go beyond somewhere.
    pub inner: Option<f64>,
    /// Neighbourhood.
    pub connectivity: Connectivity,
    /// Scales of the exact sums.
    pub scales: Scales,
}

/// Collects the runs of one tile, row after row (y fastest, then z), and joins them within the tile.
pub struct TileSweep {
    criterion: Criterion,
    rows_y: (usize, usize),
    first_z: usize,
    /// Start of each row's runs in `runs`.
    starts: Vec<usize>,
    /// Runs in the order z, y, x.
    runs: Vec<Run>,
    tallies: Vec<Tally>,
    parent: Vec<u32>,
    /// Scratch: component of a run seen before, index of the run in the present row that touches it.
    contacts: Vec<(u32, usize)>,
}

/// A tile whose components are joined and numbered.
pub struct ClosedTile {
    pub(super) rows_y: (usize, usize),
    pub(super) first_z: usize,
    /// Start of each row's runs, and one past the last.
    pub(super) starts: Vec<usize>,
    pub(super) runs: Vec<Run>,
    pub(super) tallies: Vec<Tally>,
}

impl TileSweep {
    /// A tile of the rows `rows_y.0..rows_y.1` from plane `first_z` on.
    pub fn new(criterion: Criterion, rows_y: (usize, usize), first_z: usize) -> TileSweep {
        TileSweep {
            criterion,
            rows_y,
            first_z,
            starts: vec![0],
            runs: Vec::new(),
            tallies: Vec::new(),
            parent: Vec::new(),
            contacts: Vec::new(),
        }
    }

    /// Adds the next row: its indicator, and on a stretched grid the volumes of its cells over that of the largest.
    ///
    /// # Panics
    /// When rows do not come in order.
    pub fn add_row<T: Real>(&mut self, grid: &Grid, values: &[T], weights: &[f64], y: usize, z: usize) {
        let height = self.rows_y.1 - self.rows_y.0;
        assert_eq!(self.starts.len() - 1, (z - self.first_z) * height + y - self.rows_y.0, "order of rows");
        let Criterion { side, level, connectivity, .. } = self.criterion;
        let level = T::of(level);
        let begin = self.runs.len();
        match side {
            Side::Above => push_runs(values, |v| v > level, y, z, &mut self.runs),
            Side::Below => push_runs(values, |v| v < level, y, z, &mut self.runs),
        }
        let end = self.runs.len();
        if begin < end {
            // Neighbouring rows already seen: the one below in this plane, up to three in the plane before.
            let near = [(-1, 0), (-1, -1), (0, -1), (1, -1)];
            for (dy, dz) in near {
                let Some(reach) = connectivity.reach(dy, dz) else { continue };
                let (other_y, other_z) = (y as i64 + i64::from(dy), z as i64 + i64::from(dz));
                if other_y < self.rows_y.0 as i64 || other_y >= self.rows_y.1 as i64 || other_z < self.first_z as i64 {
                    continue;
                }
                let row = (other_z as usize - self.first_z) * height + other_y as usize - self.rows_y.0;
                let (from, to) = (self.starts[row], self.starts[row + 1]);
                let (before, here) = self.runs.split_at_mut(begin);
                let (parent, contacts) = (&mut self.parent, &mut self.contacts);
                touching(&before[from..to], here, reach, |i, j| contacts.push((before[from + i].component, j)));
                for (component, j) in contacts.drain(..) {
                    let run = &mut here[j];
                    if run.component == NONE {
                        run.component = root(parent, component);
                    } else {
                        unite(parent, run.component, component);
                    }
                }
            }
            for run in &mut self.runs[begin..end] {
                if run.component == NONE {
                    run.component = self.parent.len() as u32;
                    self.parent.push(run.component);
                    self.tallies.push(Tally::empty());
                }
                let cells = run.x0 as usize..run.x1 as usize;
                let weights = if weights.is_empty() { weights } else { &weights[cells.clone()] };
                self.tallies[run.component as usize].add_run(grid, &values[cells], weights, side, run.x0 as usize, y, z);
            }
        }
        self.starts.push(self.runs.len());
    }

    /// Ends the tile: merges the tallies of joined components and renumbers them densely.
    #[must_use]
    pub fn close(mut self) -> ClosedTile {
        let mut dense = vec![NONE; self.parent.len()];
        let mut tallies: Vec<Tally> = Vec::new();
        for c in 0..self.parent.len() as u32 {
            let r = root(&mut self.parent, c);
            let tally = std::mem::replace(&mut self.tallies[c as usize], Tally::empty());
            // The smallest member is the root, so it comes first.
            if r == c {
                dense[c as usize] = tallies.len() as u32;
                tallies.push(tally);
            } else {
                dense[c as usize] = dense[r as usize];
                tallies[dense[r as usize] as usize].merge(&tally, [0; 3], [0; 3], self.criterion.side);
            }
        }
        for run in &mut self.runs {
            run.component = dense[run.component as usize];
        }
        ClosedTile { rows_y: self.rows_y, first_z: self.first_z, starts: self.starts, runs: self.runs, tallies }
    }
}

/// Marks a run that has no component yet.
const NONE: u32 = u32::MAX;

fn push_runs<T: Real>(values: &[T], inside: impl Fn(T) -> bool, y: usize, z: usize, runs: &mut Vec<Run>) {
    const STEP: usize = 16;
    let n = values.len();
    let mut start = None;
    let mut x = 0;
    while x < n {
        // Most of a row lies outside: skip whole steps at once.
        if start.is_none() && x + STEP <= n && !values[x..x + STEP].iter().fold(false, |any, &v| any | inside(v)) {
            x += STEP;
            continue;
        }
        let stop = (x + STEP).min(n);
        while x < stop {
            match (inside(values[x]), start) {
                (true, None) => start = Some(x),
                (false, Some(s)) => {
                    runs.push(Run { x0: s as u32, x1: x as u32, y: y as u32, z: z as u32, component: NONE });
                    start = None;
                }
                _ => {}
            }
            x += 1;
        }
    }
    if let Some(s) = start {
        runs.push(Run { x0: s as u32, x1: n as u32, y: y as u32, z: z as u32, component: NONE });
    }
}

fn root(parent: &mut [u32], mut c: u32) -> u32 {
    while parent[c as usize] != c {
        parent[c as usize] = parent[parent[c as usize] as usize];
        c = parent[c as usize];
    }
    c
}

fn unite(parent: &mut [u32], a: u32, b: u32) {
    let (a, b) = (root(parent, a), root(parent, b));
    parent[a.max(b) as usize] = a.min(b);
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn runs_of_a_row() {
        let mut v = vec![0.0f32; 50];
        for x in [0, 1, 15, 16, 17, 31, 49] {
            v[x] = 1.0;
        }
        let mut runs = Vec::new();
        push_runs(&v, |a| a > 0.5, 3, 4, &mut runs);
        let spans: Vec<(u32, u32)> = runs.iter().map(|r| (r.x0, r.x1)).collect();
        assert_eq!(spans, vec![(0, 2), (15, 18), (31, 32), (49, 50)]);
    }
}
