//! Taylor–Green and Beltrami flows: statistics, shares, components, convergence of the differences, no bias of orientation.

use std::f64::consts::{PI, TAU};

use crate::common::{Outcome, Precision, VELOCITY, near, number, order, request, run, sampled};
use ropewalk::model::columns::{COLUMNS, Col, Stage, Unit, Value};
use ropewalk::model::source::{AnySource, FormulaSource};
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{abc, taylor_green};

/// A periodic cube of edge 2π whose samples lie `offset` cells off the origin.
fn cube(n: usize, offset: f64) -> Grid {
    Grid::periodic([n; 3], [TAU; 3]).with_origin([offset * TAU / n as f64; 3])
}

fn taylor_green_on<T: Precision>(grid: Grid, families: &[&str]) -> Outcome {
    run(sampled::<T>(grid.clone(), VELOCITY, taylor_green), &request(families))
}

fn rms_vorticity(o: &Outcome) -> f64 {
    let s = &o.analysis.survey;
    (s.velocity.curl2 / s.cells as f64).sqrt()
}

/// Box means of products of sines and cosines (Taylor & Green 1937, Proc. R. Soc. Lond. A 158, 499, for the flow): ⟨|ω|²⟩ = 3/4, ⟨S:S⟩ = 3/8, u·ω = 0, ⟨|u×ω|²⟩/⟨u²⟩⟨ω²⟩ = 23/24.
fn taylor_green_statistics<T: Precision>(tolerance: f64) {
    let o = taylor_green_on::<T>(cube(48, 0.3), &["w: vorticity > 1.5 rms"]);
    near(rms_vorticity(&o), 0.75f64.sqrt(), tolerance, "rms");
    let n = o.analysis.survey.cells as f64;
    near(o.analysis.survey.velocity.strain2 / n, 0.375, 2.0 * tolerance, "S:S");
    let a = &o.analysis.alignment;
    near(a.lamb2 / a.u2w2, 1.0, tolerance, "lamb_sin2");
    let u2: f64 = o.analysis.scan.components.iter().map(|c| c.square_sum).sum::<f64>() / n;
    near(a.lamb2 / n / (u2 * o.analysis.survey.velocity.curl2 / n), 23.0 / 24.0, 4.0 * tolerance, "ratio of means");
    near(o.family(0).level, 1.5 * 0.75f64.sqrt(), tolerance, "level");
    for row in o.rows(0) {
        near(number(row, Col::LambSin2), 1.0, tolerance, "lamb_sin2 of an object");
        assert!(number(row, Col::AbsCosUVorticity) < 2.0 * tolerance.sqrt().min(1e-6));
    }
    let d = o.analysis.divergence[0];
    assert!(d.ratio.unwrap() <= d.explained.unwrap());
}

#[test]
fn taylor_green_has_its_statistics() {
    // f64: truncation of order 8, (kh)^8/630 with kh = 2π/48, is 1.4e-10. f32: round-off of a difference, a few ε/kh.
    taylor_green_statistics::<f64>(2e-10);
    taylor_green_statistics::<f32>(5e-6);
}

/// The effective wavenumber of the central difference of order 8 misses k by k (kh)^8/630 at leading order (Taylor series).
#[test]
fn curl_converges_with_order_eight() {
    let error = |n: usize| (rms_vorticity(&taylor_green_on::<f64>(cube(n, 0.0), &["w: vorticity > 1"])) / 0.75f64.sqrt() - 1.0).abs();
    let e = [12, 18, 27].map(error);
    for pair in e.windows(2) {
        let got = order(pair[0], pair[1], 1.5);
        assert!((7.85..8.02).contains(&got), "order {got} from {e:?}");
    }
    near(e[2], (TAU / 27.0).powi(8) / 630.0, 0.05, "leading error");
}

/// |ω| > τω′ holds these shares of volume and enstrophy: integrals over the closed form of |ω|², computed apart from this program.
#[test]
fn taylor_green_shares_of_volume_and_enstrophy() {
    // Off the flow's planes of symmetry, which would make most samples repeat each other.
    let n = [90, 96, 100];
    let grid = Grid::periodic(n, [TAU; 3]).with_origin([0.13, 0.31, 0.43].map(|f| f * TAU / 96.0));
    let o = taylor_green_on::<f32>(grid.clone(), &["a: enstrophy > 1 mean", "b: enstrophy > 2.25 mean", "c: enstrophy > 4 mean"]);
    for (k, (volume, share)) in [(0.3462, 0.6723), (0.1013, 0.3323), (0.0203, 0.0913)].into_iter().enumerate() {
        let f = o.family(k);
        assert!((f.volume_fraction - volume).abs() < 1e-3, "{k}: {}", f.volume_fraction);
        let held: f64 = f.rows.iter().map(|r| number(r, Col::IndicatorMean) * number(r, Col::Cells)).sum();
        let got = held / o.analysis.survey.indicators[k].sum;
        assert!((got - share).abs() < 1e-3, "{k}: {got}");
    }
}

/// 8 components at τ = 1.5 and 2 when faces wrap (around the maxima at x, y = π/2, 3π/2 and z = 0, π), 12 when they do not. The
/// count is the same for every resolution below, because the four objects around z = 0 are cut in two and no other reaches a face.
#[test]
fn taylor_green_components_with_and_without_wrapping() {
    for (n, offset) in [(32, 0.0), (32, 0.5), (64, 0.5), (48, 0.31)] {
        let o = taylor_green_on::<f32>(cube(n, offset), &["a: vorticity > 1.5 rms", "b: vorticity > 2 rms"]);
        assert_eq!((o.rows(0).len(), o.rows(1).len()), (8, 8), "{n} {offset}");
    }
    for n in [32, 48, 64] {
        let o = taylor_green_on::<f32>(cube(n, 0.5).with_periodic([false; 3]), &["b: vorticity > 2 rms"]);
        assert_eq!(o.rows(0).len(), 12, "{n}");
        let cut = o.rows(0).iter().filter(|r| ["z-", "z+"].contains(&crate::common::text(r, Col::OpenFaces))).count();
        assert_eq!(cut, 8, "{n}");
    }
}

/// The whole count on the grid the reference names; planes come from the formula itself.
#[test]
#[ignore = "256^3: seconds on a fast machine"]
fn taylor_green_components_on_the_reference_grid() {
    let grid = cube(256, 0.5);
    for (periodic, want) in [(true, 8), (false, 12)] {
        let source = FormulaSource::new(grid.clone().with_periodic([periodic; 3]), VELOCITY, |p| {
            let [u, v, w] = taylor_green(p);
            [u, v, w, 0.0, 0.0, 0.0]
        });
        let o = run(AnySource::F32(Box::new(source)), &request(&["b: vorticity > 2 rms"]));
        assert_eq!(o.rows(0).len(), want);
    }
}

/// From Q = −½ (cos 2x + cos 2y) cos² z: Q = 1 at the eight points where |ω| = 2, (±π/2, ±π/2, 0 or π).
#[test]
fn taylor_green_q_peaks_at_one() {
    let o = taylor_green_on::<f64>(cube(64, 0.0), &["q: q > 0.5", "w: vorticity > 1.9"]);
    for (k, peak) in [(0, 1.0), (1, 2.0)] {
        assert_eq!(o.rows(k).len(), 8);
        for r in o.rows(k) {
            near(number(r, Col::Peak), peak, 1e-10, "peak");
            let p = [Col::PeakX, Col::PeakY, Col::PeakZ].map(|c| number(r, c) / (PI / 2.0));
            assert!((0..2).all(|a| (p[a] - 1.0).abs() < 1e-12 || (p[a] - 3.0).abs() < 1e-12), "{p:?}");
            assert!(p[2].abs() < 1e-12 || (p[2] - 2.0).abs() < 1e-12, "{p:?}");
        }
    }
}

/// Numeric columns that may not depend on where an object lies or which way it is turned.
fn intrinsic(c: usize) -> bool {
    let n = COLUMNS[c].name;
    let placed = ["id", "centroid_", "axis_", "peak_"].iter().any(|p| n.starts_with(p));
    // The cosine of u and ω is round-off here (u·ω = 0), checked on its own.
    let noise = ["cos_u_vorticity", "abs_cos_u_vorticity"].contains(&n);
    !placed && !noise && COLUMNS[c].unit != Unit::Text
}

/// The eight objects are images of each other under the flow's symmetries (shifts by π with reflections), so a method without a
/// bias of orientation gives them the same row.
fn eight_equal_objects<T: Precision>(n: usize, offset: f64, level: f64, tolerance: f64) {
    let request = ropewalk::model::request::Request {
        viscosity: Some(0.01),
        ..request(&[&format!("w: vorticity > {level}"), &format!("q: q > {}", level / 2.9)])
    };
    let o = run(sampled::<T>(cube(n, offset), VELOCITY, taylor_green), &request);
    for k in 0..2 {
        let rows = o.rows(k);
        assert_eq!(rows.len(), 8);
        let mut compared = 0;
        for c in (0..COLUMNS.len()).filter(|&c| intrinsic(c)) {
            let first = &rows[0].values()[c];
            for r in &rows[1..] {
                match (first.as_f64(), r.values()[c].as_f64()) {
                    (Some(a), Some(b)) => {
                        assert!((a - b).abs() <= tolerance * a.abs(), "{} on {n} at {offset}: {a} {b}", COLUMNS[c].name);
                        compared += usize::from(COLUMNS[c].stage != Stage::Run);
                    }
                    _ if matches!(first, Value::Counts(_)) => {}
                    (a, b) => assert_eq!((a, b), (None, None), "{}", COLUMNS[c].name),
                }
            }
        }
        // cells, volume, 6 extents, peak, mean, dissipation, share, area, C, Euler, 6 shapefinders, P, F, aligned, lamb_sin2.
        assert_eq!(compared, 7 * 25, "columns compared");
        for r in rows {
            assert!(number(r, Col::AbsCosUVorticity) < tolerance, "{}", number(r, Col::AbsCosUVorticity));
        }
    }
}

#[test]
fn eight_equal_objects_come_out_equal_in_every_column() {
    for (n, offset) in [(32, 0.0), (32, 0.5), (48, 0.0), (48, 0.5)] {
        for level in [1.3, 1.73] {
            eight_equal_objects::<f64>(n, offset, level, 1e-9);
        }
    }
    eight_equal_objects::<f32>(32, 0.5, 1.73, 2e-5);
}

/// The ABC flow has ω = u (Dombre et al. 1986, J. Fluid Mech. 167, 353). On equal spacing every mode has the same effective wavenumber, so the numerical curl is parallel
/// to u as well and what is left is round-off.
fn beltrami<T: Precision>(tolerance: f64) {
    let families = ["w: vorticity > 1.2 rms", "h: helicity > 4", "slow: speed < 0.5 rms"];
    let o = run(sampled::<T>(cube(24, 0.37), VELOCITY, |p| abc([1.0, 1.0, 1.0], p)), &request(&families));
    let a = &o.analysis.alignment;
    assert!(a.lamb2 / a.u2w2 < tolerance * tolerance, "{}", a.lamb2 / a.u2w2);
    assert!((a.cosines[0].mean().unwrap() - 1.0).abs() < tolerance);
    assert_eq!(a.cosines[0].bins[19], 24 * 24 * 24);
    for k in 0..3 {
        assert!(!o.rows(k).is_empty());
        for r in o.rows(k) {
            assert!((number(r, Col::CosUVorticity) - 1.0).abs() < tolerance, "{}", number(r, Col::CosUVorticity));
            assert_eq!(number(r, Col::AlignedUVorticity), 1.0);
            // A weighted mean over a slow region keeps the absolute round-off of the gradient: up to (1 / 0.1)² more.
            assert!(number(r, Col::LambSin2) < 100.0 * tolerance * tolerance, "{}", number(r, Col::LambSin2));
        }
    }
}

#[test]
fn beltrami_flow_is_aligned_to_round_off() {
    // Differences divide round-off by h = 2π/24: ε/h is 8.5e-16 in f64, 4.6e-7 in f32.
    beltrami::<f64>(4e-15);
    beltrami::<f32>(2e-6);
}

/// On unequal spacing the three modes have different truncation errors of order 8, and sin² is of order 16.
#[test]
fn misalignment_of_beltrami_flow_converges_with_order_sixteen() {
    let sin2 = |k: usize| {
        let grid = Grid::periodic([2 * k, 3 * k, 4 * k], [TAU; 3]);
        let o = run(sampled::<f64>(grid.clone(), VELOCITY, |p| abc([1.0, 0.7, 1.3], p)), &request(&["w: vorticity > 1.2 rms"]));
        o.analysis.alignment.lamb2 / o.analysis.alignment.u2w2
    };
    let e = [6, 8, 10].map(sin2);
    let orders = [order(e[0], e[1], 8.0 / 6.0), order(e[1], e[2], 10.0 / 8.0)];
    assert!(orders.iter().all(|o| (15.0..16.2).contains(o)), "{orders:?} from {e:?}");
}

/// From Q = cos x sin y + cos z sin x + cos y sin z: ⟨Q⟩ = 0, ⟨Q²⟩ = 3/4, largest 3/2, and Q > 0 in half the volume, as
/// Q(−x) = −Q(x); ⟨u²⟩ = 3.
#[test]
fn beltrami_flow_has_its_invariants() {
    let flow = |offset: f64, family: &str| run(sampled::<f64>(cube(48, offset), VELOCITY, |p| abc([1.0; 3], p)), &request(&[family]));
    let o = flow(0.0, "q: q > 1.4");
    let n = o.analysis.survey.cells as f64;
    near(o.analysis.survey.velocity.curl2 / n, 3.0, 4e-10, "enstrophy");
    let q = &o.analysis.survey.indicators[0];
    near(q.square_sum / n, 0.75, 6e-10, "Q squared");
    assert!((q.sum / n).abs() < 1e-14, "{}", q.sum / n);
    // The grid meets the points (π/4, π/4, π/4) and (3π/4, 3π/4, 3π/4) where Q is ±3/2.
    near(q.max, 1.5, 4e-10, "largest Q");
    near(q.min, -1.5, 4e-10, "smallest Q");
    // Off the grid's symmetries, so that no cell lies on the level.
    let half = flow(0.31, "half: q > 0").family(0).volume_fraction;
    assert!((half - 0.5).abs() < 1e-3, "{half}");
}
