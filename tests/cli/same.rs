//! The same bytes for any number of threads and any block thickness; nothing of the machine in the results.

use std::fs;

use serde_json::Value;

use crate::place::{OPTIONS, Place, field, flow};

const RESULTS: [&str; 14] = [
    "catalogue.csv",
    "catalogue.parquet",
    "catalogue.jsonl",
    "columns.json",
    "run.json",
    "parts/both.json",
    "parts/both.jsonl",
    "surfaces/both/v.ply",
    "surfaces/both/h.ply",
    "surfaces/both/j.ply",
    "labels/both/v.h5",
    "labels/both/h.h5",
    "cutouts/both/v/000001.h5",
    "cutouts/both/h/000001.h5",
];

#[test]
fn results_do_not_depend_on_threads_or_blocks() {
    let place = Place::new();
    place.hdf5("both.h5", &[flow(), field()].concat());
    let families = "--family 'v: vorticity > 1.2 rms' --family 'h: helicity > 1.5 rms' --family 'j: current > 0.02 volume'";
    let line = format!("catalogue both.h5 --lengths 2pi {families} --connectivity 6 --min-cells 4 --viscosity 0.01 --resistivity 0.02");
    let line = format!("{line} --tables csv,parquet,jsonl --labels --cut-outs 1 --cut-out-margin 2");
    let mut runs = Vec::new();
    for threads in [1, 3] {
        for planes in [1, 5] {
            let name = format!("run_{threads}_{planes}");
            place.succeed(&format!("{line} --threads {threads} --block-planes {planes} -o {name}"));
            runs.push(name);
        }
    }
    let rows = place.read("run_1_1/catalogue.csv");
    for (family, least) in [("v", 10), ("h", 10), ("j", 2)] {
        let found = rows.lines().filter(|l| l.starts_with(&format!("both,,{family},"))).count();
        assert!(found >= least, "{found} objects of {family}");
    }
    for file in RESULTS {
        let first = fs::read(place.path(&format!("{}/{file}", runs[0]))).expect("a result");
        for run in &runs[1..] {
            assert!(fs::read(place.path(&format!("{run}/{file}"))).expect("a result") == first, "{run}/{file} differs");
        }
    }
}

/// Every key of a JSON value, nested ones too.
fn keys(value: &Value, out: &mut Vec<String>) {
    match value {
        Value::Object(map) => {
            for (key, inner) in map {
                out.push(key.clone());
                keys(inner, out);
            }
        }
        Value::Array(list) => list.iter().for_each(|v| keys(v, out)),
        _ => {}
    }
}

#[test]
fn how_it_ran_stands_in_timing_alone() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS} --threads 2"));
    let timing = place.json("ropewalk-run/timing.json");
    let mut how = Vec::new();
    keys(&timing, &mut how);
    assert_eq!(timing["threads"], 2);
    let mut what = Vec::new();
    keys(&place.json("ropewalk-run/run.json"), &mut what);
    for key in ["threads", "seconds", "host", "peak_memory_bytes", "finished_unix_seconds", "stages"] {
        assert!(how.iter().any(|k| k == key), "timing.json lacks {key}");
        assert!(what.iter().all(|k| k != key), "run.json holds {key}");
    }
}

/// One path on every machine is part of what was asked, and named instead of an instruction set.
#[test]
fn the_portable_path_is_recorded() {
    let place = Place::with_snapshot();
    place.write("run.toml", b"[snapshots]\npaths = \"good.h5\"\n[input]\nlengths = \"2pi\"\n[physics]\nportable = true\n");
    for (line, portable) in [
        (format!("catalogue good.h5 {OPTIONS}"), false),
        (format!("catalogue good.h5 {OPTIONS} --portable"), true),
        ("catalogue run.toml".into(), true),
    ] {
        place.succeed(&format!("{line} -q --replace -o run"));
        for (file, what) in [("run/run.json", "run"), ("run/parts/good.json", "part")] {
            let found = place.json(file);
            assert_eq!(found["request"]["portable"], portable, "{line}: {what}");
            assert_eq!(found["program"]["instruction_set"] == "portable", portable, "{line}: {what}");
        }
    }
}

#[test]
fn shares_add_to_one() {
    let place = Place::new();
    place.hdf5("both.h5", &[flow(), field()].concat());
    place.succeed(&format!("catalogue both.h5 {OPTIONS} --family 'j: current > 1.5 rms' --surfaces none"));
    let run = place.json("ropewalk-run/run.json");
    let table = place.read("ropewalk-run/catalogue.csv");
    let header: Vec<&str> = table.lines().next().expect("a header").split(',').collect();
    let sum = |family: &str, column: &str| -> f64 {
        let at = |name: &str| header.iter().position(|h| *h == name).expect("a column");
        let rows = table.lines().skip(1).map(|l| l.split(',').collect::<Vec<_>>()).filter(|r| r[at("family")] == family);
        rows.map(|r| r[at(column)].parse::<f64>().expect("a number")).sum()
    };
    for family in run["snapshots"][0]["families"].as_array().expect("families") {
        for key in ["volume", "viscous", "ohmic"] {
            let part = |which: &str| family["shares"][which][key].as_f64().expect("a share");
            let whole = part("objects") + part("dropped") + part("background");
            assert!((whole - 1.0).abs() < 1e-14, "{key}: {whole}");
        }
        let name = family["family"].as_str().expect("a name");
        for (column, key) in [("viscous_share", "viscous"), ("ohmic_share", "ohmic")] {
            let told = family["shares"]["objects"][key].as_f64().expect("a share");
            assert!((sum(name, column) - told).abs() < 1e-14, "{name} {column}");
        }
    }
}
