//! Harris current sheets: a periodic pair across the box, single sheets tilted off the grid in an open box.

use crate::common::{
    BOTH, MAGNETIC, Outcome, Precision, Vector, has_flag, mean, missing, near, number, order, request, run, sampled, sampled_both, text,
};
use ropewalk::model::columns::{Col, Value};
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{Placement, harris, harris_pair};

const FIELD: f64 = 1.3;
/// Full width at half maximum of sech², 2 arcosh √2 (Harris 1962, Nuovo Cimento 23, 115, for the profile).
const FWHM: f64 = 1.762_747_174_039_086;

fn level() -> String {
    "sheet: current > ".to_string() + &(0.5 * FIELD).to_string()
}

/// A box of length 24 a along y (a = 1), with `n` samples along it that start `offset` cells off the origin.
fn pair_grid(n: usize, offset: f64) -> Grid {
    let h = 24.0 / n as f64;
    Grid::periodic([12, n, 10], [12.0 * 0.8 * h, 24.0, 10.0 * 1.1 * h]).with_origin([0.0, offset * h, 0.0])
}

fn wrapped(y: f64) -> f64 {
    y.rem_euclid(24.0)
}

fn pair<T: Precision>(n: usize, offset: f64, guide: f64) -> Outcome {
    let b = move |p: Vector| {
        let [bx, _, _] = harris_pair(FIELD, 1.0, 24.0, [p[0], wrapped(p[1]), p[2]]);
        [bx, 0.0, guide]
    };
    run(sampled::<T>(pair_grid(n, offset), MAGNETIC, b), &request(&[&level()]))
}

#[test]
fn two_sheets_close_on_themselves() {
    // The last one puts a sheet on the periodic face.
    for offset in [0.0, 0.5, 24.3] {
        let o = pair::<f64>(96, offset, 0.0);
        let g = pair_grid(96, offset);
        assert_eq!(o.rows(0).len(), 2);
        for row in o.rows(0) {
            assert_eq!(text(row, Col::Wraps), "x z");
            assert_eq!(text(row, Col::Class), "sheet");
            assert!(has_flag(row, "wraps") && !has_flag(row, "open"));
            missing(row, &[Col::CentroidX, Col::CentroidZ, Col::Extent1, Col::Axis3Y, Col::ShapefinderLength]);
            let y = number(row, Col::CentroidY);
            assert!((g.origin[1]..g.origin[1] + 24.0).contains(&y), "inside the box: {y}");
            assert!([6.0, 18.0].iter().any(|c| (wrapped(y) - c).abs() < 0.51 * g.spacing[1]), "{y}");
            // Two flat faces, each two tori's worth of nothing: Euler number 0.
            near(number(row, Col::SurfaceArea), 2.0 * g.length(0) * g.length(2), 1e-12, "area");
            assert!(number(row, Col::MeanCurvatureIntegral).abs() < 1e-9);
            assert_eq!(row.get(Col::Euler), &Value::Integer(0));
            // j is perpendicular to b everywhere.
            near(number(row, Col::LorentzSin2), 1.0, 1e-12, "lorentz_sin2");
            assert!(number(row, Col::AbsCosCurrentB) < 1e-12);
        }
        let a = &o.analysis.alignment;
        near(a.lorentz2 / a.j2b2, 1.0, 1e-12, "lorentz_sin2 of the box");
        let n = o.analysis.survey.cells as f64;
        // ∫ j² dy = 4 b₀²/3a a sheet (the integral of sech⁴ is 4/3); two sheets in a box of length 24 a, which overlap by exp(-12) = 6e-6.
        near(o.analysis.survey.magnetic.curl2 / n, 2.0 * 4.0 / 3.0 * FIELD * FIELD / 24.0, 6e-6, "mean j squared");
    }
}

/// Distance between the two faces of every sheet's mesh, in units of a.
fn thickness(o: &Outcome) -> Vec<f64> {
    o.meshes[0]
        .iter()
        .map(|m| {
            let y: Vec<f64> = m.positions.iter().map(|p| f64::from(p[1])).collect();
            let (low, high) = y.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), &y| (l.min(y), h.max(y)));
            assert!(y.iter().all(|&v| (v - low).abs() < 1e-4 || (v - high).abs() < 1e-4));
            high - low
        })
        .collect()
}

/// The isosurface of |j| at half the peak lies 1.76275 a apart: interpolation and differences leave an error of second order.
#[test]
fn thickness_is_the_full_width_at_half_maximum() {
    let error = |n: usize| {
        let all: Vec<f64> = (0..8).flat_map(|k| thickness(&pair::<f64>(n, f64::from(k) / 8.0, 0.0))).collect();
        all.iter().map(|t| (t / FWHM - 1.0).powi(2)).sum::<f64>().sqrt() / (all.len() as f64).sqrt()
    };
    let e = [48, 72, 108].map(error);
    let orders = [order(e[0], e[1], 1.5), order(e[1], e[2], 1.5)];
    assert!(mean(&orders) > 1.8, "{orders:?} from {e:?}");
    // Linear interpolation lies t(1 − t) h² f″/2 above the curve. For sech² at half its maximum f″ = 1/2a² and f′ = −1/√2a, so that
    // on average over t the two faces move apart by 0.067 (h/a)² of the width, 0.073 (h/a)² in the root mean square.
    near(e[1], 0.07 / 9.0, 0.05, "leading error");
    near(e[2], 0.07 * (2.0f64 / 9.0).powi(2), 0.05, "leading error");
    assert!(thickness(&pair::<f32>(72, 0.2, 0.0)).iter().all(|t| (t / FWHM - 1.0).abs() < 0.01));
}

/// Counted cells: volume over area is the full width, and the slab holds 88.4 % of the Ohmic power, in the mean over where the
/// sheet lies between samples (the midpoint rule over one cell of a quantity that is periodic in the offset).
#[test]
fn volume_and_ohmic_share_of_the_slab() {
    let (mut width, mut share) = (Vec::new(), Vec::new());
    for k in 0..16 {
        let (n, offset) = (72, (f64::from(k) + 0.37) / 16.0);
        let o = pair::<f32>(n, offset, 0.0);
        let g = pair_grid(n, offset);
        width.extend(o.rows(0).iter().map(|r| number(r, Col::Volume) / (g.length(0) * g.length(2))));
        share.push(o.rows(0).iter().map(|r| number(r, Col::OhmicShare)).sum());
    }
    // Sixteen offsets resolve the mean count of layers to 1/16 of a cell: 1.2 % of the width.
    near(mean(&width), FWHM, 0.012, "volume over area");
    near(mean(&share), 5.0 * 2f64.sqrt() / 8.0, 0.005, "Ohmic share");
}

/// With a guide field g b₀ along the current, ∫sech⁴tanh² = 4/15 and ∫sech⁴ = 4/3 give lorentz_sin2 = 1/(1 + 5g²) over the box.
#[test]
fn guide_field_makes_the_sheet_less_forced() {
    for g in [0.0, 0.5, 1.0] {
        let o = pair::<f64>(144, 0.3, g * FIELD);
        let a = &o.analysis.alignment;
        near(a.lorentz2 / a.j2b2, 1.0 / (1.0 + 5.0 * g * g), 1e-5, g);
        // The guide field is parallel to one current and antiparallel to the other, which lies whole cells away.
        let [c, d] = [0, 1].map(|k| number(&o.rows(0)[k], Col::CosCurrentB));
        assert!((c + d).abs() < 1e-10 && (g == 0.0) == (c.abs() < 1e-12), "{c} {d}");
    }
}

/// A velocity along b: cos(u, b) is 1 in every cell, whichever way b points.
#[test]
fn alfvenic_flow_is_aligned() {
    let b = |p: Vector| harris_pair(FIELD, 1.0, 24.0, [p[0], wrapped(p[1]), p[2]]);
    let both = |p: Vector| {
        let [x, y, _] = b(p);
        [x, y, 0.4]
    };
    let o = run(
        sampled_both::<f32>(pair_grid(72, 0.2), |p| both(p).map(|v| -0.7 * v), both),
        &request(&[&level(), "x: cross_helicity < -0.5"]),
    );
    for k in 0..2 {
        for row in o.rows(k) {
            assert!((number(row, Col::CosUB) + 1.0).abs() < 1e-6);
            assert_eq!(number(row, Col::AlignedUB), 1.0);
            assert!((number(row, Col::AbsCosUB) - 1.0).abs() < 1e-6);
        }
    }
    assert_eq!(o.analysis.fields, BOTH);
    assert_eq!(o.rows(0).len(), 2);
}

/// A sheet tilted off every axis of an open, non-cubic box of unequal spacing leaves through four faces as a prism: its volume is
/// width over the normal's y component times the box's section.
fn tilted<T: Precision>(place_offset: Vector) {
    let g = Grid {
        n: [40, 48, 36],
        spacing: [0.24, 0.21, 0.27],
        origin: [-4.8, -5.0, -4.86],
        periodic: [false; 3],
        stretched: [None, None, None],
    };
    // The sheet's own y is its normal.
    let [x, y, normal] = Placement::along([0.3, 1.0, 0.2], place_offset).axes;
    let place = Placement { axes: [y, normal, x], centre: place_offset };
    let b = |p: Vector| place.place(p, |q| harris(FIELD, 1.0, q));
    let o = run(sampled::<T>(g.clone(), MAGNETIC, b), &request(&[&level()]));
    let row = o.only(0);
    assert_eq!(text(row, Col::Class), "sheet");
    assert_eq!(text(row, Col::OpenFaces), "x- x+ z- z+");
    assert!(has_flag(row, "open"));
    missing(row, &[Col::SurfaceArea, Col::ShapefinderThickness, Col::Planarity]);
    let width = number(row, Col::Volume) * normal[1].abs() / (g.length(0) * g.length(2));
    near(width, FWHM, 5e-3, "volume over area");
    // Smallest axis along the normal. Peak within half a diagonal of the centre plane: sech² of that.
    let axis = [Col::Axis3X, Col::Axis3Y, Col::Axis3Z].map(|c| number(row, c));
    let along: f64 = (0..3).map(|a| axis[a] * normal[a]).sum();
    assert!(along.abs() > 0.9995, "{axis:?} {normal:?}");
    assert!(number(row, Col::Peak) <= FIELD * (1.0 + 2e-5) && number(row, Col::Peak) > FIELD * 0.999, "{}", number(row, Col::Peak));
    near(number(row, Col::LorentzSin2), 1.0, 1e-4, "lorentz_sin2");
}

#[test]
fn tilted_sheet_in_an_open_box() {
    tilted::<f64>([0.0; 3]);
    tilted::<f64>([0.03, 0.11, -0.07]);
    tilted::<f32>([0.05, -0.09, 0.12]);
}
