//! Grids with unequal spacing: volumes, positions, levels and surfaces are those of the space, not of the samples.

use ropewalk::model::columns::{COLUMNS, Col};
use ropewalk::model::request::{Family, Request};
use ropewalk::space::grid::Grid;

use super::common::*;

/// A box -1..1 along y with samples crowded towards the walls, as channel grids have them; x and z periodic.
fn channel(n: usize) -> Grid {
    let y = (0..n).map(|i| {
        let s = 2.0 * (i as f64 + 0.5) / n as f64 - 1.0;
        (1.6f64 * s).tanh() / 1.6f64.tanh()
    });
    Grid::periodic([n, n, n], [2.0, 2.0, 2.0]).with_positions(1, y.collect())
}

fn wrapped(d: f64) -> f64 {
    d - 2.0 * (d / 2.0).round()
}

/// A ball off the axes, across the periodic faces and off the middle of the channel.
#[test]
fn a_ball_keeps_its_size_where_spacing_changes() {
    let (centre, radius) = ([0.05, 0.31, 1.93], 0.42);
    let mut last = f64::INFINITY;
    for n in [32, 64] {
        let g = channel(n);
        let f = |p: Vector| {
            let d = [wrapped(p[0] - centre[0]), p[1] - centre[1], wrapped(p[2] - centre[2])];
            [2.0 - norm(d) / radius, 0.0, 0.0].map(|v: f64| v.max(0.0))
        };
        let o = run(sampled::<f64>(g, VELOCITY, f), &request(&["b: speed > 1"]));
        let row = o.only(0);
        let volume = 4.0 / 3.0 * std::f64::consts::PI * radius.powi(3);
        let h = 2.0 / n as f64;
        near(number(row, Col::Volume), volume, 0.5 * h, "cells");
        for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
            assert!(wrapped(number(row, col) - centre[a]).abs() < 0.2 * h, "{}", number(row, col));
        }
        // The second moment of a ball is R²/5.
        for col in [Col::Extent1, Col::Extent2, Col::Extent3] {
            near(number(row, col), radius * (12.0f64 / 5.0).sqrt(), 0.6 * h, "extent");
        }
        let worst = [Col::ShapefinderThickness, Col::ShapefinderWidth, Col::ShapefinderLength]
            .map(|c| (number(row, c) / radius - 1.0).abs())
            .into_iter()
            .fold(0.0, f64::max);
        assert!(worst < 0.02 && worst < last / 3.0, "{n}: {worst} after {last}");
        last = worst;
        // Vertices lie on the sphere.
        let mesh = o.mesh(0, 1);
        for p in &mesh.positions {
            let d = [wrapped(f64::from(p[0]) - centre[0]), f64::from(p[1]) - centre[1], wrapped(f64::from(p[2]) - centre[2])];
            near(norm(d), radius, 0.7 * h * h / radius / radius + 1e-6, "vertex");
        }
    }
}

/// Means over the volume of y² in -1..1 are 1/3 and of y⁴ 1/5 (calculus); half of the volume lies beyond |y| = 1/2.
#[test]
fn means_and_fractions_are_over_volume() {
    let g = channel(128);
    let families = ["a: speed > 1 rms", "b: speed > 1 mean", "c: speed > 0.5 volume"];
    let o = run(sampled::<f64>(g, VELOCITY, |p| [p[1] * p[1], 0.0, 0.0]), &request(&families));
    near(o.family(0).level, 0.2f64.sqrt(), 2e-3, "rms");
    near(o.family(1).level, 1.0 / 3.0, 2e-3, "mean");
    // Planes of one value: the level can only fall between two of them.
    near(o.family(2).level, 0.25, 6e-2, "median");
    near(o.family(2).volume_fraction, 0.5, 6e-2, "fraction");
    near(
        o.analysis.frame.iter().sum::<f64>() + o.analysis.scan.components[0].sum / o.analysis.survey.weight,
        1.0 / 3.0,
        2e-3,
        "mean velocity",
    );
}

/// Equally spaced coordinates give the rows of the plain open grid.
#[test]
fn equal_spacing_as_coordinates_changes_nothing() {
    let n = 20;
    let plain = Grid::periodic([n; 3], [2.0; 3]).with_periodic([true, false, true]).with_origin([0.0, -1.0, 0.0]);
    let given = plain.clone().with_positions(1, (0..n).map(|i| -1.0 + 0.1 * i as f64).collect());
    let f = |p: Vector| [(3.0 * p[1]).sin() + (3.1 * p[0]).cos(), (3.1 * p[2]).sin() * p[1], (3.1 * p[0]).cos()];
    let of = |g: &Grid| {
        let families = ["v: vorticity > 1 rms", "s: speed > 1.2 mean"].map(|f| Family::parse(f).unwrap()).to_vec();
        run(sampled::<f64>(g.clone(), VELOCITY, f), &Request { families, ..request(&[]) })
    };
    let (a, b) = (of(&plain), of(&given));
    for k in 0..2 {
        assert!(!a.rows(k).is_empty());
        assert_eq!(a.rows(k).len(), b.rows(k).len());
        for (r, s) in a.rows(k).iter().zip(b.rows(k)) {
            for (i, (v, w)) in r.values().iter().zip(&s.values()).enumerate() {
                // Two of the moments are equal here: round-off chooses the axes.
                if COLUMNS[i].name.starts_with("axis_") {
                    continue;
                }
                match (v.as_f64(), w.as_f64()) {
                    (Some(v), Some(w)) => assert!((v - w).abs() <= 1e-9 * (1.0 + v.abs()), "{}: {v} {w}", COLUMNS[i].name),
                    _ => assert_eq!(v, w, "{}", COLUMNS[i].name),
                }
            }
        }
    }
}
