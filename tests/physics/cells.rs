//! Inputs at the edge of what can be analysed: bad cells, nothing at all, the smallest grid, objects of a few cells.

use crate::common::{BOTH, MAGNETIC, Outcome, VELOCITY, number, request, run, sampled, stored, text, try_run};
use ropewalk::base::error::Kind;
use ropewalk::base::observe::Silent;
use ropewalk::model::columns::{COLUMNS, Col, Value};
use ropewalk::model::request::Request;
use ropewalk::model::sink::NoFiles;
use ropewalk::run::analysis::{Execution, Snapshot, analyse};
use ropewalk::space::grid::Grid;

fn cube(n: usize) -> Grid {
    Grid::periodic([n; 3], [1.0; 3])
}

/// A snapshot with NaN or infinity is refused; the message counts and locates the cells. In either order of passes.
#[test]
fn bad_cells_are_located_and_refused() {
    for family in ["a: vorticity > 3 rms", "a: helicity > 3 rms"] {
        let grid = Grid::periodic([10, 12, 14], [1.0; 3]);
        let cells = grid.cells() as usize;
        let mut u = vec![vec![0.5; cells]; 3];
        u[1][grid.index(3, 4, 5) as usize] = f64::NAN;
        u[2][grid.index(9, 11, 13) as usize] = f64::INFINITY;
        u[0][grid.index(0, 0, 13) as usize] = f64::NEG_INFINITY;
        let names = ["u", "v", "w"].map(String::from).to_vec();
        let snapshot = Snapshot { name: "broken".to_string(), time: None, components: names };
        let request = Request { frame: ropewalk::model::request::Frame::Box, ..request(&[family]) };
        for block_planes in [None, Some(2)] {
            let execution = Execution { block_planes, ..Execution::default() };
            let source = stored::<f32>(grid.clone(), VELOCITY, &u);
            let e = analyse(source, snapshot.clone(), &request, &execution, &Silent, &mut NoFiles).err().expect("refused");
            assert_eq!(e.kind(), Kind::Data);
            let message = e.to_string();
            for part in ["broken", "3 NaN or infinite", "v at x=3 y=4 z=5", "u at x=0 y=0 z=13", "w at x=9 y=11 z=13"] {
                assert!(message.contains(part), "{message}");
            }
        }
    }
}

/// |b| of 1e20 fits f32, its square does not (largest f32: 3.4e38); |u|²|ω|² overflows before |ω|² does. The same values pass in f64.
#[test]
fn squares_that_overflow_are_refused() {
    let wave = |size: f64| move |p: [f64; 3]| [0.0, size * (std::f64::consts::TAU * p[0]).sin(), size];
    for (fields, family, size) in [(MAGNETIC, "f: field > 1 rms", 1e20), (VELOCITY, "w: vorticity > 1 rms", 1e10)] {
        let e = try_run(sampled::<f32>(cube(12), fields, wave(size)), &request(&[family]), &Execution::default()).err().expect("refused");
        assert_eq!(e.kind(), Kind::Data);
        assert!(e.to_string().contains("fit f32"), "{e}");
        let o = run(sampled::<f64>(cube(12), fields, wave(size)), &request(&[family]));
        assert!(!o.rows(0).is_empty());
        check_rows(&o);
    }
}

/// Every number of every row is finite by construction of the row; sizes must be positive as well.
fn check_rows(o: &Outcome) {
    for f in &o.analysis.families {
        for row in &f.rows {
            for (c, value) in COLUMNS.iter().zip(row.values()) {
                if let Value::Number(v) = value {
                    assert!(v.is_finite(), "{}: {v}", c.name);
                }
            }
            assert!(number(row, Col::Volume) > 0.0);
            assert!(!text(row, Col::Class).is_empty());
        }
    }
}

#[test]
fn a_field_of_zeros_has_no_objects() {
    let families = [
        "a: vorticity > 3 rms",
        "b: current > 0.01 volume",
        "c: q < -1 rms",
        "d: relative_helicity > 0.5",
        "e: speed > 2 mean",
        "f: lorentz > 0",
    ];
    let zero = vec![vec![0.0; 1000]; 6];
    let o = run(stored::<f32>(cube(10), BOTH, &zero), &request(&families));
    for f in &o.analysis.families {
        assert_eq!((f.rows.len(), f.dropped.objects, f.volume_fraction), (0, 0, 0.0), "{}", f.family);
    }
    assert_eq!(o.analysis.alignment.cosines[0].mean(), None);
    assert_eq!((o.analysis.divergence[0].ratio, o.analysis.kolmogorov_length), (None, None));
    // The complement fills the box, closes on itself along all axes and has no surface.
    let o = run(stored::<f64>(cube(10), BOTH, &zero), &request(&["all: vorticity < 1"]));
    let row = o.only(0);
    assert_eq!((number(row, Col::Cells), text(row, Col::Wraps), text(row, Col::Class)), (1000.0, "x y z", "tangle"));
    assert_eq!(row.get(Col::CosUVorticity), &Value::Missing);
    assert_eq!(row.get(Col::ShapefinderThickness), &Value::Missing);
    check_rows(&o);
}

#[test]
fn a_constant_field_has_no_gradient() {
    for frame in [ropewalk::model::request::Frame::Box, ropewalk::model::request::Frame::Stored] {
        let families = ["a: vorticity > 1", "fast: speed > 1", "h: relative_helicity > 0.1"];
        let request = Request { frame, ..request(&families) };
        let o = run(sampled::<f64>(cube(9), VELOCITY, |_| [3.0, 0.0, -4.0]), &request);
        assert_eq!(o.analysis.survey.velocity.curl2, 0.0);
        let still = frame == ropewalk::model::request::Frame::Box;
        assert_eq!([0, 1, 2].map(|k| o.rows(k).len()), [0, usize::from(!still), 0]);
        assert_eq!(o.analysis.frame, if still { [3.0, 0.0, -4.0] } else { [0.0; 3] });
        check_rows(&o);
    }
}

/// Nine samples are the width of the stencil; eight are refused with the axis named.
#[test]
fn nine_samples_are_enough() {
    for periodic in [true, false] {
        let grid = Grid::periodic([9, 11, 9], [1.0; 3]).with_periodic([periodic; 3]);
        // u = (y², 0, 0): |ω| = 2y exactly for polynomials up to degree 8, where no stencil wraps.
        let o = run(sampled::<f64>(grid.clone(), VELOCITY, |p| [p[1] * p[1], 0.0, 0.0]), &request(&["w: vorticity > 0.5"]));
        assert!(!o.rows(0).is_empty());
        if !periodic {
            let top = 2.0 * 10.0 / 11.0;
            assert!((o.analysis.survey.indicators[0].max - top).abs() < 1e-12);
            assert!(o.analysis.survey.indicators[0].min.abs() < 1e-12);
        }
        check_rows(&o);
    }
    let grid = Grid::periodic([9, 8, 9], [1.0; 3]);
    let e = try_run(sampled::<f32>(grid.clone(), VELOCITY, |_| [0.0; 3]), &request(&["w: vorticity > 1"]), &Execution::default())
        .err()
        .unwrap();
    assert_eq!(e.kind(), Kind::Input);
    assert!(e.to_string().contains("axis y") && e.to_string().contains("found 8"), "{e}");
}

/// Objects of one, two and three cells (flat and single cells break hull-based measures): extents are the sides of their cells, the surface is closed.
#[test]
fn objects_of_a_few_cells() {
    let spacing = [0.1, 0.2, 0.3];
    // Cells, and the extents along x, y, z of a brick where they make one (second moment l²/12 of a uniform rod, each cell a solid box).
    // Cells that share no more than a corner are one object (26 neighbours) of two closed surfaces: Euler number 2.
    type Case = (&'static [[usize; 3]], Option<[f64; 3]>, i64);
    let cases: [Case; 7] = [
        (&[[4, 5, 6]], Some([0.1, 0.2, 0.3]), 1),
        (&[[4, 5, 6], [5, 5, 6]], Some([0.2, 0.2, 0.3]), 1),
        (&[[4, 5, 6], [4, 6, 6]], Some([0.1, 0.4, 0.3]), 1),
        (&[[4, 5, 6], [5, 6, 7]], None, 2),
        (&[[4, 5, 6], [4, 5, 7], [4, 5, 8]], Some([0.1, 0.2, 0.9]), 1),
        (&[[4, 5, 6], [5, 5, 6], [5, 6, 6]], None, 1),
        // Across the corner of the periodic box.
        (&[[0, 0, 0], [9, 9, 9]], None, 2),
    ];
    for (cells, brick, euler) in cases {
        for b in [1.0, 1e-8, 1e8] {
            let grid = Grid { n: [10; 3], spacing, origin: [0.0; 3], periodic: [true; 3], stretched: [None, None, None] };
            let mut field = vec![vec![0.0; 1000]; 3];
            cells.iter().for_each(|c| field[0][grid.index(c[0], c[1], c[2]) as usize] = b);
            let o = run(stored::<f32>(grid.clone(), MAGNETIC, &field), &request(&[&format!("f: field > {}", 0.4 * b)]));
            let row = o.only(0);
            assert_eq!(number(row, Col::Cells), cells.len() as f64);
            assert!((number(row, Col::Volume) - cells.len() as f64 * 0.006).abs() < 1e-15);
            let mut extents = [Col::Extent1, Col::Extent2, Col::Extent3].map(|c| number(row, c));
            assert!(extents.iter().all(|&e| e > 0.09), "{extents:?}");
            if let Some(mut sides) = brick {
                sides.sort_by(f64::total_cmp);
                extents.sort_by(f64::total_cmp);
                assert!((0..3).all(|a| (extents[a] - sides[a]).abs() < 1e-12), "{extents:?} {sides:?}");
            }
            assert!(number(row, Col::SurfaceArea) > 0.0 && number(row, Col::MeanCurvatureIntegral) > 0.0);
            assert_eq!(row.get(Col::Euler), &Value::Integer(euler));
            assert!(crate::common::has_flag(row, "under_resolved"));
            assert!((number(row, Col::IndicatorMean) / b - 1.0).abs() < 1e-6, "{}", number(row, Col::IndicatorMean));
            assert!((number(row, Col::Peak) / b - 1.0).abs() < 1e-6);
            assert_eq!(text(row, Col::Wraps), "");
            check_rows(&o);
        }
    }
}
