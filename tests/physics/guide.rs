//! A mean magnetic field: its ratio, and the columns with it taken off; companions; given dissipation and Kolmogorov length.

use std::f64::consts::TAU;

use ropewalk::model::columns::{COLUMNS, Col};
use ropewalk::model::request::{Indicator, Request};
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{abc, taylor_green};

use super::common::*;

fn cube(n: usize) -> Grid {
    Grid::periodic([n; 3], [TAU; 3])
}

/// ABC fields with a shifted phase: ⟨|b|²⟩ = 3.
fn shaken(p: Vector) -> Vector {
    abc([1.0; 3], [p[0] + 0.4, p[1] - 0.9, p[2] + 0.2])
}

#[test]
fn columns_without_the_mean_are_those_of_the_fluctuations() {
    let families = ["j: current > 1 rms", "w: vorticity > 1 rms"];
    let with = |mean: Vector| {
        let b = move |p: Vector| std::array::from_fn(|a| shaken(p)[a] + mean[a]);
        run(sampled_both::<f64>(cube(24), taylor_green, b), &request(&families))
    };
    let (plain, guided) = (with([0.0; 3]), with([0.5, -1.0, 3.0]));
    let (_, ratio) = guided.analysis.guide_field.unwrap();
    near(ratio, (10.25f64 / 3.0).sqrt(), 1e-12, "|⟨b⟩|/b′");
    assert!(plain.analysis.guide_field.unwrap().1 < 1e-12);
    let pairs = [
        (Col::CosCurrentB, Col::CosCurrentBFluct),
        (Col::AbsCosCurrentB, Col::AbsCosCurrentBFluct),
        (Col::CosUB, Col::CosUBFluct),
        (Col::AbsCosUB, Col::AbsCosUBFluct),
        (Col::LorentzSin2, Col::LorentzSin2Fluct),
    ];
    for k in 0..2 {
        assert!(!plain.rows(k).is_empty());
        for (a, b) in plain.rows(k).iter().zip(guided.rows(k)) {
            assert_eq!(a.get(Col::Cells), b.get(Col::Cells));
            for (total, fluct) in pairs {
                assert!((number(a, total) - number(b, fluct)).abs() < 1e-9, "{}", COLUMNS[fluct as usize].name);
                assert!((number(b, total) - number(b, fluct)).abs() > 1e-3, "the mean changes {}", COLUMNS[total as usize].name);
                missing(a, &[fluct]);
            }
            assert!(has_flag(a, "no_guide") && !has_flag(b, "no_guide"));
        }
    }
}

/// Companions of an object: mean, smallest and largest over its cells; of the family's own indicator they repeat its columns.
#[test]
fn companions_are_means_and_extremes_over_the_object() {
    let companions = vec![Indicator::Vorticity, Indicator::Q, Indicator::RelativeHelicity];
    let families = ["w: vorticity > 1.2 rms", "low: vorticity < 0.5 rms"];
    let r = Request { companions, ..request(&families) };
    let o = run(sampled::<f64>(cube(24), VELOCITY, |p| abc([1.0; 3], p)), &r);
    for k in 0..2 {
        assert!(!o.rows(k).is_empty());
        for row in o.rows(k) {
            let extra: Vec<f64> = row.values()[COLUMNS.len()..].iter().map(|v| v.as_f64().unwrap()).collect();
            assert_eq!(extra.len(), 9);
            near(extra[0], number(row, Col::IndicatorMean), 1e-12, "mean");
            let peak = extra[if k == 0 { 2 } else { 1 }];
            near(peak, number(row, Col::Peak), 1e-12, "peak");
            assert!(extra[1] <= extra[0] && extra[0] <= extra[2]);
            assert!(extra[4] <= extra[3] && extra[3] <= extra[5]);
            // ω = u in an ABC flow: the cosine is 1, but for round-off where both vanish.
            assert!(k == 1 || extra[6..].iter().all(|c| (c - 1.0).abs() < 1e-9), "{extra:?}");
        }
    }
}

/// Every indicator can be put on a mesh; of the family's own it repeats the value `indicator`.
#[test]
fn mesh_values_are_the_indicators_at_the_vertices() {
    let r = Request {
        companions: vec![Indicator::Strain],
        mesh_values: vec![Indicator::Speed, Indicator::Q, Indicator::Strain, Indicator::Vorticity],
        ..request(&["w: vorticity > 1.4 rms"])
    };
    let o = run(sampled::<f64>(cube(32), VELOCITY, |p| abc([1.0; 3], p)), &r);
    let mesh = &o.meshes[0][0];
    // Companions are derived before further mesh values, and yet every value has its own name's place.
    let names = ropewalk::model::surface::SurfaceMesh::value_names(VELOCITY, &r.mesh_values);
    assert_eq!(names.len(), mesh.values.len());
    let of = |name: &str| &mesh.values[names.iter().position(|n| *n == name).unwrap()];
    for i in 0..mesh.positions.len() {
        let [x, y, z] = mesh.positions[i].map(f64::from);
        // Q of the ABC flow, cos x sin y + cos z sin x + cos y sin z, second order in the spacing between samples.
        let q = x.cos() * y.sin() + z.cos() * x.sin() + y.cos() * z.sin();
        assert!((f64::from(of("q")[i]) - q).abs() < 0.03, "{} {q}", of("q")[i]);
        assert!((of("vorticity")[i] - of("indicator")[i]).abs() < 1e-5);
        // Q = ¼ω² − ½ S:S, up to interpolation.
        let (w, s) = (f64::from(of("vorticity")[i]), f64::from(of("strain")[i]));
        assert!((0.25 * w * w - 0.5 * s * s - q).abs() < 0.05);
    }
}

/// Given ε and ν give (ν³/ε)^¼, a given length is taken as it is, and a given ε without ν its effective viscosity.
#[test]
fn stated_dissipation_and_length_are_used() {
    let source = || sampled::<f64>(cube(24), VELOCITY, taylor_green);
    let families = ["w: vorticity > 1.5 rms"];
    let stated = Request { dissipation: Some(0.02), viscosity: Some(1e-3), ..request(&families) };
    near(run(source(), &stated).analysis.kolmogorov_length.unwrap(), (1e-9f64 / 0.02).powf(0.25), 1e-12, "η");
    let length = Request { kolmogorov_length: Some(0.03), ..request(&families) };
    let o = run(source(), &length);
    let row = &o.rows(0)[0];
    near(number(row, Col::Extent1Eta), number(row, Col::Extent1) / 0.03, 1e-12, "extent in η");
    missing(row, &[Col::DissipationViscous]);
    // 2ν⟨S:S⟩ = ε with ⟨S:S⟩ = 3/8: the shares times the box total.
    let only = Request { dissipation: Some(0.02), ..request(&families) };
    let o = run(source(), &only);
    let row = &o.rows(0)[0];
    let total = 0.02 * TAU.powi(3);
    near(number(row, Col::DissipationViscous), number(row, Col::ViscousShare) * total, 1e-12, "share of the stated dissipation");
}
