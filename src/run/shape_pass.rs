//! The shape pass: rows are derived around every object, what its cells hold is summed, and its patch is meshed and measured.

use std::ops::Range;
use std::sync::{Mutex, MutexGuard, PoisonError};

use crate::base::error::Result;
use crate::base::par;
use crate::base::real::Real;
use crate::derive::{Deriver, Scratch};
use crate::detect::Criterion;
use crate::measure::patches::{Patch, Patches, Wanted};
use crate::measure::surface::{MESH_BYTES, Shaped, Trace, shape};
use crate::model::contents::Contents;
use crate::model::object::{Detected, LEFT_OUT, Member};
use crate::model::rows::Need;
use crate::model::sink::ObjectSink;
use crate::model::source::Fields;
use crate::model::surface::SurfaceMesh;
use crate::run::passes::{Pass, joined, place};
use crate::run::waves::{Cost, group_bytes, waves};
use crate::space::grid::Grid;
use crate::space::slab::Block;

/// Bytes of an object besides its cells: what it is known by, what it holds, its measured outline and its row.
const OBJECT_BYTES: u64 = 2560;

/// Which objects get a surface and a mesh.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ShapePlan {
    /// Larger objects get neither.
    pub max_cells: u64,
    /// Objects of at least so many cells get a mesh; none where no mesh is wanted.
    pub mesh_cells: Option<u64>,
    /// Which of the further indicators go to mesh vertices.
    pub mesh_extras: Vec<usize>,
}

/// Everything that stays the same through the pass.
struct Shaping<'a, T> {
    grid: &'a Grid,
    deriver: &'a Deriver<T>,
    criteria: &'a [Criterion],
    tiles: &'a [Range<usize>],
    plan: &'a ShapePlan,
    /// Sums of the objects of every family; the last of each is that of all that were left out.
    contents: &'a [Vec<Mutex<Box<Contents>>>],
    /// Whether cells are summed: once, in the first wave.
    summing: bool,
}

impl<T: Real> Pass<'_, T> {
    /// Sums what the objects hold and measures the surface of every object no larger than `max_cells`; meshes of objects of at least
    /// `mesh_cells` cells go to the sink. Takes the objects' intervals. Results per family, in object order; missing for larger objects.
    ///
    /// # Errors
    /// Those of the source and of the sink; `Limit` when one object does not fit the budget.
    pub fn shapes(
        &mut self,
        deriver: &Deriver<T>,
        criteria: &[Criterion],
        found: &mut [Detected],
        plan: &ShapePlan,
        sink: &mut (dyn ObjectSink + Send),
    ) -> Result<Vec<Vec<Option<Shaped>>>> {
        let grid = self.source.grid().clone();
        let meshes = plan.mesh_cells.is_some();
        let fields = if meshes { self.source.fields() } else { Fields::default() };
        let extras = if meshes { plan.mesh_extras.clone() } else { Vec::new() };
        let tiles = self.tiles();
        let carried = Patches::<T>::carried(fields, extras.len()) * size_of::<T>();
        let objects: usize = found.iter().map(|f| f.objects.len()).sum();
        let _objects = self.budget.reserve(objects as u64 * OBJECT_BYTES, "objects and their rows", "a larger --min-cells")?;
        let _cells = self.budget.reserve(found.iter().map(Detected::bytes).sum(), "cells beyond the level", "a stronger level")?;
        let left = self.budget.left();
        let cost = Cost { values: vec![carried as u64; found.len()], max_cells: plan.max_cells, left };
        let waves = waves(&grid, found, &self.ranges, &cost)?;
        let contents: Vec<Vec<Mutex<Box<Contents>>>> =
            found.iter().map(|f| (0..=f.objects.len()).map(|_| Mutex::default()).collect()).collect();
        let mut out: Vec<Vec<Option<Shaped>>> = found.iter().map(|f| f.objects.iter().map(|_| None).collect()).collect();
        let mut pending: Vec<(usize, Vec<SurfaceMesh>)> = Vec::new();
        for (w, wave) in waves.into_iter().enumerate() {
            self.observe.stage("shapes", grid.n[2] as u64);
            let shaping = Shaping { grid: &grid, deriver, criteria, tiles: &tiles, plan, contents: &contents, summing: w == 0 };
            let mut patches: Vec<Patches<T>> = criteria
                .iter()
                .zip(found.iter())
                .zip(wave)
                .map(|((c, f), objects)| Patches::new(grid.clone(), c.family, c.side, fields, extras.clone(), &f.objects, objects))
                .collect();
            self.stream(deriver, |block| {
                for (p, f) in patches.iter_mut().zip(found.iter_mut()) {
                    p.begin_block(block.z.clone(), &tiles, &mut f.objects);
                }
                // The meshes made before are written while rows are derived.
                let waiting = std::mem::take(&mut pending);
                let (written, derived) = par::join(|| write(waiting, sink), || shaping.derive(block, &patches, found));
                written.and(derived)?;
                for (k, p) in patches.iter_mut().enumerate() {
                    let mut done = p.end_block(block.z.end);
                    while !done.is_empty() {
                        let later = done.split_off(group(&done, group_bytes(left)));
                        let waiting = std::mem::take(&mut pending);
                        let (written, mut shaped) = par::join(|| write(waiting, sink), || shaping.measure(k, done, &found[k]));
                        written?;
                        done = later;
                        pending.push((k, shaped.iter_mut().filter_map(|s| s.mesh.take()).collect()));
                        for s in shaped {
                            let place = s.object;
                            out[k][place] = Some(s);
                        }
                    }
                }
                Ok(())
            })?;
            write(std::mem::take(&mut pending), sink)?;
            self.observe.done();
        }
        for (f, sums) in found.iter_mut().zip(contents) {
            let mut sums = sums.into_iter().map(|c| c.into_inner().unwrap_or_else(PoisonError::into_inner));
            for o in &mut f.objects {
                o.contents = sums.next();
            }
            f.dropped.contents = sums.next().map_or_else(Contents::default, |c| *c);
        }
        Ok(out)
    }
}

fn lock<V>(value: &Mutex<V>) -> MutexGuard<'_, V> {
    value.lock().unwrap_or_else(PoisonError::into_inner)
}

fn write(meshes: Vec<(usize, Vec<SurfaceMesh>)>, sink: &mut (dyn ObjectSink + Send)) -> Result<()> {
    meshes.into_iter().filter(|(_, m)| !m.is_empty()).try_for_each(|(k, meshes)| sink.put(k, meshes))
}

/// How many patches are meshed together: as many as take no more than `most` bytes, one at least.
fn group<T>(done: &[Patch<T>], most: u64) -> usize {
    let mut sum = 0;
    let within = |p: &&Patch<T>| {
        sum += p.shape.cells as u64 * MESH_BYTES;
        sum <= most
    };
    done.iter().take_while(within).count().max(1)
}

impl<T: Real> Shaping<'_, T> {
    /// Derives what the patches and sums want of a block and hands it to them.
    fn derive(&self, block: &Block<'_, T>, patches: &[Patches<T>], found: &[Detected]) -> Result<()> {
        let meshes = self.plan.mesh_cells.is_some();
        let with_extras = self.criteria.first().is_some_and(|c| !c.scales.extras.is_empty());
        let of_patches = Need { extras: meshes && !self.plan.mesh_extras.is_empty(), vectors: meshes, ..Need::default() };
        let of_sums = Need { strain: true, alignment: true, extras: with_extras, ..Need::default() };
        let both = Need { extras: of_patches.extras || with_extras, vectors: meshes, ..of_sums };
        let ready = self.deriver.prepare(block, if self.summing { both } else { of_patches })?;
        par::map_range(self.tiles.len(), |t| {
            let mut scratch = Scratch::default();
            // The small ones that are left out come one after the other: their common sum is locked once.
            let mut left_out: Vec<Contents> = found.iter().map(|_| Contents::default()).collect();
            let mut wanted: Vec<Wanted> = patches.iter().flat_map(|p| p.wanted(t)).collect();
            wanted.sort_unstable();
            let mut rest = wanted.as_slice();
            let (mut cells, mut pieces): (Vec<Wanted>, Vec<Range<usize>>) = Default::default();
            for z in block.z.clone() {
                for y in self.tiles[t].clone() {
                    let count = rest.iter().take_while(|w| (w.z, w.y) == (z, y)).count();
                    let (here, later) = rest.split_at(count);
                    rest = later;
                    cells.clear();
                    cells.extend_from_slice(here);
                    if self.summing {
                        for f in found {
                            let run = |m: &Member| Wanted { z, y, x: m.x0 as usize, len: (m.x1 - m.x0) as usize };
                            cells.extend(f.members.row(y, z).iter().map(run));
                        }
                        cells.sort_unstable();
                    }
                    if cells.is_empty() {
                        continue;
                    }
                    joined(&cells, self.grid.n[0], &mut pieces);
                    let need = match (self.summing, here.is_empty()) {
                        (true, false) => both,
                        (true, true) => of_sums,
                        _ => of_patches,
                    };
                    self.deriver.pieces(block, &ready, z, y, &pieces, need, &mut scratch);
                    for p in patches {
                        p.deliver(t, z, y, &pieces, &scratch.rows);
                    }
                    if !self.summing {
                        continue;
                    }
                    self.weights(&pieces, y, z, &mut scratch.rows.weights);
                    let families = found.iter().zip(self.criteria).zip(self.contents).zip(&mut left_out);
                    for (((f, c), sums), left_out) in families {
                        let mut last = (0, 0);
                        for m in f.members.row(y, z) {
                            let first = place(&pieces, &mut last, m.x0 as usize);
                            let at = (first, first + (m.x1 - m.x0) as usize);
                            if m.object == LEFT_OUT {
                                left_out.add_cells(&scratch.rows, c.family, &c.scales, at);
                            } else {
                                lock(&sums[m.object as usize]).add_cells(&scratch.rows, c.family, &c.scales, at);
                            }
                        }
                    }
                }
            }
            for (left_out, sums) in left_out.iter().zip(self.contents) {
                lock(&sums[sums.len() - 1]).merge(left_out);
            }
        });
        Ok(())
    }

    /// Volumes of the cells of some pieces of a row over that of the largest cell, one after the other; none where all are equal.
    fn weights(&self, pieces: &[Range<usize>], y: usize, z: usize, out: &mut Vec<f64>) {
        out.clear();
        if self.grid.is_stretched() {
            let mut part = Vec::new();
            for x in pieces {
                self.grid.relative_weights(x.clone(), y, z, &mut part);
                out.append(&mut part);
            }
        }
    }

    /// Meshes and measures complete patches of a family.
    fn measure(&self, family: usize, done: Vec<Patch<T>>, found: &Detected) -> Vec<Shaped> {
        let Criterion { side, level, connectivity, .. } = self.criteria[family];
        par::map_owned(done, |_, patch| {
            let object = &found.objects[patch.object];
            let with_mesh = self.plan.mesh_cells.is_some_and(|least| object.tally.moments.count >= least);
            let trace = Trace { level: object.level.unwrap_or(level), side, connectivity, id: object.id, with_mesh };
            shape(self.grid, &patch, trace)
        })
    }
}
