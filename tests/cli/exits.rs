//! Exit codes, what is left behind, and run folders that are refused or replaced.

use crate::place::{OPTIONS, Place, flow};

#[test]
fn success_is_0_and_leaves_the_run_folder() {
    let place = Place::with_snapshot();
    let ran = place.run(&format!("catalogue good.h5 {OPTIONS} -o out/run"));
    assert_eq!((ran.code, ran.err.as_str()), (0, ""), "{}", ran.out);
    assert_eq!(
        place.listing(),
        [
            "good.h5",
            "out/",
            "out/run/",
            "out/run/catalogue.csv",
            "out/run/catalogue.parquet",
            "out/run/columns.json",
            "out/run/parts/",
            "out/run/parts/good.json",
            "out/run/parts/good.jsonl",
            "out/run/run.json",
            "out/run/surfaces/",
            "out/run/surfaces/good/",
            "out/run/surfaces/good/v.ply",
            "out/run/timing.json",
        ]
    );
}

#[test]
fn one_bad_snapshot_of_two_is_1_and_the_other_is_done() {
    let place = Place::with_snapshot();
    place.write("bad.h5", b"nothing of the kind");
    let mut broken = flow();
    broken[1].1[5] = f32::NAN;
    place.hdf5("broken.h5", &broken);
    let ran = place.run(&format!("catalogue bad.h5 broken.h5 good.h5 {OPTIONS} -q"));
    assert_eq!(ran.code, 1);
    assert_eq!(ran.out, "");
    assert_eq!(
        ran.err,
        "error: snapshot skipped: cannot read the HDF5 file: bad.h5: expected an HDF5 signature, found a file beginning \"nothing \"; \
         hint: snapshots are HDF5 files, .npy files or folders of .npy files; files without a header need --raw-values and --raw-shape\n\
         error: snapshot skipped: cannot use the snapshot: broken: expected finite values, \
         found 1 NaN or infinite, first broken.h5:/v at x=5 y=0 z=0; hint: indices count from 0; was the file written completely?\n"
    );
    let run = place.json("ropewalk-run/run.json");
    assert_eq!(run["snapshots"].as_array().map(Vec::len), Some(1));
    assert_eq!(run["snapshots"][0]["snapshot"], "good");
    assert_eq!(run["failed"][0]["path"], "bad.h5");
    assert_eq!(run["failed"][1]["path"], "broken.h5");
    let rows = place.read("ropewalk-run/catalogue.csv");
    assert!(rows.lines().count() > 1 && rows.lines().skip(1).all(|l| l.starts_with("good,")), "{rows}");
    assert!(!place.listing().iter().any(|f| f.contains("broken_") || f.contains(".faces")), "{:?}", place.listing());
}

#[test]
fn no_usable_snapshot_of_two_is_3() {
    let place = Place::new();
    place.write("a.h5", b"a");
    place.write("b.h5", b"b");
    let ran = place.run("catalogue a.h5 b.h5 --lengths 1");
    assert_eq!(ran.code, 3);
    assert!(
        ran.err.ends_with("error: cannot use any snapshot: expected at least one that is usable, found 2 that are not\n"),
        "{}",
        ran.err
    );
    assert_eq!(place.listing(), ["a.h5", "b.h5"]);
}

#[test]
fn an_unwritable_place_is_5() {
    // Below a regular file nothing can be made, whoever runs the test.
    let place = Place::with_snapshot();
    place.write("file", b"");
    let ran = place.run(&format!("catalogue good.h5 {OPTIONS} -o file/run"));
    assert_eq!(ran.code, 5);
    assert_eq!(ran.err, "error: cannot make the run folder: file/run: expected a folder above it, found a file\n");
    assert_eq!(ran.out, "");
    assert_eq!(place.listing(), ["file", "good.h5"]);
}

#[test]
fn an_existing_run_is_refused_untouched_then_replaced() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS} -o run"));
    let before: Vec<(String, String)> =
        ["catalogue.csv", "columns.json", "run.json", "timing.json"].map(|f| (f.to_string(), place.read(&format!("run/{f}")))).into();
    let other = format!("catalogue good.h5 {OPTIONS} --connectivity 6 -o run");
    let ran = place.run(&other);
    assert_eq!(ran.code, 5);
    assert_eq!(
        ran.err,
        "error: cannot make the run folder: run: expected nothing there, found a run folder or file of that name; \
         hint: name another with -o, or pass --replace to put this run in its place once it is complete\n"
    );
    for (file, text) in &before {
        assert_eq!(&place.read(&format!("run/{file}")), text, "{file}");
    }
    place.write("bad.h5", b"bad");
    let failed = place.run(&format!("catalogue bad.h5 {OPTIONS} -o run --replace"));
    assert_eq!(failed.code, 3);
    for (file, text) in &before {
        assert_eq!(&place.read(&format!("run/{file}")), text, "{file} after a failed replacement");
    }
    place.succeed(&format!("{other} --replace"));
    assert_eq!(place.json("run/run.json")["request"]["connectivity"], 6);
    assert!(place.listing().iter().all(|f| !f.contains(".replaced") && !f.contains(".unfinished")), "{:?}", place.listing());
}

#[test]
fn a_folder_that_holds_no_run_is_never_replaced() {
    let place = Place::with_snapshot();
    std::fs::create_dir(place.path("thesis")).expect("a new folder");
    place.write("thesis/chapter.tex", b"words");
    let ran = place.run(&format!("catalogue good.h5 {OPTIONS} -o thesis --replace"));
    assert_eq!(ran.code, 5);
    assert_eq!(
        ran.err,
        "error: cannot replace the run folder: thesis: expected a run folder (one with run.json) or an empty folder, found other files; \
         hint: name another folder with -o\n"
    );
    assert_eq!(place.read("thesis/chapter.tex"), "words");
}
