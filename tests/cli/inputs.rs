//! Bad inputs and bad options: exact messages, exit codes, nothing left behind.

use crate::place::{N, OPTIONS, Place, flow};

/// Runs a line that must fail with exactly this message and leave the folder as it was.
fn fails(place: &Place, line: &str, code: i32, message: &str) {
    let before = place.listing();
    let ran = place.run(line);
    assert_eq!(ran.err, format!("error: {message}\n"), "{line}");
    assert_eq!(ran.code, code, "{line}");
    assert_eq!(ran.out, "", "{line}");
    assert_eq!(place.listing(), before, "{line}");
}

const DATASETS_HINT: &str = "hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)";

#[test]
fn truncated_hdf5() {
    let place = Place::with_snapshot();
    let whole = std::fs::read(place.path("good.h5")).expect("a snapshot");
    place.write("cut.h5", &whole[..20000]);
    let message = format!(
        "cannot read the HDF5 file: cut.h5: expected {} bytes, as its header says, found 20000; hint: the file is truncated: copy or write it again",
        whole.len()
    );
    fails(&place, &format!("catalogue cut.h5 {OPTIONS}"), 3, &message);
}

#[test]
fn wrong_shape() {
    let place = Place::new();
    let [(u, a), (v, b), (w, c)] = <[_; 3]>::try_from(flow()).expect("three components");
    let short = c[..12 * N * N].to_vec();
    place.hdf5_shaped("shape.h5", &[(u, a, [N; 3]), (v, b, [N; 3]), (w, short, [12, N, N])]);
    let message = "cannot use the dataset: shape.h5: /w: expected 16 x 16 x 16 samples along x, y, z as in shape.h5:/u, \
        found 16 x 16 x 12 samples along x, y, z; hint: all components of a snapshot share one grid";
    fails(&place, &format!("catalogue shape.h5 {OPTIONS}"), 3, message);
}

#[test]
fn missing_dataset() {
    let place = Place::new();
    place.hdf5("two.h5", &flow()[..2]);
    let most = "cannot find all components: two.h5: expected u,v,w, found only u,v; \
        hint: --velocity or --magnetic alone reads one field and leaves the other";
    fails(&place, &format!("catalogue two.h5 {OPTIONS}"), 3, most);
    place.hdf5("one.h5", &flow()[..1]);
    let guessed = format!(
        "cannot find a velocity or magnetic field: one.h5: expected u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b \
         in the root group, found /u 16x16x16; {DATASETS_HINT}"
    );
    fails(&place, &format!("catalogue one.h5 {OPTIONS}"), 3, &guessed);
    let named = format!("cannot find the dataset: two.h5: /w: found only /u 16x16x16, /v 16x16x16; {DATASETS_HINT}");
    fails(&place, &format!("catalogue two.h5 {OPTIONS} --velocity u,v,w"), 3, &named);
}

#[test]
fn a_text_file() {
    let place = Place::new();
    place.write("notes.txt", b"These are notes.\n");
    let message = "cannot read the HDF5 file: notes.txt: expected an HDF5 signature, found a file beginning \"These ar\"; \
        hint: snapshots are HDF5 files, .npy files or folders of .npy files; files without a header need --raw-values and --raw-shape";
    fails(&place, &format!("catalogue notes.txt {OPTIONS}"), 3, message);
}

#[test]
fn nothing_there() {
    let place = Place::new();
    let pattern = "cannot find snapshots: \"run_*.h5\": expected a pattern that matches a file, found no match; \
        hint: quote the pattern and check the folder";
    fails(&place, &format!("catalogue run_*.h5 {OPTIONS}"), 3, pattern);
    let name = "cannot find the snapshot: run.h5: expected an HDF5 file, a .npy file or a folder of .npy files, found nothing; \
        hint: check the path";
    fails(&place, &format!("catalogue run.h5 {OPTIONS}"), 3, name);
}

#[test]
fn a_pattern_takes_every_match_in_order() {
    let place = Place::new();
    for name in ["run_2.h5", "run_10.h5", "run_1.h5"] {
        place.hdf5(name, &flow());
    }
    place.succeed(&format!("catalogue run_*.h5 {OPTIONS} --surfaces none"));
    let run = place.json("ropewalk-run/run.json");
    let names: Vec<&str> = run["snapshots"].as_array().expect("snapshots").iter().filter_map(|s| s["snapshot"].as_str()).collect();
    assert_eq!(names, ["run_1", "run_2", "run_10"]);
}

#[test]
fn nan_and_infinite_cells() {
    let place = Place::new();
    let mut values = flow();
    values[0].1[1 + N * (2 + N * 3)] = f32::NAN;
    values[2].1[6 + N * (5 + N * 4)] = f32::NEG_INFINITY;
    place.hdf5("nan.h5", &values);
    let message = "cannot use the snapshot: nan: expected finite values, found 2 NaN or infinite, \
        first nan.h5:/u at x=1 y=2 z=3, nan.h5:/w at x=6 y=5 z=4; hint: indices count from 0; was the file written completely?";
    fails(&place, &format!("catalogue nan.h5 {OPTIONS}"), 3, message);
    fails(&place, &format!("catalogue nan.h5 {OPTIONS} --family 's: speed > 1 rms'"), 3, message);
}

#[test]
fn npy_files() {
    let place = Place::new();
    let values: Vec<f32> = flow().into_iter().flat_map(|(_, v)| v).collect();
    place.npy("velocity.npy", &[3, N, N, N], &values);
    place.succeed(&format!("catalogue velocity.npy {OPTIONS} -o npy"));
    place.hdf5("velocity.h5", &flow());
    place.succeed(&format!("catalogue velocity.h5 {OPTIONS} -o hdf5"));
    assert_eq!(place.read("npy/catalogue.csv"), place.read("hdf5/catalogue.csv"));

    let whole = std::fs::read(place.path("velocity.npy")).expect("an array");
    place.write("cut.npy", &whole[..whole.len() - 100]);
    let message = format!(
        "cannot read the npy file: cut.npy: expected {} bytes, as its header says, found {}; \
         hint: the file is truncated or damaged: copy or write it again",
        whole.len(),
        whole.len() - 100
    );
    fails(&place, &format!("catalogue cut.npy {OPTIONS}"), 3, &message);
    place.npy("flat.npy", &[3 * N, N, N], &values);
    let ran = place.run(&format!("catalogue flat.npy {OPTIONS}"));
    assert_eq!(ran.code, 3, "{}", ran.err);
    assert!(ran.err.starts_with("error: cannot use the dataset: flat.npy: "), "{}", ran.err);
}

#[test]
fn bad_families() {
    let place = Place::with_snapshot();
    let indicators: Vec<&str> = ropewalk::model::indicator::INDICATORS.iter().map(|i| i.name).collect();
    let unknown =
        format!("\"a: swirl > 3\": expected an indicator of this version, found \"swirl\"; hint: one of {}", indicators.join(", "));
    const GRAMMAR: &str = "\"NAME: INDICATOR > LEVEL [down to LEVEL]\"";
    let cases = [
        ("vorticity", format!("\"vorticity\": expected {GRAMMAR}, found no colon; hint: for example \"vorticity: vorticity > 3 rms\"")),
        (
            "a: vorticity > 3 sigma",
            format!(
                "\"a: vorticity > 3 sigma\": expected {GRAMMAR}, found the word \"sigma\"; \
                 hint: a level is a number, alone or with rms, run-rms, mean, volume or peak"
            ),
        ),
        ("a: swirl > 3", unknown),
    ];
    for (family, rest) in cases {
        let line = format!("catalogue good.h5 --lengths 2pi --family '{family}'");
        fails(&place, &line, 2, &format!("cannot read family: {rest}"));
    }
    let line = "catalogue good.h5 --lengths 2pi --family 'sheets: current > 3 rms'";
    let message = "cannot detect family: good.h5: \"sheets: current > 3 rms\": expected a magnetic field, found none; \
        hint: name its datasets with --magnetic BX,BY,BZ";
    fails(&place, line, 2, message);
    let line = "catalogue good.h5 --lengths 2pi --family 'd: dissipation_viscous > 3 mean'";
    let message = "cannot detect family: \"d: dissipation_viscous > 3 mean\": expected the viscosity, found none; \
        hint: give --viscosity, or use strain instead";
    fails(&place, line, 2, message);
    let line = "catalogue good.h5 --lengths 2pi --family 'a: q > 1 rms' --family 'a: speed > 1'";
    let message = "cannot use family: \"a: speed > 1\": expected a name of its own, found \"a\" twice; \
        hint: give every family another name before the colon";
    fails(&place, line, 2, message);
}

#[test]
fn bad_options() {
    let place = Place::with_snapshot();
    let cases = [
        (
            "",
            "cannot settle the size of the box: --lengths, --spacing: expected one of them, found neither; \
             hint: --lengths 2pi is a cube of that side",
        ),
        (
            "--lengths -1",
            "cannot use a setting: --lengths: expected three finite numbers above 0, or one for all axes, found \"-1\"; \
             hint: for example --lengths 2pi,2pi,pi",
        ),
        (
            "--lengths 1 --viscosity -1",
            "cannot use a setting: --viscosity: expected a number above 0, found \"-1\"; hint: for example --viscosity 0.002",
        ),
        (
            "--lengths 1 --periodic ''",
            "cannot use a setting: --periodic: expected a subset of xyz, or none, found nothing; hint: for example --periodic xz",
        ),
        (
            "--lengths 1 --velocity u,v,w --magnetic u,v,w",
            "cannot read two fields from one dataset: --velocity, --magnetic: expected different datasets, found u, v, w in both; \
             hint: every dataset is one field",
        ),
    ];
    for (options, message) in cases {
        fails(&place, &format!("catalogue good.h5 {options}"), 2, message);
    }
    let usage = "\n\nUsage: ropewalk catalogue --lengths <LX,LY,LZ> <RUN.toml|SNAPSHOT>...\n\nFor more information, try '--help'.";
    let tip = "\n\n  tip: to pass '--colour' as a value, use '-- --colour'";
    fails(&place, "catalogue good.h5 --lengths 1 --colour", 2, &format!("unexpected argument '--colour' found{tip}{usage}"));
    fails(&place, "weave", 2, "unrecognized subcommand 'weave'\n\nUsage: ropewalk <COMMAND>\n\nFor more information, try '--help'.");
}

/// All faults of a command line at once, each on a line.
#[test]
fn several_bad_options() {
    let place = Place::with_snapshot();
    let ran = place.run("catalogue good.h5 --order zyy --min-cells 0 --threads 5000 --threads 2 --block-planes 0 --origin -1,2,3,4");
    assert_eq!(ran.code, 2);
    let wanted = "\
error: cannot use a setting: --threads: expected it once, found it 2 times: \"5000\", \"2\"
error: cannot use a setting: --order: expected a permutation of xyz (of xy for planes) with an optional c first or last, found \"zyy\"; \
hint: for example --order xyz
error: cannot use a setting: --origin: expected three finite numbers, or one for all axes, found \"-1,2,3,4\"; hint: for example --origin 0,-1.5,-pi
error: cannot use a setting: --min-cells: expected a whole number of at least 1, found \"0\"; hint: for example --min-cells 8
error: cannot use a setting: --block-planes: expected a whole number of at least 1, found \"0\"; hint: for example --block-planes 16
error: cannot settle the size of the box: --lengths, --spacing: expected one of them, found neither; hint: --lengths 2pi is a cube of that side
";
    assert_eq!(ran.err, wanted);
    assert_eq!((ran.out.as_str(), place.listing()), ("", vec!["good.h5".to_string()]));
}

#[test]
fn two_snapshots_of_one_name() {
    let place = Place::with_snapshot();
    std::fs::create_dir(place.path("later")).expect("a new folder");
    place.hdf5("later/good.h5", &flow());
    let message = "cannot tell two snapshots apart: good.h5: expected a name of its own, found the name \"good\", also that of good.h5; \
        hint: name every snapshot once";
    // Named twice, and named and matched by a pattern.
    let twice = "cannot take snapshots twice: SNAPSHOT: expected every path once, found ./good.h5 again; hint: drop one of them";
    fails(&place, &format!("catalogue good.h5 ./good.h5 {OPTIONS}"), 2, twice);
    fails(&place, &format!("catalogue good.h5 'goo*.h5' {OPTIONS}"), 2, message);
    place.succeed(&format!("catalogue good.h5 later/good.h5 {OPTIONS} -o both"));
    let table = place.read("both/catalogue.csv");
    for name in ["good,", "later_good,"] {
        assert!(table.lines().any(|l| l.starts_with(name)), "{name}");
        assert!(place.path(&format!("both/surfaces/{}/v.ply", name.trim_end_matches(','))).is_file(), "{name}");
    }
}

#[test]
fn a_family_that_fits_one_snapshot_only() {
    let place = Place::with_snapshot();
    let all = flow();
    place.hdf5("field.h5", &[("bx", all[0].1.clone()), ("by", all[1].1.clone()), ("bz", all[2].1.clone())]);
    let ran = place.run("catalogue good.h5 field.h5 --lengths 2pi --family 'j: current > 2.2 rms' --min-cells 4 -o out");
    assert_eq!(ran.code, 1, "{}", ran.err);
    let reason = "cannot detect family: good.h5: \"j: current > 2.2 rms\": expected a magnetic field, found none; \
        hint: name its datasets with --magnetic BX,BY,BZ";
    assert_eq!(ran.err, format!("error: snapshot skipped: {reason}\n"));
}
