//! The three passes over a snapshot: survey, detection, shape. Work is cut into tiles of rows; results never depend on the cut.

use std::ops::Range;
use std::sync::Mutex;

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::par;
use crate::base::real::Real;
use crate::derive::{Deriver, Scratch};
use crate::detect::{ClosedTile, Criterion, Labeller, TileSweep};
use crate::math::stats::Quantiles;
use crate::measure::patches::{Patches, Wanted};
use crate::measure::surface::{Shaped, Trace, shape};
use crate::model::object::Detected;
use crate::model::request::{Family, Level};
use crate::model::rows::Need;
use crate::model::sink::ObjectSink;
use crate::model::source::{Fields, PlaneSource};
use crate::model::statistics::{Alignment, Scan, Survey};
use crate::model::surface::SurfaceMesh;
use crate::run::stream::{Buffers, blocks};
use crate::space::grid::Grid;
use crate::space::slab::Block;
use crate::survey::scan::{self, ScanSum};
use crate::survey::spectra::SpectraSum;
use crate::survey::{box_alignment, moments};

/// What every row of the survey needs; sampled ones the truncation as well.
const SURVEY: Need = Need { strain: true, divergence: true, truncation: false, alignment: false, extras: false, vectors: false };
/// What every row of the detection needs.
const DETECTION: Need = Need { strain: true, divergence: false, truncation: false, alignment: true, extras: false, vectors: false };

/// Everything a pass needs besides its own request.
pub struct Pass<'a, T> {
    /// The planes.
    pub source: &'a mut dyn PlaneSource<T>,
    /// The blocks that planes are worked on in.
    pub ranges: Vec<Range<usize>>,
    /// Buffers shared by the passes.
    pub buffers: &'a Buffers<T>,
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

    /// Reads everything once: digest, bad cells, component sums. With a deriver, surveys the derived quantities as well.
    ///
    /// # Errors
    /// Those of the source. Bad cells are reported in the result; nothing is derived from the block that holds one on.
    pub fn survey(
        &mut self,
        deriver: Option<&Deriver<T>>,
        with_scan: bool,
        families: &[Family],
        companions: usize,
    ) -> Result<(Scan, Survey)> {
        let grid = self.source.grid().clone();
        let components = self.source.fields().components();
        let tiles = self.tiles();
        self.observe.stage(if deriver.is_some() { "survey" } else { "read" }, grid.n[2] as u64);
        let mut scans = ScanSum::new::<T>(&grid, components);
        let mut spectra = SpectraSum::<T>::new(&grid, components);
        let mut survey = moments::empty(families, companions);
        let wanted: Vec<bool> = families.iter().map(|f| f.levels().iter().any(|l| matches!(l, Level::Volume(_)))).collect();
        let quantiles: Mutex<Vec<Vec<Option<Quantiles>>>> = Mutex::new(Vec::new());
        let mut sound = true;
        let halo = deriver.map_or(0, Deriver::halo);
        let reach = |z: Range<usize>| deriver.map_or((z.start as isize, z.end as isize), |d| d.reach(z));
        blocks(self.source, &self.ranges, halo, reach, self.buffers, self.observe, |block| {
            if with_scan {
                let planes = par::map_range(block.z.len(), |k| {
                    let z = block.z.start + k;
                    let slices: Vec<&[T]> = (0..components).map(|c| block.plane(c, z as isize)).collect();
                    scan::plane(&grid, z, &slices)
                });
                for p in &planes {
                    sound &= p.is_finite();
                    scans.add(p);
                }
                if sound {
                    spectra.add(block);
                }
            }
            let Some(deriver) = deriver.filter(|_| sound) else { return Ok(()) };
            let ready = deriver.prepare(block, Need { truncation: true, extras: companions > 0, ..SURVEY })?;
            let parts = par::map(&tiles, |_, rows_y| {
                let mut counts = take(&quantiles).unwrap_or_else(|| wanted.iter().map(|w| w.then(Quantiles::default)).collect());
                let mut scratch = Scratch::default();
                let per_plane: Vec<Survey> = block
                    .z
                    .clone()
                    .map(|z| {
                        let mut part = moments::empty(families, companions);
                        for y in rows_y.clone() {
                            let sampled = y % moments::SAMPLE_ROWS == 0;
                            let need = Need { truncation: sampled, extras: companions > 0, ..SURVEY };
                            deriver.row(block, &ready, z, y, 0..grid.n[0], need, &mut scratch);
                            grid.relative_weights(0..grid.n[0], y, z, &mut scratch.rows.weights);
                            moments::add_row(&mut part, &scratch.rows, sampled, deriver.inner(y, z));
                            for (q, row) in counts.iter_mut().zip(&scratch.rows.indicators) {
                                match (q, scratch.rows.weights.as_slice()) {
                                    (None, _) => {}
                                    (Some(q), []) => q.add(row),
                                    (Some(q), weights) => q.add_weighted(row, weights),
                                }
                            }
                        }
                        part
                    })
                    .collect();
                give(&quantiles, counts);
                per_plane
            });
            for k in 0..block.z.len() {
                let mut plane = moments::empty(families, companions);
                for tile in &parts {
                    moments::merge(&mut plane, &tile[k]);
                }
                moments::merge(&mut survey, &plane);
            }
            Ok(())
        })?;
        while let Some(counts) = take(&quantiles) {
            for (s, q) in survey.indicators.iter_mut().zip(counts) {
                match (&mut s.quantiles, q) {
                    (Some(a), Some(b)) => a.merge(&b),
                    (a, b) => *a = b.or(a.take()),
                }
            }
        }
        self.observe.done();
        Ok((Scan { lines: spectra.finish(), ..scans.finish() }, survey))
    }

    /// Finds the objects of every family, and the alignment over the whole box.
    ///
    /// # Errors
    /// Those of the source.
    pub fn detect(&mut self, deriver: &Deriver<T>, criteria: &[Criterion], min_cells: &[u64]) -> Result<(Vec<Detected>, Alignment)> {
        let grid = self.source.grid().clone();
        let tiles = self.tiles();
        self.observe.stage("detection", grid.n[2] as u64);
        let mut labellers: Vec<Labeller> = criteria.iter().map(|c| Labeller::new(grid.clone(), c.clone())).collect();
        let need = Need { extras: criteria.first().is_some_and(|c| !c.scales.extras.is_empty()), ..DETECTION };
        let mut whole = Alignment::default();
        blocks(
            self.source,
            &self.ranges,
            deriver.halo(),
            |z| deriver.reach(z),
            self.buffers,
            self.observe,
            |block| {
                let ready = deriver.prepare(block, need)?;
                let parts = par::map(&tiles, |_, rows_y| {
                    let mut scratch = Scratch::default();
                    let mut sweeps: Vec<TileSweep> =
                        criteria.iter().map(|c| TileSweep::new(c.clone(), (rows_y.start, rows_y.end), block.z.start)).collect();
                    let alignment: Vec<Alignment> = block
                        .z
                        .clone()
                        .map(|z| {
                            let mut part = Alignment::default();
                            for y in rows_y.clone() {
                                deriver.row(block, &ready, z, y, 0..grid.n[0], need, &mut scratch);
                                grid.relative_weights(0..grid.n[0], y, z, &mut scratch.rows.weights);
                                box_alignment::add_row(&mut part, &scratch.rows);
                                for sweep in &mut sweeps {
                                    sweep.add_row(&grid, &scratch.rows, y, z);
                                }
                            }
                            part
                        })
                        .collect();
                    let closed: Vec<ClosedTile> = sweeps.into_iter().map(TileSweep::close).collect();
                    (closed, alignment)
                });
                for k in 0..block.z.len() {
                    let mut plane = Alignment::default();
                    for (_, alignment) in &parts {
                        plane.merge(&alignment[k]);
                    }
                    whole.merge(&plane);
                }
                for (sweeps, _) in parts {
                    for (labeller, sweep) in labellers.iter_mut().zip(sweeps) {
                        labeller.add(sweep);
                    }
                }
                Ok(())
            },
        )?;
        let found = par::map_owned(labellers, |k, l| l.finish(min_cells[k]));
        self.observe.done();
        Ok((found, whole))
    }

    /// Measures the surface of every object no larger than `max_cells`; meshes of objects of at least `mesh_cells` cells
    /// go to the sink. Takes the objects' intervals. Results per family, in object order; missing for larger objects.
    ///
    /// # Errors
    /// Those of the source and of the sink.
    pub fn shapes(
        &mut self,
        deriver: &Deriver<T>,
        criteria: &[Criterion],
        found: &mut [Detected],
        plan: &ShapePlan,
        sink: &mut (dyn ObjectSink + Send),
    ) -> Result<Vec<Vec<Option<Shaped>>>> {
        let grid = self.source.grid().clone();
        let fields = if plan.mesh_cells.is_some() { self.source.fields() } else { Fields::default() };
        let extras = if plan.mesh_cells.is_some() { plan.mesh_extras.clone() } else { Vec::new() };
        let tiles = self.tiles();
        self.observe.stage("shapes", grid.n[2] as u64);
        let mut patches: Vec<Patches<T>> = criteria
            .iter()
            .zip(found.iter())
            .map(|(c, f)| Patches::new(grid.clone(), c.family, c.side, fields, extras.clone(), &f.objects, plan.max_cells))
            .collect();
        let mut pending = Vec::new();
        let mut out: Vec<Vec<Option<Shaped>>> = found.iter().map(|f| f.objects.iter().map(|_| None).collect()).collect();
        blocks(
            self.source,
            &self.ranges,
            deriver.halo(),
            |z| deriver.reach(z),
            self.buffers,
            self.observe,
            |block| {
                // The meshes of the block before are written while this one is worked on.
                let waiting = std::mem::take(&mut pending);
                let (written, meshes) = par::join(
                    || waiting.into_iter().try_for_each(|(k, meshes)| sink.put(k, meshes)),
                    || shape_block(&grid, deriver, criteria, &tiles, block, &mut patches, found, plan, &mut out),
                );
                pending = meshes?;
                written
            },
        )?;
        pending.into_iter().try_for_each(|(k, meshes)| sink.put(k, meshes))?;
        self.observe.done();
        Ok(out)
    }
}

/// Delivers one block to the patches and measures those that are complete; returns their meshes, family by family.
fn shape_block<T: Real>(
    grid: &Grid,
    deriver: &Deriver<T>,
    criteria: &[Criterion],
    tiles: &[Range<usize>],
    block: &Block<'_, T>,
    patches: &mut [Patches<T>],
    found: &mut [Detected],
    plan: &ShapePlan,
    out: &mut [Vec<Option<Shaped>>],
) -> Result<Vec<(usize, Vec<SurfaceMesh>)>> {
    for (p, f) in patches.iter_mut().zip(found.iter_mut()) {
        p.begin_block(block.z.clone(), tiles, &mut f.objects);
    }
    let open: &[Patches<T>] = patches;
    let meshes = plan.mesh_cells.is_some();
    let need = Need { extras: meshes && !plan.mesh_extras.is_empty(), vectors: meshes, ..Need::default() };
    let ready = deriver.prepare(block, need)?;
    par::map_range(tiles.len(), |t| {
        let mut scratch = Scratch::default();
        let mut wanted: Vec<Wanted> = open.iter().flat_map(|p| p.wanted(t)).collect();
        wanted.sort_unstable();
        for row in wanted.chunk_by(|a, b| (a.z, a.y) == (b.z, b.y)) {
            let (z, y) = (row[0].z, row[0].y);
            for x in joined(row) {
                deriver.row(block, &ready, z, y, x.clone(), need, &mut scratch);
                for p in open {
                    p.deliver(t, z, y, &x, &scratch.rows);
                }
            }
        }
    });
    let mut finished = Vec::new();
    for (k, (p, f)) in patches.iter_mut().zip(found.iter()).enumerate() {
        let shaped = par::map_owned(p.end_block(block.z.end), |_, patch| {
            let object = &f.objects[patch.object];
            let with_mesh = plan.mesh_cells.is_some_and(|least| object.tally.moments.count >= least);
            let Criterion { side, level, connectivity, .. } = criteria[k];
            let trace = Trace { level: object.level.unwrap_or(level), side, connectivity, id: object.id, with_mesh };
            shape(grid, &patch, trace)
        });
        let mut meshes = Vec::new();
        for mut s in shaped {
            meshes.extend(s.mesh.take());
            let place = s.object;
            out[k][place] = Some(s);
        }
        finished.push((k, meshes));
    }
    Ok(finished)
}

/// The stretches of a row that cover what is wanted of it, nearby ones joined: deriving a few cells more is cheaper than
/// beginning anew.
pub(super) fn joined(row: &[Wanted]) -> Vec<Range<usize>> {
    const GAP: usize = 64;
    let mut out: Vec<Range<usize>> = Vec::new();
    for w in row {
        match out.last_mut() {
            Some(last) if w.x <= last.end + GAP => last.end = last.end.max(w.x + w.len),
            _ => out.push(w.x..w.x + w.len),
        }
    }
    out
}

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

fn take<V>(pool: &Mutex<Vec<V>>) -> Option<V> {
    pool.lock().ok().and_then(|mut p| p.pop())
}

fn give<V>(pool: &Mutex<Vec<V>>, value: V) {
    if let Ok(mut p) = pool.lock() {
        p.push(value);
    }
}
