//! What files hold, and guesses at how to read them: what is guessed must open and give the values written.

use std::f64::consts::TAU;

use ::hdf5::types::VarLenUnicode;
use ::hdf5::{File, Location};
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::read::inspect::{Contents, inspect};
use ropewalk::read::{InputSpec, open};

use crate::files::names;
use crate::flows::*;
use crate::npy::npy;

const N: [usize; 3] = [12, 10, 9];
const SHAPE: [usize; 3] = [9, 10, 12];

fn number(place: &Location, name: &str, values: &[f64]) {
    place.new_attr::<f64>().shape(values.len()).create(name).unwrap().write_raw(values).unwrap();
}

/// The guess opens, with the grid and the first component expected.
fn opens(contents: &Contents, group: Option<&str>) -> ropewalk::read::Opened {
    let snapshot = SnapshotRef { path: contents.path.clone(), group: group.map(String::from), time: None };
    let opened = open(&snapshot, &contents.guess).unwrap_or_else(|e| panic!("{e}"));
    let got = values_of(&snapshot, &contents.guess);
    assert_eq!(got[0], coded(opened.source.grid().n, 0));
    assert_eq!(opened.time, contents.time);
    opened
}

#[test]
fn an_hdf5_file_is_told_in_full() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    let builder = file.new_dataset::<f32>().shape(SHAPE).chunk([3, 10, 12]).shuffle().deflate(4);
    let codes = |c: usize| coded(N, c).iter().map(|&v| v as f32).collect::<Vec<_>>();
    builder.create("ux").unwrap().write_raw(&codes(0)).unwrap();
    put::<f64>(&file, "uy", &SHAPE, &coded(N, 1));
    put::<f32>(&file, "uz", &SHAPE, &coded(N, 2));
    put::<f32>(&file, "rho", &SHAPE, &[1.0; 1080]);
    number(&file.dataset("uy").unwrap(), "scale", &[2.0, 3.0]);
    let text: VarLenUnicode = "invented".parse().unwrap();
    file.new_attr::<VarLenUnicode>().create("remark").unwrap().write_scalar(&text).unwrap();
    number(&file, "box_size", &[6.0, 5.0, 4.5]);
    file.new_attr::<f32>().create("time").unwrap().write_scalar(&0.25f32).unwrap();
    file.close().unwrap();
    let got = inspect(&path).unwrap();
    assert_eq!((got.kind.as_str(), got.bytes), ("HDF5", std::fs::metadata(&path).unwrap().len()));
    let told: Vec<(&str, &[usize], &str, &str)> =
        got.items.iter().map(|i| (i.name.as_str(), &i.shape[..], i.values.as_str(), i.storage.as_str())).collect();
    let (single, double) = ("float32 little-endian", "float64 little-endian");
    assert_eq!(
        told,
        [
            ("/rho", &SHAPE[..], single, "contiguous"),
            ("/ux", &SHAPE[..], single, "chunks 3x10x12, shuffle, gzip"),
            ("/uy", &SHAPE[..], double, "contiguous"),
            ("/uz", &SHAPE[..], single, "contiguous"),
        ]
    );
    assert_eq!(got.items[2].attributes, [("scale".into(), "2, 3".into())]);
    let attributes: Vec<(&str, &str)> = got.attributes.iter().map(|(n, t)| (n.as_str(), t.as_str())).collect();
    assert_eq!(attributes, [("box_size", "6, 5, 4.5"), ("remark", "invented"), ("time", "0.25")]);
    let want = InputSpec {
        velocity: names(&["ux", "uy", "uz"]),
        density: Some("rho".into()),
        lengths: Some([6.0, 5.0, 4.5]),
        ..InputSpec::default()
    };
    assert_eq!(got.guess, want);
    assert_eq!((got.time, got.steps.len()), (Some(0.25), 0));
    assert_eq!(
        got.reasons,
        [
            "ux,uy,uz named as a velocity",
            "rho named as a density",
            "lengths of the box from the attribute box_size, in the order x, y, z",
            "time from the attribute time",
        ]
    );
    opens(&got, None);
}

#[test]
fn steps_coordinates_and_orders_are_guessed() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("run.h5");
    let file = File::create(&path).unwrap();
    for step in ["step_10", "step_9"] {
        let group = file.create_group(step).unwrap();
        // x slowest: the coordinates tell.
        for (c, stem) in ["Velocity", "B"].into_iter().enumerate() {
            for (k, axis) in ["x", "y", "z"].into_iter().enumerate() {
                let values: Vec<f64> = (0..1080).map(|i| code(3 * c + k, i / 90, i / 9 % 10, i % 9)).collect();
                put::<f32>(&group, &format!("{stem}_{axis}"), &[12, 10, 9], &values);
            }
        }
        group.new_attr::<f64>().create("sim_time").unwrap().write_scalar(&step[5..].parse::<f64>().unwrap()).unwrap();
    }
    let grid = file.create_group("grid").unwrap();
    for (axis, n) in [("x", 12), ("y", 10), ("z", 9)] {
        let line: Vec<f64> = (0..n).map(|i| (i * i + 3 * i) as f64).collect();
        put::<f64>(&grid, axis, &[n], &line);
    }
    file.close().unwrap();
    let got = inspect(&path).unwrap();
    assert_eq!(got.steps, ["step_9", "step_10"]);
    assert_eq!(got.guess.velocity, names(&["Velocity_x", "Velocity_y", "Velocity_z"]));
    assert_eq!(got.guess.magnetic, names(&["B_x", "B_y", "B_z"]));
    assert_eq!(got.guess.order, "xyz");
    assert_eq!(got.guess.coordinates, ["x", "y", "z"].map(|a| Some(format!("/grid/{a}"))));
    assert_eq!((got.guess.lengths, got.guess.spacing), (None, None));
    assert_eq!((got.guess.time.attribute.as_deref(), got.time), (Some("sim_time"), Some(9.0)));
    let opened = opens(&got, Some("step_9"));
    assert!(opened.source.grid().is_stretched());
    assert_eq!(opened.source.grid().n, N);
}

#[test]
fn components_in_a_group_and_spacing() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    let group = file.create_group("fields").unwrap();
    let all: Vec<f64> = (0..3).flat_map(|c| coded(N, c)).collect();
    put::<f32>(&group, "velocity", &[3, 9, 10, 12], &all);
    put::<f32>(&group, "theta", &SHAPE, &coded(N, 3));
    for (axis, v) in [("dx", 0.5), ("dy", 0.25), ("dz", 0.125)] {
        file.new_attr::<f64>().create(axis).unwrap().write_scalar(&v).unwrap();
    }
    file.new_dataset::<f64>().create("fields/time").unwrap().write_scalar(&3.5).unwrap();
    file.close().unwrap();
    let got = inspect(&path).unwrap();
    let want = InputSpec {
        velocity: names(&["/fields/velocity"]),
        buoyancy: Some("/fields/theta".into()),
        order: "czyx".into(),
        spacing: Some([0.5, 0.25, 0.125]),
        time: ropewalk::read::TimeSource { dataset: Some("/fields/time".into()), ..Default::default() },
        ..InputSpec::default()
    };
    assert_eq!(got.guess, want);
    assert_eq!(got.reasons[3], "spacing from the attributes dx, dy, dz, in the order x, y, z");
    let opened = opens(&got, None);
    assert!(opened.source.fields().buoyancy);
}

#[test]
fn planes_and_files_of_numpy() {
    let dir = tempfile::tempdir().unwrap();
    let n = [12, 10, 1];
    let folder = dir.path().join("run");
    std::fs::create_dir(&folder).unwrap();
    for (c, name) in ["u.npy", "v.npy"].into_iter().enumerate() {
        write(&folder, name, &npy(1, "'<f8'", false, &[10, 12], &doubles(&coded(n, c), false)));
    }
    write(&folder, "x.npy", &npy(1, "'<f4'", false, &[12], &singles(&(0..12).map(f64::from).collect::<Vec<_>>(), false)));
    write(&folder, "broken.npy", b"text");
    let got = inspect(&folder).unwrap();
    assert_eq!((got.kind.as_str(), got.items.len()), ("folder of npy files", 4));
    assert_eq!((got.items[0].name.as_str(), got.items[0].values.as_str()), ("broken.npy", "not usable"));
    assert_eq!((&got.items[1].shape[..], got.items[1].values.as_str()), (&[10, 12][..], "float64 little-endian"));
    assert_eq!(got.guess.velocity, names(&["u.npy", "v.npy"]));
    assert_eq!((got.guess.order.as_str(), got.guess.lengths), ("yx", Some([0.0, TAU, TAU])));
    let opened = opens(&got, None);
    assert_eq!((opened.source.grid().n, opened.source.grid().spacing[0]), (n, 1.0));
    let mixed: Vec<f64> = (0..1080).flat_map(|i| (0..3).map(move |c| code(c, i % 12, i / 12 % 10, i / 120))).collect();
    let single = write(dir.path(), "flow.npy", &npy(1, "'>f4'", false, &[9, 10, 12, 3], &singles(&mixed, true)));
    let got = inspect(&single).unwrap();
    assert_eq!((got.guess.order.as_str(), got.items[0].values.as_str()), ("zyxc", "float32 big-endian"));
    opens(&got, None);
}

#[test]
fn files_without_a_header_are_guessed_by_size() {
    let dir = tempfile::tempdir().unwrap();
    let n = [8; 3];
    let all = |components: usize| -> Vec<f64> { (0..components).flat_map(|c| coded(n, c)).collect() };
    let got = inspect(&write(dir.path(), "a.dat", &singles(&all(6), false))).unwrap();
    assert_eq!((got.kind.as_str(), got.bytes), ("no known header", 6 * 512 * 4));
    assert_eq!(got.reasons, ["its size fits 8x8x8 samples of 6 components in float32", "nothing tells the size of the box",]);
    opens(&got, None);
    let record = |body: Vec<u8>| [&(body.len() as u32).to_be_bytes()[..], &body, &(body.len() as u32).to_be_bytes()].concat();
    let each: Vec<u8> = (0..3).flat_map(|c| record(doubles(&coded(n, c), true))).collect();
    let got = inspect(&write(dir.path(), "b.dat", &each)).unwrap();
    assert_eq!(got.reasons[0], "it has 3 records of 4096 bytes between 4-byte markers, big-endian");
    assert_eq!(got.reasons[1], "its size fits 8x8x8 samples of 3 components in float64 with 4-byte record markers, big-endian");
    opens(&got, None);
    let got = inspect(&write(dir.path(), "d.dat", &record(vec![1; 300]))).unwrap();
    assert_eq!(
        got.reasons,
        ["it has 1 record of 300 bytes between 4-byte markers, big-endian", "its values are of no sane magnitude in either type"]
    );
    let got = inspect(&write(dir.path(), "c.dat", &[7; 1000])).unwrap();
    assert_eq!(
        (got.guess.raw, &got.reasons[..]),
        (None, &["its values are of no sane magnitude in any type and byte order".to_string()][..])
    );
}

/// Values tell type and byte order, whatever the size allows.
#[test]
fn values_tell_the_layout() {
    let dir = tempfile::tempdir().unwrap();
    let n = [8; 3];
    let wave = |c: usize| filled(n, |x, y, z| 1e-3 * ((0.7 * x as f64).sin() + (1.1 * y as f64 + c as f64).cos() * (0.3 * z as f64).sin()));
    let all: Vec<f64> = (0..6).flat_map(wave).collect();
    for (big, double) in [(false, false), (true, false), (false, true), (true, true)] {
        let bytes = if double { doubles(&all, big) } else { singles(&all, big) };
        let raw = inspect(&write(dir.path(), "f.dat", &bytes)).unwrap().guess.raw.unwrap();
        assert_eq!((raw.big_endian, raw.double, &raw.shape[..]), (big, double, &n[..]), "{big} {double}");
    }
    // A text or an archive of that very size is none.
    for (head, kind) in [(&b"PK\x03\x04"[..], "zip archive"), (b"\x1f\x8b", "gzip file"), (b"0.5 1.5\n", "text")] {
        let mut bytes = vec![b'1'; 6 * 512 * 4];
        bytes[..head.len()].copy_from_slice(head);
        let got = inspect(&write(dir.path(), "f.npz", &bytes)).unwrap();
        assert_eq!((got.kind.as_str(), got.guess.raw, got.reasons.len()), (kind, None, 1));
        assert!(got.reasons[0].contains("not a snapshot"), "{:?}", got.reasons);
    }
    // Records of no cube.
    let body = doubles(&all[..7 * 9 * 10], false);
    let marker = (body.len() as u32).to_le_bytes();
    let got = inspect(&write(dir.path(), "r.dat", &[&marker[..], &body, &marker].concat())).unwrap();
    assert_eq!(
        got.reasons,
        ["it has 1 record of 5040 bytes between 4-byte markers, little-endian", "its records are no cubes of values: give their shape"]
    );
}

#[test]
fn one_file_a_component() {
    let dir = tempfile::tempdir().unwrap();
    let n = [8; 3];
    for (c, name) in ["u", "v", "w"].into_iter().enumerate() {
        write(dir.path(), &format!("{name}_1.npy"), &npy(1, "'<f4'", false, &n, &singles(&coded(n, c), false)));
        write(dir.path(), &format!("{name}_1.dat"), &singles(&coded(n, c), false));
        let file = File::create(dir.path().join(format!("{name}_1.h5"))).unwrap();
        put::<f64>(&file, "data", &n, &coded(n, c));
        number(&file, "lx", &[6.0]);
        number(&file, "ly", &[5.0]);
        number(&file, "lz", &[4.0]);
        number(&file, "time", &[0.5]);
        file.close().unwrap();
    }
    for (name, kind, time) in [("npy", "npy", None), ("h5", "HDF5", Some(0.5))] {
        let got = inspect(&dir.path().join(format!("{{field}}_1.{name}"))).unwrap();
        assert_eq!((got.kind, got.time), (format!("{kind}, one file a component"), time));
        assert_eq!(got.guess.velocity, names(&["u", "v", "w"]));
        assert_eq!(got.guess.lengths, Some(if time.is_some() { [6.0, 5.0, 4.0] } else { [TAU; 3] }));
        opens(&inspect(&dir.path().join(format!("{{field}}_1.{name}"))).unwrap(), None);
    }
    let got = inspect(&dir.path().join("{field}_1.dat")).unwrap();
    assert_eq!((got.bytes, got.guess.raw.as_ref().unwrap().shape.clone()), (3 * 512 * 4, n.to_vec()));
    opens(&got, None);
    let e = inspect(&dir.path().join("{field}_2.dat")).unwrap_err();
    assert_eq!(
        plain(dir.path(), &e),
        "cannot look into the files: DIR/{field}_2.dat: expected files with usual names of components, such as u, v, w, in place of \
         {field}, found none of them; hint: give the file of one component"
    );
}

#[test]
fn what_cannot_be_looked_into() {
    let dir = tempfile::tempdir().unwrap();
    let check = |name: &str, text: &str| assert_eq!(plain(dir.path(), &inspect(&dir.path().join(name)).unwrap_err()), text);
    check("none.h5", "cannot look into the file: DIR/none.h5: found nothing; hint: check the path");
    check("", "cannot look into the folder: DIR/: expected npy files, found none");
    write(dir.path(), "empty.h5", b"");
    check(
        "empty.h5",
        "cannot read the HDF5 file: DIR/empty.h5: expected an HDF5 signature, found an empty file; \
         hint: the file is truncated: copy or write it again",
    );
    write(dir.path(), "cut.h5", b"\x89HDF\r\n\x1a\n\0\0");
    check(
        "cut.h5",
        "cannot read the HDF5 file: DIR/cut.h5: expected a complete superblock, found a file of 10 bytes; \
         hint: the file is truncated: copy or write it again",
    );
    write(dir.path(), "s.npy", b"text");
    check(
        "s.npy",
        "cannot read the npy file: DIR/s.npy: expected the signature \"\\x93NUMPY\", found a file beginning \"text\"; \
         hint: write it with numpy.save",
    );
}

#[test]
fn odd_contents_are_told_without_fuss() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    for (c, name) in ["u", "v", "w"].into_iter().enumerate() {
        put::<f32>(&file, name, &SHAPE, &coded(N, c));
    }
    // A ring, an empty dataset, no values, integers, booleans, text.
    file.create_group("a/b").unwrap();
    file.link_soft("/", "a/b/ring").unwrap();
    file.link_soft("/nowhere", "dangling").unwrap();
    file.new_dataset::<f64>().shape(0).create("none").unwrap();
    file.new_dataset_builder().empty::<f64>().shape(::hdf5::Extents::Null).create("empty").unwrap();
    file.new_dataset::<i16>().create("time").unwrap().write_scalar(&7i16).unwrap();
    file.new_attr::<bool>().create("flag").unwrap().write_scalar(&true).unwrap();
    let text: VarLenUnicode = "many words".parse().unwrap();
    file.new_dataset::<VarLenUnicode>().create("text").unwrap().write_scalar(&text).unwrap();
    file.close().unwrap();
    let got = inspect(&path).unwrap();
    let items: Vec<&str> = got.items.iter().map(|i| i.name.as_str()).collect();
    assert_eq!(items, ["/empty", "/none", "/text", "/time", "/u", "/v", "/w"]);
    assert_eq!(got.attributes.len(), 1);
    assert_eq!(got.time, Some(7.0));
    opens(&got, None);
}
