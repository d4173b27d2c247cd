//! The demo command on the shipped data.

use std::path::Path;

use crate::place::Place;

fn demo_data() -> std::path::PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data")
}

#[test]
fn the_demo_shows_filaments_and_sheets() {
    let place = Place::new();
    let ran = place.succeed("demo");
    assert_eq!(ran.err, "");
    for said in ["mhd_0003", "hydro_0001", "demo-run/mhd/catalogue.csv", "What to look at"] {
        assert!(ran.out.contains(said), "{said} is not in\n{}", ran.out);
    }
    for (run, snapshots) in [("mhd", 3), ("hydro", 1)] {
        let told = place.json(&format!("demo-run/{run}/run.json"));
        assert_eq!(told["snapshots"].as_array().map(Vec::len), Some(snapshots));
        assert_eq!(told["failed"], serde_json::json!([]));
    }
    let table = place.read("demo-run/mhd/catalogue.csv");
    for class in ["filament", "sheet"] {
        assert!(table.contains(&format!(",{class},")), "no {class}");
    }
    assert_eq!(place.run("demo").code, 5, "an earlier demo is not overwritten");
    place.succeed("demo --replace -q");
}

/// The coefficients and lengths of the demo are those that the files state.
#[test]
fn the_demo_uses_what_the_files_state() {
    let place = Place::new();
    place.succeed("demo -q");
    for (run, file) in [("mhd", "mhd_0001.h5"), ("hydro", "hydro_0001.h5")] {
        let request = place.json(&format!("demo-run/{run}/run.json"))["request"].clone();
        let stored = hdf5::File::open(demo_data().join(file)).expect("a demo snapshot");
        let number = |name: &str| stored.attr(name).ok().map(|a| a.read_raw::<f64>().expect("numbers"));
        for name in ["viscosity", "resistivity"] {
            assert_eq!(request[name].as_f64(), number(name).map(|v| v[0]), "{file} {name}");
        }
        let lengths: Vec<f64> = request["lengths"].as_array().expect("lengths").iter().filter_map(serde_json::Value::as_f64).collect();
        assert_eq!(Some(lengths), number("lengths"), "{file}");
    }
}

#[test]
fn absent_demo_data() {
    let place = Place::new();
    let ran = place.run("demo --data nowhere");
    assert_eq!(ran.code, 3);
    assert_eq!(
        ran.err,
        "error: cannot find the demo data: nowhere: expected mhd_0001.h5, found no such file; \
         hint: run it in the source tree, or name the folder with --data DIR\n"
    );
    assert!(place.listing().is_empty());
}
