//! Coordinates of the samples, and densities: what becomes of the grid and the fields, and what is refused.

use std::path::{Path, PathBuf};

use ::hdf5::File;
use ropewalk::base::error::Kind;
use ropewalk::model::source::AnySource;
use ropewalk::read::{InputSpec, Opened, RawLayout, Stretch, open};

use crate::files::{opened, spec};
use crate::flows::*;
use crate::npy::npy;

const N: [usize; 3] = [12, 10, 9];

/// A file of velocities with three lines of coordinates, in f64 and f32.
fn with_lines(dir: &Path, lines: &[(&str, Vec<f64>)]) -> PathBuf {
    let path = dir.join("s.h5");
    let file = File::create(&path).unwrap();
    for (c, name) in ["u", "v", "w"].into_iter().enumerate() {
        put::<f32>(&file, name, &[N[2], N[1], N[0]], &coded(N, c));
    }
    for (name, values) in lines {
        if name.starts_with("single") {
            put::<f32>(&file, name, &[values.len()], values)
        } else {
            put::<f64>(&file, name, &[values.len()], values)
        }
    }
    file.close().unwrap();
    path
}

fn along(axis: usize, name: &str) -> InputSpec {
    let mut own = InputSpec { lengths: Some([6.0, 5.0, 4.5]), origin: [7.0; 3], ..spec("zyx") };
    own.coordinates[axis] = Some(name.into());
    own.lengths.as_mut().unwrap()[axis] = 0.0;
    own.origin[axis] = 0.0;
    own
}

fn bent(n: usize) -> Vec<f64> {
    (0..n).map(|i| -2.0 + i as f64 + 0.02 * (i * i) as f64).collect()
}

#[test]
fn unequal_spacing_makes_an_open_stretched_axis() {
    let dir = tempfile::tempdir().unwrap();
    for axis in 0..3 {
        let line = bent(N[axis]);
        let path = with_lines(dir.path(), &[("grid/line", line.clone())]);
        let got = opened(&path, &along(axis, "/grid/line"));
        let grid = got.source.grid();
        assert_eq!(grid.stretched[axis].as_ref().unwrap().positions, line);
        assert_eq!(grid.periodic, [0, 1, 2].map(|a| a != axis));
        assert_eq!(grid.origin, [0, 1, 2].map(|a| if a == axis { -2.0 } else { 7.0 }));
        assert_eq!([0, 1, 2].map(|a| a == axis || grid.spacing[a] == 0.5), [true; 3]);
        let name = ["x", "y", "z"][axis];
        assert_eq!(got.notes, [format!("{name} axis: the coordinates /grid/line are unequally spaced, the axis is open")]);
        let mut own = along(axis, "grid/line");
        own.periodic[axis] = false;
        let got = opened(&path, &own);
        assert_eq!(got.source.grid().spacing, grid.spacing);
        assert_eq!(got.notes, [format!("{name} axis: the coordinates /grid/line are unequally spaced")]);
        // A region has the positions of its part.
        own.region[axis] = Some(Stretch::Indices(2, 7));
        let got = opened(&path, &own);
        assert_eq!(got.source.grid().stretched[axis].as_ref().unwrap().positions, line[2..7]);
        own.region[axis] = Some(Stretch::Positions(line[3] - 0.4, line[6] + 0.1));
        let got = opened(&path, &own);
        assert_eq!(got.source.grid().stretched[axis].as_ref().unwrap().positions, line[3..7]);
    }
}

#[test]
fn equal_spacing_stays_uniform_and_periodic() {
    let dir = tempfile::tempdir().unwrap();
    // 0.1 i in single precision is off by up to 4e-8 of the axis.
    let line = |n: usize| (0..n).map(|i| 100.0 + 0.1 * i as f64).collect::<Vec<_>>();
    let path = with_lines(dir.path(), &[("x", line(12)), ("single_y", line(10)), ("z", line(9))]);
    let mut own = InputSpec { lengths: None, ..spec("zyx") };
    own.coordinates = ["x", "/single_y", "z"].map(|n| Some(n.into()));
    let got = opened(&path, &own);
    let grid = got.source.grid();
    assert!(!grid.is_stretched());
    assert_eq!(grid.periodic, [true; 3]);
    for a in 0..3 {
        assert!((grid.spacing[a] - 0.1).abs() < if a == 1 { 2e-6 } else { 1e-12 }, "{:?}", grid.spacing);
        assert_eq!(grid.origin[a], 100.0);
    }
    assert_eq!(got.notes.len(), 3);
    assert_eq!(got.notes[2], "z axis: the coordinates /z are equally spaced, 0.1 apart");
    // What is off by more than rounding is not equal.
    let mut off = line(12);
    off[5] += 1e-5;
    let path = with_lines(dir.path(), &[("x", off)]);
    assert!(opened(&path, &along(0, "x")).source.grid().is_stretched());
}

#[test]
fn files_beside_the_snapshot() {
    let dir = tempfile::tempdir().unwrap();
    let path = with_lines(dir.path(), &[]);
    let line = bent(10);
    write(dir.path(), "y.npy", &npy(1, "'>f8'", false, &[10], &doubles(&line, true)));
    let text: Vec<String> = line.iter().map(|v| format!(" {v:e}  # place")).collect();
    write(dir.path(), "y.txt", format!("# y of the samples\n\n{}\n", text.join("\n")).as_bytes());
    let grid = |o: Opened| o.source.grid().stretched[1].as_ref().unwrap().positions.clone();
    assert_eq!(grid(opened(&path, &along(1, "y.npy"))), line);
    assert_eq!(grid(opened(&path, &along(1, "y.txt"))), line);
    let raw = RawLayout { double: false, big_endian: false, shape: vec![9, 10, 12], offset: 0, record_markers: None };
    let bytes: Vec<u8> = (0..3).flat_map(|c| singles(&coded(N, c), false)).collect();
    let plain = write(dir.path(), "s.dat", &bytes);
    assert_eq!(grid(opened(&plain, &InputSpec { raw: Some(raw), ..along(1, "y.txt") })), line);
    let folder = dir.path().join("run");
    std::fs::create_dir(&folder).unwrap();
    for (c, name) in ["u.npy", "v.npy", "w.npy"].into_iter().enumerate() {
        write(&folder, name, &npy(1, "'<f4'", false, &[9, 10, 12], &singles(&coded(N, c), false)));
    }
    write(&folder, "yc.npy", &npy(1, "'<f8'", false, &[10], &doubles(&line, false)));
    assert_eq!(grid(opened(&folder, &along(1, "yc.npy"))), line);
    assert_eq!(grid(opened(&folder.join("{field}.npy"), &along(1, "yc.npy"))), line);
}

#[test]
fn coordinates_that_do_not_fit() {
    let dir = tempfile::tempdir().unwrap();
    let check = |line: Vec<f64>, text: &str| {
        let path = with_lines(dir.path(), &[("grid/x", line)]);
        let want = format!("cannot use the coordinates: DIR/s.h5: /grid/x (x axis): expected {text}");
        assert_eq!(fault(dir.path(), &path.into(), &along(0, "/grid/x")), (Kind::Input, want));
    };
    let good = bent(12);
    let with = |i: usize, v: f64| {
        let mut line = good.clone();
        line[i] = v;
        line
    };
    check(bent(11), "12 numbers, as many as samples, found 11; hint: one number a sample");
    check(bent(13), "12 numbers, as many as samples, found 13; hint: coordinates of faces are one more: give those of the samples");
    check(
        good.iter().rev().copied().collect(),
        "strictly ascending coordinates, found descending ones; hint: reverse the axis in the arrays and in the coordinates",
    );
    check(with(1, -2.0), "strictly ascending coordinates, found -2 behind -2 at index 1; hint: every sample needs a place of its own");
    check(with(3, 9.5), "strictly ascending coordinates, found 2.32 behind 9.5 at index 4; hint: every sample needs a place of its own");
    check(with(3, f64::NAN), "finite numbers, found NaN at index 3");
    let path = with_lines(dir.path(), &[("x", good.clone())]);
    let refused = |name: &str| fault(dir.path(), &path.clone().into(), &along(0, name));
    assert_eq!(
        refused("y").1,
        "cannot find the dataset: DIR/s.h5: /y: found only /u 9x10x12, /v 9x10x12, /w 9x10x12, /x 12; hint: --coordinates x=NAME \
         names a dataset of the file, or a file beside it"
    );
    assert_eq!(refused("u").1, "cannot use the coordinates: DIR/s.h5: /u: expected a dataset with one axis, found 9x10x12");
    write(dir.path(), "x.txt", b"1\n2 # two\n3,4\n");
    assert_eq!(refused("x.txt").1, "cannot use the coordinates: DIR/x.txt: line 3: expected one number a line, found \"3,4\"");
    write(dir.path(), "two.npy", &npy(1, "'<f8'", false, &[2, 2], &doubles(&[0.0; 4], false)));
    assert_eq!(refused("two.npy").1, "cannot use the coordinates: DIR/two.npy: expected an array with one axis, found 2x2");
    // Sizes are missing only where there are no coordinates.
    let own = InputSpec { lengths: None, ..along(0, "x") };
    assert_eq!(
        fault(dir.path(), &path.clone().into(), &own).1,
        "cannot settle the size of the box: --lengths, --spacing: expected one of them for y, z, found neither; \
         hint: --lengths 6.283185,6.283185,6.283185 for a 2 pi box"
    );
    let own = InputSpec { lengths: None, coordinates: [Some("x".into()), Some("single".into()), None], ..spec("zyx") };
    let path = with_lines(dir.path(), &[("x", good), ("single", bent(10))]);
    assert_eq!(fault(dir.path(), &path.into(), &own).0, Kind::Usage);
    let npy_folder = dir.path().join("run");
    std::fs::create_dir(&npy_folder).unwrap();
    for name in ["u.npy", "v.npy", "w.npy"] {
        write(&npy_folder, name, &npy(1, "'<f4'", false, &[9, 10, 12], &[0; 4320]));
    }
    assert_eq!(
        fault(dir.path(), &npy_folder.into(), &along(2, "z.txt")).1,
        "cannot find the coordinates: DIR/run/z.txt: expected a .npy file, or a text file with one number a line, found nothing; \
         hint: names are those of files in the folder of the snapshot"
    );
}

/// Lengths beside coordinates. That samples on both walls fill the channel with half cells there is the trapezoidal rule.
#[test]
fn lengths_settle_the_cells_at_the_ends() {
    let dir = tempfile::tempdir().unwrap();
    let walls: Vec<f64> = vec![-1.0, -0.9, -0.6, -0.2, 0.0, 0.2, 0.5, 0.7, 0.95, 1.0];
    let path = with_lines(dir.path(), &[("y", walls.clone()), ("x", (0..12).map(|i| 0.5 + 0.25 * f64::from(i)).collect())]);
    let with = |axis: usize, length: f64| {
        let mut own = along(axis, ["x", "y"][axis]);
        own.lengths.as_mut().unwrap()[axis] = length;
        own
    };
    let grid = |length: f64| opened(&path, &with(1, length)).source.grid().clone();
    let ends = |length: f64| {
        let widths = grid(length).stretched[1].as_ref().unwrap().widths.clone();
        ((widths[0] * 1e6).round() / 1e6, (widths[9] * 1e6).round() / 1e6)
    };
    assert_eq!((ends(0.0), ends(2.0), ends(2.1)), ((0.1, 0.05), (0.05, 0.025), (0.1, 0.075)));
    assert!((grid(2.0).length(1) - 2.0).abs() < 1e-15 && (grid(2.0000001).length(1) - 2.0).abs() < 1e-6);
    let refused = |own: &InputSpec| fault(dir.path(), &path.clone().into(), own);
    let usage = |text: &str| (Kind::Usage, format!("cannot settle the size of the box: {text}"));
    for length in [1.99, 2.2] {
        assert_eq!(
            refused(&with(1, length)),
            usage(&format!(
                "--lengths for y: expected 2 to 2.1, as the coordinates /y go from -1 to 1, found {length}; \
                 hint: leave the entry of y 0 for whole cells at the ends"
            ))
        );
    }
    assert_eq!(
        refused(&with(1, f64::NAN)),
        usage(
            "--lengths for y: expected a finite number above 0, or 0, found NaN; hint: leave the entry of y 0 to take what the coordinates say"
        )
    );
    // Equal spacing: 12 samples 0.25 apart are 3 long.
    assert_eq!(opened(&path, &with(0, 3.001)).source.grid().spacing[0], 0.25);
    assert_eq!(
        refused(&with(0, 3.1)),
        usage(
            "--lengths for x: expected 3, as 12 coordinates /x that are 0.25 apart say, found 3.1; \
             hint: leave the entry of x 0 to take what the coordinates say"
        )
    );
    assert_eq!(
        refused(&with(0, 2.75)),
        usage(
            "--lengths for x: expected 3, as 12 coordinates /x that are 0.25 apart say, found 2.75; \
             hint: the last sample repeats the first one of the period, or the samples lie on both walls: store the arrays without it, \
             or leave the entry of x 0 for whole cells at the walls"
        )
    );
    let spaced = |axis: usize, spacing: [f64; 3]| InputSpec { lengths: None, spacing: Some(spacing), ..along(axis, ["x", "y"][axis]) };
    assert_eq!(opened(&path, &spaced(0, [0.25, 1.0, 1.0])).source.grid().spacing, [0.25, 1.0, 1.0]);
    assert_eq!(
        refused(&spaced(0, [0.26, 1.0, 1.0])),
        usage(
            "--spacing for x: expected 0.25, as 12 coordinates /x that are 0.25 apart say, found 0.26; \
             hint: leave the entry of x 0 to take what the coordinates say"
        )
    );
    assert_eq!(
        refused(&spaced(1, [1.0; 3])),
        usage(
            "--spacing for y: expected 0, as the coordinates /y are unequally spaced, found 1; \
             hint: --lengths says how long all cells are together"
        )
    );
    // The coordinates decide where the axis begins. A region that ends at a wall keeps the cell there.
    let mut own = InputSpec { origin: [7.0; 3], ..with(1, 2.0) };
    own.region[1] = Some(Stretch::Indices(0, 4));
    let got = opened(&path, &own);
    assert_eq!(got.source.grid().stretched[1].as_ref().unwrap().widths[0], grid(2.0).stretched[1].as_ref().unwrap().widths[0]);
    assert_eq!(got.source.grid().origin, [7.0, -1.0, 7.0]);
    assert_eq!(got.notes[0], "y axis: it begins at -1, as the coordinates /y say, not at the origin 7");
}

#[test]
fn planes_take_two_coordinates() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("p.h5");
    let file = File::create(&path).unwrap();
    for name in ["u", "v"] {
        put::<f64>(&file, name, &[10, 12], &coded([12, 10, 1], 0));
    }
    put::<f64>(&file, "x", &[12], &bent(12));
    put::<f64>(&file, "y", &[10], &bent(10));
    file.close().unwrap();
    let own = InputSpec { lengths: None, coordinates: [Some("x".into()), Some("y".into()), None], ..spec("yx") };
    let grid = opened(&path, &own).source.grid().clone();
    assert!(grid.is_flat() && grid.stretched[0].is_some() && grid.stretched[1].is_some() && grid.stretched[2].is_none());
}

#[test]
fn densities_must_be_positive_where_they_are_needed() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    for (bad, text) in [(0.0, "0"), (-1.5, "-1.5"), (f64::NAN, "NaN"), (f64::INFINITY, "inf")] {
        let file = File::create(&path).unwrap();
        for (c, name) in ["u", "v", "w", "bx", "by", "bz"].into_iter().enumerate() {
            put::<f64>(&file, name, &[9, 10, 12], &coded(N, c));
        }
        put::<f64>(&file, "rho", &[9, 10, 12], &filled(N, |x, y, z| if (x, y, z) == (7, 6, 5) { bad } else { 1.0 }));
        file.close().unwrap();
        let own = InputSpec { density: Some("rho".into()), ..spec("zyx") };
        for region in [None, Some(Stretch::Indices(6, 10))] {
            let own = InputSpec { region: [region, region, None], ..own.clone() };
            let AnySource::F64(mut source) = open(&path.clone().into(), &own).unwrap().source else { unreachable!() };
            let n = source.grid().n;
            let mut store = vec![vec![0.0; 3 * n[0] * n[1]]; 6];
            let mut out: Vec<&mut [f64]> = store.iter_mut().map(|v| &mut v[..]).collect();
            source.read(0, 3, &mut out).unwrap();
            let e = source.read(3, 6, &mut out).unwrap_err();
            assert_eq!(e.kind(), Kind::Data);
            assert_eq!(
                plain(dir.path(), &e),
                format!(
                    "cannot divide the magnetic field by the root of the density: DIR/s.h5: /rho: expected densities above 0, found \
                     {text} at x=7 y=6 z=5; hint: indices count from 0; was the file written completely?"
                )
            );
        }
        // A velocity alone does not need its values, but it must be there and on the same grid.
        let own = InputSpec { velocity: crate::files::names(&["u", "v", "w"]), ..own };
        let got = opened(&path, &own);
        assert!(got.source.fields().compressible);
        assert_eq!(got.datasets[3], "s.h5:/rho");
        assert_eq!(values(&path, &own)[2], coded(N, 2));
    }
    let own = InputSpec { velocity: crate::files::names(&["u", "v", "w"]), density: Some("ro".into()), ..spec("zyx") };
    let text = fault(dir.path(), &path.into(), &own).1;
    assert!(text.starts_with("cannot find the dataset: DIR/s.h5: /ro: found only /bx"), "{text}");
    assert!(text.ends_with("; hint: --density NAME names it"), "{text}");
}
