//! What is measured does not depend on where the box begins, which way its axes point, or in which units it is given.

use ropewalk::model::columns::{COLUMNS, Col, Row, Unit, Value};
use ropewalk::model::request::{Indicator, Request};
use ropewalk::space::grid::Grid;
use ropewalk::synth::random::solenoidal;

use super::common::*;

const N: [usize; 3] = [28, 20, 24];
const LENGTHS: Vector = [3.5, 2.0, 2.7];
const FAMILIES: [&str; 7] = [
    "w: vorticity > 1.4 rms",
    "j: current > 1.9 rms down to 1.5 rms",
    "h: helicity > 1.2 rms",
    "n: helicity < -1.2 rms",
    "l: lambda2 < -1 rms",
    "p: vorticity > 1.6 rms down to 0.7 peak",
    "x: cross_helicity > 0.06 volume",
];

/// Six components on a periodic box.
struct Box6 {
    n: [usize; 3],
    lengths: Vector,
    components: Vec<Vec<f64>>,
}

fn original() -> Box6 {
    let power = |k: f64| (-(k / 6.0).powi(2)).exp();
    let components = [3u64, 4].into_iter().flat_map(|seed| solenoidal(N, LENGTHS, seed, power, 0.2)).collect();
    Box6 { n: N, lengths: LENGTHS, components }
}

impl Box6 {
    fn at(&self, c: usize, i: [usize; 3]) -> f64 {
        self.components[c][(i[2] * self.n[1] + i[1]) * self.n[0] + i[0]]
    }

    /// A box whose component c at cell i is `value(c, i)`.
    fn of(n: [usize; 3], lengths: Vector, value: impl Fn(usize, [usize; 3]) -> f64) -> Box6 {
        let cells = |c: usize| {
            let mut out = Vec::new();
            for z in 0..n[2] {
                for y in 0..n[1] {
                    for x in 0..n[0] {
                        out.push(value(c, [x, y, z]));
                    }
                }
            }
            out
        };
        Box6 { n, lengths, components: (0..6).map(cells).collect() }
    }

    fn outcome(&self) -> Outcome {
        let companions = vec![Indicator::Q, Indicator::Helicity, Indicator::ElsasserPlus, Indicator::Swirling];
        let r = Request { companions, viscosity: Some(0.1), resistivity: Some(0.2), min_cells: 27, ..request(&FAMILIES) };
        run(stored::<f64>(Grid::periodic(self.n, self.lengths), BOTH, &self.components), &r)
    }
}

/// How a column changes.
type Change<'a> = dyn Fn(usize, f64) -> Option<f64> + 'a;

/// Every row of `a`, its numbers changed by `change` (none: not compared), has its like in `b`. Rows are told apart by their peaks.
fn same(a: &Outcome, b: &Outcome, change: &Change, peak: impl Fn(f64) -> f64) {
    let mut compared = 0;
    for k in 0..FAMILIES.len() {
        assert_eq!(a.rows(k).len(), b.rows(k).len(), "{}", FAMILIES[k]);
        assert!(!a.rows(k).is_empty(), "{}", FAMILIES[k]);
        for row in a.rows(k) {
            let wanted = peak(number(row, Col::Peak));
            let distance = |r: &&Row| (number(r, Col::Peak) - wanted).abs();
            let other = b.rows(k).iter().min_by(|p, q| distance(p).total_cmp(&distance(q))).unwrap();
            for (i, (v, w)) in row.values().iter().zip(&other.values()).enumerate() {
                let name = COLUMNS.get(i).map_or("companion", |c| c.name);
                match (v, w) {
                    (Value::Number(v), Value::Number(w)) => {
                        let Some(v) = change(i, *v) else { continue };
                        assert!((v - w).abs() <= 1e-8 * (1.0 + v.abs()), "{} {name} ({i}): {v} {w}", FAMILIES[k]);
                        compared += 1;
                    }
                    (Value::Integer(v), Value::Integer(w)) if name != "id" => assert_eq!(v, w, "{name}"),
                    (Value::Text(v), Value::Text(w)) if !["wraps", "open_faces"].contains(&name) => assert_eq!(v, w, "{name}"),
                    (Value::Missing, w) if change(i, 0.0).is_some() => assert_eq!(&Value::Missing, w, "{name}"),
                    _ => {}
                }
            }
        }
    }
    assert!(compared > 500, "{compared}");
}

fn is(i: usize, columns: &[Col]) -> bool {
    columns.iter().any(|c| *c as usize == i)
}

const PLACES: [Col; 6] = [Col::CentroidX, Col::CentroidY, Col::CentroidZ, Col::PeakX, Col::PeakY, Col::PeakZ];
const AXES: [Col; 9] =
    [Col::Axis1X, Col::Axis1Y, Col::Axis1Z, Col::Axis2X, Col::Axis2Y, Col::Axis2Z, Col::Axis3X, Col::Axis3Y, Col::Axis3Z];

#[test]
fn where_the_box_begins_does_not_matter() {
    let a = original();
    let shift = [9, 13, 17];
    let b = Box6::of(N, LENGTHS, |c, i| a.at(c, std::array::from_fn(|k| (i[k] + shift[k]) % N[k])));
    let (a, b) = (a.outcome(), b.outcome());
    same(&a, &b, &|i, v| (!is(i, &PLACES)).then_some(v), |p| p);
    // Positions move with the box.
    for row in a.rows(0) {
        let other = b.rows(0).iter().find(|r| (number(r, Col::Peak) - number(row, Col::Peak)).abs() < 1e-9).unwrap();
        for (k, col) in PLACES.into_iter().enumerate() {
            if let (Some(p), Some(q)) = (row.get(col).as_f64(), other.get(col).as_f64()) {
                let d = p - q - shift[k % 3] as f64 * LENGTHS[k % 3] / N[k % 3] as f64;
                assert!((d / LENGTHS[k % 3] - (d / LENGTHS[k % 3]).round()).abs() < 1e-9, "{}: {p} {q}", name(col));
            }
        }
    }
}

/// A turn that takes x to y, y to z and z to x changes no scalar.
#[test]
fn the_names_of_the_axes_do_not_matter() {
    let a = original();
    let turned = |v: [usize; 3]| [v[2], v[0], v[1]];
    let lengths = [LENGTHS[2], LENGTHS[0], LENGTHS[1]];
    // Component and axis a of the turned box are those of a − 1 of the original.
    let b = Box6::of(turned(N), lengths, |c, i| a.at(3 * (c / 3) + (c % 3 + 2) % 3, [i[1], i[2], i[0]]));
    same(&a.outcome(), &b.outcome(), &|i, v| (!is(i, &PLACES) && !is(i, &AXES)).then_some(v), |p| p);
}

/// In a mirror helicities and the cosines with a curl change sign, and nothing else does; the objects of both signs of the helicity
/// change places.
#[test]
fn a_mirror_flips_what_has_a_sign() {
    let a = original();
    let b = Box6::of(N, LENGTHS, |c, i| {
        let sign = if c % 3 == 0 { -1.0 } else { 1.0 };
        sign * a.at(c, [(N[0] - i[0]) % N[0], i[1], i[2]])
    });
    let (a, mut b) = (a.outcome(), b.outcome());
    // What was above is now below.
    b.analysis.families.swap(2, 3);
    let helicity = |k: usize| FAMILIES[k].contains("helicity") && !FAMILIES[k].contains("cross");
    for k in 0..FAMILIES.len() {
        assert_eq!(a.rows(k).len(), b.rows(k).len(), "{}", FAMILIES[k]);
        assert!(!a.rows(k).is_empty());
        for row in a.rows(k) {
            let sign = if helicity(k) { -1.0 } else { 1.0 };
            let wanted = sign * number(row, Col::Peak);
            let other = b.rows(k).iter().find(|r| (number(r, Col::Peak) - wanted).abs() < 1e-9).unwrap();
            let flips = [Col::CosUVorticity, Col::CosCurrentB];
            let stays = [
                Col::Cells,
                Col::Extent1,
                Col::Extent3,
                Col::AbsCosUVorticity,
                Col::CosUB,
                Col::LambSin2,
                Col::LorentzSin2,
                Col::ViscousShare,
                Col::OhmicShare,
                Col::SurfaceArea,
                Col::Planarity,
            ];
            for (cols, sign) in [(&flips[..], -1.0), (&stays[..], 1.0), (&[Col::IndicatorMean, Col::Level][..], sign)] {
                for &c in cols {
                    match (row.get(c).as_f64(), other.get(c).as_f64()) {
                        (Some(v), Some(w)) => {
                            assert!((sign * v - w).abs() < 1e-8 * (1.0 + v.abs()), "{} {}: {v} {w}", FAMILIES[k], name(c))
                        }
                        _ => assert_eq!(row.get(c), other.get(c), "{}", name(c)),
                    }
                }
            }
            // Companions: Q, |∇×(u+b)| and swirling stay; helicity flips, its smallest becoming its largest.
            let extra = |r: &Row| r.values()[COLUMNS.len()..].iter().map(|v| v.as_f64().unwrap()).collect::<Vec<f64>>();
            let (e, f) = (extra(row), extra(other));
            let mirrored = [e[0], e[1], e[2], -e[3], -e[5], -e[4], e[6], e[7], e[8], e[9], e[10], e[11]];
            assert!(mirrored.iter().zip(&f).all(|(v, w)| (v - w).abs() < 1e-7 * (1.0 + v.abs())), "{mirrored:?} {f:?}");
        }
    }
}

/// Lengths times 3, velocities and fields times 4, coefficients with them: every column changes by its unit. A power of 2 for the
/// velocity also moves the bins that a level by volume is read from.
#[test]
fn units_scale_by_their_powers() {
    let (l, v) = (3.0, 4.0);
    let a = original();
    let b = Box6 {
        n: N,
        lengths: LENGTHS.map(|x| l * x),
        components: a.components.iter().map(|c| c.iter().map(|x| v * x).collect()).collect(),
    };
    let r = |nu: f64| Request { viscosity: Some(nu), resistivity: Some(2.0 * nu), min_cells: 27, ..request(&FAMILIES) };
    let of = |b: &Box6, nu: f64| run(stored::<f64>(Grid::periodic(b.n, b.lengths), BOTH, &b.components), &r(nu));
    let (a, b) = (of(&a, 0.1), of(&b, 0.1 * l * v));
    for (k, f) in FAMILIES.iter().enumerate() {
        let indicator = match f.split([':', ' ']).nth(2).unwrap() {
            "vorticity" | "current" => v / l,
            "helicity" => v * v / l,
            "lambda2" => (v / l).powi(2),
            "cross_helicity" => v * v,
            other => panic!("{other}"),
        };
        let factor = |i: usize| match COLUMNS[i].unit {
            Unit::Length => l,
            Unit::Area => l * l,
            Unit::Volume => l.powi(3),
            Unit::Indicator => indicator,
            Unit::Power => v.powi(3) / l * l.powi(3),
            _ => 1.0,
        };
        assert_eq!(a.rows(k).len(), b.rows(k).len(), "{f}");
        for (p, q) in a.rows(k).iter().zip(b.rows(k)) {
            for (i, (x, y)) in p.values().iter().zip(&q.values()).enumerate() {
                match (x, y) {
                    (Value::Number(x), Value::Number(y)) => {
                        let want = x * factor(i);
                        assert!((want - y).abs() <= 1e-8 * want.abs().max(1e-3), "{f} {}: {want} {y}", COLUMNS[i].name);
                    }
                    (x, y) => assert_eq!(x, y, "{f} {}", COLUMNS[i].name),
                }
            }
        }
    }
}
