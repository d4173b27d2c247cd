//! Steps in groups, one file a component, and times: every place they may stand in, and which wins.

use std::path::Path;

use ::hdf5::{File, Group};
use ropewalk::base::error::Kind;
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::read::{InputSpec, TimeSource, open};

use crate::files::{names, opened, spec};
use crate::flows::*;
use crate::npy::npy;

const N: [usize; 3] = [5, 4, 3];
const SHAPE: [usize; 3] = [3, 4, 5];

fn step(path: &Path, group: &str) -> SnapshotRef {
    SnapshotRef { path: path.into(), group: Some(group.into()), time: None }
}

fn components(group: &Group, all: &[&str], first: usize) {
    for (c, name) in all.iter().enumerate() {
        put::<f32>(group, name, &SHAPE, &coded(N, first + c));
    }
}

fn check(got: &[Vec<f64>], first: usize) {
    for (c, values) in got.iter().enumerate() {
        assert_eq!(*values, coded(N, first + c), "component {c}");
    }
}

#[test]
fn groups_are_steps() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("run.h5");
    let file = File::create(&path).unwrap();
    for (i, name) in ["steps/t_1", "steps/t 2"].into_iter().enumerate() {
        let group = file.create_group(name).unwrap();
        components(&group, &["u", "v", "w"], 3 * i);
        group.new_attr::<f64>().create("time").unwrap().write_scalar(&(i as f64 + 0.5)).unwrap();
    }
    components(&file, &["bx", "by", "bz"], 9);
    file.new_attr::<f64>().create("time").unwrap().write_scalar(&99.0).unwrap();
    file.close().unwrap();
    for (i, (group, name)) in [("steps/t_1", "run_steps_t_1"), ("/steps/t 2/", "run_steps_t_2")].into_iter().enumerate() {
        let snapshot = step(&path, group);
        let got = open(&snapshot, &spec("zyx")).unwrap();
        assert_eq!((got.name.as_str(), got.time), (name, Some(i as f64 + 0.5)));
        assert_eq!(got.datasets[1], format!("run.h5:/{}/v", group.trim_matches('/')));
        check(&values_of(&snapshot, &spec("zyx")), 3 * i);
    }
    // Names that begin with / are absolute.
    let own = InputSpec { velocity: names(&["u", "v", "w"]), magnetic: names(&["/bx", "/by", "/bz"]), ..spec("zyx") };
    let got = values_of(&step(&path, "steps/t_1"), &own);
    check(&got[..3], 0);
    check(&got[3..], 9);
    assert_eq!(
        fault(dir.path(), &step(&path, "steps/t_3"), &spec("zyx")),
        (Kind::Input, "cannot find the group: DIR/run.h5: /steps/t_3: found only /steps".into())
    );
    assert!(
        fault(dir.path(), &step(&path, "steps"), &spec("zyx")).1.contains("| magnetic | b in /steps, found /bx 3x4x5, "),
        "the group is named"
    );
    // Where nobody says which step, the hint says how.
    let steps = dir.path().join("iter.h5");
    let file = File::create(&steps).unwrap();
    for name in ["iter/10", "iter/20"] {
        components(&file.create_group(name).unwrap(), &["u", "v", "w"], 0);
    }
    file.close().unwrap();
    let text = fault(dir.path(), &steps.clone().into(), &spec("zyx")).1;
    let hint = "; hint: --steps \"iter/*\" reads its groups as steps, iter.h5:/iter/10 one of them";
    assert!(text.starts_with("cannot find a velocity or magnetic field: DIR/iter.h5") && text.ends_with(hint), "{text}");
    let own = InputSpec { velocity: names(&["u", "v", "w"]), buoyancy: Some("theta".into()), ..spec("zyx") };
    let text = fault(dir.path(), &step(&steps, "iter/10"), &own).1;
    assert!(text.starts_with("cannot find the dataset: DIR/iter.h5: /iter/10/theta"), "{text}");
    assert!(text.ends_with("; hint: --buoyancy NAME names it"), "{text}");
    let npy = write(dir.path(), "s.npy", &npy(1, "'<f4'", false, &[3, 3, 4, 5], &[0; 720]));
    assert_eq!(
        fault(dir.path(), &step(&npy, "a"), &spec("zyx")),
        (Kind::Usage, "cannot look for a group: DIR/s.npy: DIR/s.npy:/a: expected an HDF5 file, found a .npy file".into())
    );
}

#[test]
fn one_hdf5_file_a_component() {
    let dir = tempfile::tempdir().unwrap();
    let at = |name: &str| dir.path().join(name);
    for (c, name) in ["vx", "vy", "vz"].into_iter().enumerate() {
        let file = File::create(at(&format!("{name}.0007.h5"))).unwrap();
        match c {
            // Its own name among others, and the only array beside coordinates.
            0 => {
                put::<f32>(&file, "vx", &SHAPE, &coded(N, 0));
                put::<f32>(&file, "other", &SHAPE, &coded(N, 9));
                file.new_attr::<f32>().create("time").unwrap().write_scalar(&2.5f32).unwrap();
            }
            _ => {
                put::<f32>(&file, "x", &[5], &[0.0; 5]);
                let group = file.create_group("deep").unwrap();
                group.new_dataset::<f32>().shape(SHAPE).chunk([2, 2, 2]).create("data").unwrap();
                let values: Vec<f32> = coded(N, c).iter().map(|&v| v as f32).collect();
                group.dataset("data").unwrap().write_raw(&values).unwrap();
            }
        }
        file.close().unwrap();
    }
    let path = at("{field}.0007.h5");
    let got = opened(&path, &spec("zyx"));
    assert_eq!((got.name.as_str(), got.time), ("0007", Some(2.5)));
    assert_eq!(got.datasets, ["vx.0007.h5:/vx", "vy.0007.h5:/deep/data", "vz.0007.h5:/deep/data"]);
    check(&values(&path, &spec("zyx")), 0);
    let own = InputSpec { velocity: names(&["vx", "vy", "vz"]), ..spec("zyx") };
    check(&values(&path, &own), 0);
    // The group of a step is one of every file.
    let own = InputSpec { velocity: names(&["vy", "vz", "vy2"]), ..spec("zyx") };
    assert_eq!(
        fault(dir.path(), &step(&path, "deep"), &own).1,
        "cannot find the file: DIR/vy2.0007.h5: found nothing; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name \
         of an array with a component axis)"
    );
    std::fs::copy(at("vy.0007.h5"), at("vy2.0007.h5")).unwrap();
    let got = values_of(&step(&path, "deep"), &own);
    assert_eq!(got, [coded(N, 1), coded(N, 2), coded(N, 1)]);
    // Two arrays, neither with the name of the component.
    let own = InputSpec { velocity: names(&["vy", "vz", "two"]), ..spec("zyx") };
    let file = File::create(at("two.0007.h5")).unwrap();
    components(&file, &["a", "b"], 0);
    file.close().unwrap();
    assert_eq!(
        fault(dir.path(), &path.clone().into(), &own).1,
        "cannot tell the dataset: DIR/two.0007.h5: expected /two, or a single array, found /a 3x4x5, /b 3x4x5; \
         hint: --velocity U,V,W gives names that are both of files and of datasets"
    );
    assert!(fault(dir.path(), &at("none_{field}.h5").into(), &spec("zyx")).1.contains("in place of {field}, found none of them"));
}

#[test]
fn one_npy_file_a_component() {
    let dir = tempfile::tempdir().unwrap();
    for (c, name) in ["u", "v", "w", "bx", "by", "bz"].into_iter().enumerate() {
        std::fs::create_dir(dir.path().join(name)).unwrap();
        write(dir.path(), &format!("{name}/t5.npy"), &npy(1, "'<f4'", false, &SHAPE, &singles(&coded(N, c), false)));
    }
    let path = dir.path().join("{field}/t5.npy");
    assert_eq!(opened(&path, &spec("zyx")).name, "t5");
    check(&values(&path, &spec("zyx")), 0);
    let own = InputSpec { magnetic: names(&["bx", "by", "bz"]), ..spec("zyx") };
    check(&values(&path, &own), 3);
    let own = InputSpec { magnetic: names(&["bx", "by", "bq"]), ..spec("zyx") };
    assert!(fault(dir.path(), &path.into(), &own).1.starts_with("cannot find the file: DIR/bq/t5.npy: found nothing"));
    assert!(fault(dir.path(), &dir.path().join("{field}.npy").into(), &spec("zyx")).1.contains("expected npy files with u,v,w |"));
}

#[test]
fn times_come_from_the_first_place_that_is_named_and_found() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("out_t1.5e-3.h5");
    let file = File::create(&path).unwrap();
    components(&file, &["u", "v", "w"], 0);
    file.new_attr::<f64>().create("t").unwrap().write_scalar(&1.0).unwrap();
    file.new_attr::<f32>().create("clock").unwrap().write_scalar(&2.5f32).unwrap();
    file.dataset("u").unwrap().new_attr::<i32>().create("cycle").unwrap().write_scalar(&3).unwrap();
    file.new_dataset::<f32>().create("info/time").unwrap().write_scalar(&4.25f32).unwrap();
    file.new_dataset::<i64>().shape(1).create("one").unwrap().write_raw(&[5i64]).unwrap();
    file.new_dataset::<f64>().shape(2).create("two").unwrap().write_raw(&[5.0, 6.0]).unwrap();
    file.close().unwrap();
    let time = |attribute: &str, dataset: &str, name: &str| {
        let some = |text: &str| (!text.is_empty()).then(|| text.to_string());
        let source = TimeSource { attribute: some(attribute), dataset: some(dataset), name: some(name) };
        let got = opened(&path, &InputSpec { time: source, ..spec("zyx") });
        (got.time.unwrap(), got.notes.join("; "))
    };
    let good = |t: f64| (t, String::new());
    assert_eq!(time("", "", ""), good(1.0));
    assert_eq!(time("clock", "/info/time", "out_t{time}.h5"), good(2.5));
    assert_eq!(time("cycle", "", ""), good(3.0));
    assert_eq!(time("", "info/time", "out_t{time}.h5"), good(4.25));
    assert_eq!(time("", "one", ""), good(5.0));
    assert_eq!(time("", "", "out_t{time}.h5"), good(1.5e-3));
    assert_eq!(time("", "", "*t{time}.h5"), good(1.5e-3));
    assert_eq!(time("none", "two", "out_t{time}.h5"), good(1.5e-3));
    assert_eq!(time("none", "two", "other{time}"), (1.0, "no time found in attribute none, dataset two, name other{time}".into()));
    let given = SnapshotRef { time: Some(-7.0), ..path.clone().into() };
    let source = TimeSource { attribute: Some("clock".into()), ..TimeSource::default() };
    assert_eq!(open(&given, &InputSpec { time: source, ..spec("zyx") }).unwrap().time, Some(-7.0));
}

#[test]
fn names_of_groups_and_numbered_files_hold_times() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("run.h5");
    let file = File::create(&path).unwrap();
    components(&file.create_group("step_0010").unwrap(), &["u", "v", "w"], 0);
    file.close().unwrap();
    let time = TimeSource { name: Some("step_{time}".into()), ..TimeSource::default() };
    let own = InputSpec { time, ..spec("zyx") };
    assert_eq!(open(&step(&path, "step_0010"), &own).unwrap().time, Some(10.0));
    // A number in place of an extension belongs to the name.
    let numbered = dir.path().join("flow.0010");
    let file = File::create(&numbered).unwrap();
    components(&file, &["u", "v", "w"], 0);
    file.close().unwrap();
    let time = TimeSource { name: Some("*.{time}".into()), ..TimeSource::default() };
    let got = opened(&numbered, &InputSpec { time, ..spec("zyx") });
    assert_eq!((got.name.as_str(), got.time), ("flow.0010", Some(10.0)));
}
