//! The detection pass: cells beyond the level of every family, joined into objects.

use std::ops::Range;

use crate::base::budget::Reserved;
use crate::base::error::Result;
use crate::base::par;
use crate::base::real::Real;
use crate::derive::{Ahead, Deriver, Scratch};
use crate::detect::{ClosedTile, Criterion, Labeller, TileSweep};
use crate::model::object::Detected;
use crate::model::rows::Need;
use crate::run::kept::Kept;
use crate::run::passes::Pass;

/// Planes and rows of a tile where indicators are in memory.
const TILE: [usize; 2] = [16, 64];

impl<T: Real> Pass<'_, T> {
    /// Finds the objects of every family of at least `min_cells` cells, from indicators in memory where they were kept, else by deriving
    /// them once more.
    ///
    /// # Errors
    /// Those of the source; `Limit` when there are more objects than fit.
    pub fn detect(
        &mut self,
        deriver: &Deriver<T>,
        criteria: &[Criterion],
        min_cells: &[u64],
        kept: Option<&Kept<T>>,
    ) -> Result<Vec<Detected>> {
        let grid = self.source.grid().clone();
        self.observe.stage("detection", grid.n[2] as u64);
        let mut labellers: Vec<Labeller> = criteria.iter().map(|c| Labeller::new(grid.clone(), c.clone())).collect();
        let budget = self.budget;
        let mut taken: Vec<Reserved<'_>> = Vec::new();
        let mut add = |tiles: Vec<Vec<ClosedTile>>| -> Result<()> {
            for closed in tiles {
                for (labeller, tile) in labellers.iter_mut().zip(closed) {
                    labeller.add(tile);
                }
            }
            let need: u64 = labellers.iter().map(Labeller::bytes).sum();
            let held: u64 = taken.iter().map(Reserved::bytes).sum();
            if need > held {
                taken.push(budget.reserve(need - held, "cells beyond the level", "a stronger level")?);
            }
            Ok(())
        };
        let sweeps = |tile: &Range<usize>, z: &Range<usize>| -> Vec<TileSweep> {
            criteria.iter().map(|c| TileSweep::new(c.clone(), (tile.start, tile.end), z.start)).collect()
        };
        if let Some(kept) = kept {
            let items: Vec<(Range<usize>, Range<usize>)> = pieces(grid.n[2], TILE[0])
                .into_iter()
                .flat_map(|z| pieces(grid.n[1], TILE[1]).into_iter().map(move |y| (z.clone(), y)))
                .collect();
            // A few at a time, so that progress shows and memory is counted.
            let columns = grid.n[1].div_ceil(TILE[1]);
            for some in items.chunks(columns * 8) {
                add(par::map(some, |_, (z, y)| {
                    let mut weights = Vec::new();
                    let mut sweeps = sweeps(y, z);
                    for (sweep, c) in sweeps.iter_mut().zip(criteria) {
                        for z in z.clone() {
                            for y in y.clone() {
                                grid.relative_weights(0..grid.n[0], y, z, &mut weights);
                                sweep.add_row(&grid, kept.row(c.family, y, z), &weights, y, z);
                            }
                        }
                    }
                    sweeps.into_iter().map(TileSweep::close).collect()
                }))?;
                self.observe.advance(some.iter().step_by(columns).map(|(z, _)| z.len() as u64).sum());
            }
        } else {
            let tiles = self.tiles();
            self.stream(deriver, |block| {
                let ready = deriver.prepare(block, Need::default())?;
                add(par::map(&tiles, |_, rows_y| {
                    let mut scratch = Scratch::default();
                    let mut sweeps = sweeps(rows_y, &block.z);
                    for z in block.z.clone() {
                        scratch.expect(Ahead { rows: rows_y.clone(), planes: z..z + 1 });
                        for y in rows_y.clone() {
                            deriver.row(block, &ready, z, y, 0..grid.n[0], Need::default(), &mut scratch);
                            grid.relative_weights(0..grid.n[0], y, z, &mut scratch.rows.weights);
                            for (sweep, c) in sweeps.iter_mut().zip(criteria) {
                                sweep.add_row(&grid, &scratch.rows.indicators[c.family], &scratch.rows.weights, y, z);
                            }
                        }
                    }
                    sweeps.into_iter().map(TileSweep::close).collect()
                }))
            })?;
        }
        let found = par::map_owned(labellers, |k, l| l.finish(min_cells[k]));
        self.observe.done();
        Ok(found)
    }
}

fn pieces(n: usize, size: usize) -> Vec<Range<usize>> {
    (0..n).step_by(size).map(|i| i..(i + size).min(n)).collect()
}
