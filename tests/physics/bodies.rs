//! Rods, plates and rings as objects: everything within a distance of a segment, a square or a circle, tilted off the grid.

use std::f64::consts::PI;

use crate::common::{MAGNETIC, Outcome, Precision, Vector, near, norm, number, order, request, run, sampled, text};
use ropewalk::model::columns::{Col, Value};
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::Placement;

/// A body of radius r about a skeleton, with V, S and C from closed forms.
struct Body {
    distance: fn(Vector) -> f64,
    radius: f64,
    exact: Vector,
    euler: i64,
    class: &'static str,
    /// Box that holds it.
    size: Vector,
}

/// Volume, area and mean curvature integral of a convex body of S₀, C₀ without volume, dilated by r (Steiner's formula).
fn dilated(s: f64, c: f64, r: f64) -> Vector {
    [s * r + c * r * r + 4.0 / 3.0 * PI * r.powi(3), s + 2.0 * c * r + 4.0 * PI * r * r, c + 4.0 * PI * r]
}

fn bodies() -> [Body; 3] {
    const ROD: f64 = 10.0;
    const PLATE: f64 = 5.0;
    [
        Body {
            // A segment of length l: S₀ = 0, C₀ = πl.
            distance: |q| norm([q[0], q[1], q[2] - q[2].clamp(-0.5 * ROD, 0.5 * ROD)]),
            radius: 1.0,
            exact: dilated(0.0, PI * ROD, 1.0),
            euler: 1,
            class: "filament",
            size: [7.0, 6.0, 13.5],
        },
        Body {
            // A square of side s: S₀ = 2s², C₀ = 2πs.
            distance: |q| norm([q[0] - q[0].clamp(-0.5 * PLATE, 0.5 * PLATE), q[1] - q[1].clamp(-0.5 * PLATE, 0.5 * PLATE), q[2]]),
            radius: 0.6,
            exact: dilated(2.0 * PLATE * PLATE, 2.0 * PI * PLATE, 0.6),
            euler: 1,
            class: "sheet",
            size: [9.0, 9.5, 6.0],
        },
        Body {
            // A circle of radius R = 3, Pappus: V = 2π²Rr², S = 4π²Rr; C = 2π²R.
            distance: |q| norm([q[0].hypot(q[1]) - 3.0, q[2], 0.0]),
            radius: 1.0,
            exact: [6.0 * PI * PI, 12.0 * PI * PI, 6.0 * PI * PI],
            euler: 0,
            class: "filament",
            size: [10.0, 9.6, 6.0],
        },
    ]
}

/// |b| = 2 − d/r, at least 0: above 1 inside the body, linear in the distance across its surface.
fn analysed<T: Precision>(body: &Body, h: f64, periodic: bool) -> Outcome {
    let spacing = [h, 0.9 * h, 1.1 * h];
    let n = std::array::from_fn(|a| (body.size[a] / spacing[a]).round() as usize);
    let grid = Grid { n, spacing, origin: [0.0; 3], periodic: [periodic; 3], stretched: [None, None, None] };
    // In the middle, or around the corner of the periodic box.
    let centre = [0.317, 0.171, -0.233].map(|c| c * 0.2);
    let centre = if periodic { centre } else { std::array::from_fn(|a| centre[a] + 0.5 * grid.length(a)) };
    let place = Placement::along([0.12, -0.09, 1.0], centre);
    let value = |p: Vector| {
        let image = std::array::from_fn(|a| {
            let d = p[a] - centre[a];
            centre[a] + d - if periodic { grid.length(a) * (d / grid.length(a)).round() } else { 0.0 }
        });
        (2.0 - (body.distance)(place.local(image)) / body.radius).max(0.0)
    };
    run(sampled::<T>(grid.clone(), MAGNETIC, |p| [0.0, value(p), 0.0]), &request(&["body: field > 1"]))
}

/// V (from T = 3V/S), S, C.
fn measured(o: &Outcome) -> Vector {
    let row = o.only(0);
    let s = number(row, Col::SurfaceArea);
    [number(row, Col::ShapefinderThickness) * s / 3.0, s, number(row, Col::MeanCurvatureIntegral)]
}

#[test]
fn errors_of_volume_area_and_curvature_fall_with_the_square_of_the_cell() {
    for body in bodies() {
        let errors = |h: f64| -> Vector {
            let got = measured(&analysed::<f64>(&body, h, true));
            std::array::from_fn(|k| (got[k] / body.exact[k] - 1.0).abs())
        };
        let (coarse, fine) = (errors(0.26), errors(0.13));
        for k in 0..3 {
            let got = order(coarse[k], fine[k], 2.0);
            assert!(got > 1.7 && fine[k] < 0.01, "{} quantity {k}: order {got}, {coarse:?} {fine:?}", body.class);
        }
    }
}

#[test]
fn rods_plates_and_rings_have_their_class_and_euler_number() {
    for body in bodies() {
        for periodic in [false, true] {
            let o = analysed::<f32>(&body, 0.2, periodic);
            let row = o.only(0);
            assert_eq!(text(row, Col::Class), body.class);
            assert_eq!(row.get(Col::Euler), &Value::Integer(body.euler));
            let [v, s, c] = body.exact;
            let (t, w, l) = (3.0 * v / s, s / c, c / (4.0 * PI));
            // Sahni, Sathyaprakash & Shandarin 1998, ApJ 495, L5. At 3 cells a radius second-order errors reach a few per cent.
            near(number(row, Col::ShapefinderThickness), t, 0.03, "T");
            near(number(row, Col::ShapefinderWidth), w, 0.03, "W");
            near(number(row, Col::ShapefinderLength), l, 0.03, "L");
            assert!((number(row, Col::Planarity) - (w - t) / (w + t)).abs() < 0.02);
            assert!((number(row, Col::Filamentarity) - (l - w) / (l + w)).abs() < 0.02);
        }
    }
}

/// A plate of 26 x 22 cells whose profile sech²(s/a) is only 0.8 cells wide (FWHM = 1.76275 a, the Harris profile): cells that touch
/// at edges and corners, an isosurface in pieces. What it is must not depend on that: a sheet, flagged.
#[test]
fn a_plate_thinner_than_the_grid_is_still_a_sheet() {
    let grid = Grid { n: [48; 3], spacing: [1.0; 3], origin: [0.0; 3], periodic: [false; 3], stretched: [None, None, None] };
    let directions = [[0.3, 0.2, 1.0], [1.0, 0.4, 0.7], [-0.5, 1.0, 0.3], [1.0, 1.0, 1.0], [0.1, -0.9, 0.6], [0.9, 0.1, -0.2]];
    let a = 0.8 / 1.76275;
    for direction in directions {
        let place = Placement::along(direction, [23.7, 24.2, 23.4]);
        let value = |p: Vector| {
            let q = place.local(p);
            let edge = (q[0] / 13.0).powi(8) + (q[1] / 11.0).powi(8);
            (-edge).exp() / (q[2] / a).cosh().powi(2)
        };
        let o = run(sampled::<f64>(grid.clone(), MAGNETIC, |p| [0.0, value(p), 0.0]), &request(&["plate: field > 0.25"]));
        let largest = o.rows(0).iter().max_by_key(|r| number(r, Col::Cells) as u64).unwrap();
        assert!(number(largest, Col::Cells) > 300.0, "{direction:?}");
        assert_eq!(text(largest, Col::Class), "sheet", "{direction:?}: {}", text(largest, Col::Flags));
        assert!(text(largest, Col::Flags).contains("under_resolved"), "{direction:?}: {}", text(largest, Col::Flags));
        if number(largest, Col::Euler) > 2.0 {
            assert!(text(largest, Col::Flags).contains("fragmented"), "{direction:?}");
        }
    }
}
