//! From patterns, lists and groups to the snapshots of a run.

use std::path::{Path, PathBuf};

use ::hdf5::File;
use ropewalk::base::error::Kind;
use ropewalk::read::series::{Series, expand};
use ropewalk::read::{InputSpec, RawLayout};

use crate::files::{names, spec};
use crate::flows::{fault, plain, write};

/// The snapshots as text, with the folder of the test left out and times behind `@`.
fn told(dir: &Path, series: &Series, spec: &InputSpec) -> Vec<String> {
    let folder = format!("{}/", dir.display());
    let all = expand(series, spec).unwrap_or_else(|e| panic!("{e}"));
    all.iter().map(|s| format!("{s}{}", s.time.map_or(String::new(), |t| format!(" @{t}"))).replace(&folder, "")).collect()
}

fn paths(dir: &Path, named: &[&str]) -> Series {
    Series { paths: named.iter().map(|n| dir.join(n).display().to_string()).collect(), ..Series::default() }
}

fn refused(dir: &Path, series: &Series) -> (Kind, String) {
    let e = expand(series, &spec("zyx")).expect_err("the series was accepted");
    (e.kind(), plain(dir, &e))
}

fn touch(dir: &Path, files: &[&str]) {
    for name in files {
        std::fs::create_dir_all(dir.join(name).parent().unwrap()).unwrap();
        write(dir, name, b"");
    }
}

#[test]
fn patterns_in_natural_order() {
    let dir = tempfile::tempdir().unwrap();
    touch(dir.path(), &["s_10.h5", "s_9.h5", "s_100.h5", "a[1].h5", "t2/s.h5", "t10/s.h5", "x*.h5"]);
    let t = |named: &[&str]| told(dir.path(), &paths(dir.path(), named), &spec("zyx"));
    assert_eq!(t(&["s_*.h5"]), ["s_9.h5", "s_10.h5", "s_100.h5"]);
    assert_eq!(t(&["s_??.h5", "s_9.h5"]), ["s_10.h5", "s_9.h5"]);
    assert_eq!(t(&["t*/s.h5"]), ["t2/s.h5", "t10/s.h5"]);
    assert_eq!(t(&["a[1].h5", "x*.h5"]), ["a[1].h5", "x*.h5"], "files that look like patterns");
    assert_eq!(t(&["missing.h5"]), ["missing.h5"]);
    assert_eq!(t(&[]), Vec::<String>::new());
    assert_eq!(
        refused(dir.path(), &paths(dir.path(), &["q*.h5"])),
        (
            Kind::Input,
            "cannot find snapshots: \"DIR/q*.h5\": expected a pattern that matches a file, found no match; \
             hint: quote the pattern and check the folder"
                .into()
        )
    );
    let (kind, text) = refused(dir.path(), &paths(dir.path(), &["s[.h5"]));
    assert_eq!(kind, Kind::Usage);
    assert!(text.starts_with("cannot read a pattern: \"DIR/s[.h5\": found "), "{text}");
}

#[test]
fn files_of_components_make_one_snapshot() {
    let dir = tempfile::tempdir().unwrap();
    let files = ["u_9.dat", "v_9.dat", "w_9.dat", "u_10.dat", "v_10.dat", "w_10.dat", "ax/1.h5", "ay/1.h5", "az/1.h5", "ax/2.h5"];
    touch(dir.path(), &files);
    let t = |named: &str, own: &InputSpec| told(dir.path(), &paths(dir.path(), &[named]), own);
    assert_eq!(t("{field}_*.dat", &spec("zyx")), ["{field}_9.dat", "{field}_10.dat"]);
    assert_eq!(t("{field}_9.dat", &spec("zyx")), ["{field}_9.dat"]);
    let own = InputSpec { velocity: names(&["ax", "ay", "az"]), ..spec("zyx") };
    assert_eq!(t("{field}/*.h5", &own), ["{field}/1.h5", "{field}/2.h5"]);
    assert_eq!(
        refused(dir.path(), &paths(dir.path(), &["{field}/*.h5"])),
        (
            Kind::Input,
            "cannot find snapshots: \"DIR/{field}/*.h5\": expected a pattern that matches a file, found no match; \
             hint: --velocity U,V,W names the components"
                .into()
        )
    );
}

#[test]
fn a_file_of_any_component_is_enough() {
    let dir = tempfile::tempdir().unwrap();
    touch(dir.path(), &["u_9.dat", "v_9.dat", "w_9.dat", "v_10.dat", "w_10.dat", "w_2.dat", "b_notes.dat", "theta_11.dat"]);
    let t = |own: &InputSpec| told(dir.path(), &paths(dir.path(), &["{field}_*.dat"]), own);
    // A lone b is no field beside a velocity whose names are there.
    assert_eq!(t(&spec("zyx")), ["{field}_2.dat", "{field}_9.dat", "{field}_10.dat", "{field}_notes.dat"][..3]);
    let own = InputSpec { velocity: names(&["u", "v", "w"]), buoyancy: Some("theta".into()), ..spec("zyx") };
    assert_eq!(t(&own), ["{field}_2.dat", "{field}_9.dat", "{field}_10.dat", "{field}_11.dat"]);
    let raw = RawLayout { double: false, big_endian: false, shape: vec![3, 4, 5], offset: 0, record_markers: None };
    let own = InputSpec { raw: Some(raw), ..own };
    let (kind, text) = fault(dir.path(), &dir.path().join("{field}_10.dat").into(), &own);
    assert_eq!(kind, Kind::Input);
    assert!(text.starts_with("cannot find the file: DIR/u_10.dat: found nothing"), "{text}");
    // The set that is there most wholly counts: u* would match ux1 as well.
    touch(dir.path(), &["ux1.h5", "uy1.h5", "uz1.h5", "uy2.h5"]);
    assert_eq!(told(dir.path(), &paths(dir.path(), &["{field}?.h5"]), &spec("zyx")), ["{field}1.h5", "{field}2.h5"]);
}

/// A broken file among those with steps is left to open() to report, with the true reason.
#[test]
fn files_without_steps_do_not_end_the_others() {
    let dir = tempfile::tempdir().unwrap();
    steps(&dir.path().join("a_1.h5"), &["step_9", "step_10"]);
    steps(&dir.path().join("a_2.h5"), &["grid"]);
    let whole = std::fs::read(dir.path().join("a_1.h5")).unwrap();
    write(dir.path(), "a_3.h5", &whole[..whole.len() / 2]);
    let with = |named: &[&str]| Series { steps: Some("step_*".into()), ..paths(dir.path(), named) };
    let all = with(&["a_*.h5", "none.h5"]);
    let want = ["a_1.h5:/step_9", "a_1.h5:/step_10", "a_2.h5:/step_*", "a_3.h5:/step_*", "none.h5:/step_*"];
    assert_eq!(told(dir.path(), &all, &spec("zyx")), want);
    let found = expand(&all, &spec("zyx")).unwrap();
    let reason = |i: usize| fault(dir.path(), &found[i], &spec("zyx"));
    let no_steps = "cannot find steps: DIR/a_2.h5: \"step_*\": expected a pattern that matches a group, found only /grid; \
                    hint: the pattern begins at the root group";
    assert_eq!(reason(2), (Kind::Input, no_steps.into()));
    assert!(reason(3).1.ends_with("hint: the file is truncated: copy or write it again"), "{}", reason(3).1);
    assert!(reason(4).1.starts_with("cannot find the snapshot: DIR/none.h5"), "{}", reason(4).1);
    // Where no file has a step, the first fault is that of the run.
    assert_eq!(refused(dir.path(), &with(&["a_2.h5", "a_3.h5"])), (Kind::Input, no_steps.into()));
    // A malformed pattern is wrong for every file.
    let bad = Series { steps: Some("s[".into()), ..all };
    assert_eq!(refused(dir.path(), &bad).0, Kind::Usage);
}

fn steps(path: &Path, groups: &[&str]) {
    let file = File::create(path).unwrap();
    for group in groups {
        file.create_group(group).unwrap();
    }
    file.new_dataset::<f32>().shape(3).create("step_none").unwrap();
    file.close().unwrap();
}

#[test]
fn groups_of_files() {
    let dir = tempfile::tempdir().unwrap();
    steps(&dir.path().join("a_1.h5"), &["step_10", "step_9", "grid"]);
    steps(&dir.path().join("a_2.h5"), &["step_11"]);
    steps(&dir.path().join("deep.h5"), &["data/1/fields", "data/10/fields", "data/2/fields", "data/x/other"]);
    let t = |named: &[&str], pattern: Option<&str>| {
        let series = Series { steps: pattern.map(String::from), ..paths(dir.path(), named) };
        told(dir.path(), &series, &spec("zyx"))
    };
    assert_eq!(t(&["a_*.h5"], Some("step_*")), ["a_1.h5:/step_9", "a_1.h5:/step_10", "a_2.h5:/step_11"]);
    assert_eq!(t(&["deep.h5"], Some("/data/*/fields")), ["deep.h5:/data/1/fields", "deep.h5:/data/2/fields", "deep.h5:/data/10/fields"]);
    assert_eq!(t(&["a_1.h5:/step_10"], Some("step_*")), ["a_1.h5:/step_10"], "one that is named");
    assert_eq!(t(&["a_1.h5:/step_*", "a_2.h5:/step_12"], None), ["a_1.h5:/step_9", "a_1.h5:/step_10", "a_2.h5:/step_12"]);
    let series = Series { steps: Some("t*".into()), ..paths(dir.path(), &["a_1.h5"]) };
    assert_eq!(
        refused(dir.path(), &series),
        (
            Kind::Input,
            "cannot find steps: DIR/a_1.h5: \"t*\": expected a pattern that matches a group, found only /grid, /step_10, /step_9; \
             hint: the pattern begins at the root group"
                .into()
        )
    );
    let series = Series { steps: Some("t*".into()), ..paths(dir.path(), &["b.h5"]) };
    assert_eq!(refused(dir.path(), &series).1, "cannot look for steps: DIR/b.h5: expected an HDF5 file, found nothing");
    write(dir.path(), "c.h5", b"text");
    let series = Series { steps: Some("t*".into()), ..paths(dir.path(), &["c.h5"]) };
    assert!(refused(dir.path(), &series).1.starts_with("cannot read the HDF5 file: DIR/c.h5: expected an HDF5 signature"));
}

#[test]
fn lists_and_times() {
    let dir = tempfile::tempdir().unwrap();
    touch(dir.path(), &["a.h5", "b 1.h5", "c_2.h5", "c_1.h5", "d#.h5"]);
    let far = dir.path().join("a.h5").display().to_string();
    let list = write(
        dir.path(),
        "list.txt",
        format!("# invented\n\n{far} 0.5\nb 1.h5   1.5e-3 # the second\nc_*.h5\nd#.h5\nmissing.h5 # none\n").as_bytes(),
    );
    let series = Series { lists: vec![list.clone()], ..Series::default() };
    let want = ["a.h5 @0.5", "b 1.h5 @0.0015", "c_1.h5", "c_2.h5", "d#.h5", "missing.h5"];
    assert_eq!(told(dir.path(), &series, &spec("zyx")), want);
    // Paths come before lists; times that are given win.
    let both = Series { times: (0..7).map(f64::from).collect(), lists: vec![list], ..paths(dir.path(), &["c_1.h5"]) };
    let want = ["c_1.h5 @0", "a.h5 @1", "b 1.h5 @2", "c_1.h5 @3", "c_2.h5 @4", "d#.h5 @5", "missing.h5 @6"];
    assert_eq!(told(dir.path(), &both, &spec("zyx")), want);
    let few = Series { times: vec![1.0, 2.0], ..paths(dir.path(), &["c_*.h5", "a.h5"]) };
    assert_eq!(
        refused(dir.path(), &few),
        (
            Kind::Usage,
            "cannot use the times: expected 3 numbers, one a snapshot, found 2; \
             hint: times follow the snapshots, those of a pattern in the order of the numbers in their names"
                .into()
        )
    );
    let bad = Series { times: vec![f64::NAN], ..paths(dir.path(), &["a.h5"]) };
    assert_eq!(refused(dir.path(), &bad), (Kind::Usage, "cannot use the times: expected finite numbers, found NaN".into()));
    let refuse = |bytes: &[u8]| refused(dir.path(), &Series { lists: vec![write(dir.path(), "bad.txt", bytes)], ..Series::default() });
    assert_eq!(
        refuse(b"a.h5\nc_*.h5 3\n"),
        (Kind::Input, "cannot use the list: DIR/bad.txt: line 2: expected one snapshot before a time, found 2 snapshots".into())
    );
    assert_eq!(refuse(b"# nothing\n").1, "cannot read the list: DIR/bad.txt: expected one path a line, found none");
    assert_eq!(refuse(b"\xff\xfe").1, "cannot read the list: DIR/bad.txt: expected a text file with one path a line, found other bytes");
    let none = Series { lists: vec![PathBuf::from("/nowhere/list.txt")], ..Series::default() };
    assert_eq!(
        refused(dir.path(), &none),
        (
            Kind::Input,
            "cannot read the list: /nowhere/list.txt: expected a text file with one path a line, found nothing; \
             hint: check the path of the list"
                .into()
        )
    );
    // What stands behind a path that is there is a time.
    for (line, path, time) in [("a.h5 five", "a.h5", "five"), ("c_*.h5  nan", "c_*.h5", "nan"), ("b 1.h5 1,5", "b 1.h5", "1,5")] {
        assert_eq!(
            refuse(format!("a.h5\n{line} # t\n").as_bytes()),
            (
                Kind::Input,
                format!(
                    "cannot use the list: DIR/bad.txt: line 2: expected a finite number behind {path}, its time, found \"{time}\"; \
                     hint: a # begins a comment"
                )
            )
        );
    }
}
