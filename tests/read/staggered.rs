//! Magnetic components on faces: brought to the samples with errors of order 8, whatever the axis, its faces and its spacing.

use std::f64::consts::TAU;
use std::path::Path;

use ropewalk::read::{InputSpec, Staggering, Stretch};

use crate::files::spec;
use crate::flows::*;

/// A smooth periodic field of unit period, different along every axis and for every component.
fn field(c: usize, p: [f64; 3]) -> f64 {
    let k = |a: usize| TAU * p[a];
    (k(0) + 0.3).sin() * (k(1) + 0.7).cos() + (k(1) + k(2) + c as f64).sin() + (k(2) - k(0) + 0.1).cos()
}

/// A coordinate with unequal spacing on 0..1.
fn bent(s: f64) -> f64 {
    s + 0.1 * (TAU * s).sin() / TAU + 0.05 * s * s
}

struct Case {
    staggering: Staggering,
    periodic: bool,
    stretched: bool,
}

/// Writes components on their faces and gives the largest error at the samples.
fn error(dir: &Path, n: usize, case: &Case) -> f64 {
    let shift = match case.staggering {
        Staggering::LowerFaces => -0.5,
        Staggering::UpperFaces => 0.5,
        Staggering::Centres => 0.0,
    };
    // An open axis ends with its last sample.
    let h = if case.periodic { 1.0 / n as f64 } else { 1.0 / (n - 1) as f64 };
    let at = |i: f64| if case.stretched { bent(i * h) } else { i * h };
    let face = |i: usize| {
        let (i, outer) = (i as f64, i as f64 + 2.0 * shift);
        // Faces lie halfway between samples; beyond the last sample as far as inside.
        let inside = outer >= 0.0 && outer <= (n - 1) as f64;
        if case.periodic || inside { 0.5 * (at(i) + at(outer)) } else { at(i) + 0.5 * (at(i) - at(i - 2.0 * shift)) }
    };
    let path = dir.join("s.h5");
    let file = ::hdf5::File::create(&path).unwrap();
    let cube = [n; 3];
    for (c, name) in ["bx", "by", "bz"].into_iter().enumerate() {
        let stored = filled(cube, |x, y, z| {
            let i = [x, y, z];
            field(c, std::array::from_fn(|a| if a == c { face(i[a]) } else { at(i[a] as f64) }))
        });
        put::<f64>(&file, name, &[n; 3], &stored);
    }
    let line: Vec<f64> = (0..n).map(|i| at(i as f64)).collect();
    put::<f64>(&file, "x", &[n], &line);
    file.close().unwrap();
    let mut own = InputSpec { staggering: case.staggering, periodic: [case.periodic; 3], ..spec("zyx") };
    (own.lengths, own.spacing) = (None, Some([h; 3]));
    if case.stretched {
        own.coordinates = [0; 3].map(|_| Some("x".into()));
        own.spacing = None;
    }
    let got = values(&path, &own);
    let mut worst: f64 = 0.0;
    for (c, got) in got.iter().enumerate() {
        let exact = filled(cube, |x, y, z| field(c, [x, y, z].map(|i| at(i as f64))));
        worst = got.iter().zip(&exact).fold(worst, |w, (a, b)| w.max((a - b).abs()));
    }
    worst
}

#[test]
fn errors_are_of_order_eight() {
    let dir = tempfile::tempdir().unwrap();
    for staggering in [Staggering::LowerFaces, Staggering::UpperFaces] {
        for (periodic, stretched) in [(true, false), (false, false), (false, true)] {
            let case = Case { staggering, periodic, stretched };
            let (coarse, fine) = (error(dir.path(), 16, &case), error(dir.path(), 32, &case));
            // Halving the spacing divides an error of order 8 by 256; beyond open faces it is not in its limit yet.
            let order = (coarse / fine).log2();
            let wanted = if periodic { 7.8..8.2 } else { 7.2..9.8 };
            assert!(
                wanted.contains(&order),
                "{staggering:?} periodic {periodic} stretched {stretched}: order {order}, {coarse:e} {fine:e}"
            );
            assert!(fine < if periodic { 2e-8 } else { 2e-5 }, "{staggering:?} {periodic} {stretched}: {fine:e}");
        }
    }
}

#[test]
fn polynomials_of_degree_seven_are_exact() {
    // Interpolation through eight points: exact for degree 7, at open faces and unequal spacing too.
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let n = 11;
    let line: Vec<f64> = (0..n).map(|i| (i as f64 / 10.0).powf(1.3) * 2.0 - 1.0).collect();
    let p = |x: f64| 1.0 + x * (2.0 + x * (-1.0 + x * (0.5 + x * (1.5 + x * (-2.0 + x * (0.7 - 1.1 * x))))));
    let face = |i: usize| if i == 0 { line[0] - 0.5 * (line[1] - line[0]) } else { 0.5 * (line[i - 1] + line[i]) };
    let file = ::hdf5::File::create(&path).unwrap();
    for (c, name) in ["bx", "by", "bz"].into_iter().enumerate() {
        put::<f64>(&file, name, &[n; 3], &filled([n; 3], |x, y, z| p(face([x, y, z][c]))));
    }
    put::<f64>(&file, "x", &[n], &line);
    file.close().unwrap();
    let coordinates = [0; 3].map(|_| Some("x".into()));
    let own = InputSpec { staggering: Staggering::LowerFaces, coordinates, lengths: None, ..spec("zyx") };
    for (c, got) in values(&path, &own).iter().enumerate() {
        let exact = filled([n; 3], |x, y, z| p(line[[x, y, z][c]]));
        let worst = got.iter().zip(&exact).fold(0.0f64, |w, (a, b)| w.max((a - b).abs()));
        assert!(worst < 1e-12, "component {c}: {worst:e}");
    }
}

/// Velocity, density and magnetic field, so that every layer is there.
fn everything(path: &Path, n: [usize; 3]) -> InputSpec {
    let file = ::hdf5::File::create(path).unwrap();
    let shape = [n[2], n[1], n[0]];
    for (c, name) in ["u", "v", "w", "bx", "by", "bz"].into_iter().enumerate() {
        let at = |x: usize, y: usize, z: usize| [x as f64 / n[0] as f64, y as f64 / n[1] as f64, z as f64 / n[2] as f64];
        put::<f32>(&file, name, &shape, &filled(n, |x, y, z| field(c, at(x, y, z))));
    }
    put::<f32>(&file, "rho", &shape, &filled(n, |x, y, z| 1.0 + (x + 2 * y + 3 * z) as f64 / 40.0));
    file.close().unwrap();
    InputSpec { density: Some("rho".into()), ..spec("zyx") }
}

#[test]
fn faces_then_density_then_region() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let n = [12, 10, 14];
    let plain = everything(&path, n);
    let raw = values(&path, &InputSpec { density: None, ..plain.clone() });
    let centred = values(&path, &InputSpec { density: None, staggering: Staggering::UpperFaces, ..plain.clone() });
    assert_eq!(centred[..3], raw[..3]);
    assert_ne!(centred[3], raw[3]);
    let whole = values(&path, &InputSpec { staggering: Staggering::UpperFaces, ..plain.clone() });
    assert_eq!(whole[..3], raw[..3]);
    let rho = filled(n, |x, y, z| f64::from((1.0 + (x + 2 * y + 3 * z) as f64 / 40.0) as f32));
    for c in 3..6 {
        for (i, b) in whole[c].iter().enumerate() {
            let want = f64::from(centred[c][i] as f32 / (rho[i] as f32).sqrt());
            assert_eq!(*b, want, "component {c} at {i}");
        }
    }
    // A region of it has the values of the whole, to the bit: faces are brought to samples before anything is cut.
    for region in [[Some((3, 9)), None, None], [None, Some((-2, 4)), Some((12, 17))], [Some((-1, 3)), Some((8, 12)), Some((-3, 3))]] {
        let own = InputSpec {
            staggering: Staggering::UpperFaces,
            region: region.map(|r| r.map(|(a, b)| Stretch::Indices(a, b))),
            ..plain.clone()
        };
        let first = region.map(|r| r.map_or(0, |r| r.0));
        let size: [usize; 3] = std::array::from_fn(|a| region[a].map_or(n[a], |r| (r.1 - r.0) as usize));
        let at = |a: usize, i: usize| (first[a] + i as i64).rem_euclid(n[a] as i64) as usize;
        for (got, all) in values(&path, &own).iter().zip(&whole) {
            let want = filled(size, |x, y, z| all[(at(2, z) * n[1] + at(1, y)) * n[0] + at(0, x)]);
            assert_eq!(*got, want, "{region:?}");
        }
    }
}

#[test]
fn chunks_and_interleaved_components_give_the_same() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let n = [12, 10, 14];
    let own = InputSpec { staggering: Staggering::LowerFaces, ..everything(&path, n) };
    let want = values(&path, &own);
    let read = |name: &str| ::hdf5::File::open(&path).unwrap().dataset(name).unwrap().read_raw::<f32>().unwrap();
    let stored: Vec<Vec<f32>> = ["u", "v", "w", "bx", "by", "bz", "rho"].map(read).into();
    let other = dir.path().join("c.h5");
    let file = ::hdf5::File::create(&other).unwrap();
    for (name, first) in [("velocity", 0), ("magnetic", 3)] {
        let mixed: Vec<f32> = (0..stored[0].len()).flat_map(|i| (0..3).map(move |c| (c, i))).map(|(c, i)| stored[first + c][i]).collect();
        let builder = file.new_dataset::<f32>().shape([14, 10, 12, 3]).chunk([5, 4, 7, 3]).deflate(1);
        builder.create(name).unwrap().write_raw(&mixed).unwrap();
    }
    file.new_dataset::<f32>().shape([14, 10, 12]).chunk([3, 10, 12]).create("rho").unwrap().write_raw(&stored[6]).unwrap();
    file.close().unwrap();
    assert_eq!(values(&other, &own), want);
}

/// Magnetic components with one more face along their own axis, `f` of component and face index.
fn faced(path: &Path, n: [usize; 3], velocity: bool, f: impl Fn(usize, [usize; 3]) -> f64) {
    let file = ::hdf5::File::create(path).unwrap();
    if velocity {
        for name in ["u", "v", "w"] {
            put::<f64>(&file, name, &[n[2], n[1], n[0]], &filled(n, |_, _, _| 1.0));
        }
    }
    for (c, name) in ["bx", "by", "bz"].into_iter().enumerate() {
        let mut own = n;
        own[c] += 1;
        put::<f64>(&file, name, &[own[2], own[1], own[0]], &filled(own, |x, y, z| f(c, [x, y, z])));
    }
    file.close().unwrap();
}

#[test]
fn arrays_with_a_face_behind_the_last_sample() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let n = [12, 10, 9];
    // Across a periodic axis the last face is the first again.
    let wrapped = |c: usize, i: [usize; 3]| field(c, std::array::from_fn(|a| (i[a] % n[a]) as f64 / n[a] as f64));
    let own = InputSpec { staggering: Staggering::LowerFaces, ..spec("zyx") };
    faced(&path, n, true, wrapped);
    let got = values(&path, &own);
    let plain = dir.path().join("p.h5");
    let all = |c: usize| filled(n, |x, y, z| wrapped(c, [x, y, z]));
    hdf5(&plain, &[9, 10, 12], &[("bx", all(0)), ("by", all(1)), ("bz", all(2))]);
    assert_eq!(got[3..], values(&plain, &own));
    faced(&path, n, false, wrapped);
    assert_eq!(values(&path, &own), got[3..]);
    // At an open face it is used: sample n - 1 lies between faces, and a polynomial of degree 7 is exact.
    let p = |x: f64| 1.0 + x * (2.0 + x * (-1.0 + x * (0.5 + x * (1.5 + x * (-2.0 + x * (0.7 - 1.1 * x))))));
    let open = InputSpec { periodic: [false; 3], ..own.clone() };
    for velocity in [false, true] {
        faced(&path, n, velocity, |c, i| p((i[c] as f64 - 0.5) / 8.0));
        let got = values(&path, &open);
        for (c, b) in got[got.len() - 3..].iter().enumerate() {
            let exact = filled(n, |x, y, z| p([x, y, z][c] as f64 / 8.0));
            let worst = b.iter().zip(&exact).fold(0.0f64, |w, (a, b)| w.max((a - b).abs()));
            assert!(worst < 1e-12, "component {c}: {worst:e}");
        }
        // It matters: another value there changes the last samples.
        faced(&path, n, velocity, |c, i| if i[c] == n[c] { 100.0 } else { p((i[c] as f64 - 0.5) / 8.0) });
        let other = values(&path, &open);
        assert_ne!(other[got.len() - 1].last(), got[got.len() - 1].last());
    }
    let text = fault(dir.path(), &path.clone().into(), &InputSpec { staggering: Staggering::Centres, ..own.clone() }).1;
    assert_eq!(
        text,
        "cannot use the dataset: DIR/s.h5: /bx: expected 12 x 10 x 9 samples along x, y, z as in s.h5:/u, found 13 x 10 x 9 samples along \
         x, y, z; hint: a magnetic component with one more face than samples is one on lower faces: say so"
    );
    let text = fault(dir.path(), &path.into(), &InputSpec { staggering: Staggering::UpperFaces, ..own }).1;
    assert!(text.ends_with("is one on lower faces: say so"), "{text}");
}
