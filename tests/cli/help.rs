//! Help, version and the data dictionary as printed.

use std::path::Path;

use ropewalk::run::config::registry::SETTINGS;

use crate::place::{OPTIONS, Place};

/// Compares with a file beside this one; a difference prints the replacement.
fn golden(file: &str, found: &str) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/cli").join(file);
    let wanted = std::fs::read_to_string(&path).unwrap_or_default();
    assert!(wanted == found, "tests/cli/{file} should be, if the change is meant:\n{found}");
}

#[test]
fn help_of_every_command() {
    let place = Place::new();
    for (line, file) in [
        ("--help", "help.txt"),
        ("demo --help", "help_demo.txt"),
        ("inspect --help", "help_inspect.txt"),
        ("catalogue --help", "help_catalogue.txt"),
        ("gather --help", "help_gather.txt"),
        ("columns --help", "help_columns.txt"),
    ] {
        let ran = place.succeed(line);
        golden(file, &ran.out);
        assert_eq!(ran.err, "", "{line}");
    }
}

/// Every setting has a flag in the help of the main job, and every flag there is a setting, but for those that say how to talk.
#[test]
fn every_setting_is_a_flag_and_the_other_way_round() {
    let help = Place::new().succeed("catalogue --help").out;
    let shown: Vec<&str> = help
        .lines()
        .filter(|l| l.trim_start().starts_with('-') && (2..=6).contains(&(l.len() - l.trim_start().len())))
        .filter_map(|l| l.split("--").nth(1)?.split(|c: char| !c.is_alphanumeric() && c != '-').next())
        .collect();
    let settings: Vec<&str> = SETTINGS.iter().map(|s| s.flag).filter(|f| !f.is_empty()).collect();
    let others = ["dry-run", "quiet", "verbose", "progress", "help"];
    assert_eq!(shown, [&others[..], &settings].concat());
    for s in &SETTINGS {
        let told = s.flag.is_empty() || s.help.split_whitespace().all(|word| help.contains(word));
        assert!(told, "{}", s.path());
    }
}

#[test]
fn version() {
    let ran = Place::new().succeed("--version");
    assert_eq!(ran.out, concat!("ropewalk ", env!("CARGO_PKG_VERSION"), "\n"));
    assert_eq!(ran.err, "");
}

/// One registry drives the CSV header, columns.json and the printed dictionary.
#[test]
fn dictionary_header_and_listing_agree() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS}"));
    let header = place.read("ropewalk-run/catalogue.csv").lines().next().expect("a header").to_string();
    let dictionary = place.json("ropewalk-run/columns.json");
    let columns = dictionary["columns"].as_array().expect("a list of columns");
    let names: Vec<&str> = columns.iter().map(|c| c["name"].as_str().expect("a name")).collect();
    assert_eq!(header.split(',').collect::<Vec<_>>(), names);

    let mut listing = String::new();
    for c in columns {
        let text = |key: &str| c[key].as_str().unwrap_or_else(|| panic!("{key} of {}", c["name"]));
        listing += &format!("{} [{}]\n    {}\n", text("name"), text("unit"), text("definition"));
        if !text("source").is_empty() {
            listing += &format!("    source: {}\n", text("source"));
        }
    }
    let ran = place.succeed("columns");
    let rest = ran.out.strip_prefix(&listing).unwrap_or_else(|| panic!("the dictionary, then more:\n{}", ran.out));
    assert_eq!(ran.err, "");
    assert!(rest.starts_with("\nColumns that --companions LIST adds, three for every indicator named\n"), "{rest}");
    for ending in ["mean", "min", "max"] {
        assert!(rest.contains(&format!("\nINDICATOR_{ending} [of the indicator]\n")), "{rest}");
    }
    for i in &ropewalk::model::indicator::INDICATORS {
        assert!(rest.contains(&format!("\n{} [{}]\n    {}\n", i.name, i.unit, i.definition)), "{} is not in {rest}", i.name);
    }
}

/// Companions that were asked for stand in header and dictionary.
#[test]
fn companions_have_columns() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS} --companions strain,q"));
    let header = place.read("ropewalk-run/catalogue.csv").lines().next().expect("a header").to_string();
    assert!(header.ends_with(",flags,strain_mean,strain_min,strain_max,q_mean,q_min,q_max"), "{header}");
    let dictionary = place.json("ropewalk-run/columns.json");
    let last = dictionary["columns"].as_array().and_then(|c| c.last()).expect("a column");
    assert_eq!((&last["name"], &last["unit"]), (&"q_max".into(), &"1/T^2".into()));
}
