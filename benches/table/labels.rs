//! From an indicator in memory to periodic, 26-connected objects with their cell counts.

use std::hint::black_box;

use ropewalk::base::par;
use ropewalk::detect::{ClosedTile, Criterion, Labeller, TileSweep};
use ropewalk::math::stats::Scale;
use ropewalk::model::contents::{SUMS, Scales};
use ropewalk::model::request::Side;
use ropewalk::space::grid::Grid;
use ropewalk::space::runs::Connectivity;
use serde_json::json;

use crate::{Asked, medians, seconds, tell};

/// Planes and rows of a work item.
const DEPTH: usize = 16;
const HEIGHT: usize = 64;

pub fn run(asked: &Asked) -> Result<(), String> {
    let path = asked.indicator.as_ref().ok_or("labels need --indicator FILE: a cube of little-endian f32")?;
    let bytes = std::fs::read(path).map_err(|e| format!("{path}: {e}"))?;
    let values: Vec<f32> = bytes.as_chunks::<4>().0.iter().map(|b| f32::from_le_bytes(*b)).collect();
    drop(bytes);
    let n = (values.len() as f64).cbrt().round() as usize;
    if n * n * n != values.len() {
        return Err(format!("{path}: {} values are no cube", values.len()));
    }
    let square: f64 = values.iter().map(|&v| f64::from(v) * f64::from(v)).sum();
    let level = asked.level * (square / values.len() as f64).sqrt();
    let grid = Grid::periodic([n; 3], [std::f64::consts::TAU; 3]);
    let pools = asked.pools()?;
    let mut found = (0, 0);
    let times = medians(asked.runs, pools.len(), |k| seconds(|| found = pools[k].run(|| label(&grid, &values, level))));
    for (threads, seconds) in asked.threads.iter().zip(times) {
        tell("labels", &format!("{n}^3"), *threads, seconds, json!({ "objects": found.0, "cells": found.1, "level": level }));
    }
    Ok(())
}

/// Objects and the cells in them.
fn label(grid: &Grid, values: &[f32], level: f64) -> (usize, u64) {
    let [nx, ny, nz] = grid.n;
    let scales = Scales { sums: [Scale::for_bound(1e6 * level); SUMS], extras: Vec::new() };
    let criterion = Criterion { family: 0, side: Side::Above, level, inner: None, connectivity: Connectivity::TwentySix, scales };
    let (deep, high) = (nz.div_ceil(DEPTH), ny.div_ceil(HEIGHT));
    let tiles: Vec<ClosedTile> = par::map_range(deep * high, |k| {
        let (z0, y0) = (k / high * DEPTH, k % high * HEIGHT);
        let y1 = (y0 + HEIGHT).min(ny);
        let mut sweep = TileSweep::new(criterion.clone(), (y0, y1), z0);
        for z in z0..(z0 + DEPTH).min(nz) {
            for y in y0..y1 {
                let at = (z * ny + y) * nx;
                sweep.add_row(grid, &values[at..at + nx], &[], y, z);
            }
        }
        sweep.close()
    });
    let mut labeller = Labeller::new(grid.clone(), criterion);
    tiles.into_iter().for_each(|t| labeller.add(t));
    let detected = black_box(labeller.finish(1));
    (detected.objects.len(), detected.objects.iter().map(|o| o.tally.moments.count).sum())
}
