//! Derivatives, all quantities and detection in one sweep over fields in memory, beside one copy of the same fields.

use std::hint::black_box;
use std::path::PathBuf;
use std::sync::Arc;

use ropewalk::base::par;
use ropewalk::derive::{Ahead, Deriver, Plan, Scratch};
use ropewalk::detect::{ClosedTile, Criterion, TileSweep};
use ropewalk::math::diff::Scheme;
use ropewalk::math::stats::Scale;
use ropewalk::model::contents::{SUMS, Scales};
use ropewalk::model::indicator::Indicator;
use ropewalk::model::request::Side;
use ropewalk::model::rows::Need;
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::model::source::{AnySource, Fields};
use ropewalk::read::{self, InputSpec};
use ropewalk::space::grid::Grid;
use ropewalk::space::runs::Connectivity;
use ropewalk::space::slab::{Batch, Block};
use serde_json::json;

use crate::copy::Copy;
use crate::{Asked, medians, seconds, tell};

/// Planes of halo that the widest difference takes.
const HALO: usize = 4;
/// Planes and rows of a work item.
const DEPTH: usize = 8;
const HEIGHT: usize = 8;

/// A snapshot in memory, single precision.
pub struct Planes {
    pub grid: Grid,
    pub fields: Fields,
    pub components: Vec<Vec<f32>>,
}

impl Planes {
    /// All of the file named by `--field`.
    pub fn read(asked: &Asked) -> Result<Planes, String> {
        let path = asked.field.as_ref().ok_or("this line needs --field FILE")?;
        let spec = InputSpec { lengths: Some([std::f64::consts::TAU; 3]), ..InputSpec::default() };
        let opened = read::open(&SnapshotRef::from(PathBuf::from(path)), &spec).map_err(|e| e.to_string())?;
        let AnySource::F32(mut source) = opened.source else { return Err("the field must be in single precision".into()) };
        let (grid, fields) = (source.grid().clone(), source.fields());
        let mut components = vec![vec![0.0f32; grid.cells() as usize]; fields.components()];
        let mut out: Vec<&mut [f32]> = components.iter_mut().map(Vec::as_mut_slice).collect();
        source.read(0, grid.n[2], &mut out).map_err(|e| e.to_string())?;
        Ok(Planes { grid, fields, components })
    }

    /// The planes of some components with those across the periodic faces on both sides.
    fn batch(&self, components: usize) -> Batch<f32> {
        let (plane, n) = (self.grid.plane_cells(), self.grid.n[2]);
        let with_halo = |c: &Vec<f32>| [&c[(n - HALO) * plane..], c, &c[..HALO * plane]].concat().into();
        let components = self.components[..components].iter().map(with_halo).collect();
        Batch { first: -(HALO as isize), planes: n + 2 * HALO, components: Arc::new(components) }
    }
}

/// A set of quantities.
struct Set {
    name: &'static str,
    fields: Fields,
    indicators: Vec<Indicator>,
    need: Need,
}

fn sets(fields: Fields) -> Vec<Set> {
    let catalogue = Need { strain: true, alignment: true, ..Need::default() };
    let u = |name, indicators: &[Indicator], need| Set { name, fields: Fields::VELOCITY, indicators: indicators.to_vec(), need };
    let mut out = vec![
        u("vorticity, objects and their moments", &[Indicator::Vorticity], Need::default()),
        u("vorticity, strain and alignment: the catalogue of u", &[Indicator::Vorticity], catalogue),
        u("q and the catalogue of u", &[Indicator::Q], catalogue),
    ];
    if fields.magnetic {
        let indicators = vec![Indicator::Vorticity, Indicator::Current];
        out.push(Set { name: "vorticity and current, the catalogue of u and b", fields, indicators, need: catalogue });
    }
    out
}

pub fn run(asked: &Asked) -> Result<(), String> {
    let planes = Planes::read(asked)?;
    let pools = asked.pools()?;
    for set in sets(planes.fields) {
        let components = set.fields.components();
        let mut copy = Copy::new(&planes, components);
        let batches = [planes.batch(components)];
        let plan = Plan {
            indicators: set.indicators.clone(),
            extras: Vec::new(),
            scheme: Scheme::Fd8,
            frame: [0.0; 3],
            mean_field: None,
            viscosity: None,
            resistivity: None,
        };
        let deriver = Deriver::<f32>::new(&planes.grid, set.fields, plan);
        let work = Work { grid: &planes.grid, deriver: &deriver, batches: &batches, need: set.need };
        let criteria = work.criteria(asked.level, set.indicators.len());
        let mut tiles = 0;
        // Copies and sweeps in turns.
        let times = medians(asked.runs, 2 * pools.len(), |k| {
            let pool = &pools[k % pools.len()];
            if k < pools.len() { seconds(|| copy.run(pool)) } else { seconds(|| tiles = pool.run(|| work.sweep(&criteria))) }
        });
        let (copied, swept) = times.split_at(pools.len());
        copy.tell(asked, copied);
        for ((threads, seconds), copied) in asked.threads.iter().zip(swept).zip(copied) {
            let more = json!({ "times_a_copy": seconds / copied, "cells_per_s": planes.grid.cells() as f64 / seconds, "tiles": tiles });
            tell("sweep", set.name, *threads, *seconds, more);
        }
    }
    Ok(())
}

struct Work<'a> {
    grid: &'a Grid,
    deriver: &'a Deriver<f32>,
    batches: &'a [Batch<f32>],
    need: Need,
}

impl Work<'_> {
    /// Calls `each` with every row of every tile; what `begin` makes for a tile comes back from `each` as `end` leaves it.
    fn tiles<S, R: Send>(
        &self,
        begin: impl Fn(usize, usize, usize) -> S + Sync + Send,
        each: impl Fn(&mut S, &Scratch<f32>, usize, usize) + Sync + Send,
        end: impl Fn(S) -> R + Sync + Send,
    ) -> Vec<R> {
        let [nx, ny, nz] = self.grid.n;
        let (deep, high) = (nz.div_ceil(DEPTH), ny.div_ceil(HEIGHT));
        par::map_range(deep * high, |k| {
            let (z0, y0) = (k / high * DEPTH, k % high * HEIGHT);
            let (z1, y1) = ((z0 + DEPTH).min(nz), (y0 + HEIGHT).min(ny));
            let block = Block::new(z0..z1, self.batches, self.grid.plane_cells());
            // Only spectral derivatives prepare anything, and only they can fail to.
            let Ok(ready) = self.deriver.prepare(&block, self.need) else { panic!("differences need no preparation") };
            let mut scratch = Scratch::default();
            let mut state = begin(y0, y1, z0);
            for z in z0..z1 {
                scratch.expect(Ahead { rows: y0..y1, planes: z..z + 1 });
                for y in y0..y1 {
                    self.deriver.row(&block, &ready, z, y, 0..nx, self.need, &mut scratch);
                    each(&mut state, &scratch, y, z);
                }
            }
            end(state)
        })
    }

    /// Criteria at a multiple of the rms of each indicator; the scales of sums fit any value.
    fn criteria(&self, level: f64, indicators: usize) -> Vec<Criterion> {
        let sums = self.tiles(
            |_, _, _| vec![0.0; indicators],
            |sums, scratch, _, _| {
                for (sum, row) in sums.iter_mut().zip(&scratch.rows.indicators) {
                    *sum += row.iter().map(|&v| f64::from(v) * f64::from(v)).sum::<f64>();
                }
            },
            |sums| sums,
        );
        let cells = self.grid.cells() as f64;
        let rms = |k: usize| (sums.iter().map(|s| s[k]).sum::<f64>() / cells).sqrt();
        (0..indicators)
            .map(|family| Criterion {
                family,
                side: Side::Above,
                level: level * rms(family),
                inner: None,
                connectivity: Connectivity::TwentySix,
                scales: Scales { sums: [Scale::for_bound(1e6 * rms(family)); SUMS], extras: Vec::new() },
            })
            .collect()
    }

    /// The sweep itself; how many tiles it made.
    fn sweep(&self, criteria: &[Criterion]) -> usize {
        let closed: Vec<Vec<ClosedTile>> = self.tiles(
            |y0, y1, z0| criteria.iter().map(|c| TileSweep::new(c.clone(), (y0, y1), z0)).collect::<Vec<_>>(),
            |sweeps, scratch, y, z| {
                for (s, c) in sweeps.iter_mut().zip(criteria) {
                    s.add_row(self.grid, &scratch.rows.indicators[c.family], &[], y, z);
                }
            },
            |sweeps| sweeps.into_iter().map(TileSweep::close).collect(),
        );
        black_box(&closed).len()
    }
}
