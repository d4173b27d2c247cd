//! Planes: arrays of two axes, or with an axis of length 1, of two or three components.

use std::path::Path;

use ::hdf5::File;
use ropewalk::base::error::Kind;
use ropewalk::read::InputSpec;

use crate::files::{names, opened, spec};
use crate::flows::*;
use crate::npy::npy;

const N: [usize; 3] = [7, 5, 1];

/// Values of component `c` of an array whose axes are y, x, or x, y.
fn plane(order: &str, c: usize) -> Vec<f64> {
    if order == "yx" { coded(N, c) } else { (0..35).map(|i| code(c, i / 5, i % 5, 0)).collect() }
}

fn check(path: &Path, own: &InputSpec, components: usize, case: &str) {
    let got = opened(path, own);
    let grid = got.source.grid();
    assert_eq!((grid.n, grid.periodic, grid.is_flat()), (N, [true, true, false], true), "{case}");
    assert_eq!(grid.spacing, [1.0 / 7.0, 0.2, 1.0], "{case}");
    let mut want: Vec<Vec<f64>> = (0..components).map(|c| coded(N, c)).collect();
    want.resize(3, vec![0.0; 35]);
    assert_eq!(values(path, own), want, "{case}");
    let note = "the velocity has two components: the third is taken as 0".to_string();
    assert_eq!(got.notes, if components == 2 { vec![note] } else { vec![] }, "{case}");
    assert_eq!(got.components.len(), 3);
    assert_eq!(got.components[2] == "no dataset", components == 2, "{case}");
}

#[test]
fn arrays_of_every_rank() {
    let dir = tempfile::tempdir().unwrap();
    for order in ["yx", "xy"] {
        let two = if order == "yx" { [5, 7] } else { [7, 5] };
        let full = if order == "yx" { "zyx" } else { "zxy" };
        let shapes: [(&str, Vec<usize>); 4] =
            [(order, two.into()), (full, two.into()), (full, vec![1, two[0], two[1]]), (&format!("{order}z"), vec![two[0], two[1], 1])];
        for (said, shape) in shapes {
            for components in [2, 3] {
                let case = format!("{said} {shape:?} {components}");
                // A dataset a component, guessed and named.
                let path = dir.path().join("s.h5");
                let all: Vec<(&str, Vec<f64>)> = ["u", "v", "w"].into_iter().zip((0..components).map(|c| plane(order, c))).collect();
                hdf5(&path, &shape, &all);
                check(&path, &spec(said), components, &case);
                let own = InputSpec { velocity: names(&["u", "v", "w"][..components]), ..spec(said) };
                check(&path, &own, components, &case);
                // Chunks pass through the library.
                let file = File::create(&path).unwrap();
                for (name, values) in &all {
                    let chunk: Vec<usize> = shape.iter().map(|n| n.div_ceil(2)).collect();
                    let builder = file.new_dataset::<f64>().shape(&shape[..]).chunk(chunk).deflate(1);
                    builder.create(*name).unwrap().write_raw(values).unwrap();
                }
                file.close().unwrap();
                check(&path, &spec(said), components, &case);
                // A component axis.
                let first: Vec<f64> = (0..components).flat_map(|c| plane(order, c)).collect();
                let last: Vec<f64> = (0..35).flat_map(|i| (0..components).map(move |c| (c, i))).map(|(c, i)| plane(order, c)[i]).collect();
                let (before, after) = ([&[components], &shape[..]].concat(), [&shape[..], &[components]].concat());
                for (shape, values, letters) in [(&before, &first, format!("c{said}")), (&after, &last, format!("{said}c"))] {
                    hdf5(&path, shape, &[("velocity", values.clone())]);
                    check(&path, &spec(said), components, &case);
                    check(&path, &spec(&letters), components, &case);
                    let file = write(dir.path(), "s.npy", &npy(1, "'<f8'", false, shape, &doubles(values, false)));
                    check(&file, &spec(said), components, &case);
                }
            }
        }
    }
}

#[test]
fn fortran_planes_of_numpy() {
    let dir = tempfile::tempdir().unwrap();
    for (c, name) in ["u.npy", "v.npy"].into_iter().enumerate() {
        // Indexed (x, y) in Fortran order: the values are those of y slowest.
        write(dir.path(), name, &npy(1, "'<f8'", true, &[7, 5], &doubles(&coded(N, c), false)));
    }
    check(dir.path(), &spec("zyx"), 2, "folder");
    check(&dir.path().join("{field}.npy"), &spec("yx"), 2, "one file a component");
}

#[test]
fn the_third_length_means_nothing() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    hdf5(&path, &[5, 7], &[("u", plane("yx", 0)), ("v", plane("yx", 1)), ("b", plane("yx", 2))]);
    let own = InputSpec { lengths: Some([1.0, 1.0, f64::NAN]), ..spec("yx") };
    check(&path, &own, 2, "lengths");
    let own = InputSpec { lengths: None, spacing: Some([1.0 / 7.0, 0.2, 0.0]), ..spec("yx") };
    check(&path, &own, 2, "spacing");
    // In space it does.
    hdf5(&path, &[2, 5, 7], &[("u", vec![0.0; 70]), ("v", vec![0.0; 70]), ("w", vec![0.0; 70])]);
    let own = InputSpec { lengths: Some([1.0, 1.0, 0.0]), ..spec("zyx") };
    assert_eq!(
        fault(dir.path(), &path.into(), &own),
        (Kind::Usage, "cannot settle the size of the box: --lengths: expected 3 finite numbers above 0, found 1,1,0".into())
    );
}

#[test]
fn what_is_no_plane() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let check = |own: &InputSpec, shape: &[usize], all: &[&str], kind: Kind, text: &str| {
        let values = vec![0.0; shape.iter().product()];
        let all: Vec<(&str, Vec<f64>)> = all.iter().map(|n| (*n, values.clone())).collect();
        hdf5(&path, shape, &all);
        assert_eq!(fault(dir.path(), &path.clone().into(), own), (kind, text.into()));
    };
    let two = InputSpec { velocity: names(&["u", "v"]), ..spec("zyx") };
    check(
        &two,
        &[3, 5, 7],
        &["u", "v"],
        Kind::Input,
        "cannot use the dataset: DIR/s.h5: /u: expected a plane, as one of two components, found 3x5x7; \
         hint: a field in space has three components: --velocity takes three names",
    );
    check(
        &two,
        &[5],
        &["u", "v"],
        Kind::Input,
        "cannot use the dataset: DIR/s.h5: /u: expected rank 3 (2 on a plane), as one of two components, found 5 (rank 1); \
         hint: a dataset with a component axis is named alone: --velocity NAME",
    );
    check(
        &spec("yx"),
        &[3, 5, 7],
        &["u", "v", "w"],
        Kind::Usage,
        "cannot use the axis order: DIR/s.h5: /u: expected x, y and z for an array with three space axes, found --order yx for 3x5x7; \
         hint: --order zyx for arrays with z slowest and x fastest",
    );
    check(
        &InputSpec { velocity: names(&["u"]), ..spec("zyx") },
        &[2, 7, 3],
        &["u"],
        Kind::Usage,
        "cannot tell the component axis: DIR/s.h5: /u: expected length 2 or 3 on the first or on the last axis, found both in 2x7x3; \
         hint: write --order czyx or --order zyxc",
    );
    check(
        &InputSpec { velocity: names(&["u"]), ..spec("cyx") },
        &[5, 7, 3],
        &["u"],
        Kind::Input,
        "cannot use the dataset: DIR/s.h5: /u: expected length 2 or 3 on the first axis, where --order has its c, found 5x7x3; \
         hint: --order gives the axes slowest first, with c for a component axis",
    );
    check(
        &InputSpec { buoyancy: Some("u".into()), ..spec("zyx") },
        &[3, 5, 7, 3],
        &["velocity", "u"],
        Kind::Usage,
        "cannot tell the component axis: DIR/s.h5: /velocity: expected length 3 on the first or on the last axis, found both in \
         3x5x7x3; hint: write --order czyx or --order zyxc",
    );
    check(
        &InputSpec { buoyancy: Some("u".into()), ..spec("zyxc") },
        &[3, 5, 7, 3],
        &["velocity", "u"],
        Kind::Input,
        "cannot use the dataset: DIR/s.h5: /u: expected rank 3 (2 on a plane), as a scalar, found 3x5x7x3 (rank 4); \
         hint: --buoyancy takes an array without a component axis",
    );
}
