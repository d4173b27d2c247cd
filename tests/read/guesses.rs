//! Guesses where steps hold groups, where attributes tell of the box, and where an array is no vector field.

use ::hdf5::types::VarLenUnicode;
use ::hdf5::{File, Location};
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::read::inspect::inspect;
use ropewalk::read::{InputSpec, TimeSource, open};

use crate::files::{names, opened, spec};
use crate::flows::*;
use crate::npy::npy;

const N: [usize; 3] = [12, 10, 9];
const SHAPE: [usize; 3] = [9, 10, 12];

fn number(place: &Location, name: &str, values: &[f64]) {
    place.new_attr::<f64>().shape(values.len()).create(name).unwrap().write_raw(values).unwrap();
}

fn text(place: &Location, name: &str, value: &str) {
    let value: VarLenUnicode = value.parse().unwrap();
    place.new_attr::<VarLenUnicode>().create(name).unwrap().write_scalar(&value).unwrap();
}

fn flow(file: &::hdf5::Group, first: usize) {
    for (c, name) in ["u", "v", "w"].into_iter().enumerate() {
        put::<f64>(file, name, &SHAPE, &coded(N, first + c));
    }
}

#[test]
fn names_are_relative_to_the_step() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("run.h5");
    let file = File::create(&path).unwrap();
    let line: Vec<f64> = (0..10).map(|i| (i * i + 3 * i) as f64).collect();
    for (i, step) in ["iter/100", "iter/20"].into_iter().enumerate() {
        let group = file.create_group(&format!("{step}/flow")).unwrap();
        flow(&group, 3 * i);
        put::<f64>(&group, "rho", &SHAPE, &[1.0; 1080]);
        let group = file.group(step).unwrap();
        put::<f64>(&group, "mesh/y", &[10], &line.iter().map(|y| y + i as f64).collect::<Vec<_>>());
        group.new_dataset::<f64>().create("sim_time").unwrap().write_scalar(&(i as f64 + 0.5)).unwrap();
    }
    file.close().unwrap();
    let got = inspect(&path).unwrap();
    assert_eq!(got.steps, ["iter/20", "iter/100"]);
    let guess = &got.guess;
    assert_eq!(guess.velocity, names(&["flow/u", "flow/v", "flow/w"]));
    assert_eq!((guess.density.as_deref(), guess.coordinates[1].as_deref()), (Some("flow/rho"), Some("mesh/y")));
    assert_eq!((guess.time.dataset.as_deref(), got.time), (Some("sim_time"), Some(1.5)));
    // Every step reads its own values.
    for (step, first, time) in [("iter/100", 0, 0.5), ("iter/20", 3, 1.5)] {
        let snapshot = SnapshotRef { path: path.clone(), group: Some(step.into()), time: None };
        let opened = open(&snapshot, guess).unwrap();
        assert_eq!((opened.time, opened.source.grid().origin[1]), (Some(time), f64::from(u8::from(first == 3))));
        assert_eq!(values_of(&snapshot, guess)[0], coded(N, first), "{step}");
        assert!(!opened.notes.iter().any(|n| n.contains("absolute")), "{:?}", opened.notes);
    }
    // One step looked into by its name.
    let one = inspect(&dir.path().join("run.h5:/iter/100")).unwrap();
    assert_eq!((one.path, one.steps.len(), one.time), (dir.path().join("run.h5:/iter/100"), 0, Some(0.5)));
    assert_eq!(one.guess, got.guess);
    let e = inspect(&dir.path().join("run.h5:/iter/7")).unwrap_err();
    assert_eq!(plain(dir.path(), &e), "cannot find the group: DIR/run.h5: /iter/7: found only /iter");
}

#[test]
fn absolute_names_in_steps_are_noted() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("run.h5");
    let file = File::create(&path).unwrap();
    for (i, step) in ["iter/100", "iter/20", "base"].into_iter().enumerate() {
        flow(&file.create_group(step).unwrap(), 3 * i);
    }
    file.close().unwrap();
    let notes = |group: &str, all: [&str; 3]| {
        let own = InputSpec { velocity: names(&all), ..spec("zyx") };
        open(&SnapshotRef { path: path.clone(), group: Some(group.into()), time: None }, &own).unwrap().notes
    };
    let note = |name: &str| format!("the name {name} is absolute: the same for every step");
    assert_eq!(notes("iter/20", ["/iter/100/u", "v", "w"]), [note("/iter/100/u")]);
    assert_eq!(notes("/iter/20/", ["u", "/iter/20/v", "/base/w"]), [note("/iter/20/v")]);
    assert!(notes("base", ["/base/u", "/iter/20/v", "w"]).is_empty());
}

#[test]
fn groups_without_fields_are_no_steps() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    flow(&file, 0);
    for name in ["spectra_1", "spectra_2"] {
        put::<f64>(&file.create_group(name).unwrap(), "e", &[4, 4], &[0.0; 16]);
    }
    file.close().unwrap();
    let got = inspect(&path).unwrap();
    assert_eq!((got.steps.len(), &got.guess.velocity), (0, &names(&["u", "v", "w"])));
    let told = "2 groups look like steps, spectra_1 the first, but the fields are in none of them";
    assert!(got.reasons.contains(&told.to_string()), "{:?}", got.reasons);
}

/// The attributes are those that our own cut-outs have.
#[test]
fn origin_periodic_and_compressible_are_taken() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let make = |more: &dyn Fn(&File)| {
        let file = File::create(&path).unwrap();
        flow(&file, 0);
        number(&file, "lengths", &[6.0, 5.0, 4.5]);
        more(&file);
        file.close().unwrap();
        inspect(&path).unwrap()
    };
    let compressible = |value: i32| move |f: &File| f.new_attr::<i32>().create("compressible").unwrap().write_scalar(&value).unwrap();
    let got = make(&|f| {
        number(f, "origin", &[1.5, -2.0, 0.25]);
        text(f, "periodic", "xz");
        compressible(1)(f);
    });
    assert_eq!((got.guess.origin, got.guess.periodic), ([1.5, -2.0, 0.25], [true, false, true]));
    assert_eq!(
        got.reasons[2..],
        [
            "position of the first sample from the attribute origin, in the order x, y, z",
            "periodic axes from the attribute periodic: x, z",
            "the attribute compressible says that the flow is compressible",
        ]
    );
    let opened_now = opened(&path, &got.guess);
    assert!(opened_now.source.fields().compressible);
    assert_eq!(opened_now.notes, ["the attribute compressible says that the flow is compressible"]);
    assert_eq!((opened_now.source.grid().origin, opened_now.source.grid().periodic), (got.guess.origin, got.guess.periodic));
    let got = make(&|f| {
        text(f, "periodic", "none");
        compressible(0)(f);
    });
    assert_eq!(got.guess.periodic, [false; 3]);
    assert!(!opened(&path, &got.guess).source.fields().compressible);
    let got = make(&|f| f.new_attr::<bool>().shape(3).create("periodic").unwrap().write_raw(&[true, true, false]).unwrap());
    assert_eq!(got.guess.periodic, [true, true, false]);
    assert_eq!(make(&|f| text(f, "periodic", "perhaps")).guess.periodic, [true; 3]);
    // A magnetic field alone has no density to be compressed by.
    let file = File::create(&path).unwrap();
    for (c, name) in ["bx", "by", "bz"].into_iter().enumerate() {
        put::<f64>(&file, name, &SHAPE, &coded(N, c));
    }
    compressible(1)(&file);
    file.close().unwrap();
    assert!(!opened(&path, &spec("zyx")).source.fields().compressible);
}

/// Lengths beside coordinates: kept where they add to them, left out where they do not or do not fit.
#[test]
fn lengths_beside_coordinates() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    // Unequal from wall to wall.
    let walls: Vec<f64> = (0..10).map(|j| -(std::f64::consts::PI * f64::from(j) / 9.0).cos()).collect();
    let whole = 2.0 + (walls[1] - walls[0]);
    for (length, kept) in [(2.0, 2.0), (whole, 0.0), (9.0, 0.0)] {
        let file = File::create(&path).unwrap();
        flow(&file, 0);
        put::<f64>(&file, "y", &[10], &walls);
        number(&file, "lengths", &[6.0, length, 4.5]);
        number(&file, "origin", &[0.0, -1.0, 0.0]);
        file.close().unwrap();
        let got = inspect(&path).unwrap();
        assert_eq!((got.guess.lengths, got.guess.origin), (Some([6.0, kept, 4.5]), [0.0; 3]));
        let odd = "it does not fit the coordinates of y, which are taken instead".to_string();
        assert_eq!(got.reasons.contains(&odd), length == 9.0, "{:?}", got.reasons);
        let grid = opened(&path, &got.guess).source.grid().clone();
        assert!((grid.length(1) - if kept == 0.0 { whole } else { kept }).abs() < 1e-12);
    }
}

#[test]
fn scalars_and_arrays_with_time_are_no_velocity() {
    let dir = tempfile::tempdir().unwrap();
    let single = write(dir.path(), "u.npy", &npy(1, "'<f4'", false, &SHAPE, &singles(&coded(N, 0), false)));
    let got = inspect(&single).unwrap();
    assert_eq!(got.guess.velocity, None);
    assert_eq!(got.reasons, ["u.npy has no component axis, it is one component: give its folder, or {field} for the names of all"]);
    let timed = write(dir.path(), "vel.npy", &npy(1, "'<f4'", false, &[5, 4, 4, 4], &[0; 1280]));
    let got = inspect(&timed).unwrap();
    assert_eq!(got.guess.velocity, None);
    assert_eq!(got.reasons, ["vel.npy has four axes, none of length 3 at its ends for the components (is one the time?): not a velocity"]);
    let path = dir.path().join("s.h5");
    hdf5(&path, &[5, 4, 4, 4], &[("u", vec![0.0; 320]), ("v", vec![0.0; 320]), ("w", vec![0.0; 320])]);
    let got = inspect(&path).unwrap();
    assert_eq!(got.guess.velocity, None);
    let told = "/u has four axes, none of length 3 at its ends for the components (is one the time?): not taken";
    assert_eq!((got.reasons.len(), got.reasons[0].as_str()), (4, told));
}

#[test]
fn times_as_text_and_as_datasets() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let time = |more: &dyn Fn(&File)| {
        let file = File::create(&path).unwrap();
        let group = file.create_group("step_2").unwrap();
        flow(&group, 0);
        more(&file);
        file.close().unwrap();
        open(&SnapshotRef { path: path.clone(), group: Some("step_2".into()), time: None }, &spec("zyx")).unwrap().time
    };
    let dataset = |f: &File, name: &str, value: f64| f.new_dataset::<f64>().create(name).unwrap().write_scalar(&value).unwrap();
    assert_eq!(time(&|f| text(f, "time", " 1.5 ")), Some(1.5));
    assert_eq!(time(&|f| text(f, "time", "soon")), None);
    assert_eq!(time(&|f| dataset(f, "t", 2.5)), Some(2.5));
    assert_eq!(time(&|f| (dataset(f, "t", 2.5), dataset(f, "step_2/time", 3.5)).1), Some(3.5), "that of the step first");
    assert_eq!(time(&|f| (dataset(f, "step_2/time", 3.5), text(f, "t", "4.5")).1), Some(4.5), "attributes first");
    assert_eq!(time(&|f| put::<f64>(f, "time", &[2], &[1.0, 2.0])), None);
    let own = InputSpec { time: TimeSource { attribute: Some("clock".into()), ..TimeSource::default() }, ..spec("zyx") };
    time(&|f| text(f, "clock", "-6e1"));
    let snapshot = SnapshotRef { path: path.clone(), group: Some("step_2".into()), time: None };
    assert_eq!(open(&snapshot, &own).unwrap().time, Some(-60.0));
}
