//! Objects whose surface is an exact ellipsoid, tilted, across periodic faces and corners, and moved about.

use crate::common::{Outcome, Precision, VELOCITY, Vector, dot, near, norm, number, order, request, run, sampled, text};
use ropewalk::model::columns::{COLUMNS, Col, Row, Unit, Value};
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::Placement;

/// Closed forms: V = 4πabc/3; S and C by quadrature of the support function; T = 3V/S, W = S/C, L = C/4π, P and F of Sahni,
/// Sathyaprakash & Shandarin 1998, ApJ 495, L5.
struct Body {
    axes: Vector,
    exact: [f64; 8],
    class: Option<&'static str>,
}

const BODIES: [Body; 5] = [
    Body { axes: [1.0; 3], exact: [4.18879, 12.56637, 12.56637, 1.0, 1.0, 1.0, 0.0, 0.0], class: Some("blob") },
    Body { axes: [1.0, 1.0, 2.0], exact: [8.37758, 21.47844, 17.34377, 1.1701, 1.2384, 1.3802, 0.0283, 0.0541], class: Some("blob") },
    Body { axes: [1.0, 1.0, 4.0], exact: [16.75516, 40.49750, 28.48028, 1.2412, 1.4219, 2.2664, 0.0679, 0.2289], class: Some("filament") },
    Body { axes: [1.0, 4.0, 4.0], exact: [67.02064, 113.92112, 40.49750, 1.7649, 2.8130, 3.2227, 0.2289, 0.0679], class: Some("sheet") },
    // Planarity equals filamentarity: either class is right.
    Body { axes: [1.0, 2.0, 4.0], exact: [33.51032, 63.47665, 31.73833, 1.5837, 2.0, 2.5257, 0.1162, 0.1162], class: None },
];

/// A periodic box of unequal spacing about `h`, non-cubic, large enough for any of the bodies.
fn grid(h: f64) -> Grid {
    let spacing = [h, 1.1 * h, 0.9 * h];
    let n = [9.6, 10.4, 9.9].map(|l: f64| (l / h).round() as usize);
    let n = [n[0], (n[1] as f64 / 1.1).round() as usize, (n[2] as f64 / 0.9).round() as usize];
    Grid { n, spacing, origin: [-1.3, 0.4, 2.2], periodic: [true; 3], stretched: [None, None, None] }
}

/// Speed 1/(1 + q²) along x, q the distance from the centre in units of the semi-axes: above 1/2 inside the ellipsoid.
fn ellipsoid<T: Precision>(g: Grid, body: &Body, place: Placement) -> Outcome {
    let flow = |p: Vector| {
        // The nearest image of the centre.
        let image = std::array::from_fn(|a| {
            let d = p[a] - place.centre[a];
            place.centre[a] + d - g.length(a) * (d / g.length(a)).round()
        });
        let local = place.local(image);
        let q2: f64 = (0..3).map(|a| (local[a] / body.axes[a]).powi(2)).sum();
        [1.0 / (1.0 + q2), 0.0, 0.0]
    };
    run(sampled::<T>(g.clone(), VELOCITY, flow), &request(&["e: speed > 0.5"]))
}

fn tilted(centre: Vector) -> Placement {
    Placement::along([0.5, -0.7, 0.6], centre)
}

fn shapes(row: &Row) -> [f64; 6] {
    [Col::SurfaceArea, Col::MeanCurvatureIntegral, Col::ShapefinderThickness, Col::ShapefinderWidth, Col::ShapefinderLength, Col::Volume]
        .map(|c| number(row, c))
}

/// Semi-axis a gives extent a √(12/5): second moment a²/5 of a solid ellipsoid. Cells count as solid boxes,
/// which adds h²/12 to a second moment that is right on average without: 5/24 (h/a)² of the extent. `scatter` is on top.
fn check_extents(row: &Row, body: &Body, place: &Placement, h: f64, scatter: f64) {
    let mut order = [0, 1, 2];
    order.sort_by(|&i, &j| body.axes[j].total_cmp(&body.axes[i]));
    let extents = [Col::Extent1, Col::Extent2, Col::Extent3];
    let axes = [[Col::Axis1X, Col::Axis1Y, Col::Axis1Z], [Col::Axis2X, Col::Axis2Y, Col::Axis2Z], [Col::Axis3X, Col::Axis3Y, Col::Axis3Z]];
    for k in 0..3 {
        let own = order[k];
        let a = body.axes[own];
        near(number(row, extents[k]), a * 2.4f64.sqrt(), 5.0 / 24.0 * (h / a).powi(2) + scatter, "extent");
        let axis = axes[k].map(|c| number(row, c));
        near(norm(axis), 1.0, 1e-12, "unit axis");
        let distinct = (0..3).all(|o| o == own || (body.axes[o] / body.axes[own] - 1.0).abs() > 0.1);
        assert!(!distinct || dot(axis, place.axes[own]).abs() > 0.9995, "axis {k}: {axis:?}");
    }
}

/// Every exact body in the box, over a face, an edge and a corner of it.
#[test]
fn tilted_ellipsoids_across_faces_and_corners() {
    let g = grid(0.22);
    let inside = [3.31, 5.47, 6.93];
    let corner = [g.origin[0] + 0.05, g.origin[1] + 0.02, g.origin[2] - 0.04];
    for body in &BODIES {
        for centre in [inside, [corner[0], inside[1], inside[2]], [inside[0], corner[1], corner[2]], corner] {
            let place = tilted(centre);
            let o = ellipsoid::<f32>(g.clone(), body, place);
            let row = o.only(0);
            // Some 4.5 cells to the smallest semi-axis.
            let [area, curvature, t, w, l, volume] = shapes(row);
            near(area, body.exact[1], 0.02, "S");
            near(curvature, body.exact[2], 0.01, "C");
            near(t, body.exact[3], 0.02, "T");
            near(w, body.exact[4], 0.02, "W");
            near(l, body.exact[5], 0.02, "L");
            near(volume, body.exact[0], 0.02, "V");
            assert!((number(row, Col::Planarity) - body.exact[6]).abs() < 0.01);
            assert!((number(row, Col::Filamentarity) - body.exact[7]).abs() < 0.01);
            assert_eq!(row.get(Col::Euler), &Value::Integer(1));
            assert_eq!((text(row, Col::Wraps), text(row, Col::OpenFaces)), ("", ""));
            if let Some(class) = body.class {
                assert_eq!(text(row, Col::Class), class, "{:?}", body.axes);
            }
            check_extents(row, body, &place, 0.242, 0.02);
            for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
                let c = number(row, col);
                assert!(c >= g.origin[a] && c < g.origin[a] + g.length(a), "inside the box");
                let d = (c - centre[a]).rem_euclid(g.length(a));
                assert!(d.min(g.length(a) - d) < 0.1 * g.spacing[a], "centroid {c}, centre {}", centre[a]);
            }
        }
    }
}

/// Errors of area, curvature integral and shapefinders fall with the square of the cell, as linear interpolation of a smooth field does.
#[test]
fn errors_fall_with_the_square_of_the_cell() {
    let body = &BODIES[4];
    let centre = [3.317, 5.471, 6.933];
    let errors = |h: f64| -> [f64; 5] {
        let place = tilted(centre);
        let o = ellipsoid::<f64>(grid(h), body, place);
        check_extents(o.only(0), body, &place, 1.1 * h, 0.04 * h);
        let got = shapes(o.only(0));
        std::array::from_fn(|k| (got[k] / body.exact[k + 1] - 1.0).abs())
    };
    let (coarse, fine) = (errors(0.3), errors(0.15));
    for k in 0..5 {
        let got = order(coarse[k], fine[k], 2.0);
        assert!((1.9..2.1).contains(&got), "quantity {k}: order {got}, {coarse:?} {fine:?}");
    }
}

/// Columns that may not change when an object is moved by whole cells.
fn stays(c: usize) -> bool {
    let n = COLUMNS[c].name;
    !["centroid_", "peak_"].iter().any(|p| n.starts_with(p)) && COLUMNS[c].unit != Unit::Text
}

#[test]
fn moving_an_object_leaves_its_row_alone() {
    let g = grid(0.3);
    let body = &BODIES[4];
    let centre = [3.317, 5.471, 6.933];
    let first = ellipsoid::<f64>(g.clone(), body, tilted(centre));
    let reference = first.only(0);
    for cells in [[1, 0, 0], [5, -3, 2], [14, 3, -7], [-11, 15, 17], [g.n[0] as i32, 0, 0], [0, 16, 18], [-16, -2, 40]] {
        let moved: Vector = std::array::from_fn(|a| centre[a] + f64::from(cells[a]) * g.spacing[a]);
        let o = ellipsoid::<f64>(g.clone(), body, tilted(moved));
        let row = o.only(0);
        for c in (0..COLUMNS.len()).filter(|&c| stays(c)) {
            match (&reference.values()[c], &row.values()[c]) {
                (Value::Number(a), Value::Number(b)) => {
                    assert!((a - b).abs() <= 2e-11 * a.abs().max(1e-3), "{} moved by {cells:?}: {a} {b}", COLUMNS[c].name);
                }
                (a, b) => assert_eq!(a, b, "{} moved by {cells:?}", COLUMNS[c].name),
            }
        }
        assert_eq!(text(row, Col::Class), text(reference, Col::Class));
        for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
            let d = number(row, col) - number(reference, col) - f64::from(cells[a]) * g.spacing[a];
            assert!((d / g.length(a) - (d / g.length(a)).round()).abs() < 1e-12, "centroid moved by {cells:?}");
        }
    }
    // Between samples the discretisation changes, by less than its own error.
    for shift in [[0.5, 0.5, 0.5], [0.21, -0.4, 0.33], [7.3, -9.6, 11.8]] {
        let moved: Vector = std::array::from_fn(|a| centre[a] + shift[a] * g.spacing[a]);
        let o = ellipsoid::<f64>(g.clone(), body, tilted(moved));
        let (a, b) = (shapes(reference), shapes(o.only(0)));
        for k in 0..5 {
            near(b[k], a[k], 5e-3, (k, shift));
        }
        near(b[5], a[5], 0.02, "volume");
        for col in [Col::Extent1, Col::Extent2, Col::Extent3] {
            near(number(o.only(0), col), number(reference, col), 0.01, col);
        }
    }
}
