//! Which objects are open at a time in the shape pass: all of them where they fit the budget, else wave after wave.
//!
//! Waves take objects in the order in which they are finished when all are open at once, so that what is written never depends on them.

use std::ops::Range;

use crate::base::budget::{rounded_up, size};
use crate::base::error::{Error, Result};
use crate::base::par;
use crate::measure::patches::{patch_shape, planes};
use crate::measure::surface::MESH_BYTES;
use crate::model::object::{Detected, Object};
use crate::space::grid::Grid;
use crate::space::patch::Segment;

/// Bytes of the meshes that are made together: they wait in memory while those before are written.
pub fn group_bytes(left: u64) -> u64 {
    (left / 8).clamp(1 << 20, 32 << 20)
}

/// What opening objects costs.
pub struct Cost {
    /// Bytes of the fields carried a stored cell, family by family.
    pub values: Vec<u64>,
    /// Larger objects are not opened.
    pub max_cells: u64,
    /// Bytes that may be used.
    pub left: u64,
}

/// An object to be opened: when, and for how much.
struct Entry {
    family: usize,
    object: usize,
    first: usize,
    last: usize,
    /// Bytes while it is open, and while it is meshed.
    open: u64,
    mesh: u64,
}

/// The objects of every wave, family by family.
///
/// # Errors
/// `Limit` when one object alone does not fit.
pub fn waves(grid: &Grid, found: &[Detected], ranges: &[Range<usize>], cost: &Cost) -> Result<Vec<Vec<Vec<usize>>>> {
    let group = group_bytes(cost.left);
    let limit = cost.left.saturating_sub(2 * group);
    let mut entries = Vec::new();
    for (family, detected) in found.iter().enumerate() {
        for (object, o) in detected.objects.iter().enumerate().filter(|(_, o)| o.tally.moments.count <= cost.max_cells) {
            let (first, last) = planes(grid, o);
            let (open, mesh) = bytes(most_stored(grid, o), 9 * o.intervals.len() as u64, cost.values[family]);
            entries.push(Entry { family, object, first, last, open, mesh });
        }
    }
    entries.sort_unstable_by_key(|e| (e.last, e.family, e.object));
    let all = cut(&entries, found.len(), ranges, limit, group, found);
    if let Ok([_]) = all.as_deref() {
        return all;
    }
    // The bound is generous: what is stored is counted before work is done twice.
    let counted = par::map(&entries, |_, e| {
        let o = &found[e.family].objects[e.object];
        let shape = patch_shape(grid, o.intervals.clone(), o.spans);
        bytes(shape.cells as u64, shape.stored.len() as u64, cost.values[e.family])
    });
    for (e, (open, mesh)) in entries.iter_mut().zip(counted) {
        (e.open, e.mesh) = (open, mesh);
    }
    cut(&entries, found.len(), ranges, limit, group, found)
}

/// Bytes of an open patch, and of its surface.
fn bytes(cells: u64, segments: u64, values: u64) -> (u64, u64) {
    // Segments, and what is delivered to each.
    const SEGMENT: u64 = size_of::<Segment>() as u64 + 40;
    (cells * values + segments * SEGMENT, cells * MESH_BYTES)
}

/// No more cells are stored around an object: nine rows around each of its own, and no more than the box around it.
fn most_stored(grid: &Grid, object: &Object) -> u64 {
    let rows = 9 * (object.tally.moments.count + 2 * object.intervals.len() as u64);
    rows.min(grid.cells())
}

fn cut(
    entries: &[Entry],
    families: usize,
    ranges: &[Range<usize>],
    limit: u64,
    group: u64,
    found: &[Detected],
) -> Result<Vec<Vec<Vec<usize>>>> {
    let block = |z: usize| ranges.partition_point(|r| r.end <= z);
    let mut out = vec![vec![Vec::new(); families]];
    let mut load = vec![0u64; ranges.len()];
    let mut empty = true;
    for e in entries {
        let blocks = block(e.first)..=block(e.last);
        // The surface of a large object stands beside the groups that are counted already.
        let closing = if e.mesh > group { e.mesh } else { 0 };
        let fits =
            |load: &[u64]| load[blocks.clone()].iter().all(|l| l + e.open <= limit) && load[*blocks.end()] + e.open + closing <= limit;
        if !fits(&load) && !empty {
            out.push(vec![Vec::new(); families]);
            load.fill(0);
        }
        if !fits(&load) {
            let need = e.open + closing + 2 * group;
            let cells = found[e.family].objects[e.object].tally.moments.count;
            return Err(Error::limit("cannot measure an object within the memory budget")
                .item(format!("an object of {cells} cells"))
                .expected(format!("at most {} beside what is in use", size(limit + 2 * group)))
                .found(format!("a need of {}", size(need)))
                .hint(format!(
                    "give {} more with --memory, measure smaller ones only with --max-object-cells, or raise the level",
                    rounded_up(need - limit - 2 * group)
                )));
        }
        load[blocks.clone()].iter_mut().for_each(|l| *l += e.open);
        load[*blocks.end()] += closing;
        empty = false;
        if let Some(wave) = out.last_mut() {
            wave[e.family].push(e.object);
        }
    }
    Ok(out)
}
