//! What the passes over a snapshot share: source, blocks, tiles of rows. Results never depend on how the work is cut.

use std::ops::Range;

use crate::base::budget::Budget;
use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::real::Real;
use crate::derive::Deriver;
use crate::measure::patches::Wanted;
use crate::model::source::PlaneSource;
use crate::run::stream::{Buffers, blocks};
use crate::space::grid::Grid;
use crate::space::slab::Block;

/// Everything a pass needs besides its own request.
pub struct Pass<'a, T> {
    /// The planes.
    pub source: &'a mut dyn PlaneSource<T>,
    /// The blocks that planes are worked on in.
    pub ranges: Vec<Range<usize>>,
    /// Buffers shared by the passes.
    pub buffers: &'a Buffers<T>,
    /// What may still be allocated.
    pub budget: &'a Budget,
    /// Who watches.
    pub observe: &'a dyn Observe,
}

/// Rows a tile: with its halo, a tile of all planes of a stencil stays in the cache of one core.
fn tiles(grid: &Grid, components: usize, value_bytes: usize) -> Vec<Range<usize>> {
    const CACHE_BYTES: usize = 1 << 20;
    const STENCIL_PLANES: usize = 9;
    let row = grid.n[0] * components * value_bytes * STENCIL_PLANES;
    let height = (CACHE_BYTES / row.max(1)).clamp(4, 16);
    (0..grid.n[1]).step_by(height).map(|y| y..(y + height).min(grid.n[1])).collect()
}

impl<T: Real> Pass<'_, T> {
    /// Streams the planes through `each`, block by block with the halo that derivatives take.
    pub(super) fn stream(&mut self, deriver: &Deriver<T>, each: impl FnMut(&Block<'_, T>) -> Result<()>) -> Result<()> {
        blocks(self.source, &self.ranges, deriver.halo(), |z| deriver.reach(z), self.buffers, self.observe, each)
    }

    /// Rows a work item.
    pub(super) fn tiles(&self) -> Vec<Range<usize>> {
        tiles(self.source.grid(), self.source.fields().components(), size_of::<T>())
    }
}

/// Planes in the groups that rows are derived in.
pub(super) fn groups(z: &Range<usize>) -> Vec<Range<usize>> {
    const TOGETHER: usize = 4;
    z.clone().step_by(TOGETHER).map(|k| k..(k + TOGETHER).min(z.end)).collect()
}

/// The stretches of a row of `n` cells that cover what is wanted of it, nearby ones joined: deriving a few cells more is cheaper than
/// beginning anew, and lanes that are half full cost as much as full ones.
pub(super) fn joined(row: &[Wanted], n: usize, out: &mut Vec<Range<usize>>) {
    const GAP: usize = 8;
    const LANES: usize = 8;
    out.clear();
    for w in row {
        let (start, end) = (w.x / LANES * LANES, (w.x + w.len).next_multiple_of(LANES).min(n));
        match out.last_mut() {
            Some(last) if start <= last.end + GAP => last.end = last.end.max(end),
            _ => out.push(start..end),
        }
    }
}

/// Where cell `x` of a row stands among pieces of it that stand one after the other; `at` is the piece it was found in last, and what is asked for
/// ascends.
pub(super) fn place(pieces: &[Range<usize>], at: &mut (usize, usize), x: usize) -> usize {
    while pieces[at.0].end <= x {
        at.1 += pieces[at.0].len();
        at.0 += 1;
    }
    at.1 + x - pieces[at.0].start
}
