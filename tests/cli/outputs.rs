//! Files that are written on request, and that their bytes depend on nothing but data and request.

use std::fs;
use std::thread::sleep;
use std::time::Duration;

use crate::place::{OPTIONS, Place, field, flow};

#[test]
fn tables_are_chosen() {
    let place = Place::with_snapshot();
    for (option, wanted) in [
        ("", vec!["catalogue.csv", "catalogue.parquet"]),
        ("--tables csv", vec!["catalogue.csv"]),
        ("--tables jsonl", vec!["catalogue.csv", "catalogue.jsonl"]),
        ("--tables csv,jsonl,parquet", vec!["catalogue.csv", "catalogue.jsonl", "catalogue.parquet"]),
    ] {
        place.succeed(&format!("catalogue good.h5 {OPTIONS} -o run --replace {option}"));
        let found: Vec<String> = place.listing().iter().filter_map(|f| f.strip_prefix("run/cat")).map(|f| format!("cat{f}")).collect();
        assert_eq!(found, wanted, "{option}");
    }
}

/// Also a second later: HDF5 can put times into its files, Parquet writers names of their own.
#[test]
fn binary_files_are_the_same_every_time() {
    let place = Place::new();
    place.hdf5("both.h5", &[flow(), field()].concat());
    let line = format!("catalogue both.h5 {OPTIONS} --labels --cut-outs largest:3 --surfaces none");
    place.succeed(&format!("{line} -o a"));
    sleep(Duration::from_millis(1100));
    place.succeed(&format!("{line} -o b"));
    let files: Vec<String> = place.listing().iter().filter_map(|f| f.strip_prefix("a/")).map(str::to_string).collect();
    assert_eq!(files.iter().filter(|f| f.ends_with(".h5")).count(), 3, "{files:?}");
    for file in files.iter().filter(|f| f.ends_with(".h5") || f.ends_with(".parquet")) {
        let bytes = |run: &str| fs::read(place.path(&format!("{run}/{file}"))).expect("a result");
        assert!(bytes("a") == bytes("b"), "{file} differs");
    }
}

/// What the parts hold is what the tables hold.
#[test]
fn parts_are_the_rows() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS} --tables jsonl -o run"));
    assert_eq!(place.read("run/parts/good.jsonl"), place.read("run/catalogue.jsonl"));
    let part = place.json("run/parts/good.json");
    let run = place.json("run/run.json");
    assert_eq!(part["snapshot"], run["snapshots"][0]);
    assert_eq!((&part["request"], &part["program"]), (&run["request"], &run["program"]));
    assert_eq!(part["rows"], place.read("run/catalogue.csv").lines().count() - 1);
}

#[test]
fn objects_that_are_not_there_are_named() {
    let place = Place::with_snapshot();
    let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS} --cut-outs 1,v:99999,88888 -q -o run"));
    assert_eq!(ran.err, "");
    let text = "no cut-out, for want of a listed object: v:99999, 88888";
    let warnings = place.json("run/run.json")["snapshots"][0]["warnings"].clone();
    assert!(warnings.as_array().is_some_and(|w| w.iter().any(|w| w == text)), "{warnings}");
    let cut: Vec<String> = place.listing().into_iter().filter(|f| f.starts_with("run/cutouts") && f.ends_with(".h5")).collect();
    assert_eq!(cut, ["run/cutouts/good/v/000001.h5"]);
    let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS} --cut-outs v:99999 -o again"));
    assert!(ran.err.contains("warning: good: no cut-out, for want of a listed object: v:99999\n"), "{}", ran.err);
}

/// A snapshot that fails half-way leaves no files of its own.
#[test]
fn failed_snapshots_leave_nothing() {
    let place = Place::with_snapshot();
    let mut broken = flow();
    broken[1].1[5] = f32::NAN;
    place.hdf5("broken.h5", &broken);
    let ran = place.run(&format!("catalogue broken.h5 good.h5 {OPTIONS} --labels --cut-outs largest:1 -q -o run"));
    assert_eq!(ran.code, 1);
    let left: Vec<String> = place.listing().into_iter().filter(|f| f.contains("run/") && f.contains("broken")).collect();
    assert!(left.iter().all(|f| f == "run/surfaces/broken/"), "{left:?}");
    assert!(!place.listing().iter().any(|f| f.ends_with("plan.json") || f.ends_with(".writing")));
}
