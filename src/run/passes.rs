//! What the passes over a snapshot share: source, blocks, tiles of rows. Results never depend on how the work is cut.

use std::ops::Range;

use crate::base::budget::Budget;
use crate::base::observe::Observe;
use crate::base::real::Real;
use crate::measure::patches::Wanted;
use crate::model::source::PlaneSource;
use crate::run::stream::Buffers;
use crate::space::grid::Grid;

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

/// The stretches of a row that cover what is wanted of it, nearby ones joined: deriving a few cells more is cheaper than
/// beginning anew.
pub(super) fn joined(row: &[Wanted]) -> Vec<Range<usize>> {
    const GAP: usize = 24;
    let mut out: Vec<Range<usize>> = Vec::new();
    for w in row {
        match out.last_mut() {
            Some(last) if w.x <= last.end + GAP => last.end = last.end.max(w.x + w.len),
            _ => out.push(w.x..w.x + w.len),
        }
    }
    out
}
