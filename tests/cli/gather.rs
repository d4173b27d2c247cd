//! Runs made by separate jobs, joined: the bytes of one run over the same snapshots, and what is refused.

use std::fs;

use crate::place::{OPTIONS, Place, field, flow};

const MORE: &str = "--family 'h: helicity > 1.5 rms' --viscosity 0.01 --tables csv,parquet,jsonl --labels --cut-outs 1 --companions q";

/// Three snapshots whose natural order is not that of their bytes.
fn jobs() -> Place {
    let place = Place::new();
    for (k, name) in ["s2.h5", "s9.h5", "s10.h5"].into_iter().enumerate() {
        let mut fields = flow();
        fields[k].1.iter_mut().for_each(|v| *v *= 1.5);
        place.hdf5(name, &[fields, field()].concat());
    }
    place
}

/// Every file of a run but `timing.json`.
fn results(place: &Place, run: &str) -> Vec<String> {
    let all = place.listing();
    let files =
        all.iter().filter_map(|f| f.strip_prefix(&format!("{run}/"))).filter(|f| !f.is_empty() && !f.ends_with('/') && *f != "timing.json");
    files.map(str::to_string).collect()
}

fn assert_same(place: &Place, a: &str, b: &str) {
    assert_eq!(results(place, a), results(place, b));
    for file in results(place, a) {
        let bytes = |run: &str| fs::read(place.path(&format!("{run}/{file}"))).expect("a result");
        assert!(bytes(a) == bytes(b), "{file} differs");
    }
}

#[test]
fn gathered_jobs_are_one_run() {
    let place = jobs();
    let one = place.succeed(&format!("catalogue s2.h5 s9.h5 s10.h5 {OPTIONS} {MORE} --threads 2 -o one"));
    for name in ["s10", "s2", "s9"] {
        place.succeed(&format!("catalogue {name}.h5 {OPTIONS} {MORE} --threads 1 -o job_{name} -q"));
    }
    let ran = place.succeed("gather job_s10 job_s2 job_s9 -o all");
    assert_eq!(ran.err, "");
    assert_eq!(ran.out.lines().count(), one.out.lines().count());
    for (told, wanted) in ran.out.lines().zip(one.out.lines()).filter(|(_, w)| *w != "one") {
        assert_eq!(told, wanted);
    }
    assert!(results(&place, "all").len() > 20, "{:?}", results(&place, "all"));
    assert_same(&place, "one", "all");
    // What was gathered can be gathered again, by two and one.
    place.succeed("gather job_s9 job_s2 -o two -q");
    place.succeed("gather job_s10 two/parts -o again -q");
    assert_same(&place, "one", "again");
    // The jobs' folders stay as they are, and nothing is replaced unasked.
    assert!(place.listing().iter().any(|f| f == "job_s9/labels/s9/v.h5"));
    assert_eq!(place.run("gather job_s10 -o all").code, 5);
    place.succeed("gather job_s10 -o all --replace -q");
    assert_same(&place, "job_s10", "all");
}

#[test]
fn time_orders_where_all_have_one() {
    let place = jobs();
    // A folder with arrays has no time; HDF5 files here get one each.
    for (name, time) in [("s2", 3.0), ("s9", 1.0), ("s10", 2.0)] {
        place.timed(&format!("{name}.h5"), time);
        place.succeed(&format!("catalogue {name}.h5 {OPTIONS} -o job_{name} -q"));
    }
    place.succeed(&format!("catalogue s9.h5 s10.h5 s2.h5 {OPTIONS} -o one -q"));
    place.succeed("gather job_s2 job_s9 job_s10 -o all -q");
    assert_same(&place, "one", "all");
}

#[test]
fn different_requests_are_refused() {
    let place = jobs();
    place.succeed(&format!("catalogue s2.h5 {OPTIONS} -o a -q"));
    place.succeed("catalogue s9.h5 --lengths 2pi --family 'v: vorticity > 2.2 rms' --min-cells 5 --viscosity 0.5 -o b -q");
    let ran = place.run("gather a b -o all");
    assert_eq!(ran.code, 3);
    assert_eq!(
        ran.err,
        "error: cannot gather: b/parts/s9.json: expected the program and request of a/parts/s2.json, \
         found request.min_cells 4 there and 5 here; request.viscosity null there and 0.5 here; \
         hint: a catalogue answers one request: run the others again with the same options\n"
    );
    assert!(!place.listing().iter().any(|f| f.starts_with("all")));
}

#[test]
fn a_snapshot_in_two_runs_is_refused() {
    let place = jobs();
    place.succeed(&format!("catalogue s2.h5 {OPTIONS} -o a -q"));
    place.succeed(&format!("catalogue s2.h5 s9.h5 {OPTIONS} -o b -q"));
    let ran = place.run("gather a b -o all");
    assert_eq!(ran.code, 3);
    assert!(
        ran.err.starts_with("error: cannot gather: b: expected every snapshot once, found the snapshot s2, which is also in a"),
        "{}",
        ran.err
    );
}

/// A run that was killed: its complete parts count, an incomplete one does not.
#[test]
fn complete_parts_of_an_unfinished_run_are_taken() {
    let place = jobs();
    place.succeed(&format!("catalogue s2.h5 s9.h5 {OPTIONS} {MORE} -o wanted -q"));
    place.succeed(&format!("catalogue s2.h5 s9.h5 s10.h5 {OPTIONS} {MORE} -o run -q"));
    fs::rename(place.path("run"), place.path("run.unfinished")).expect("renamed");
    for file in ["catalogue.csv", "catalogue.jsonl", "catalogue.parquet", "columns.json", "run.json", "timing.json", "parts/s10.json"] {
        fs::remove_file(place.path(&format!("run.unfinished/{file}"))).expect("removed");
    }
    place.write("run.unfinished/plan.json", br#"{"snapshots":["s2","s9","s10"]}"#);
    place.write("run.unfinished/parts/s10.json.writing", b"{");

    let ran = place.run("gather run -o all");
    assert_eq!(ran.code, 3);
    assert!(ran.err.ends_with("hint: run.unfinished is there: name it to take its complete parts\n"), "{}", ran.err);
    let ran = place.run("gather run.unfinished -o run");
    assert_eq!(ran.code, 5, "it must not be overwritten: {}", ran.err);
    let ran = place.run("gather run.unfinished -o all -q");
    assert_eq!((ran.code, ran.err.as_str()), (1, ""));
    assert_same(&place, "wanted", "all");
    let ran = place.run("gather run.unfinished -o all --replace");
    assert_eq!((ran.code, ran.err.as_str()), (1, "warning: run.unfinished: unfinished, without s10\n"));

    // A later job makes up for it.
    place.succeed(&format!("catalogue s10.h5 {OPTIONS} {MORE} -o rest -q"));
    place.succeed(&format!("catalogue s2.h5 s9.h5 s10.h5 {OPTIONS} {MORE} -o whole -q"));
    place.succeed("gather run.unfinished rest -o all --replace -q");
    assert_same(&place, "whole", "all");
}

#[test]
fn failures_are_carried_along_until_made_up_for() {
    let place = jobs();
    place.write("s9.h5", b"nothing of the kind");
    assert_eq!(place.run(&format!("catalogue s2.h5 s9.h5 {OPTIONS} -o a -q")).code, 1);
    place.succeed(&format!("catalogue s10.h5 {OPTIONS} -o b -q"));
    let ran = place.run("gather a b -o all");
    assert_eq!(ran.code, 1);
    assert!(ran.err.contains("snapshot failed in its run: cannot read the HDF5 file: s9.h5"), "{}", ran.err);
    assert_eq!(place.json("all/run.json")["failed"][0]["path"], "s9.h5");
    place.hdf5("s9.h5", &flow());
    place.succeed(&format!("catalogue s9.h5 {OPTIONS} -o c -q"));
    place.succeed("gather a b c -o all --replace");
    assert_eq!(place.json("all/run.json")["failed"], serde_json::json!([]));
}

#[test]
fn damaged_parts_are_named() {
    let place = jobs();
    place.succeed(&format!("catalogue s2.h5 {OPTIONS} -o a -q"));
    let rows = place.read("a/parts/s2.jsonl");
    let refused = |text: &str, part: &str| {
        place.write("a/parts/s2.jsonl", text.as_bytes());
        let ran = place.run("gather a -o all");
        assert_eq!(ran.code, 3, "{}", ran.err);
        assert!(ran.err.contains(part), "{}", ran.err);
        assert!(!place.listing().iter().any(|f| f.starts_with("all")));
    };
    refused(rows.split_inclusive('\n').next().expect("a row"), "cannot read the rows of a snapshot: a/parts/s2.jsonl: expected ");
    refused(&rows.replace("\"cells\":", "\"cell\":"), "a/parts/s2.jsonl: line 1: expected a JSON object with the columns");
    refused(&rows[..rows.len() - 9], "a/parts/s2.jsonl: line ");
    place.write("a/parts/s2.json", b"{}");
    let ran = place.run("gather a -o all");
    assert!(ran.code == 3 && ran.err.contains("cannot read the part of a snapshot: a/parts/s2.json"), "{}", ran.err);
    let ran = place.run("gather nowhere -o all");
    assert_eq!((ran.code, ran.err.as_str()), (3, "error: cannot gather: nowhere: expected a run folder with its parts, found nothing\n"));
}
