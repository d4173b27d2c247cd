//! Derives whole fields given as functions of position, block by block.

use ropewalk::base::observe::Silent;
use ropewalk::base::real::Real;
use ropewalk::derive::{Deriver, Plan, Room, Scratch, z_lines};
use ropewalk::model::request::{Indicator, Scheme};
use ropewalk::model::rows::{Need, Rows};
use ropewalk::model::source::{Fields, MemorySource, PlaneSource};
use ropewalk::run::stream::{Buffers, block_ranges, blocks};
use ropewalk::space::grid::Grid;

pub type Vector = [f64; 3];

pub const TAU: f64 = std::f64::consts::TAU;

/// Room for everything, in memory.
pub const ALL_ROOM: Room<'static> = Room { bytes: u64::MAX, scratch: None };

pub fn plan(scheme: Scheme, indicators: &[Indicator]) -> Plan {
    Plan {
        indicators: indicators.to_vec(),
        extras: Vec::new(),
        scheme,
        frame: [0.0; 3],
        mean_field: None,
        viscosity: None,
        resistivity: None,
    }
}

/// Position of every cell, x fastest.
pub fn positions(grid: &Grid) -> Vec<Vector> {
    let at = |i| {
        let c = grid.coordinates(i);
        std::array::from_fn(|a| grid.position(a, c[a] as f64))
    };
    (0..grid.cells()).map(at).collect()
}

/// Components as functions of position.
pub fn sampled<T: Real, const C: usize>(grid: &Grid, fields: Fields, f: impl Fn(Vector) -> [f64; C]) -> MemorySource<T> {
    let mut components = vec![Vec::new(); C];
    for p in positions(grid) {
        for (c, v) in components.iter_mut().zip(f(p)) {
            c.push(T::of(v));
        }
    }
    MemorySource::new(grid.clone(), fields, components)
}

/// Derives every row in blocks of `planes` and gives it to `each` with its y and z.
pub fn each_row<T: Real>(source: &mut MemorySource<T>, plan: &Plan, need: Need, planes: usize, each: impl FnMut(usize, usize, &Rows<T>)) {
    each_row_within(source, plan, need, planes, &ALL_ROOM, each);
}

/// The same with derivatives along z kept where there is room.
pub fn each_row_within<T: Real>(
    source: &mut MemorySource<T>,
    plan: &Plan,
    need: Need,
    planes: usize,
    room: &Room<'_>,
    mut each: impl FnMut(usize, usize, &Rows<T>),
) {
    let grid = source.grid().clone();
    let deriver = Deriver::<T>::new(&grid, source.fields(), plan.clone());
    let lines = deriver.wanted_z_lines().map(|wanted| z_lines(source, &wanted, room, &Silent).unwrap().into());
    let deriver = deriver.with_z_lines(lines);
    let ranges = block_ranges(&*source, Some(planes), |_| true);
    let mut scratch = Scratch::default();
    let run = |block: &ropewalk::space::slab::Block<'_, T>| {
        let ready = deriver.prepare(block, need)?;
        for z in block.z.clone() {
            for y in 0..grid.n[1] {
                deriver.row(block, &ready, z, y, 0..grid.n[0], need, &mut scratch);
                each(y, z, &scratch.rows);
            }
        }
        Ok(())
    };
    blocks(source, &ranges, deriver.halo(), |z| deriver.reach(z), &Buffers::default(), &Silent, run).unwrap();
}

/// What `pick` takes of every row, one after the other, in double precision.
pub fn whole<T: Real>(source: &mut MemorySource<T>, plan: &Plan, need: Need, pick: impl Fn(&Rows<T>) -> &[T]) -> Vec<f64> {
    let mut out = Vec::new();
    each_row(source, plan, need, 5, |_, _, rows| out.extend(pick(rows).iter().map(|v| v.wide())));
    assert_eq!(out.len() as u64, source.grid().cells(), "cells");
    out
}

/// Indicators over the box, one array each.
pub fn indicators<T: Real>(source: &mut MemorySource<T>, scheme: Scheme, list: &[Indicator]) -> Vec<Vec<f64>> {
    let mut out = vec![Vec::new(); list.len()];
    each_row(source, &plan(scheme, list), Need::default(), 7, |_, _, rows| {
        for (o, r) in out.iter_mut().zip(&rows.indicators) {
            o.extend(r.iter().map(|v| v.wide()));
        }
    });
    out
}

/// Fails when two arrays differ by more than `tolerance` anywhere.
pub fn close(found: &[f64], wanted: &[f64], tolerance: f64, what: &str) {
    assert_eq!(found.len(), wanted.len(), "{what}");
    for (i, (f, w)) in found.iter().zip(wanted).enumerate() {
        assert!((f - w).abs() <= tolerance, "{what}, cell {i}: {f}, wanted {w}");
    }
}
