//! Round trips of `.npy` files written byte by byte after NumPy Enhancement Proposal 1.

use std::path::Path;

use ropewalk::model::source::Fields;
use ropewalk::read::InputSpec;

use crate::files::*;

/// A `.npy` file of the given format version. `shape` is as the header states it.
pub fn npy(version: u8, descr: &str, fortran: bool, shape: &[usize], values: &[u8]) -> Vec<u8> {
    let order = if fortran { "True" } else { "False" };
    let list: Vec<String> = shape.iter().map(usize::to_string).collect();
    let tail = if shape.len() == 1 { "," } else { "" };
    let mut header = format!("{{'descr': {descr}, 'fortran_order': {order}, 'shape': ({}{tail}), }}", list.join(", "));
    let digits = if version == 1 { 2 } else { 4 };
    while (8 + digits + header.len() + 1) % 64 != 0 {
        header.push(' ');
    }
    header.push('\n');
    let mut bytes = b"\x93NUMPY".to_vec();
    bytes.extend([version, 0]);
    bytes.extend(&(header.len() as u32).to_le_bytes()[..digits]);
    bytes.extend(header.as_bytes());
    bytes.extend(values);
    bytes
}

fn write<T: Value>(path: &Path, version: u8, axes: &str, first: usize, big: bool, fortran: bool) {
    let (mut shape, values) = array::<T>(axes, first);
    if fortran {
        shape.reverse();
    }
    let descr = format!("'{}f{}'", if big { '>' } else { '<' }, size_of::<T>());
    let values: Vec<u8> = values.into_iter().flat_map(|v| v.bytes(big)).collect();
    std::fs::write(path, npy(version, &descr, fortran, &shape, &values)).unwrap();
}

fn every_form<T: Value>() {
    let dir = tempfile::tempdir().unwrap();
    let run = dir.path().join("run.5");
    std::fs::create_dir(&run).unwrap();
    for (i, order) in ORDERS.into_iter().enumerate() {
        for (big, fortran) in [(false, false), (false, true), (true, false), (true, true)] {
            let version = 1 + (i % 3) as u8;
            let case = format!("{} {order} big-endian {big} fortran {fortran} version {version}", T::NAME);
            for (c, name) in ["ux.npy", "uy.npy", "uz.npy"].into_iter().enumerate() {
                write::<T>(&run.join(name), version, order, c, big, fortran);
            }
            let got = opened(&run, &spec(order));
            assert_eq!(got.datasets, ["run.5/ux.npy", "run.5/uy.npy", "run.5/uz.npy"]);
            assert_eq!((got.name.as_str(), got.time), ("run.5", None));
            let source = T::take(got.source);
            assert_eq!((source.natural_planes(), source.is_costly()), (1, order != "zyx"), "{case}");
            check_all::<T>(opened(&run, &spec(order)).source, 0, &case);
            for axes in [format!("c{order}"), format!("{order}c")] {
                let path = dir.path().join("snap.1.npy");
                write::<T>(&path, version, &axes, 0, big, fortran);
                let got = opened(&path, &spec(order));
                assert_eq!((got.name.as_str(), &got.datasets[..]), ("snap.1", &["snap.1.npy".to_string()][..]));
                check_all::<T>(got.source, 0, &format!("{case} {axes}"));
                check_all::<T>(opened(&path, &spec(&axes)).source, 0, &format!("{case} {axes} said"));
            }
        }
    }
}

#[test]
fn single_precision_of_every_form() {
    every_form::<f32>();
}

#[test]
fn double_precision_of_every_form() {
    every_form::<f64>();
}

#[test]
fn names_decide_what_a_file_is() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("m.npy");
    write::<f32>(&path, 1, "zyxc", 0, false, false);
    let velocity = Fields::VELOCITY;
    let magnetic = Fields::MAGNETIC;
    let mut own = spec("zyx");
    assert_eq!(opened(&path, &own).source.fields(), velocity);
    own.velocity = names(&["m"]);
    assert_eq!(opened(&path, &own).source.fields(), velocity);
    (own.velocity, own.magnetic) = (None, names(&["m.npy"]));
    assert_eq!(opened(&path, &own).source.fields(), magnetic);
}

#[test]
fn folders_hold_both_fields_and_mixed_forms() {
    let dir = tempfile::tempdir().unwrap();
    let at = |name: &str| dir.path().join(name);
    write::<f32>(&at("velocity.npy"), 1, "zyxc", 0, true, false);
    for (c, name) in ["p.npy", "q.npy", "r.npy"].into_iter().enumerate() {
        write::<f32>(&at(name), 2, "zyx", 3 + c, false, c == 1);
    }
    let named = InputSpec { velocity: names(&["velocity"]), magnetic: names(&["p", "q.npy", "r"]), ..spec("zyx") };
    check_all::<f32>(opened(dir.path(), &named).source, 0, "both");
    // Guessed: the other names mean nothing.
    let got = opened(dir.path(), &spec("zyx"));
    assert_eq!(got.source.fields(), Fields::VELOCITY);
}

#[test]
fn mixed_precision_widens_big_endian_f32() {
    let dir = tempfile::tempdir().unwrap();
    for order in ["zyx", "xyz"] {
        write::<f32>(&dir.path().join("u.npy"), 1, order, 0, true, false);
        write::<f64>(&dir.path().join("v.npy"), 1, order, 1, true, false);
        write::<f32>(&dir.path().join("w.npy"), 1, order, 2, false, false);
        let mut source = f64::take(opened(dir.path(), &spec(order)).source);
        let mut store = vec![vec![0.0; N[0] * N[1]]; 3];
        let mut out: Vec<&mut [f64]> = store.iter_mut().map(|v| &mut v[..]).collect();
        source.read(8, 9, &mut out).unwrap();
        for i in 0..N[0] * N[1] {
            let (x, y) = (i % N[0], i / N[0]);
            assert_eq!(store[0][i], f64::from(f32::code(0, x, y, 8)));
            assert_eq!(store[1][i], f64::code(1, x, y, 8));
            assert_eq!(store[2][i], f64::from(f32::code(2, x, y, 8)));
        }
    }
}
