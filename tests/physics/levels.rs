//! Levels in pairs and from peaks: which cells belong to an object, on fields whose answer is known.

use ropewalk::model::columns::Col;
use ropewalk::model::request::{Connectivity, Request};
use ropewalk::space::grid::Grid;

use super::common::*;

/// A velocity whose speed is the given positive function of position.
fn speed(grid: &Grid, families: &[&str], f: impl Fn(Vector) -> f64) -> Outcome {
    run(sampled::<f64>(grid.clone(), VELOCITY, |p| [f(p), 0.0, 0.0]), &request(families))
}

/// A Gaussian bump of height 1 and 1/e radius `r` in a periodic box of length 1.
fn bump(p: Vector, centre: Vector, r: f64) -> f64 {
    let d2: f64 = (0..3).map(|a| (p[a] - centre[a] - (p[a] - centre[a]).round()).powi(2)).sum();
    (-d2 / (r * r)).exp()
}

fn cube(n: usize) -> Grid {
    Grid::periodic([n; 3], [1.0; 3])
}

/// Of the objects beyond the weaker level, those whose peak lies beyond the stronger one, unchanged.
#[test]
fn two_levels_keep_the_objects_that_reach_the_first() {
    let centres = [[0.02, 0.5, 0.97], [0.5, 0.31, 0.42], [0.77, 0.83, 0.55]];
    let heights = [2.0, 5.0, 3.5];
    let field = |p: Vector| (0..3).map(|k| heights[k] * bump(p, centres[k], 0.09)).sum();
    let o = speed(&cube(48), &["outer: speed > 1", "both: speed > 3 down to 1", "above: speed > 3 rms down to 2 mean"], field);
    let (outer, both) = (o.rows(0), o.rows(1));
    assert_eq!((outer.len(), both.len()), (3, 2));
    assert_eq!((o.family(1).level, o.family(1).inner_level), (1.0, Some(3.0)));
    let strong: Vec<_> = outer.iter().filter(|r| number(r, Col::Peak) > 3.0).collect();
    for (a, b) in strong.iter().zip(both) {
        for col in [Col::Cells, Col::CentroidX, Col::SurfaceArea, Col::IndicatorMean, Col::Level, Col::ViscousShare, Col::Extent1] {
            assert_eq!(a.get(col), b.get(col));
        }
    }
}

/// Half of a Gaussian bump's own peak is reached at r √(ln 2), whatever its height (calculus).
#[test]
fn a_bump_grown_to_half_its_peak_is_a_ball_of_known_radius() {
    grown_bumps::<f64>();
    grown_bumps::<f32>();
}

/// On a box that is no cube in samples, the bumps across its faces.
fn grown_bumps<T: Precision>() {
    let r = 0.11;
    let want = r * 2f64.ln().sqrt();
    let centres = [[0.013, 0.52, 0.988], [0.52, 0.04, 0.46]];
    let field = |p: Vector| 7.0 * bump(p, centres[0], r) + 3.1 * bump(p, centres[1], r);
    let mut last = f64::INFINITY;
    for n in [40, 80] {
        let grid = Grid::periodic([n, n + 6, n + 10], [1.0; 3]);
        let o = run(sampled::<T>(grid, VELOCITY, |p| [field(p), 0.0, 0.0]), &request(&["half: speed > 2 down to 0.5 peak"]));
        assert_eq!(o.rows(0).len(), 2);
        let mut worst: f64 = 0.0;
        for row in o.rows(0) {
            let peak = number(row, Col::Peak);
            assert_eq!(number(row, Col::Level), 0.5 * peak);
            let k = usize::from(peak < 5.0);
            for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
                let d = number(row, col) - centres[k][a];
                assert!((d - d.round()).abs() < 0.02 / n as f64 * 40.0, "centroid {d}");
            }
            for col in [Col::ShapefinderThickness, Col::ShapefinderWidth, Col::ShapefinderLength] {
                worst = worst.max((number(row, col) / want - 1.0).abs());
            }
        }
        assert!(worst < 0.03 && worst < last / 2.5, "{n}: {worst}");
        last = worst;
    }
}

/// Two bumps on a line: with a saddle beyond half of the higher they are one object; with a lower saddle two, split between the
/// peaks; far apart two with no wall.
#[test]
fn touching_objects_split_by_the_height_of_their_saddle() {
    let r = 0.1;
    let at = |d: f64| move |p: Vector| 6.0 * bump(p, [0.3, 0.51, 0.49], r) + 4.0 * bump(p, [0.3 + d, 0.51, 0.49], r);
    let of = |d: f64| speed(&cube(64), &["f: speed > 2 down to 0.5 peak", "g: speed > 1.999"], at(d));
    let near = of(0.15);
    assert_eq!(near.rows(0).len(), 1, "the lower peak lies on the higher one's shoulder");
    let middle = of(0.23);
    let rows = middle.rows(0);
    assert_eq!(rows.len(), 2);
    let (high, low) = if number(&rows[0], Col::Peak) > number(&rows[1], Col::Peak) { (&rows[0], &rows[1]) } else { (&rows[1], &rows[0]) };
    assert!(number(low, Col::CentroidX) > 0.48 && number(high, Col::CentroidX) < 0.36);
    assert!(text(low, Col::Flags).split(' ').any(|f| f == "wall"), "{}", text(low, Col::Flags));
    assert!(!text(high, Col::Flags).split(' ').any(|f| f == "wall"));
    assert_eq!(low.get(Col::SurfaceArea), &ropewalk::model::columns::Value::Missing);
    // The lower one ends at the saddle plane: nothing of it on the higher one's side.
    assert!(number(low, Col::CentroidX) - 0.5 * number(low, Col::Extent1) > 0.39);
    let far = of(0.42);
    assert_eq!(far.rows(0).len(), 2);
    assert!(far.rows(0).iter().all(|r| !text(r, Col::Flags).contains("wall")));
}

/// A tube of varying strength through the periodic box is one object that closes on itself.
#[test]
fn a_tube_through_the_box_wraps() {
    let tube = |p: Vector| {
        let d2: f64 = (0..2).map(|a| (p[a] - 0.98 - (p[a] - 0.98).round()).powi(2)).sum();
        5.0 * (-d2 / 0.01).exp() * (1.0 + 0.1 * (std::f64::consts::TAU * p[2]).cos())
    };
    let o = speed(&cube(40), &["t: speed > 0.5 peak"], tube);
    assert_eq!(o.rows(0).len(), 1);
    assert_eq!(text(&o.rows(0)[0], Col::Wraps), "z");
    let shorter = |p: Vector| tube(p) * if (p[2] - 0.5).abs() < 0.2 { 0.3 } else { 1.0 };
    let o = speed(&cube(40), &["t: speed > 0.5 peak"], shorter);
    assert_eq!((o.rows(0).len(), text(&o.rows(0)[0], Col::Wraps)), (1, ""), "it crosses the face z = 0 without closing");
}

/// Negative peaks of an indicator thresholded from below are grown to a fraction of their depth.
#[test]
fn valleys_grow_like_peaks() {
    let f = |p: Vector| 4.0 * bump(p, [0.2, 0.4, 0.6], 0.12) + 2.5 * bump(p, [0.7, 0.8, 0.1], 0.12);
    let source = |sign: f64| sampled_both::<f64>(cube(40), move |p| [sign * f(p), 0.0, 0.0], |_| [1.0, 0.0, 0.0]);
    let up = run(source(1.0), &request(&["h: cross_helicity > 2 down to 0.4 peak"]));
    let down = run(source(-1.0), &request(&["h: cross_helicity < -2 down to 0.4 peak"]));
    assert_eq!(up.rows(0).len(), 2);
    for (a, b) in up.rows(0).iter().zip(down.rows(0)) {
        assert_eq!(number(a, Col::Level), -number(b, Col::Level));
        assert_eq!(number(a, Col::IndicatorMean), -number(b, Col::IndicatorMean));
        for col in [Col::Cells, Col::CentroidX, Col::SurfaceArea, Col::Extent2] {
            assert_eq!(a.get(col), b.get(col));
        }
    }
}

/// Listed, dropped and background add up, and small grown objects are counted.
#[test]
fn small_grown_objects_are_dropped_but_counted() {
    let f = |p: Vector| 4.0 * bump(p, [0.2, 0.4, 0.6], 0.12) + 3.0 * bump(p, [0.7, 0.8, 0.1], 0.04);
    let source = || sampled::<f64>(cube(40), VELOCITY, |p| [f(p), 0.0, 0.0]);
    let all = run(source(), &request(&["f: speed > 1 down to 0.5 peak"]));
    let large = run(source(), &Request { min_cells: 100, connectivity: Connectivity::Six, ..request(&["f: speed > 1 down to 0.5 peak"]) });
    assert_eq!((all.rows(0).len(), large.rows(0).len(), large.family(0).dropped.objects), (2, 1, 1));
    let cells = |o: &Outcome| o.family(0).listed.moments.count + o.family(0).dropped.tally.moments.count;
    assert_eq!(cells(&all), cells(&large));
}
