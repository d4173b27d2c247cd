//! One object that holds half of all cells beyond the level, beside as many cells in many objects: a lattice of balls with arms
//! along the axes, which end a little before those of their neighbours, or in half of the box join them, there alone or through the
//! faces of the box too.

use std::sync::Mutex;
use std::time::Instant;

use ropewalk::base::observe::Observe;
use ropewalk::base::par::Pool;
use ropewalk::model::request::{Family, Request, Surfaces};
use ropewalk::model::sink::NoFiles;
use ropewalk::model::source::{AnySource, Fields, MemorySource};
use ropewalk::run::analysis::{Execution, Snapshot, analyse};
use ropewalk::space::grid::Grid;
use serde_json::json;

use crate::{Asked, medians, tell};

/// Cells of one unit of the lattice along each axis, and in it the radius of the ball and that of the arms.
const UNIT: usize = 16;
const BALL: f32 = 5.0;
const ARM: f32 = 2.2;
/// Where an arm ends, from the centre, so that it touches nothing: the unit ends at 8.
const END: f32 = 6.8;

pub fn run(asked: &Asked) -> Result<(), String> {
    let n = asked.size / UNIT * UNIT;
    if n < 4 * UNIT {
        return Err(format!("--size {} is less than {}", asked.size, 4 * UNIT));
    }
    let grid = Grid::periodic([n; 3], [std::f64::consts::TAU; 3]);
    let family = Family::parse("field: field > 1").map_err(|e| e.to_string())?;
    let fields = [Joined::Nowhere, Joined::Inside, Joined::Through].map(|joined| lattice(n, joined));
    for surfaces in [Surfaces::None, Surfaces::Each] {
        let meshes = surfaces == Surfaces::Each;
        let request = Request { families: vec![family.clone()], min_cells: 1, max_object_cells: u64::MAX, surfaces, ..Request::default() };
        compare(asked, &grid, &fields, &request, meshes)?;
    }
    Ok(())
}

/// Times the analysis of each of the fields.
fn compare(asked: &Asked, grid: &Grid, fields: &[Vec<f32>; 3], request: &Request, meshes: bool) -> Result<(), String> {
    for &threads in &asked.threads {
        let pool = Pool::new(threads).map_err(|e| e.to_string())?;
        let mut told = [json!({}), json!({}), json!({})];
        let mut shapes = [Vec::new(), Vec::new(), Vec::new()];
        let times = medians(asked.runs, 3, |k| {
            let still = vec![0.0f32; fields[k].len()];
            let source = MemorySource::new(grid.clone(), Fields::MAGNETIC, vec![fields[k].clone(), still.clone(), still]);
            let snapshot = Snapshot { name: "bench".into(), time: None, components: Vec::new() };
            let clock = Shapes::default();
            let start = Instant::now();
            let source = AnySource::F32(Box::new(source));
            let done = pool.run(|| analyse(source, snapshot, request, &Execution::default(), &clock, &mut NoFiles));
            let seconds = start.elapsed().as_secs_f64();
            let Ok(done) = done else { panic!("the lattice cannot be analysed") };
            let rows = &done.families[0].rows;
            let cells = rows.iter().filter_map(|r| r.get(ropewalk::model::columns::Col::Cells).as_f64());
            let (all, largest) = cells.fold((0.0, 0.0f64), |(all, largest), c| (all + c, largest.max(c)));
            shapes[k].push(clock.seconds());
            told[k] = json!({ "objects": rows.len(), "cells": all, "largest_holds": largest / all, "meshes": meshes });
            seconds
        });
        for (told, shapes) in told.iter_mut().zip(shapes) {
            // The first run is not counted.
            told["shapes_seconds"] = crate::median(shapes[1..].to_vec()).into();
        }
        // In pairs: many objects, and one of as many cells.
        for (k, what) in [(1, "one object of half the cells"), (2, "one object of half the cells that closes on itself")] {
            tell("giant", "many objects", threads, times[0], told[0].clone());
            tell("giant", what, threads, times[k], told[k].clone());
        }
    }
    Ok(())
}

/// Where the arms of neighbours join.
#[derive(Clone, Copy, PartialEq)]
enum Joined {
    Nowhere,
    /// In the lower half of the box, but not through its faces.
    Inside,
    /// In the lower half of the box and through its faces along x and y.
    Through,
}

/// The field: 1 plus the distance into the nearest ball or arm, in cells.
fn lattice(n: usize, joined: Joined) -> Vec<f32> {
    let half = UNIT as f32 / 2.0 - 0.5;
    let place = |i: usize| (i % UNIT) as f32 - half;
    let mut out = Vec::with_capacity(n * n * n);
    for z in 0..n {
        for y in 0..n {
            for x in 0..n {
                let (at, p) = ([x, y, z], [place(x), place(y), place(z)]);
                let radius = p.iter().map(|v| v * v).sum::<f32>();
                let mut depth = BALL - radius.sqrt();
                for a in 0..3 {
                    let across = (radius - p[a] * p[a]).sqrt();
                    // Arms go on into the next unit, but not along z out of the half of the box that is joined.
                    let ahead = if p[a] > 0.0 { at[a] / UNIT + 1 } else { at[a] / UNIT };
                    let last = if a == 2 { n / UNIT / 2 } else { n / UNIT };
                    let through = joined == Joined::Through && a != 2;
                    let open = joined != Joined::Nowhere && at[2] < n / 2 && (through || (ahead > 0 && ahead < last));
                    let along = if open { f32::INFINITY } else { END - p[a].abs() };
                    depth = depth.max((ARM - across).min(along));
                }
                out.push((1.0 + depth).max(0.0));
            }
        }
    }
    out
}

/// Seconds of the shape pass.
#[derive(Default)]
struct Shapes(Mutex<(Option<Instant>, f64)>);

impl Shapes {
    fn seconds(&self) -> f64 {
        self.0.lock().map_or(f64::NAN, |s| s.1)
    }
}

impl Observe for Shapes {
    fn stage(&self, name: &str, _total: u64) {
        if let Ok(mut s) = self.0.lock() {
            s.0 = (name == "shapes").then(Instant::now);
        }
    }

    fn done(&self) {
        if let Ok(mut s) = self.0.lock()
            && let Some(since) = s.0.take()
        {
            s.1 += since.elapsed().as_secs_f64();
        }
    }
}
