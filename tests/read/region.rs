//! Regions: the same values as the part of the whole, across periodic faces as well.

use ropewalk::base::error::Kind;
use ropewalk::read::{InputSpec, Stretch};

use crate::files::{opened, spec};
use crate::flows::*;

const N: [usize; 3] = [12, 10, 9];
const NAMES: [&str; 3] = ["u", "v", "w"];

fn indices(ranges: [Option<(i64, i64)>; 3]) -> [Option<Stretch>; 3] {
    ranges.map(|r| r.map(|(a, b)| Stretch::Indices(a, b)))
}

#[test]
fn regions_are_parts_of_the_shifted_box() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let regions = [
        [Some((2, 7)), None, None],
        [None, Some((3, 10)), None],
        [None, None, Some((4, 9))],
        [Some((0, 5)), Some((1, 4)), Some((2, 4))],
        [Some((-3, 4)), None, Some((7, 12))],
        [Some((10, 14)), Some((-2, 3)), Some((-4, 2))],
        [Some((-5, 7)), Some((20, 25)), Some((-18, -10))],
        [Some((0, 12)), Some((5, 15)), None],
    ];
    for (order, double) in [("zyx", false), ("xyz", true), ("yzx", false)] {
        let place = |l: char| order.find(l).unwrap();
        let shape: Vec<usize> = order.chars().map(|l| N["xyz".find(l).unwrap()]).collect();
        let file = ::hdf5::File::create(&path).unwrap();
        for (c, name) in NAMES.into_iter().enumerate() {
            let stored = filled([shape[2], shape[1], shape[0]], |a, b, d| {
                let at = [d, b, a];
                code(c, at[place('x')], at[place('y')], at[place('z')])
            });
            if double { put::<f64>(&file, name, &shape, &stored) } else { put::<f32>(&file, name, &shape, &stored) }
        }
        file.close().unwrap();
        for region in regions {
            let case = format!("{order} {region:?}");
            let mut own = spec(order);
            (own.lengths, own.spacing, own.origin) = (None, Some([0.5, 1.0, 2.0]), [1.0, 0.0, -3.0]);
            own.region = indices(region);
            let grid = opened(&path, &own).source.grid().clone();
            let first = region.map(|r| r.map_or(0, |r| r.0));
            let n: [usize; 3] = std::array::from_fn(|a| region[a].map_or(N[a], |r| (r.1 - r.0) as usize));
            assert_eq!(grid.n, n, "{case}");
            assert_eq!(grid.periodic, [0, 1, 2].map(|a| n[a] == N[a]), "{case}");
            assert_eq!(grid.origin, [0, 1, 2].map(|a| own.origin[a] + first[a] as f64 * own.spacing.unwrap()[a]), "{case}");
            assert_eq!(grid.spacing, own.spacing.unwrap());
            let at = |a: usize, i: usize| (first[a] + i as i64).rem_euclid(N[a] as i64) as usize;
            for (c, got) in values(&path, &own).iter().enumerate() {
                assert_eq!(*got, filled(n, |x, y, z| code(c, at(0, x), at(1, y), at(2, z))), "{case} component {c}");
            }
        }
    }
}

#[test]
fn positions_pick_the_samples_between_them() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let all: Vec<(&str, Vec<f64>)> = NAMES.into_iter().enumerate().map(|(c, n)| (n, coded(N, c))).collect();
    hdf5(&path, &[9, 10, 12], &all);
    let grid = |periodic: bool, from: f64, to: f64| {
        let own = InputSpec {
            lengths: None,
            spacing: Some([0.1; 3]),
            origin: [0.3, 0.0, 0.0],
            periodic: [periodic; 3],
            region: [Some(Stretch::Positions(from, to)), None, None],
            ..spec("zyx")
        };
        let g = opened(&path, &own).source.grid().clone();
        (((g.origin[0] - 0.3) / 0.1).round() as i64, g.n[0])
    };
    // Samples at 0.3, 0.4, ... 1.4.
    assert_eq!(grid(true, 0.3, 0.6), (0, 4));
    assert_eq!(grid(true, 0.31, 0.69), (1, 3));
    assert_eq!(grid(true, 0.1, 0.4), (-2, 4));
    assert_eq!(grid(true, 1.2, 1.8), (9, 7));
    assert_eq!(grid(true, 0.3, 1.49), (0, 12));
    assert_eq!(grid(false, 0.25, 0.6), (0, 4));
    // The box of an open axis ends one spacing behind the last sample.
    assert_eq!(grid(false, 0.9, 1.5), (6, 6));
}

#[test]
fn regions_that_cannot_be_cut() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let all: Vec<(&str, Vec<f64>)> = NAMES.into_iter().enumerate().map(|(c, n)| (n, coded(N, c))).collect();
    hdf5(&path, &[9, 10, 12], &all);
    let check = |axis: usize, periodic: bool, stretch: Stretch, text: &str| {
        let mut own = InputSpec { periodic: [periodic; 3], lengths: Some([12.0, 10.0, 9.0]), ..spec("zyx") };
        own.region[axis] = Some(stretch);
        assert_eq!(fault(dir.path(), &path.clone().into(), &own), (Kind::Usage, format!("cannot cut the region: --region{text}")));
    };
    let next = "hint: the first sample of the next period is that of this one: end before it";
    let wrap = "hint: a region goes across a face only where the axis is periodic";
    check(
        0,
        true,
        Stretch::Indices(5, 5),
        "-cells x 5..5: expected an end above the first sample, found no samples; hint: indices count from 0, the second is one past the last sample",
    );
    check(1, true, Stretch::Indices(5, 6), "-cells y 5..6: expected at least 2 samples, found 1; hint: widen the region");
    check(2, false, Stretch::Indices(-1, 4), &format!("-cells z -1..4: expected samples inside 0..9, found an open axis; {wrap}"));
    check(2, false, Stretch::Indices(4, 10), &format!("-cells z 4..10: expected samples inside 0..9, found an open axis; {wrap}"));
    check(2, true, Stretch::Indices(-1, 9), &format!("-cells z -1..9: expected at most one period, 9 samples, found 10 samples; {next}"));
    check(
        0,
        true,
        Stretch::Positions(0.0, 12.0),
        &format!(" x 0 to 12: expected at most one period, 12 samples, found 13 samples; {next}"),
    );
    check(0, true, Stretch::Positions(2.2, 2.8), " x 2.2 to 2.8: expected at least 2 samples, found 0; hint: widen the region");
    check(
        0,
        true,
        Stretch::Positions(3.0, 2.0),
        " x 3 to 2: expected two finite positions in ascending order, found 3 and 2; hint: the first sample taken comes first, also across a periodic face",
    );
    check(
        1,
        false,
        Stretch::Positions(3.0, 20.0),
        &format!(" y 3 to 20: expected positions inside the box, found samples from 0 to 9 on an open axis; {wrap}"),
    );
    let flat = dir.path().join("p.h5");
    hdf5(&flat, &[5, 7], &[("u", vec![0.0; 35]), ("v", vec![0.0; 35])]);
    let mut own = spec("yx");
    own.region[2] = Some(Stretch::Indices(0, 1));
    assert_eq!(
        fault(dir.path(), &flat.into(), &own).1,
        "cannot cut the region: --region-cells z 0..1: expected no part of z, found a plane; hint: cut a plane along x and y only"
    );
}
