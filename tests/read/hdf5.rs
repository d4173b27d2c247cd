//! HDF5 round trips: storage, precision, byte order, component axis, axis order, groups, chunk cache, time.

use std::path::Path;

use ::hdf5::File;
use ropewalk::model::source::{AnySource, Fields};
use ropewalk::read::InputSpec;

use crate::files::*;

#[derive(Clone, Copy, PartialEq, Debug)]
enum Storage {
    Contiguous,
    Chunked,
    Filtered,
}

/// Chunk edges that divide no axis but that of the components.
const CHUNK: [usize; 3] = [5, 4, 2];

fn write<T: Value>(file: &File, name: &str, axes: &str, first: usize, storage: Storage, big: bool) {
    let (shape, mut values) = array::<T>(axes, first);
    if big {
        values.iter_mut().for_each(|v| *v = v.swapped());
    }
    let chunk: Vec<usize> = axes.chars().map(|l| extent(l, CHUNK, 1)).collect();
    let builder = file.new_dataset::<T>().shape(shape);
    let dataset = match storage {
        Storage::Contiguous => builder.create(name),
        Storage::Chunked => builder.chunk(chunk).create(name),
        Storage::Filtered => builder.chunk(chunk).shuffle().deflate(4).create(name),
    };
    dataset.unwrap().write_raw(&values).unwrap();
}

/// Declares all `count` datasets of a closed file big-endian: bit 0 of the bit field of a datatype
/// message is the byte order (HDF5 File Format Specification 3.0, IV.A.2.d).
pub fn declare_big<T: Value>(path: &Path, count: usize) {
    let mut bytes = std::fs::read(path).unwrap();
    let places: Vec<usize> = (0..bytes.len()).filter(|&i| bytes[i..].starts_with(&T::MESSAGE)).collect();
    assert_eq!(places.len(), count, "datatype messages in the file");
    for p in places {
        bytes[p + 1] |= 1;
    }
    std::fs::write(path, bytes).unwrap();
}

fn every_form<T: Value>(storage: Storage, big: bool) {
    let dir = tempfile::tempdir().unwrap();
    for order in ORDERS {
        for form in ["three", "first", "last"] {
            let case = format!("{storage:?} {} big-endian {big} {order} {form}", T::NAME);
            let path = dir.path().join(format!("{order}-{form}.h5"));
            let file = File::create(&path).unwrap();
            let (mut own, mut written) = (spec(order), 1);
            match form {
                "three" => {
                    for (c, name) in ["flow/u", "flow/v", "flow/w"].into_iter().enumerate() {
                        write::<T>(&file, name, order, c, storage, big);
                    }
                    written = 3;
                    own.velocity = names(&["/flow/u", "flow/v", "/flow/w"]);
                }
                "first" => write::<T>(&file, "velocity", &format!("c{order}"), 0, storage, big),
                _ => write::<T>(&file, "velocity", &format!("{order}c"), 0, storage, big),
            }
            file.close().unwrap();
            if big {
                declare_big::<T>(&path, written);
            }
            let got = opened(&path, &own);
            assert_eq!(got.name, format!("{order}-{form}"));
            let named: Vec<String> = match form {
                "three" => ["u", "v", "w"].map(|c| format!("{order}-{form}.h5:/flow/{c}")).into(),
                _ => vec![format!("{order}-{form}.h5:/velocity")],
            };
            assert_eq!(got.datasets, named);
            let source = T::take(got.source);
            assert_eq!(source.natural_planes(), if storage == Storage::Contiguous { 1 } else { CHUNK[2] }, "{case}");
            assert_eq!(source.is_costly(), storage == Storage::Filtered || order != "zyx", "{case}");
            drop(source);
            check_all::<T>(opened(&path, &own).source, 0, &case);
        }
    }
}

#[test]
fn contiguous_of_every_form() {
    for big in [false, true] {
        every_form::<f32>(Storage::Contiguous, big);
        every_form::<f64>(Storage::Contiguous, big);
    }
}

#[test]
fn chunked_of_every_form() {
    for big in [false, true] {
        every_form::<f32>(Storage::Chunked, big);
        every_form::<f64>(Storage::Chunked, big);
    }
}

#[test]
fn compressed_of_every_form() {
    for big in [false, true] {
        every_form::<f32>(Storage::Filtered, big);
        every_form::<f64>(Storage::Filtered, big);
    }
}

#[test]
fn usual_names_are_guessed() {
    let dir = tempfile::tempdir().unwrap();
    let both = Fields::BOTH;
    let velocity = Fields::VELOCITY;
    let magnetic = Fields::MAGNETIC;
    let sets: [(&[&str], Fields); 8] = [
        (&["u", "v", "w"], velocity),
        (&["ux", "uy", "uz", "bx", "by", "bz"], both),
        (&["vx", "vy", "vz"], velocity),
        (&["bx", "by", "bz"], magnetic),
        (&["velocity", "magnetic"], both),
        (&["velocity", "b"], both),
        (&["magnetic"], magnetic),
        (&["u", "v", "w", "b"], both),
    ];
    for (i, (set, fields)) in sets.into_iter().enumerate() {
        let path = dir.path().join(format!("{i}.h5"));
        let file = File::create(&path).unwrap();
        let mut first = 0;
        for name in set {
            let whole = ["velocity", "magnetic", "b"].contains(name);
            write::<f32>(&file, name, if whole { "czyx" } else { "zyx" }, first, Storage::Contiguous, false);
            first += if whole { 3 } else { 1 };
        }
        file.close().unwrap();
        let got = opened(&path, &spec("zyx"));
        assert_eq!(got.source.fields(), fields, "{set:?}");
        let paths: Vec<String> = set.iter().map(|n| format!("{i}.h5:/{n}")).collect();
        assert_eq!(got.datasets, paths);
        check_all::<f32>(got.source, 0, &format!("{set:?}"));
    }
}

#[test]
fn scalar_named_b_is_no_magnetic_field() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    for (c, name) in ["u", "v", "w", "b"].into_iter().enumerate() {
        write::<f32>(&file, name, "zyx", c, Storage::Contiguous, false);
    }
    file.close().unwrap();
    let got = opened(&path, &spec("zyx"));
    assert_eq!(got.source.fields(), Fields::VELOCITY);
}

#[test]
fn only_what_is_named_is_read() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    write::<f32>(&file, "velocity", "zyxc", 0, Storage::Contiguous, false);
    write::<f32>(&file, "b", "czyx", 3, Storage::Contiguous, false);
    file.close().unwrap();
    let named = InputSpec { magnetic: names(&["b"]), ..spec("zyx") };
    let got = opened(&path, &named);
    assert_eq!(got.source.fields(), Fields::MAGNETIC);
    check_all::<f32>(got.source, 3, "magnetic alone");
    let named = InputSpec { velocity: names(&["velocity"]), ..spec("zyxc") };
    check_all::<f32>(opened(&path, &named).source, 0, "velocity alone");
    let named = InputSpec { velocity: names(&["velocity"]), magnetic: names(&["b"]), ..spec("zyx") };
    check_all::<f32>(opened(&path, &named).source, 0, "both, components on different ends");
}

#[test]
fn mixed_precision_widens_to_f64() {
    let dir = tempfile::tempdir().unwrap();
    for storage in [Storage::Contiguous, Storage::Filtered] {
        for order in ["zyx", "xyz"] {
            let path = dir.path().join(format!("{storage:?}-{order}.h5"));
            let file = File::create(&path).unwrap();
            write::<f32>(&file, "u", order, 0, storage, false);
            write::<f64>(&file, "v", order, 1, storage, false);
            write::<f32>(&file, "w", order, 2, storage, false);
            file.close().unwrap();
            let mut source = f64::take(opened(&path, &spec(order)).source);
            let mut store = vec![vec![0.0; 4 * N[0] * N[1]]; 3];
            let mut out: Vec<&mut [f64]> = store.iter_mut().map(|v| &mut v[..]).collect();
            source.read(2, 6, &mut out).unwrap();
            for (i, at) in (0..4 * N[0] * N[1]).map(|i| (i, (i % N[0], i / N[0] % N[1], 2 + i / N[0] / N[1]))) {
                let (x, y, z) = at;
                assert_eq!(store[0][i], f64::from(f32::code(0, x, y, z)));
                assert_eq!(store[1][i], f64::code(1, x, y, z));
                assert_eq!(store[2][i], f64::from(f32::code(2, x, y, z)));
            }
        }
    }
}

#[test]
fn special_values_keep_their_bits() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let cells = N[0] * N[1] * N[2];
    let special = [0x7fc0_1234, 0xff80_0000, 0x8000_0000, 0x0000_0001, 0x7f7f_ffff, 0x7f80_0000];
    let values: Vec<f32> = (0..cells).map(|i| f32::from_bits(special[i % special.len()])).collect();
    for chunked in [false, true] {
        let file = File::create(&path).unwrap();
        for name in ["u", "v", "w"] {
            let builder = file.new_dataset::<f32>().shape([N[2], N[1], N[0]]);
            let builder = if chunked { builder.chunk([4, 4, 4]).deflate(1) } else { builder };
            builder.create(name).unwrap().write_raw(&values).unwrap();
        }
        file.close().unwrap();
        let mut source = f32::take(opened(&path, &spec("zyx")).source);
        let mut store = vec![vec![0.0; cells]; 3];
        let mut out: Vec<&mut [f32]> = store.iter_mut().map(|v| &mut v[..]).collect();
        source.read(0, N[2], &mut out).unwrap();
        for component in &store {
            assert!(component.iter().zip(&values).all(|(a, b)| a.to_bits() == b.to_bits()));
        }
    }
}

#[test]
fn links_into_other_files_and_unwritten_datasets_are_read() {
    let dir = tempfile::tempdir().unwrap();
    let other = File::create(dir.path().join("other.h5")).unwrap();
    write::<f32>(&other, "far", "zyx", 0, Storage::Contiguous, false);
    other.close().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    file.link_external("other.h5", "/far", "u").unwrap();
    write::<f32>(&file, "near", "zyx", 1, Storage::Contiguous, false);
    file.link_soft("/near", "v").unwrap();
    file.new_dataset::<f32>().shape([N[2], N[1], N[0]]).fill_value(2.5f32).create("w").unwrap();
    file.close().unwrap();
    let mut source = f32::take(opened(&path, &spec("zyx")).source);
    let mut store = vec![vec![0.0; N[0] * N[1]]; 3];
    let mut out: Vec<&mut [f32]> = store.iter_mut().map(|v| &mut v[..]).collect();
    source.read(6, 7, &mut out).unwrap();
    for i in 0..N[0] * N[1] {
        let (x, y) = (i % N[0], i / N[0]);
        assert_eq!([store[0][i], store[1][i], store[2][i]], [f32::code(0, x, y, 6), f32::code(1, x, y, 6), 2.5]);
    }
}

#[test]
fn user_block_shifts_nothing() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::with_options().with_fcpl(|p| p.userblock(1024)).create(&path).unwrap();
    write::<f32>(&file, "velocity", "czyx", 0, Storage::Contiguous, false);
    file.close().unwrap();
    check_all::<f32>(opened(&path, &spec("zyx")).source, 0, "user block");
    let bytes = std::fs::read(&path).unwrap();
    std::fs::write(&path, &bytes[..bytes.len() - 1]).unwrap();
    let e = ropewalk::read::open(&path.clone().into(), &spec("zyx")).err().expect("one byte is missing");
    assert!(e.to_string().contains("the file is truncated"), "{e}");
}

#[test]
fn grid_follows_lengths_spacing_origin_and_periodicity() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    write::<f32>(&file, "velocity", "cxzy", 0, Storage::Contiguous, false);
    file.close().unwrap();
    let mut own = spec("xzy");
    own.lengths = Some([24.0, 5.0, 4.5]);
    own.origin = [1.0, -2.0, 3.0];
    own.periodic = [true, false, true];
    let grid = opened(&path, &own).source.grid().clone();
    assert_eq!((grid.n, grid.spacing, grid.origin), (N, [2.0, 0.5, 0.5], [1.0, -2.0, 3.0]));
    assert_eq!(grid.periodic, [true, false, true]);
    (own.lengths, own.spacing) = (None, Some([2.0, 0.5, 0.25]));
    let grid = opened(&path, &own).source.grid().clone();
    assert_eq!((grid.length(0), grid.length(1), grid.length(2)), (24.0, 5.0, 2.25));
}

#[test]
fn time_comes_from_the_root_then_the_first_dataset() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let time = |root: &dyn Fn(&File), dataset: &dyn Fn(&::hdf5::Dataset)| {
        let file = File::create(&path).unwrap();
        write::<f32>(&file, "velocity", "czyx", 0, Storage::Contiguous, false);
        root(&file);
        dataset(&file.dataset("velocity").unwrap());
        file.close().unwrap();
        opened(&path, &spec("zyx")).time
    };
    let none = |_: &::hdf5::Dataset| {};
    assert_eq!(time(&|_| {}, &none), None);
    assert_eq!(time(&|f| f.new_attr::<f64>().create("time").unwrap().write_scalar(&0.1).unwrap(), &none), Some(0.1));
    assert_eq!(time(&|f| f.new_attr::<f32>().create("t").unwrap().write_scalar(&1.5f32).unwrap(), &none), Some(1.5));
    assert_eq!(time(&|f| f.new_attr::<i32>().create("t").unwrap().write_scalar(&-7).unwrap(), &none), Some(-7.0));
    let dataset = |d: &::hdf5::Dataset| d.new_attr::<u16>().create("time").unwrap().write_scalar(&9u16).unwrap();
    assert_eq!(time(&|_| {}, &dataset), Some(9.0));
    assert_eq!(time(&|f| f.new_attr::<f64>().create("t").unwrap().write_scalar(&2.0).unwrap(), &dataset), Some(2.0));
    // Several numbers are no time.
    let two = |f: &File| f.new_attr::<f64>().shape(2).create("time").unwrap().write_raw(&[1.0, 2.0]).unwrap();
    assert_eq!(time(&two, &dataset), Some(9.0));
}

#[test]
#[should_panic(expected = "planes: expected a range inside 0..9, got 8..10")]
fn planes_outside_the_box_panic() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    write::<f32>(&file, "velocity", "czyx", 0, Storage::Contiguous, false);
    file.close().unwrap();
    let AnySource::F32(mut source) = opened(&path, &spec("zyx")).source else { unreachable!() };
    let mut values = vec![vec![0.0; 240]; 3];
    let mut out: Vec<&mut [f32]> = values.iter_mut().map(|v| &mut v[..]).collect();
    source.read(8, 10, &mut out).unwrap();
}

#[test]
fn one_file_feeds_several_sources() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    write::<f32>(&file, "velocity", "czyx", 0, Storage::Filtered, false);
    write::<f32>(&file, "b", "zyxc", 3, Storage::Filtered, false);
    file.close().unwrap();
    let both = opened(&path, &spec("zyx"));
    let own = InputSpec { magnetic: names(&["b"]), ..spec("zyx") };
    let magnetic = opened(&path, &own);
    let reader = std::thread::spawn(move || check_all::<f32>(magnetic.source, 3, "second"));
    check_all::<f32>(both.source, 0, "first");
    reader.join().unwrap();
}
