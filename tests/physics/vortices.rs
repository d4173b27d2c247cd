//! Lamb–Oseen and Burgers vortices on and off the grid's axes, in open boxes and in boxes periodic along the vortex.

use std::f64::consts::{LN_2, PI};

use crate::common::{
    Outcome, Precision, VELOCITY, Vector, has_flag, mean, minus, missing, near, norm, number, order, request, run, sampled, text,
};
use ropewalk::model::columns::{Col, Value};
use ropewalk::space::grid::Grid;
use ropewalk::synth::flows::{Placement, burgers, lamb_oseen};

const PEAK: f64 = 3.0;
const RADIUS: f64 = 0.5;
const STRAIN: f64 = 0.4;
const SURFACE: [Col; 8] = [
    Col::SurfaceArea,
    Col::MeanCurvatureIntegral,
    Col::Euler,
    Col::ShapefinderThickness,
    Col::ShapefinderWidth,
    Col::ShapefinderLength,
    Col::Planarity,
    Col::Filamentarity,
];

/// An open box of edges near 4, 3.6 and 3.8 around the origin with spacings near `h`, unequal and non-cubic.
fn open_box(h: f64) -> Grid {
    let spacing = [h, 0.9 * h, 1.05 * h];
    let n = [4.0, 3.6, 3.8].map(|l: f64| l / h).map(f64::round).map(|v| v as usize);
    let origin = std::array::from_fn(|a| -0.5 * n[a] as f64 * spacing[a]);
    Grid { n, spacing, origin, periodic: [false; 3], stretched: [None, None, None] }
}

/// The sample nearest to the middle of the box, moved by a fraction of a cell.
fn near_middle(g: &Grid, cells: Vector) -> Vector {
    std::array::from_fn(|a| g.position(a, (g.n[a] / 2) as f64 + cells[a]))
}

fn half_radius() -> f64 {
    LN_2.sqrt() * RADIUS
}

fn vortex<T: Precision>(g: Grid, place: Placement, strain: f64) -> Outcome {
    let flow = |p: Vector| place.place(p, |q| burgers(PEAK, RADIUS, strain, q));
    let families = [format!("tube: vorticity > {}", 0.5 * PEAK), "cores: q > 1".to_string()];
    run(sampled::<T>(g.clone(), VELOCITY, flow), &request(&families.each_ref().map(String::as_str)))
}

/// Closed forms of the Burgers vortex (Burgers 1948, Adv. Appl. Mech. 1, 171; Lamb–Oseen for α = 0): |ω| = ω₀ and Q = ω₀²/4 − ¾α²
/// on the axis, |ω| > ω₀/2 within √(ln 2) r_c = 0.8326 r_c.
fn check_column<T: Precision>(direction: Vector, faces: &str, strain: f64, tolerance: f64) {
    let g = open_box(0.085);
    let place = Placement::along(direction, near_middle(&g, [0.0; 3]));
    let o = vortex::<T>(g.clone(), place, strain);
    let row = o.only(0);
    near(number(row, Col::Peak), PEAK, tolerance, "peak vorticity");
    near(number(o.only(1), Col::Peak), 0.25 * PEAK * PEAK - 0.75 * strain * strain, 2.0 * tolerance, "peak Q");
    assert_eq!(text(row, Col::Class), "filament");
    assert_eq!(text(row, Col::OpenFaces), faces);
    assert_eq!(text(row, Col::Wraps), "");
    assert!(has_flag(row, "open") && !has_flag(row, "wraps"));
    missing(row, &SURFACE);
    // A column that leaves through two opposite faces is a prism: its volume is section over cosine times the box's edge.
    let d = direction.map(|c| c / norm(direction));
    let along = (0..3).fold(0, |b, a| if d[a].abs() > d[b].abs() { a } else { b });
    let section = number(row, Col::Volume) * d[along].abs() / g.length(along);
    // The counted section scatters with where the axis lies: some 2πr/h cells on the rim are in or out by chance, each by 1/√12,
    // which makes 0.115 (h/r)^1.5 = 1 % of the radius.
    near((section / PI).sqrt(), half_radius(), 0.01, "radius");
    let axis = [Col::Axis1X, Col::Axis1Y, Col::Axis1Z].map(|c| number(row, c));
    let sine2 = 1.0 - (0..3).map(|a| axis[a] * d[a]).sum::<f64>().powi(2);
    // Cut slantwise by the faces, the moments of a prism turn a little off its direction.
    assert!(sine2 < 0.01, "axis {axis:?}, direction {d:?}");
    // Off the samples the peak cell is a fraction of a cell from the axis: ω₀ exp(−s²/r_c²), s² at most a quarter of Σh².
    let o = vortex::<T>(g.clone(), Placement::along(direction, near_middle(&g, [0.37, 0.21, 0.45])), strain);
    let s2 = 0.25 * g.spacing.iter().map(|h| h * h).sum::<f64>();
    let least = PEAK * (-s2 / (RADIUS * RADIUS)).exp();
    let peak = number(o.only(0), Col::Peak);
    assert!(peak >= least * (1.0 - tolerance) && peak <= PEAK * (1.0 + tolerance), "{peak}");
}

#[test]
fn columns_in_an_open_box() {
    // Order 8 misses f⁽⁹⁾h⁸/630; the series of u_θ makes that 4.8 (h/r_c)⁸ = 5e-6 of ω₀ at r_c = 5.6 cells.
    for strain in [0.0, STRAIN] {
        check_column::<f64>([0.0, 0.0, 1.0], "z- z+", strain, 1e-5);
        check_column::<f64>([1.0, 0.0, 0.0], "x- x+", strain, 1e-5);
        check_column::<f64>([0.2, 0.15, 1.0], "z- z+", strain, 1e-5);
    }
    check_column::<f32>([0.2, 1.0, -0.1], "y- y+", STRAIN, 2e-5);
}

/// Order 8 in the interior, on an axis off every grid direction.
#[test]
fn peak_vorticity_converges_with_order_eight() {
    for direction in [[0.0, 0.0, 1.0], [0.3, -0.4, 0.8]] {
        let error = |n: usize| {
            let h = 3.0 / n as f64;
            let g = Grid { n: [n; 3], spacing: [h; 3], origin: [-1.5; 3], periodic: [false; 3], stretched: [None, None, None] };
            let place = Placement::along(direction, near_middle(&g, [0.0; 3]));
            let o = vortex::<f64>(g.clone(), place, 0.0);
            (number(o.only(0), Col::Peak) / PEAK - 1.0).abs()
        };
        let e = [24, 32, 44].map(error);
        let orders = [order(e[0], e[1], 32.0 / 24.0), order(e[1], e[2], 44.0 / 32.0)];
        assert!(orders[0] > 7.0 && orders[1] > 7.5 && orders[1] < 8.3, "{orders:?} from {e:?}");
        if direction[0] == 0.0 {
            // The ninth derivative of u_θ on the axis, (ω₀/2) 9!/5! r_c⁻⁸, over 630, twice.
            near(e[2], 4.8 * (3.0 / 44.0 / RADIUS).powi(8), 0.1, "leading error");
        }
    }
}

/// Radius from the cell count: the mean over several places of the axis within a cell converges on 0.8326 r_c.
#[test]
fn radius_of_the_half_maximum_converges() {
    let error = |h: f64| {
        let radii: Vec<f64> = (0..12)
            .map(|k| {
                // Places from two incommensurate rotations (Weyl's equidistribution).
                let shift = [f64::from(k) * 0.618_034 % 1.0, f64::from(k) * 0.414_214 % 1.0, 0.0];
                let n = (2.0 / h).round() as usize;
                let g =
                    Grid { n: [n, n, 9], spacing: [h; 3], origin: [-1.0, -1.0, 0.0], periodic: [false; 3], stretched: [None, None, None] };
                let place = Placement::at(std::array::from_fn(|a| if a < 2 { shift[a] * h } else { 0.0 }));
                let o = vortex::<f64>(g.clone(), place, 0.0);
                (number(o.only(0), Col::Volume) / g.length(2) / PI).sqrt()
            })
            .collect();
        (mean(&radii) / half_radius() - 1.0).abs()
    };
    for h in [0.1, 0.05] {
        // Two standard errors of the mean of twelve counts, see above.
        let allowed = 2.0 * 0.115 * (h / half_radius()).powf(1.5) / 12f64.sqrt();
        let got = error(h);
        assert!(got < allowed, "{h}: {got} {allowed}");
    }
}

/// A column of radius r and length L that closes on itself: area 2πrL, C = πL, Euler number 0, T = 3r/2, W = 2r
/// (closed forms of a cylinder without caps; shapefinders of Sahni, Sathyaprakash & Shandarin 1998, ApJ 495, L5).
fn periodic_column<T: Precision>(n: usize, axis: usize) -> f64 {
    let h = 2.4 / n as f64;
    let mut g = Grid { n: [n; 3], spacing: [h; 3], origin: [-1.2; 3], periodic: [false; 3], stretched: [None, None, None] };
    (g.n[axis], g.periodic[axis]) = (12, true);
    let direction = std::array::from_fn(|a| f64::from(u8::from(a == axis)));
    let o = vortex::<T>(g.clone(), Placement::along(direction, [0.31 * h, 0.17 * h, -0.23 * h]), 0.0);
    let row = o.only(0);
    let (length, r) = (12.0 * h, half_radius());
    assert_eq!(text(row, Col::Wraps), ["x", "y", "z"][axis]);
    assert_eq!(text(row, Col::Class), "filament");
    assert!(has_flag(row, "wraps") && !has_flag(row, "open"));
    missing(row, &[Col::Extent1, Col::Extent2, Col::Extent3, Col::Axis1X, Col::ShapefinderLength, Col::Filamentarity]);
    let centroid = [Col::CentroidX, Col::CentroidY, Col::CentroidZ];
    missing(row, &[centroid[axis]]);
    // Some 2πr/h cells on the rim are in or out by chance, each by 1/√12 of a cell: the centroid of the count scatters by
    // 0.163 √(h/r) cells. Allowed 3.5 times that.
    let scatter = 3.5 * 0.163 * (h / r).sqrt() * h;
    for a in (0..3).filter(|&a| a != axis) {
        assert!((number(row, centroid[a]) - [0.31 * h, 0.17 * h, -0.23 * h][a]).abs() < scatter);
    }
    assert_eq!(row.get(Col::Euler), &Value::Integer(0));
    near(number(row, Col::MeanCurvatureIntegral), PI * length, 1e-3, "C");
    // T holds the counted volume, whose section scatters by 0.23 (h/r)^1.5 for the same reason.
    near(number(row, Col::ShapefinderThickness), 1.5 * r, 3.5 * 0.23 * (h / r).powf(1.5), "T");
    near(number(row, Col::ShapefinderWidth), 2.0 * r, 0.02, "W");
    // Every vertex lies on the cylinder: interpolation is of second order.
    let mesh = o.mesh(0, 1);
    for p in &mesh.positions {
        let d = minus(p.map(f64::from), [0.31 * h, 0.17 * h, -0.23 * h]);
        let across = (0..3).filter(|&a| a != axis).map(|a| d[a] * d[a]).sum::<f64>().sqrt();
        near(across, r, 0.5 * (h / r).powi(2), "vertex on the cylinder");
    }
    (number(row, Col::SurfaceArea) / (2.0 * PI * r * length) - 1.0).abs()
}

#[test]
fn column_that_closes_on_itself() {
    for axis in 0..3 {
        let e = [24, 36, 54].map(|n| periodic_column::<f64>(n, axis));
        let orders = [order(e[0], e[1], 1.5), order(e[1], e[2], 1.5)];
        assert!(orders.iter().all(|o| (1.9..2.15).contains(o)) && e[2] < 1e-3, "area errors {e:?}, orders {orders:?}");
    }
    assert!(periodic_column::<f32>(36, 2) < 3e-3);
}

/// A Burgers vortex is a Lamb–Oseen vortex in a potential flow: the vorticity is the same everywhere.
#[test]
fn strain_leaves_the_vorticity_alone() {
    let g = open_box(0.1);
    let place = Placement::along([0.2, 0.3, 1.0], near_middle(&g, [0.2, 0.4, 0.1]));
    let (a, b) = (vortex::<f64>(g.clone(), place, 0.0), vortex::<f64>(g.clone(), place, STRAIN));
    assert_eq!(a.only(0).get(Col::Cells), b.only(0).get(Col::Cells));
    near(number(a.only(0), Col::IndicatorMean), number(b.only(0), Col::IndicatorMean), 1e-11, "mean vorticity");
    // Both fields are solenoidal by construction; what the differences miss is what the warning allows for.
    for o in [&a, &b] {
        let d = o.analysis.divergence[0];
        assert!(d.ratio.unwrap() < 1e-3 && !d.is_suspicious(), "{d:?}");
    }
    let still =
        run(sampled::<f64>(g.clone(), VELOCITY, |p| place.place(p, |q| lamb_oseen(PEAK, RADIUS, q))), &request(&["w: vorticity > 1.5"]));
    assert_eq!(still.only(0).get(Col::Cells), a.only(0).get(Col::Cells));
}
