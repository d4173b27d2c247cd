//! From patterns, lists and groups to the snapshots of a run.

use std::path::{Path, PathBuf};

use ::hdf5::File;
use ropewalk::base::error::Kind;
use ropewalk::read::InputSpec;
use ropewalk::read::series::{Series, expand};

use crate::files::{names, spec};
use crate::flows::{plain, write};

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
    assert!(refused(dir.path(), &none).1.starts_with("cannot read the list: /nowhere/list.txt: found "));
}
