//! Plane snapshots: derivatives within the plane, areas and contours, and the columns that make no sense left out.

use std::f64::consts::{PI, TAU};

use ropewalk::model::columns::Col;
use ropewalk::model::request::Request;
use ropewalk::space::grid::Grid;

use super::common::*;

fn plane(n: [usize; 2], lengths: [f64; 2]) -> Grid {
    Grid::periodic([n[0], n[1], 1], [lengths[0], lengths[1], 1.0]).with_periodic([true, true, false])
}

/// Orszag & Tang, J. Fluid Mech. 90 (1979) 129: u = (−sin y, sin x), b = (−sin y, sin 2x) in a periodic box 2π, so that
/// ω = cos x + cos y, j = 2 cos 2x + cos y, ⟨ω²⟩ = 1, ⟨j²⟩ = 5/2, ⟨|u|²⟩ = ⟨|b|²⟩ = 1, ⟨u·b⟩ = 1/2 (calculus).
#[test]
fn orszag_tang_has_its_currents() {
    let g = plane([96, 64], [TAU, TAU]).with_origin([0.01, 0.02, 0.0]);
    let u = |p: Vector| [-p[1].sin(), p[0].sin(), 0.0];
    let b = |p: Vector| [-p[1].sin(), (2.0 * p[0]).sin(), 0.0];
    let families = ["j: current > 2", "w: vorticity > 1.5", "x: cross_helicity > 0.5 rms"];
    let o = run(sampled_both::<f64>(g, u, b), &request(&families));
    let s = &o.analysis.survey;
    near(s.velocity.curl2 / s.weight, 1.0, 1e-8, "vorticity");
    near(s.magnetic.curl2 / s.weight, 2.5, 1e-8, "current");
    assert!(o.analysis.divergence.iter().all(|d| !d.is_suspicious()));
    // In the plane u is at right angles to ω, and b to j.
    near(o.analysis.alignment.lamb2 / o.analysis.alignment.u2w2, 1.0, 1e-12, "lamb_sin2");
    // |ω| > 3/2 around (0, 0) and (π, π), |j| > 2 around y = 0 with x = 0 and π, and around y = π with x = π/2 and 3π/2.
    assert_eq!((o.rows(0).len(), o.rows(1).len()), (4, 2));
    let mut peaks: Vec<(i64, i64)> = o
        .rows(0)
        .iter()
        .map(|r| [Col::CentroidX, Col::CentroidY].map(|c| (number(r, c) / (PI / 2.0)).round() as i64 % 4))
        .map(|[x, y]| (y, x))
        .collect();
    peaks.sort_unstable();
    assert_eq!(peaks, vec![(0, 0), (0, 2), (2, 1), (2, 3)]);
    for row in o.rows(0) {
        near(number(row, Col::Peak), 3.0, 1e-3, "peak of |j|");
        missing(row, &[Col::Volume, Col::SurfaceArea, Col::Extent3, Col::Axis3Z, Col::ShapefinderThickness, Col::MeanCurvatureIntegral]);
        missing(
            row,
            &[Col::CosUVorticity, Col::LambSin2, Col::HistogramCurrentB, Col::LorentzSin2, Col::CentroidZ, Col::PeakZ, Col::Axis1Z],
        );
        assert!(has_flag(row, "plane") && !has_flag(row, "undefined_direction"));
        assert_eq!(text(row, Col::OpenFaces), "");
    }
}

/// The plane Taylor–Green flow (cos x sin y, −sin x cos y): ω = −2 cos x cos y, Q = −½ (cos 2x + cos 2y)... at the vortex centres
/// |ω| = 2, Q = 1, λ_ci = 1 (methods: any plane vortex); ⟨ω²⟩ = 1.
#[test]
fn plane_taylor_green_has_four_vortices() {
    let g = plane([64, 64], [TAU, TAU]);
    let u = |p: Vector| [p[0].cos() * p[1].sin(), -p[0].sin() * p[1].cos(), 0.0];
    let o = run(sampled::<f64>(g, VELOCITY, u), &request(&["w: vorticity > 1.5", "q: q > 0.5", "s: swirling > 0.7"]));
    near(o.analysis.survey.velocity.curl2 / o.analysis.survey.weight, 1.0, 1e-8, "⟨ω²⟩");
    for (k, peak) in [2.0, 1.0, 1.0].into_iter().enumerate() {
        assert_eq!(o.rows(k).len(), 4, "family {k}");
        for row in o.rows(k) {
            near(number(row, Col::Peak), peak, 1e-6, "peak");
            assert_eq!(text(row, Col::Class), "filament");
            assert_eq!(number(row, Col::Euler), 1.0);
        }
    }
}

/// A disc: area πR², contour 2πR, extents R√3 (second moment R²/4), converging; off the grid and across both faces.
#[test]
fn a_disc_has_its_area_and_contour() {
    disc::<f64>();
    disc::<f32>();
}

fn disc<T: Precision>() {
    let (centre, radius) = ([0.03, 1.96], 0.5);
    let mut last = f64::INFINITY;
    for n in [40, 80, 160] {
        let g = plane([n, 2 * n], [2.0, 2.0]);
        let f = |p: Vector| {
            let d: [f64; 2] = std::array::from_fn(|a| p[a] - centre[a] - 2.0 * ((p[a] - centre[a]) / 2.0).round());
            [(1.5 - d[0].hypot(d[1]) / radius).max(0.0), 0.0, 0.0]
        };
        let o = run(sampled::<T>(g.clone(), VELOCITY, f), &request(&["d: speed > 0.5"]));
        let row = o.only(0);
        near(number(row, Col::Area), PI * radius * radius, 2.0 / n as f64, "area");
        near(number(row, Col::Extent1), radius * 3f64.sqrt(), 2.0 / n as f64, "extent");
        let error = (number(row, Col::Perimeter) / (TAU * radius) - 1.0).abs();
        assert!(error < last / 3.0, "{n}: {error} after {last}");
        last = error;
        let mesh = o.mesh(0, 1);
        assert!(mesh.triangles.is_empty());
        assert_eq!(mesh.edges.len(), mesh.positions.len(), "a closed line");
        for (p, normal) in mesh.positions.iter().zip(&mesh.normals) {
            let d: [f64; 2] = std::array::from_fn(|a| {
                let d = f64::from(p[a]) - centre[a];
                d - 2.0 * (d / 2.0).round()
            });
            let r = d[0].hypot(d[1]);
            near(r, radius, 2.0 / (n * n) as f64, "vertex");
            assert!((d[0] * f64::from(normal[0]) + d[1] * f64::from(normal[1])) / r > 0.99, "normals point outwards");
        }
        assert!(mesh.positions.iter().all(|p| p[2] == 0.0));
    }
    assert!(last < 1e-4, "{last}");
}

/// A ring has Euler number 0, a stripe closes on itself, a cut disc is open; four and eight neighbours differ at a corner.
#[test]
fn holes_stripes_cuts_and_corners() {
    let g = plane([60, 60], [6.0, 6.0]);
    let of = |g: &Grid, connectivity, f: &dyn Fn(Vector) -> f64| {
        run(sampled::<f64>(g.clone(), VELOCITY, |p| [f(p), 0.0, 0.0]), &Request { connectivity, ..request(&["f: speed > 1"]) })
    };
    use ropewalk::model::request::Connectivity::{Six, TwentySix};
    let ring = of(&g, TwentySix, &|p| (2.0 - ((p[0] - 3.0).hypot(p[1] - 3.0) - 1.5).abs() / 0.4).max(0.0));
    assert_eq!((number(ring.only(0), Col::Euler), text(ring.only(0), Col::Wraps)), (0.0, ""));
    let stripe = of(&g, TwentySix, &|p| (2.0 - (p[1] - 2.0).abs() / 0.5).max(0.0));
    let row = stripe.only(0);
    assert_eq!((text(row, Col::Wraps), text(row, Col::Class)), ("x", "sheet"));
    near(number(row, Col::Perimeter), 12.0, 1e-6, "two straight lines");
    missing(row, &[Col::Extent1, Col::CentroidX]);
    let open = g.clone().with_periodic([false, false, false]);
    let cut = of(&open, TwentySix, &|p| (2.0 - p[0].hypot(p[1] - 3.0)).max(0.0));
    assert_eq!(text(cut.only(0), Col::OpenFaces), "x-");
    missing(cut.only(0), &[Col::Perimeter, Col::Euler]);
    let corner = |p: Vector| {
        let at = [p[0], p[1]].map(|v| (v / 0.1).round() as i64);
        f64::from(u8::from([[20, 20], [21, 21]].contains(&at))) * 2.0
    };
    assert_eq!(of(&g, TwentySix, &corner).rows(0).len(), 1);
    assert_eq!(of(&g, Six, &corner).rows(0).len(), 2);
}
