//! Criteria for vortices against the exact values of Taylor–Green, ABC, Lamb–Oseen, Burgers, solid rotation, shear and expansion.
//!
//! Values at points: A = ∇u of each flow, its eigenvalues and those of S² + W² by algebra.

use ropewalk::base::real::Real;
use ropewalk::model::request::{Indicator as I, Scheme};
use ropewalk::model::source::Fields;
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{abc, burgers, lamb_oseen, shear, solid_rotation, taylor_green};

use crate::common::{TAU, Vector, close, indicators, positions, sampled};

const CRITERIA: [I; 6] = [I::Vorticity, I::Q, I::Delta, I::Lambda2, I::Swirling, I::PressureLaplacian];

fn criteria<T: Real>(grid: &Grid, fields: Fields, scheme: Scheme, u: impl Fn(Vector) -> Vector) -> Vec<Vec<f64>> {
    indicators(&mut sampled::<T, 3>(grid, fields, u), scheme, &CRITERIA)
}

/// Taylor–Green: R = 0 everywhere, so the eigenvalues are 0 and ±√(−Q), and Δ = (Q/3)³; its pressure
/// p = (cos 2x + cos 2y)(cos 2z + 2)/16 has ∇²p = 2Q.
fn taylor_green_everywhere<T: Real>(tolerance: f64) {
    let grid = Grid::periodic([24, 16, 20], [TAU; 3]);
    let found = criteria::<T>(&grid, Fields::VELOCITY, Scheme::Spectral, taylor_green);
    let (mut q, mut delta, mut laplacian) = (Vec::new(), Vec::new(), Vec::new());
    for (i, [x, y, z]) in positions(&grid).into_iter().enumerate() {
        let here = -0.5 * ((2.0 * x).cos() + (2.0 * y).cos()) * z.cos().powi(2);
        q.push(here);
        delta.push((here / 3.0).powi(3));
        let (c, d) = ((2.0 * x).cos() + (2.0 * y).cos(), (2.0 * z).cos());
        laplacian.push((-4.0 * c * (d + 2.0) - 4.0 * c * d) / 16.0);
        // A root: half the digits where Q vanishes.
        assert!((found[4][i] - here.max(0.0).sqrt()).abs() < 4.0 * tolerance.sqrt(), "swirling: {} {here}", found[4][i]);
    }
    close(&found[1], &q, tolerance, "Q");
    close(&found[2], &delta, tolerance, "delta");
    close(&found[5], &laplacian, 2.0 * tolerance, "laplacian of pressure");
    // (π/2, π/2, 0), where |ω| = 2, and the origin.
    let peak = (4 * 24) + 6;
    for (k, wanted) in [2.0, 1.0, 1.0 / 27.0, -1.0, 1.0].into_iter().enumerate() {
        assert!((found[k][peak] - wanted).abs() < 4.0 * tolerance, "{:?}: {}", CRITERIA[k], found[k][peak]);
    }
    for (k, wanted) in [0.0, -1.0, -1.0 / 27.0, 1.0, 0.0].into_iter().enumerate() {
        assert!((found[k][0] - wanted).abs() < 4.0 * tolerance.sqrt(), "{:?}: {}", CRITERIA[k], found[k][0]);
    }
}

#[test]
fn taylor_green_in_both_precisions() {
    taylor_green_everywhere::<f64>(1e-13);
    taylor_green_everywhere::<f32>(4e-6);
}

/// ABC with A = B = C = 1: Q = cos x sin y + cos z sin x + cos y sin z, R = sin x sin y sin z − cos x cos y cos z.
fn abc_everywhere<T: Real>(tolerance: f64) {
    let grid = Grid::periodic([24; 3], [TAU; 3]);
    let found = criteria::<T>(&grid, Fields::VELOCITY, Scheme::Spectral, |p| abc([1.0; 3], p));
    let (mut q, mut delta) = (Vec::new(), Vec::new());
    for [x, y, z] in positions(&grid) {
        let here = x.cos() * y.sin() + z.cos() * x.sin() + y.cos() * z.sin();
        let r = x.sin() * y.sin() * z.sin() - x.cos() * y.cos() * z.cos();
        q.push(here);
        delta.push((here / 3.0).powi(3) + (r / 2.0).powi(2));
    }
    close(&found[1], &q, tolerance, "Q");
    close(&found[2], &delta, tolerance, "delta");
    let at = |k: usize| (k * 24 + k) * 24 + k;
    // |ω|, Q, λ2, λ_ci at (π/4, π/4, π/4), the origin, (3π/4, 3π/4, 3π/4).
    let points = [(3, [6f64.sqrt(), 1.5, -1.5, 1.5f64.sqrt()]), (0, [3f64.sqrt(), 0.0, -0.5, 0.75f64.sqrt()]), (9, [0.0, -1.5, 0.5, 0.0])];
    for (k, wanted) in points {
        for (i, w) in [0, 1, 3, 4].into_iter().zip(wanted) {
            // At the last point Δ is 0 as well: a double eigenvalue, whose imaginary part keeps half of the digits.
            let allowed = if k == 9 && i == 4 { 4.0 * tolerance.sqrt() } else { 4.0 * tolerance };
            assert!((found[i][at(k)] - w).abs() < allowed, "{:?} at {k}: {}, wanted {w}", CRITERIA[i], found[i][at(k)]);
        }
    }
}

#[test]
fn abc_in_both_precisions() {
    abc_everywhere::<f64>(2e-13);
    abc_everywhere::<f32>(8e-6);
}

fn open(n: usize, h: f64) -> Grid {
    let half = (n / 2) as f64 * h;
    Grid::periodic([n; 3], [n as f64 * h; 3]).with_periodic([false; 3]).with_origin([-half; 3])
}

/// Solid rotation Ω: |ω| = 2Ω, Q = Ω², λ2 = −Ω², λ_ci = Ω. Plane shear: |ω| = γ, all criteria 0. Linear flows are exact in every
/// scheme, at open faces and on stretched axes too.
#[test]
fn rotation_is_a_vortex_and_shear_is_none() {
    let (rate, n) = (1.7f64, 11);
    let stretched = open(n, 0.1).with_positions(1, (0..n).map(|i| (0.2 * i as f64).sinh()).collect());
    for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8, Scheme::Opt, Scheme::Spectral] {
        for grid in [&open(n, 0.1), &stretched] {
            let found = criteria::<f64>(grid, Fields::VELOCITY, scheme, |p| solid_rotation(rate, p));
            let q = rate * rate;
            for (k, wanted) in [2.0 * rate, q, (q / 3.0).powi(3), -q, rate, 2.0 * q].into_iter().enumerate() {
                close(&found[k], &vec![wanted; n * n * n], 1e-11, &format!("{scheme:?} {:?} of rotation", CRITERIA[k]));
            }
            let found = criteria::<f64>(grid, Fields::VELOCITY, scheme, |p| shear(rate, p));
            for (k, wanted) in [rate, 0.0, 0.0, 0.0, 0.0, 0.0].into_iter().enumerate() {
                // The eigenvalues of a shear are a triple root: a third of the digits.
                let allowed = if CRITERIA[k] == I::Swirling { 2e-4 } else { 1e-11 };
                close(&found[k], &vec![wanted; n * n * n], allowed, &format!("{scheme:?} {:?} of shear", CRITERIA[k]));
            }
        }
    }
}

/// A plane vortex u_θ = v(r) has Q = v v′/r, λ2 = −v v′/r and λ_ci² = v v′/r where positive, so that all of them end at the radius of
/// the largest v, 1.12091 r_c for Lamb–Oseen; on the axis Q = ω0²/4.
#[test]
fn all_criteria_end_at_the_radius_of_the_fastest_swirl() {
    let (n, h, peak) = (41, 0.08, 2.0);
    let grid = open(n, h);
    let found = criteria::<f64>(&grid, Fields::VELOCITY, Scheme::Fd8, |p| lamb_oseen(peak, 1.0, p));
    let middle = (n / 2 * n + n / 2) * n + n / 2;
    for (k, wanted) in [peak, peak * peak / 4.0, (peak * peak / 12.0).powi(3), -peak * peak / 4.0, peak / 2.0].into_iter().enumerate() {
        assert!((found[k][middle] - wanted).abs() < 1e-7, "{:?}: {}", CRITERIA[k], found[k][middle]);
    }
    // Along x from the axis: a quantity that crosses zero linearly.
    let crossing = |f: &dyn Fn(usize) -> f64| {
        let i = (0..n / 2).find(|&i| f(i) * f(i + 1) <= 0.0).unwrap();
        h * (i as f64 + f(i) / (f(i) - f(i + 1)))
    };
    let radii = [crossing(&|i| found[1][middle + i]), crossing(&|i| found[2][middle + i].cbrt()), crossing(&|i| found[3][middle + i])];
    for r in radii {
        assert!((r - 1.12091).abs() < 2e-3, "{radii:?}");
    }
    let ends = h * (0..n / 2).find(|&i| found[4][middle + i] < 1e-6).unwrap() as f64;
    assert!((1.12091..1.12091 + h).contains(&ends), "swirling ends at {ends}");
    for (i, p) in positions(&grid).into_iter().enumerate() {
        let r = p[0].hypot(p[1]);
        if r > 0.0 {
            let (v, e) = (0.5 * peak * -(-r * r).exp_m1() / r, (-r * r).exp());
            let q = v * (peak * e - v / r) / r;
            assert!((found[1][i] - q).abs() < 1e-4 && (found[3][i] + q).abs() < 1e-4, "{p:?}: {} {} {q}", found[1][i], found[3][i]);
        }
    }
}

/// Burgers vortex: on the axis Q = ω0²/4 − ¾α², R = −α(α² + ω0²)/4, λ2 = (α² − ω0²)/4, λ_ci = ω0/2,
/// Δ = ω0²(ω0² + 9α²)²/1728; off it, with s = |v′ − v/r|/2, λ2 is the median of α², α²/4 − v v′/r ± αs.
#[test]
fn burgers_vortex() {
    let (n, h, w, a) = (33, 0.1, 2.0f64, 0.6f64);
    let grid = open(n, h);
    let found = criteria::<f64>(&grid, Fields::VELOCITY, Scheme::Fd8, |p| burgers(w, 1.0, a, p));
    let middle = (n / 2 * n + n / 2) * n + n / 2;
    let delta = w * w * (w * w + 9.0 * a * a).powi(2) / 1728.0;
    let wanted = [w, 0.25 * w * w - 0.75 * a * a, delta, 0.25 * (a * a - w * w), 0.5 * w];
    for (k, wanted) in wanted.into_iter().enumerate() {
        assert!((found[k][middle] - wanted).abs() < 1e-6, "{:?}: {}, wanted {wanted}", CRITERIA[k], found[k][middle]);
    }
    for (i, p) in positions(&grid).into_iter().enumerate() {
        let r = p[0].hypot(p[1]);
        if r > 0.0 {
            let v = 0.5 * w * -(-r * r).exp_m1() / r;
            let slope = w * (-r * r).exp() - v / r;
            let (centre, s) = (0.25 * a * a - v * slope / r, 0.5 * (slope - v / r).abs());
            let mut three = [a * a, centre + a * s, centre - a * s];
            three.sort_by(f64::total_cmp);
            assert!((found[3][i] - three[1]).abs() < 4e-4, "{p:?}: {}, wanted {}", found[3][i], three[1]);
        }
    }
}

/// Rotation Ω with expansion c: A = c I + Ω J. Without its trace all criteria are those of the rotation; with it Q = Ω² − 3c²/2 and
/// λ2 = c² − Ω². Δ and λ_ci, made of eigenvalues' differences, are the same in any case; S:S = 3c² keeps the expansion.
#[test]
fn expansion_counts_only_where_flow_is_solenoidal() {
    let (rate, c, n) = (1.3f64, 0.4, 9);
    let grid = open(n, 0.2);
    let flow = |p: Vector| {
        let u = solid_rotation(rate, p);
        std::array::from_fn(|a| u[a] + c * p[a])
    };
    let q = rate * rate;
    for compressible in [false, true] {
        let fields = Fields { compressible, ..Fields::VELOCITY };
        let found = criteria::<f64>(&grid, fields, Scheme::Fd6, flow);
        let (wanted_q, lambda) = if compressible { (q, -q) } else { (q - 1.5 * c * c, c * c - q) };
        for (k, wanted) in [2.0 * rate, wanted_q, (q / 3.0).powi(3), lambda, rate, 2.0 * wanted_q].into_iter().enumerate() {
            close(&found[k], &vec![wanted; n * n * n], 1e-11, &format!("{:?}, compressible {compressible}", CRITERIA[k]));
        }
        let strain = indicators(&mut sampled::<f64, 3>(&grid, fields, flow), Scheme::Fd6, &[I::Strain]);
        close(&strain[0], &vec![3f64.sqrt() * c; n * n * n], 1e-11, "strain");
    }
}
