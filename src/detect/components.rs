//! Joins the components of all tiles of a snapshot, across periodic faces too, into numbered, unwrapped objects.

use crate::base::par;
use crate::detect::rows::tidy;
use crate::detect::tile::{ClosedTile, Criterion};
use crate::math::disjoint::OffsetSets;
use crate::model::contents::Contents;
use crate::model::object::{Detected, Dropped, LEFT_OUT, Member, Members, Object, Tally};
use crate::model::request::Side;
use crate::space::grid::Grid;
use crate::space::patch::Interval;
use crate::space::runs::{Run, touching};

/// Gathers tiles in any order and labels at the end; the result does not depend on how the box was cut into tiles.
pub struct Labeller {
    grid: Grid,
    criterion: Criterion,
    runs: Vec<Run>,
    tallies: Vec<Tally>,
    /// Runs of row (y, z) as start and end in `runs`, at index z * ny + y.
    rows: Vec<(usize, usize)>,
    /// For each row, whether it is the lowest row of a tile.
    tile_floor: Vec<bool>,
    /// For each plane, whether it is the first plane of a block.
    block_floor: Vec<bool>,
}

impl Labeller {
    /// An empty labeller.
    pub fn new(grid: Grid, criterion: Criterion) -> Labeller {
        Labeller {
            grid: grid.clone(),
            criterion,
            runs: Vec::new(),
            tallies: Vec::new(),
            rows: vec![(0, 0); grid.n[1] * grid.n[2]],
            tile_floor: vec![false; grid.n[1]],
            block_floor: vec![false; grid.n[2]],
        }
    }

    /// Adds a tile.
    pub fn add(&mut self, mut tile: ClosedTile) {
        let ((y0, y1), z0) = (tile.rows_y, tile.first_z);
        let base = self.runs.len();
        let first_component = self.tallies.len() as u32;
        self.tile_floor[y0] = true;
        self.block_floor[z0] = true;
        for (k, pair) in tile.starts.windows(2).enumerate() {
            let (y, z) = (y0 + k % (y1 - y0), z0 + k / (y1 - y0));
            self.rows[z * self.grid.n[1] + y] = (base + pair[0], base + pair[1]);
        }
        self.runs.extend(tile.runs.iter().map(|r| Run { component: r.component + first_component, ..*r }));
        self.tallies.append(&mut tile.tallies);
    }

    /// Bytes that what was added takes, and that joining it will take: the objects' own lists of cells and those of rows.
    pub fn bytes(&self) -> u64 {
        const RUN: usize = size_of::<Run>() + size_of::<Interval>() + size_of::<Member>();
        // Parent, offset and spans of the sets, slot, frame and object of a component.
        const COMPONENT: usize = size_of::<Tally>() + 48;
        let rows = self.rows.len() * (size_of::<(usize, usize)>() + size_of::<usize>());
        // What arrays have room for beyond their ends is never touched.
        (self.runs.len() * RUN + self.tallies.len() * COMPONENT + rows) as u64
    }

    fn row(&self, y: usize, z: usize) -> &[Run] {
        let (from, to) = self.rows[z * self.grid.n[1] + y];
        &self.runs[from..to]
    }

    /// Joins everything that touches across the borders of tiles, blocks and periodic faces.
    fn join(&self) -> OffsetSets {
        let [_, ny, nz] = self.grid.n;
        let mut sets = OffsetSets::new(self.tallies.len());
        for z in 0..nz {
            for y in 0..ny {
                if self.row(y, z).is_empty() {
                    continue;
                }
                // Each unordered pair of neighbouring rows once, plus the row with itself for the x-face.
                for (dy, dz) in [(0, 0), (-1, 0), (-1, -1), (0, -1), (1, -1)] {
                    self.join_rows(&mut sets, y, z, dy, dz);
                }
            }
        }
        sets
    }

    fn join_rows(&self, sets: &mut OffsetSets, y: usize, z: usize, dy: i32, dz: i32) {
        let Some(reach) = self.criterion.connectivity.reach(dy, dz) else { return };
        let [nx, ny, nz] = self.grid.n;
        let (Some((oy, sy)), Some((oz, sz))) = (step(y, dy, ny, self.grid.periodic[1]), step(z, dz, nz, self.grid.periodic[2])) else {
            return;
        };
        let here = self.row(y, z);
        let there = self.row(oy, oz);
        if there.is_empty() {
            return;
        }
        // Rows of one tile are already joined to each other.
        let crosses_tile = (dy == -1 && self.tile_floor[y]) || (dy == 1 && self.tile_floor[oy]);
        let crosses = crosses_tile || sy != 0 || sz != 0 || (dz != 0 && self.block_floor[z]);
        if crosses && (dy, dz) != (0, 0) {
            touching(here, there, reach, |i, j| sets.join(here[i].component, there[j].component, [0, sy, sz]));
        }
        if self.grid.periodic[0] {
            self.join_ends(sets, here, there, reach, [sy, sz], nx as u32);
            if (dy, dz) != (0, 0) {
                // The mirror-image contact: `there` left of `here`.
                self.join_ends(sets, there, here, reach, [-sy, -sz], nx as u32);
            }
        }
    }

    /// Joins runs that touch across the x-face: `right` row's first run seen beyond the last cell of the `left` row.
    fn join_ends(&self, sets: &mut OffsetSets, left: &[Run], right: &[Run], reach: u32, shift: [i32; 2], nx: u32) {
        let (Some(last), Some(first)) = (left.last(), right.first()) else { return };
        // Gap in cells between the last cell of one and the first cell of the other: same row needs adjacency (1),
        // a diagonal row contact needs at most `reach`, where reach 0 means the same x.
        let same_row = last.y == first.y && last.z == first.z;
        let needed = if same_row { 1 } else { reach };
        if needed >= 1 && last.x1 == nx && first.x0 == 0 {
            sets.join(last.component, first.component, [1, shift[0], shift[1]]);
        }
    }

    /// The objects, numbered by their smallest cell, and what was left out for its size.
    pub fn finish(self, min_cells: u64) -> Detected {
        let mut sets = self.join();
        let Labeller { grid, criterion, runs, tallies, rows, .. } = self;
        let n = tallies.len();
        let size = grid.n.map(|v| v as i64);
        // Root tallies, each in the frame of its root.
        let mut merged: Vec<Tally> = Vec::new();
        let mut slot = vec![u32::MAX; n];
        let mut frame = vec![(0u32, [0i32; 3]); n];
        for (c, tally) in tallies.into_iter().enumerate() {
            let (root, offset) = sets.find(c as u32);
            frame[c] = (root, offset);
            if root as usize == c {
                slot[c] = merged.len() as u32;
                merged.push(tally);
            } else {
                merged[slot[root as usize] as usize].merge(&tally, offset, grid.n, criterion.side);
            }
        }
        // What never goes beyond the inner level is no object at all.
        let rises = |t: &Tally| match (criterion.inner, criterion.side) {
            (None, _) => true,
            (Some(inner), Side::Above) => t.peak > inner,
            (Some(inner), Side::Below) => t.peak < inner,
        };
        let roots: Vec<u32> =
            (0..n as u32).filter(|&c| slot[c as usize] != u32::MAX && rises(&merged[slot[c as usize] as usize])).collect();
        let mut kept: Vec<u32> = roots.iter().copied().filter(|&r| merged[slot[r as usize] as usize].moments.count >= min_cells).collect();
        kept.sort_by_key(|&r| merged[slot[r as usize] as usize].first_cell);
        let mut dropped = Dropped { objects: (roots.len() - kept.len()) as u64, tally: Tally::empty(), contents: Contents::default() };
        let mut object_of = vec![NO_OBJECT; n];
        for (k, &r) in kept.iter().enumerate() {
            object_of[r as usize] = k as u32;
        }
        for &r in &roots {
            if object_of[r as usize] == NO_OBJECT {
                object_of[r as usize] = LEFT_OUT;
                dropped.tally.merge(&merged[slot[r as usize] as usize], [0; 3], grid.n, criterion.side);
            }
        }
        let mut objects: Vec<Object> = kept
            .iter()
            .enumerate()
            .map(|(k, &r)| Object {
                id: k as u64 + 1,
                tally: std::mem::replace(&mut merged[slot[r as usize] as usize], Tally::empty()),
                contents: None,
                level: None,
                wall: 0.0,
                spans: sets.spans(r),
                intervals: Vec::new(),
            })
            .collect();
        drop(merged);
        // Where each object's frame has to move so that its centroid lies inside the box.
        let homes: Vec<[i32; 3]> = objects.iter_mut().map(|o| o.tally.bring_home(&grid)).collect();
        // Runs come tile by tile; their rows are gone through in order.
        let mut members = Members::new(grid.n[1], runs.len());
        for (from, to) in rows {
            for run in &runs[from..to] {
                let (root, offset) = frame[run.component as usize];
                let k = object_of[root as usize];
                if k == NO_OBJECT {
                    continue;
                }
                members.push(Member { x0: run.x0, x1: run.x1, object: k });
                if k == LEFT_OUT {
                    continue;
                }
                let object = &mut objects[k as usize];
                let closed = object.spans.iter().any(|&s| s);
                let place = |a: usize, v: u32| {
                    let boxes = if closed { 0 } else { i64::from(offset[a] + homes[k as usize][a]) };
                    (i64::from(v) + boxes * size[a]) as i32
                };
                object.intervals.push(Interval { z: place(2, run.z), y: place(1, run.y), x: place(0, run.x0), len: run.x1 - run.x0 });
            }
            members.end_row();
        }
        drop(runs);
        par::for_chunks(&mut objects, 16, |_, some| {
            for object in some {
                let closed = object.spans.iter().any(|&s| s);
                if closed { object.intervals.sort_unstable() } else { tidy(&mut object.intervals) }
            }
        });
        Detected { objects, dropped, members }
    }
}

/// Marks a component that never rises beyond the inner level; below [`LEFT_OUT`].
const NO_OBJECT: u32 = u32::MAX - 1;

/// Neighbour index along an axis and the box shift of the neighbour as seen from here; `None` beyond an open face.
fn step(i: usize, d: i32, n: usize, periodic: bool) -> Option<(usize, i32)> {
    let j = i as i64 + i64::from(d);
    if (0..n as i64).contains(&j) {
        Some((j as usize, 0))
    } else if periodic {
        Some((j.rem_euclid(n as i64) as usize, j.div_euclid(n as i64) as i32))
    } else {
        None
    }
}
