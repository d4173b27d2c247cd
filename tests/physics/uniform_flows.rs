//! Flows of uniform gradient in open boxes: linear in position, so differences of any order are exact up to the faces.

use crate::common::{Precision, Vector, number, request, run, sampled, text};
use ropewalk::model::columns::{Col, Value};
use ropewalk::model::statistics::IndicatorStats;
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{Placement, shear, solid_rotation};

const RATE: f64 = 1.7;

/// Non-cubic, of unequal spacing, open everywhere; first sample off the origin.
fn open_box() -> Grid {
    Grid { n: [9, 14, 21], spacing: [0.11, 0.07, 0.05], origin: [-0.43, 0.21, -0.37], periodic: [false; 3], stretched: [None, None, None] }
}

fn placements() -> [Placement; 3] {
    [Placement::at([0.1, 0.4, 0.2]), Placement::along([1.0, 0.0, 0.0], [0.0; 3]), Placement::along([0.5, -0.8, 0.3], [0.13, 0.57, 0.1])]
}

/// Largest distance of an indicator from a value, over all cells.
fn spread(s: &IndicatorStats, value: f64) -> f64 {
    (s.min - value).abs().max((s.max - value).abs())
}

/// Round-off of a first derivative: the one-sided weights at the face itself (multiples of 1/h) have magnitudes that sum to 78.
fn round_off<T: Precision>() -> f64 {
    let speed = RATE * 1.3;
    78.0 * T::EPSILON * speed / 0.05
}

fn rotation<T: Precision>() {
    let e = round_off::<T>();
    for placement in placements() {
        let flow = |p: Vector| placement.place(p, |q| solid_rotation(RATE, q));
        let families = ["w: vorticity > 1.7", "q: q > 1", "s: strain > 0.5"];
        let o = run(sampled::<T>(open_box(), crate::common::VELOCITY, flow), &request(&families));
        let s = &o.analysis.survey.indicators;
        // Solid rotation: |ω| = 2Ω, Q = Ω², S = 0, in every cell up to the open faces.
        assert!(spread(&s[0], 2.0 * RATE) < e, "{} {}", s[0].min, s[0].max);
        assert!(spread(&s[1], RATE * RATE) < 2.0 * RATE * e, "{} {}", s[1].min, s[1].max);
        assert!(s[2].max < e, "{}", s[2].max);
        let row = o.only(0);
        assert_eq!(row.get(Col::Cells), &Value::Integer(9 * 14 * 21));
        assert_eq!(text(row, Col::OpenFaces), "x- x+ y- y+ z- z+");
        assert!((number(row, Col::IndicatorMean) - 2.0 * RATE).abs() < e);
        // The object is the box: a brick's extents are its sides, samples times spacing, largest first.
        for (col, side) in [(Col::Extent1, 1.05), (Col::Extent2, 0.99), (Col::Extent3, 0.98)] {
            assert!((number(row, col) - side).abs() < 1e-12);
        }
        assert_eq!(o.rows(2).len(), 0);
    }
}

#[test]
fn solid_rotation_in_both_precisions() {
    rotation::<f64>();
    rotation::<f32>();
}

fn plane_shear<T: Precision>() {
    let e = round_off::<T>();
    for placement in placements() {
        let flow = |p: Vector| placement.place(p, |q| shear(RATE, q));
        let families = ["w: vorticity > 1", "q: q > 1", "s: strain > 1"];
        let o = run(sampled::<T>(open_box(), crate::common::VELOCITY, flow), &request(&families));
        let s = &o.analysis.survey.indicators;
        // Plane shear: |ω| = γ, S:S = γ²/2, Q = 0: a |ω| threshold accepts it, Q does not.
        assert!(spread(&s[0], RATE) < e);
        assert!(spread(&s[1], 0.0) < RATE * e);
        assert!(spread(&s[2], RATE / 2f64.sqrt()) < e);
        assert_eq!(o.rows(0).len(), 1);
        assert_eq!(o.rows(1).len(), 0);
        // u, ω and the shear are mutually perpendicular.
        let a = &o.analysis.alignment;
        assert!((a.lamb2 / a.u2w2 - 1.0).abs() < 4.0 * e / RATE);
    }
}

#[test]
fn plane_shear_in_both_precisions() {
    plane_shear::<f64>();
    plane_shear::<f32>();
}
