//! Indicators and alignments made of two fields, of buoyancy, and without the mean field; planes; what is left out when not needed.

use ropewalk::model::request::{Indicator as I, Scheme};
use ropewalk::model::rows::Need;
use ropewalk::model::source::Fields;
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{abc, taylor_green};

use crate::common::{TAU, Vector, close, each_row, indicators, plan, positions, sampled, whole};

fn norm(v: Vector) -> f64 {
    v.iter().map(|c| c * c).sum::<f64>().sqrt()
}

fn dot(a: Vector, b: Vector) -> f64 {
    (0..3).map(|i| a[i] * b[i]).sum()
}

fn cross(a: Vector, b: Vector) -> Vector {
    [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]]
}

/// ∇× of Taylor–Green.
fn curl([x, y, z]: Vector) -> Vector {
    [-x.cos() * y.sin() * z.sin(), -x.sin() * y.cos() * z.sin(), 2.0 * x.sin() * y.sin() * z.cos()]
}

fn unit_abc(p: Vector) -> Vector {
    abc([1.0; 3], p)
}

/// u Taylor–Green, b ABC (whose curl it is itself).
#[test]
fn quantities_of_two_fields() {
    let grid = Grid::periodic([16, 12, 18], [TAU; 3]);
    let both = |p: Vector| {
        let (u, b) = (taylor_green(p), unit_abc(p));
        [u[0], u[1], u[2], b[0], b[1], b[2]]
    };
    let list = [I::ElsasserPlus, I::ElsasserMinus, I::CrossHelicity, I::CurrentHelicity, I::LorentzSin, I::LambSin, I::Lamb, I::Field];
    let found = indicators(&mut sampled::<f64, 6>(&grid, Fields::BOTH, both), Scheme::Spectral, &list);
    for (i, p) in positions(&grid).into_iter().enumerate() {
        let (u, w, b) = (taylor_green(p), curl(p), unit_abc(p));
        let plus: Vector = std::array::from_fn(|k| w[k] + b[k]);
        let minus: Vector = std::array::from_fn(|k| w[k] - b[k]);
        let lamb = norm(cross(u, w));
        // u·ω = 0, so that the sine is 1 wherever both are there; by round-off alone it is anything.
        let there = norm(u) > 1e-9 && norm(w) > 1e-9;
        let sine = if there { 1.0 } else { found[5][i] };
        let wanted = [norm(plus), norm(minus), dot(u, b), dot(b, b), 0.0, sine, lamb, norm(b)];
        for (k, w) in wanted.into_iter().enumerate() {
            // j ∥ b, and where b vanishes its direction is round-off.
            let allowed = if list[k] == I::LorentzSin && norm(b) < 1e-9 { 1.0 } else { 1e-12 };
            assert!((found[k][i] - w).abs() < allowed, "{:?} at {p:?}: {}, wanted {w}", list[k], found[k][i]);
        }
        assert!((0.0..=1.0).contains(&found[5][i]));
    }
}

/// b = m + ABC has j = ABC, so that without m they are parallel.
#[test]
fn the_mean_field_is_left_out_where_it_is_known() {
    let grid = Grid::periodic([12; 3], [TAU; 3]);
    let mean = [2.0, -1.0, 5.0];
    let both = |p: Vector| {
        let (u, b) = (taylor_green(p), unit_abc(p));
        [u[0], u[1], u[2], b[0] + mean[0], b[1] + mean[1], b[2] + mean[2]]
    };
    let mut source = sampled::<f64, 6>(&grid, Fields::BOTH, both);
    let need = Need { alignment: true, ..Need::default() };
    let mut with = plan(Scheme::Spectral, &[]);
    with.mean_field = Some(mean);
    let jb = whole(&mut source, &with, need, |r| &r.cos_jb_fluct);
    let ub = whole(&mut source, &with, need, |r| &r.cos_ub_fluct);
    let force = whole(&mut source, &with, need, |r| &r.lorentz2_fluct);
    let product = whole(&mut source, &with, need, |r| &r.j2b2_fluct);
    let plain = whole(&mut source, &with, need, |r| &r.cos_jb);
    for (i, p) in positions(&grid).into_iter().enumerate() {
        let (u, b) = (taylor_green(p), unit_abc(p));
        let total: Vector = std::array::from_fn(|k| b[k] + mean[k]);
        if norm(b) > 1e-6 {
            assert!((jb[i] - 1.0).abs() < 1e-12 && (plain[i] - dot(b, total) / norm(b) / norm(total)).abs() < 1e-12);
        }
        if norm(b) > 1e-6 && norm(u) > 1e-6 {
            assert!((ub[i] - dot(u, b) / norm(u) / norm(b)).abs() < 1e-10);
        }
        assert!(force[i] < 1e-22 && (product[i] - dot(b, b).powi(2)).abs() < 1e-10);
    }
    each_row(&mut source, &plan(Scheme::Spectral, &[]), need, 4, |_, _, r| {
        assert!(r.cos_jb_fluct.is_empty() && r.cos_ub_fluct.is_empty() && r.lorentz2_fluct.is_empty() && r.j2b2_fluct.is_empty());
        assert_eq!((r.cos_jb.len(), r.cos_ub.len()), (12, 12));
    });
}

/// θ = sin x cos 2y + ½ sin z with and without other fields before it.
#[test]
fn buoyancy_is_the_last_component() {
    let theta = |[x, y, z]: Vector| x.sin() * (2.0 * y).cos() + 0.5 * z.sin();
    let list = [I::Buoyancy, I::BuoyancyGradient];
    let grid = Grid::periodic([12, 16, 10], [TAU; 3]);
    let (mut values, mut slopes) = (Vec::new(), Vec::new());
    for p @ [x, y, z] in positions(&grid) {
        values.push(theta(p));
        slopes.push(norm([x.cos() * (2.0 * y).cos(), -2.0 * x.sin() * (2.0 * y).sin(), 0.5 * z.cos()]));
    }
    let alone = Fields { buoyancy: true, ..Fields::default() };
    let with_u = Fields { buoyancy: true, ..Fields::VELOCITY };
    let with_all = Fields { buoyancy: true, ..Fields::BOTH };
    let one = indicators(&mut sampled::<f64, 1>(&grid, alone, |p| [theta(p)]), Scheme::Spectral, &list);
    let four = indicators(&mut sampled::<f64, 4>(&grid, with_u, |p| [1.0, 2.0, p[0], theta(p)]), Scheme::Spectral, &list);
    let seven = [3.0, -2.0, 1.0, 5.0, 6.0, 7.0];
    let all = |p: Vector| std::array::from_fn::<f64, 7, _>(|k| if k == 6 { theta(p) } else { seven[k] });
    let seven = indicators(&mut sampled::<f64, 7>(&grid, with_all, all), Scheme::Spectral, &list);
    for found in [one, four, seven] {
        close(&found[0], &values, 0.0, "buoyancy");
        close(&found[1], &slopes, 1e-12, "its gradient");
    }
}

/// A plane snapshot: nothing changes along z, ω = (∂y w, −∂x w, ∂x v − ∂y u).
#[test]
fn planes_have_no_derivative_across() {
    for scheme in [Scheme::Spectral, Scheme::Fd8] {
        let grid = Grid::periodic([32, 40, 1], [TAU, TAU, 3.0]);
        let flow = |[x, y, _]: Vector| [y.cos(), x.sin(), (x + y).sin()];
        let mut source = sampled::<f64, 3>(&grid, Fields::VELOCITY, flow);
        let need = Need { strain: true, divergence: true, truncation: true, vectors: true, ..Need::default() };
        let [wx, wy, wz] = [0, 1, 2].map(|c| whole(&mut source, &plan(scheme, &[]), need, |r| &r.w[c]));
        let divergence = whole(&mut source, &plan(scheme, &[]), need, |r| &r.div_u);
        for (i, [x, y, _]) in positions(&grid).into_iter().enumerate() {
            let c = (x + y).cos();
            for (found, wanted) in [(wx[i], c), (wy[i], -c), (wz[i], x.cos() + y.sin()), (divergence[i], 0.0)] {
                assert!((found - wanted).abs() < 1e-8, "{scheme:?}: {found}, wanted {wanted}");
            }
        }
    }
}

#[test]
fn extras_are_the_indicators_they_name() {
    let grid = Grid::periodic([12; 3], [TAU; 3]);
    let mut source = sampled::<f32, 3>(&grid, Fields::VELOCITY, unit_abc);
    let list = [I::Q, I::Lambda2, I::RelativeHelicity, I::Lamb, I::Vorticity, I::Q];
    let mut with = plan(Scheme::Opt, &[I::Q, I::Vorticity]);
    with.extras = list.to_vec();
    for alignment in [false, true] {
        let mut found = vec![Vec::new(); list.len()];
        each_row(&mut source, &with, Need { extras: true, alignment, ..Need::default() }, 5, |_, _, rows| {
            assert_eq!(rows.extras.len(), list.len());
            for (o, r) in found.iter_mut().zip(&rows.extras) {
                o.extend(r.iter().map(|&v| f64::from(v)));
            }
        });
        let alone = indicators(&mut source, Scheme::Opt, &list);
        assert!(found == alone, "alignment {alignment}");
    }
}

#[test]
fn only_what_is_needed_is_derived() {
    let grid = Grid::periodic([12; 3], [TAU; 3]);
    let both = |p: Vector| {
        let b = unit_abc(p);
        [p[0].sin(), 1.0, 2.0, b[0], b[1], b[2]]
    };
    let mut source = sampled::<f64, 6>(&grid, Fields::BOTH, both);
    for scheme in [Scheme::Fd8, Scheme::Spectral] {
        each_row(&mut source, &plan(scheme, &[I::Current]), Need::default(), 6, |_, _, r| {
            assert_eq!((r.j2.len(), r.indicators[0].len()), (12, 12));
            assert!(r.w2.is_empty() && r.w[0].is_empty() && r.u[0].is_empty() && r.strain2.is_empty() && r.cos_uw.is_empty());
        });
        each_row(&mut source, &plan(scheme, &[I::Speed]), Need::default(), 6, |_, _, r| {
            assert_eq!(r.u[0].len(), 12);
            assert!(r.w2.is_empty() && r.j2.is_empty() && r.b[0].is_empty());
        });
        each_row(&mut source, &plan(scheme, &[I::Speed]), Need { vectors: true, ..Need::default() }, 6, |_, _, r| {
            assert_eq!([r.u[0].len(), r.w[2].len(), r.w2.len(), r.b[1].len(), r.j[0].len(), r.j2.len()], [12; 6]);
        });
    }
}
