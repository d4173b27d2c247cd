//! The low-pass filter on single waves, whose factor its definition gives.

use std::f64::consts::PI;

use ropewalk::base::error::Kind;
use ropewalk::base::observe::Silent;
use ropewalk::base::real::Real;
use ropewalk::derive::filter::{filter_bytes, filtered};
use ropewalk::model::request::{Filter, FilterShape};
use ropewalk::model::source::Fields;
use ropewalk::space::grid::Grid;

use crate::common::{ALL_ROOM, TAU, Vector, close, positions, sampled};

/// Three waves and a constant in a box of unequal sides, each with its factor.
fn waves(grid: &Grid, factors: [f64; 3]) -> impl Fn(Vector) -> [f64; 3] {
    let [lx, ly, lz] = [grid.length(0), grid.length(1), grid.length(2)];
    move |[x, y, z]| {
        let a = (TAU * 2.0 * x / lx).cos();
        let b = (TAU * (3.0 * x / lx - 4.0 * y / ly)).sin();
        let c = (TAU * (5.0 * y / ly + 2.0 * z / lz) + 0.4).cos();
        [factors[0] * a + 1.5, factors[1] * b - 2.0, factors[0] * a + factors[2] * c]
    }
}

/// |k|² of the three.
fn squared(grid: &Grid) -> [f64; 3] {
    let k = |m: f64, a: usize| TAU * m / grid.length(a);
    [k(2.0, 0).powi(2), k(3.0, 0).powi(2) + k(4.0, 1).powi(2), k(5.0, 1).powi(2) + k(2.0, 2).powi(2)]
}

fn check<T: Real>(grid: &Grid, filter: Filter, factors: [f64; 3], tolerance: f64) {
    let mut out = filtered(&mut sampled::<T, 3>(grid, Fields::VELOCITY, waves(grid, [1.0; 3])), &filter, &ALL_ROOM, &Silent).unwrap();
    let mut planes = vec![vec![T::ZERO; grid.cells() as usize]; 3];
    let mut slices: Vec<&mut [T]> = planes.iter_mut().map(Vec::as_mut_slice).collect();
    out.read(0, grid.n[2], &mut slices).unwrap();
    let wanted: Vec<[f64; 3]> = positions(grid).into_iter().map(waves(grid, factors)).collect();
    for c in 0..3 {
        let found: Vec<f64> = planes[c].iter().map(|v| v.wide()).collect();
        close(&found, &wanted.iter().map(|w| w[c]).collect::<Vec<_>>(), tolerance, &format!("{filter} component {c}"));
    }
}

#[test]
fn sharp_and_gaussian_filters_on_waves() {
    let grid = Grid::periodic([12, 15, 10], [2.0, 3.0, 1.5]);
    let k2 = squared(&grid);
    let gaussian = Filter { shape: FilterShape::Gaussian, width: 0.3 };
    check::<f64>(&grid, gaussian, k2.map(|k| (-k * 0.09 / 24.0).exp()), 1e-13);
    check::<f32>(&grid, gaussian, k2.map(|k| (-k * 0.09 / 24.0).exp()), 1e-6);
    // Edges exactly on the second wave (kept) and just below it.
    let edge = PI / k2[1].sqrt();
    let kept = [k2[0] <= k2[1], true, k2[2] <= k2[1]].map(|k| f64::from(u8::from(k)));
    check::<f64>(&grid, Filter { shape: FilterShape::Sharp, width: edge }, kept, 1e-13);
    check::<f64>(&grid, Filter { shape: FilterShape::Sharp, width: edge * 1.001 }, [kept[0], 0.0, kept[2]], 1e-13);
}

#[test]
fn planes_are_filtered_in_two_dimensions() {
    let grid = Grid::periodic([12, 15, 1], [2.0, 3.0, 1.0]).with_periodic([true, true, false]);
    let k = |m: f64, a: usize| (TAU * m / grid.length(a)).powi(2);
    let k2 = [k(2.0, 0), k(3.0, 0) + k(4.0, 1), k(5.0, 1)];
    let filter = Filter { shape: FilterShape::Gaussian, width: 0.4 };
    check::<f64>(&grid, filter, k2.map(|k| (-k * 0.16 / 24.0).exp()), 1e-13);
}

#[test]
fn open_axes_are_refused_and_memory_is_known() {
    let grid = Grid::periodic([12, 15, 10], [1.0; 3]).with_periodic([true, false, true]);
    let mut source = sampled::<f32, 3>(&grid, Fields::VELOCITY, |p| p);
    let filter = Filter { shape: FilterShape::Sharp, width: 0.3 };
    let refused = filtered(&mut source, &filter, &ALL_ROOM, &Silent).err().unwrap();
    assert_eq!(refused.kind(), Kind::Usage);
    assert!(refused.to_string().contains("axis y: expected periodic axes"), "{refused}");
    // Three components in f32, (12/2 + 1) × 15 × 10 complex numbers.
    assert_eq!(filter_bytes(&grid, Fields::VELOCITY, 4), 1800 * 12 + 7 * 150 * 16);
}
