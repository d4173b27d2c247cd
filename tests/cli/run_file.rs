//! Run files through the program: faults, flags over them, paths, exit codes.

use crate::place::{Place, flow};

const RUN: &str = "\
[snapshots]
paths = [\"*.h5\"]
[input]
lengths = \"2pi\"
[objects]
families = [\"v: vorticity > 2.2 rms\"]
min_cells = 4
[output]
folder = \"out\"
surfaces = \"none\"
";

#[test]
fn a_run_file_does_what_flags_do() {
    let place = Place::with_snapshot();
    place.write("run.toml", RUN.as_bytes());
    place.succeed("catalogue run.toml");
    place.succeed("catalogue good.h5 --lengths 2pi --family 'v: vorticity > 2.2 rms' --min-cells 4 --surfaces none -o flags");
    for file in ["catalogue.csv", "run.json"] {
        assert_eq!(place.read(&format!("out/{file}")), place.read(&format!("flags/{file}")), "{file}");
    }
}

#[test]
fn flags_replace_what_the_run_file_says() {
    let place = Place::with_snapshot();
    place.write("run.toml", RUN.as_bytes());
    place.succeed("catalogue run.toml -o other --min-cells 50 --spacing 0.5 --connectivity 6");
    let request = place.json("other/run.json")["request"].clone();
    assert_eq!(request["min_cells"], 50);
    assert_eq!(request["connectivity"], 6);
    assert_eq!((request["lengths"].is_null(), request["spacing"][0].as_f64()), (true, Some(0.5)));
    assert_eq!(request["families"][0], "v: vorticity > 2.2 rms");
    assert!(!place.path("out").exists());
}

#[test]
fn paths_start_from_the_folder_of_the_run_file() {
    let place = Place::new();
    std::fs::create_dir_all(place.path("deep [1]/data")).expect("folders");
    place.hdf5("deep [1]/data/s2.h5", &flow());
    place.hdf5("deep [1]/data/s10.h5", &flow());
    place.write("deep [1]/run.toml", RUN.replace("*.h5", "data/s*.h5").as_bytes());
    place.succeed("catalogue 'deep [1]/run.toml'");
    let run = place.json("deep [1]/out/run.json");
    let names: Vec<&str> = run["snapshots"].as_array().expect("snapshots").iter().filter_map(|s| s["snapshot"].as_str()).collect();
    assert_eq!(names, ["s2", "s10"]);
    place.succeed("catalogue 'deep [1]/run.toml' -o here");
    assert!(place.path("here/run.json").is_file(), "a flag's path starts from the present folder");
}

#[test]
fn every_fault_is_a_line_and_nothing_is_written() {
    let place = Place::with_snapshot();
    place.write("run.toml", RUN.replace("lengths = \"2pi\"", "order = \"zyy\"").replace("min_cells = 4", "min_cell = 0").as_bytes());
    let before = place.listing();
    let ran = place.run("catalogue run.toml --threads x");
    let wanted = "\
error: cannot use a setting: run.toml:4: input.order: expected a permutation of xyz (of xy for planes) with an optional c first or last, \
found \"zyy\"; hint: for example order = \"xyz\"
error: cannot use a setting: run.toml:7: objects.min_cell: expected a key of [objects], found the key \"min_cell\"; hint: did you mean min_cells?
error: cannot use a setting: --threads: expected a whole number from 0 to 1024, found \"x\"; hint: for example --threads 2
error: cannot settle the size of the box: input.lengths, input.spacing: expected one of them, found neither; \
hint: lengths = \"2pi\" is a cube of that side
";
    assert_eq!((ran.code, ran.err.as_str(), ran.out.as_str()), (2, wanted, ""));
    assert_eq!(place.listing(), before);
}

#[test]
fn a_run_file_stands_alone() {
    let place = Place::with_snapshot();
    place.write("run.toml", RUN.as_bytes());
    let ran = place.run("catalogue run.toml good.h5 other.toml");
    let wanted = "error: cannot use a run file and more: run.toml: expected the run file alone, found also other.toml, good.h5; \
                  hint: name the snapshots in the run file, as paths below [snapshots]\n";
    assert_eq!((ran.code, ran.err.as_str()), (2, wanted));
    let absent = place.run("catalogue absent.toml");
    let wanted = "error: cannot read the run file: absent.toml: found no such file; hint: ropewalk inspect SNAPSHOT --run-file RUN.toml writes one\n";
    assert_eq!((absent.code, absent.err.as_str()), (2, wanted));
    let nothing = place.run("catalogue --lengths 1");
    let wanted = "error: cannot tell which snapshots: SNAPSHOT, --list: expected at least one path, found none; \
                  hint: name one or more files, or quote a pattern\n";
    assert_eq!((nothing.code, nothing.err.as_str()), (2, wanted));
}

/// The ending tells, however it is written; a run file by another name is no snapshot.
#[test]
fn names_of_run_files() {
    let place = Place::with_snapshot();
    place.write("RUN.TOML", RUN.as_bytes());
    place.succeed("catalogue RUN.TOML --dry-run");
    place.write("run.txt", RUN.as_bytes());
    let ran = place.run("catalogue run.txt --lengths 1");
    let wanted = "error: cannot use a snapshot: run.txt: expected a snapshot, found a text with the table [snapshots]; \
                  hint: a run file's name ends in .toml\n";
    assert_eq!((ran.code, ran.err.as_str()), (2, wanted));
    place.write("notes.txt", b"[snapshotted] yesterday\n");
    let other = place.run("catalogue notes.txt --lengths 1");
    assert!(other.code == 3 && other.err.contains("expected an HDF5 signature"), "{}", other.err);
}

#[test]
fn a_frame_of_given_velocity() {
    let place = Place::with_snapshot();
    place.write("run.toml", RUN.replace("[objects]", "[physics]\nframe = [-0.5, 0, 0.25]\n[objects]").as_bytes());
    place.succeed("catalogue run.toml --companions speed");
    place.succeed("catalogue run.toml --companions speed --frame -0.5,0,0.25 -o flags");
    place.succeed("catalogue run.toml --companions speed --frame box -o box");
    assert_eq!(place.read("out/catalogue.csv"), place.read("flags/catalogue.csv"));
    assert_ne!(place.read("out/catalogue.csv"), place.read("box/catalogue.csv"));
    assert_eq!(place.json("out/run.json")["request"]["frame"], "-0.5,0,0.25");
}

/// What can only be told with the files at hand is told after what needs none, with the codes of a run without a run file.
#[test]
fn exit_codes() {
    let place = Place::with_snapshot();
    let code = |paths: &str| {
        place.write("run.toml", RUN.replace("\"*.h5\"", paths).as_bytes());
        place.run("catalogue run.toml --replace").code
    };
    assert_eq!(code("\"good.h5\""), 0);
    assert_eq!(code("\"good.h5\", \"absent.h5\""), 1);
    assert_eq!(code("\"absent.h5\""), 3);
    assert_eq!(code("\"none*.h5\""), 3);
    assert_eq!(code("3"), 2);
}

#[test]
fn switches_take_no_for_an_answer() {
    let place = Place::with_snapshot();
    place.write("run.toml", RUN.replace("surfaces", "replace = true\nsurfaces").as_bytes());
    place.succeed("catalogue run.toml");
    place.succeed("catalogue run.toml");
    assert_eq!(place.run("catalogue run.toml --replace=no").code, 5);
}
