//! Label volumes: which object a cell belongs to, as chunked, compressed HDF5, written chunk by chunk.

use std::path::Path;

use crate::base::error::Result;
use crate::export::hdf5::{Hdf5File, Storable};
use crate::model::sink::FamilyObjects;
use crate::space::patch::Interval;

/// Cells of a chunk along every axis.
const CHUNK: usize = 64;

/// Writes the labels of a family: dataset `labels`, 0 background, else the object's id. Chunks without a cell take no space.
///
/// # Errors
/// `Output`.
pub fn write(path: &Path, snapshot: &str, found: &FamilyObjects<'_>) -> Result<()> {
    let file = Hdf5File::create(path)?;
    file.text("snapshot", snapshot)?;
    file.text("family", &found.family.to_string())?;
    file.number("level", found.level)?;
    if let Some(time) = found.time {
        file.number("time", time)?;
    }
    file.grid(found.grid)?;
    if found.objects.last().is_some_and(|o| o.id > u64::from(u32::MAX)) {
        chunks(&file, found, |id| id)?;
    } else {
        chunks(&file, found, |id| id as u32)?;
    }
    file.close()
}

/// Intervals `from..to` of an object that lie in one layer of chunks.
struct Stretch {
    object: usize,
    from: usize,
    to: usize,
}

fn chunks<T: Storable + Copy + Default>(file: &Hdf5File, found: &FamilyObjects<'_>, label: impl Fn(u64) -> T) -> Result<()> {
    let n = found.grid.n;
    let size = n.map(|n| n.min(CHUNK));
    file.chunked::<T>("labels", n, size)?;
    for (layer, stretches) in layers(found, size[2]).into_iter().enumerate() {
        let mut rows: Vec<Vec<(&Interval, u64)>> = (0..n[1].div_ceil(size[1])).map(|_| Vec::new()).collect();
        for s in &stretches {
            let object = &found.objects[s.object];
            for i in &object.intervals[s.from..s.to] {
                rows[wrap(i.y, n[1]) / size[1]].push((i, object.id));
            }
        }
        for (row, intervals) in rows.into_iter().enumerate() {
            let mut open: Vec<Option<Vec<T>>> = vec![None; n[0].div_ceil(size[0])];
            let at = |column: usize| [column, row, layer];
            let first = |column: usize| -> [usize; 3] { std::array::from_fn(|a| at(column)[a] * size[a]) };
            let cells = |column: usize| -> [usize; 3] { std::array::from_fn(|a| size[a].min(n[a] - first(column)[a])) };
            for (i, id) in intervals {
                let (y, z) = (wrap(i.y, n[1]), wrap(i.z, n[2]));
                for x in (0..i.len as i32).map(|k| wrap(i.x + k, n[0])) {
                    let column = x / size[0];
                    let (first, cells) = (first(column), cells(column));
                    let chunk = open[column].get_or_insert_with(|| vec![T::default(); cells.iter().product()]);
                    chunk[((z - first[2]) * cells[1] + y - first[1]) * cells[0] + x - first[0]] = label(id);
                }
            }
            for (column, chunk) in open.into_iter().enumerate() {
                if let Some(chunk) = chunk {
                    file.block("labels", first(column), cells(column), &chunk)?;
                }
            }
        }
    }
    Ok(())
}

/// What lies in every layer of `depth` planes; intervals of an object are sorted by plane, so each has few stretches.
fn layers(found: &FamilyObjects<'_>, depth: usize) -> Vec<Vec<Stretch>> {
    let nz = found.grid.n[2];
    let mut out: Vec<Vec<Stretch>> = (0..nz.div_ceil(depth)).map(|_| Vec::new()).collect();
    for (object, o) in found.objects.iter().enumerate() {
        let layer = |k: usize| wrap(o.intervals[k].z, nz) / depth;
        let mut from = 0;
        for to in 1..=o.intervals.len() {
            if to == o.intervals.len() || layer(to) != layer(from) {
                out[layer(from)].push(Stretch { object, from, to });
                from = to;
            }
        }
    }
    out
}

/// Index inside the box; open axes never leave it.
fn wrap(i: i32, n: usize) -> usize {
    i.rem_euclid(n as i32) as usize
}
