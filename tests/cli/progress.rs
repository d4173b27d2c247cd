//! Progress as lines of JSON, and the times of a run as they stand in timing.json.

use serde_json::Value;

use crate::place::{OPTIONS, Place, field, flow};

fn lines(err: &str) -> Vec<Value> {
    err.lines().map(|l| serde_json::from_str(l).unwrap_or_else(|e| panic!("{l}: {e}"))).collect()
}

#[test]
fn every_stage_is_told_at_its_beginning_and_end() {
    let place = Place::with_snapshot();
    place.hdf5("second.h5", &flow());
    let ran = place.succeed(&format!("catalogue good.h5 second.h5 {OPTIONS} --progress json"));
    let told = lines(&ran.err);
    let text = |l: &Value, key: &str| l[key].as_str().unwrap_or("-").to_string();
    let ends: Vec<String> = told
        .iter()
        .filter(|l| l["event"] != "advance")
        .map(|l| format!("{} {} {}", text(l, "event"), text(l, "snapshot"), text(l, "stage")))
        .collect();
    let mut wanted = vec!["- open".to_string()];
    for s in ["good", "second"] {
        wanted.extend(["open", "read", "survey", "detection", "shapes", "files", "tables"].map(|stage| format!("{s} {stage}")));
    }
    wanted.push("second tables".into());
    let wanted: Vec<String> = wanted.iter().flat_map(|w| [format!("begin {w}"), format!("end {w}")]).collect();
    assert_eq!(ends, wanted);
    for l in &told {
        let keys: Vec<&str> = l.as_object().expect("an object").keys().map(String::as_str).collect();
        let all = [
            "event",
            "snapshot",
            "snapshot_number",
            "of_snapshots",
            "stage",
            "planes",
            "of_planes",
            "bytes_read",
            "seconds",
            "seconds_left",
        ];
        assert_eq!(keys, all);
        assert!(l["seconds"].as_f64().is_some_and(|s| s >= 0.0) && l["bytes_read"].is_u64());
    }
    let end = told.iter().find(|l| l["event"] == "end" && l["stage"] == "survey").expect("an end");
    assert_eq!((&end["planes"], &end["of_planes"], &end["seconds_left"]), (&16.into(), &16.into(), &0.0.into()));
    assert_eq!((&end["snapshot_number"], &end["of_snapshots"]), (&1.into(), &2.into()));
    assert!(ran.out.starts_with("snapshot "), "results go on standard output all the same");
}

#[test]
fn warnings_failures_and_errors_are_lines_too() {
    let place = Place::with_snapshot();
    place.write("bad.h5", b"bad");
    let spoken = |ran: &crate::place::Ran| -> Vec<Value> {
        let said = |l: &Value| ["warning", "failure", "error"].iter().any(|e| l["event"] == *e);
        lines(&ran.err).into_iter().filter(said).collect()
    };
    let line = "--lengths 2pi --family 'none: vorticity > 900'";
    let ran = place.run(&format!("catalogue bad.h5 good.h5 {line} --progress json"));
    assert_eq!(ran.code, 1);
    let said = spoken(&ran);
    assert_eq!(said.iter().map(|l| l["event"].as_str().expect("a text")).collect::<Vec<_>>(), ["failure", "warning"]);
    assert!(said[0]["text"].as_str().is_some_and(|t| t.starts_with("snapshot skipped: cannot read the HDF5 file: bad.h5")));
    // Quiet: errors alone.
    let ran = place.run(&format!("catalogue bad.h5 good.h5 {line} --progress json -q -o quiet"));
    assert_eq!(lines(&ran.err), [said[0].clone()]);
    let ran = place.run("catalogue bad.h5 --lengths 2pi --progress json -o none");
    let last = lines(&ran.err).pop().expect("an error");
    assert_eq!((ran.code, &last["event"], &last["exit_code"]), (3, &"error".into(), &3.into()));
    // Faults of settings, one a line.
    let ran = place.run("catalogue good.h5 --lengths x --order q --progress json");
    assert_eq!(
        lines(&ran.err).iter().map(|l| (l["event"].clone(), l["exit_code"].clone())).collect::<Vec<_>>(),
        vec![("error".into(), 2.into()); 2]
    );
}

#[test]
fn nothing_is_told_where_nobody_asked() {
    let place = Place::with_snapshot();
    for how in ["auto", "none"] {
        let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS} --progress {how} -o {how}"));
        assert_eq!(ran.err, "");
    }
    assert_eq!(place.run("catalogue good.h5 --lengths 1 --progress loud").code, 2);
}

/// Nobody may read what is told: the run does not depend on it.
#[cfg(target_os = "linux")]
#[test]
fn a_reader_that_leaves_ends_nothing() {
    let place = Place::with_snapshot();
    let program = env!("CARGO_BIN_EXE_ropewalk");
    place.shell(&format!("'{program}' catalogue good.h5 {OPTIONS} --progress json 2>&1 >out | head -n 1"));
    assert!(place.path("ropewalk-run/run.json").exists());
}

/// Stages add up to the whole, and what they read and wrote is what files hold.
#[test]
fn timing_says_what_every_stage_took() {
    let place = Place::new();
    place.hdf5("both.h5", &[flow(), field()].concat());
    place.succeed(&format!("catalogue both.h5 {OPTIONS} --labels --cut-outs largest:1"));
    let timing = place.json("ropewalk-run/timing.json");
    let stages = timing["stages"].as_array().expect("a list");
    let names: Vec<&str> = stages.iter().map(|s| s["stage"].as_str().expect("a name")).collect();
    for name in ["open", "survey", "detection", "labels", "cut-outs", "shapes", "files", "tables"] {
        assert_eq!(names.iter().filter(|n| **n == name).count(), 1, "{name} in {names:?}");
    }
    let number = |v: &Value, key: &str| v[key].as_f64().unwrap_or_else(|| panic!("{key} in {v}"));
    let sum = |key: &str| stages.iter().map(|s| number(s, key)).sum::<f64>();
    let outside = number(&timing, "seconds_outside_stages");
    assert!((sum("seconds") + outside - number(&timing, "seconds")).abs() < 1e-3);
    assert!(outside < 0.2 * number(&timing, "seconds") + 0.01, "{outside} s of {timing}");
    assert_eq!((&timing["cells"], sum("planes"), sum("cells")), (&4096.into(), number(&timing, "planes"), 256.0 * sum("planes")));
    for s in stages {
        let rate = number(s, "cells") / number(s, "seconds");
        assert!((number(s, "cells_per_second") - rate).abs() <= 1e-6 * rate + 1e-3, "{s}");
        assert!(s["bytes_read"].is_u64() && s["bytes_written"].is_u64(), "{s}");
    }
    assert!(number(&timing, "peak_memory_bytes") > 1e6);
    let size = |name: &str| std::fs::metadata(place.path(&format!("ropewalk-run/{name}"))).expect("a file").len() as f64;
    let stage = |name: &str| &stages[names.iter().position(|n| *n == name).expect("a stage")];
    let tables = ["catalogue.csv", "catalogue.parquet", "columns.json", "run.json", "parts/both.json", "parts/both.jsonl"];
    if cfg!(target_os = "linux") {
        let written = tables.iter().map(|t| size(t)).sum::<f64>();
        assert!(number(stage("tables"), "bytes_written") >= written);
        // The HDF5 library leaves gaps in a file that are never written.
        assert!(number(stage("labels"), "bytes_written") >= 0.9 * size("labels/both/v.h5"));
        // Meshes are written while they come, and completed afterwards.
        let meshes = number(stage("shapes"), "bytes_written") + number(stage("files"), "bytes_written");
        assert!(meshes >= size("surfaces/both/v.ply"));
        assert!(number(&timing, "bytes_written") >= sum("bytes_written") && number(&timing, "bytes_read") >= 6.0 * 4096.0 * 4.0);
    }
}
