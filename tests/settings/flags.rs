//! Faults of flags: all at once, by the same checker, with the flags' names.

use ropewalk::run::config::registry::{Key, SETTINGS};
use ropewalk::run::config::{Given, check_settings};

/// All faults of flags, one a line.
fn told(flags: &[(&str, &[&str])]) -> String {
    let mut given = Given::new();
    for (flag, typed) in flags {
        let setting = SETTINGS.iter().find(|s| s.flag == *flag).unwrap_or_else(|| panic!("no flag {flag}"));
        given.flag(setting.key, typed.iter().map(|t| t.to_string()).collect());
    }
    check_settings(&given).map_or_else(|e| e.to_string(), |_| String::new())
}

#[test]
fn every_fault_is_told_at_once() {
    let faults = told(&[
        ("lengths", &["1,2,3,4"]),
        ("spacing", &["1", "2"]),
        ("order", &["zz"]),
        ("periodic", &[""]),
        ("region", &["x=3:1"]),
        ("region-cells", &["x=1.5:3"]),
        ("coordinates", &["grid"]),
        ("raw-endian", &["big"]),
        ("threads", &["many"]),
        ("min-cells", &["0"]),
        ("family", &["a: q > 1", "a: q > 2", "b: vortex > 1"]),
        ("labels", &["maybe"]),
        ("connectivity", &["7"]),
        ("viscosity", &["-1"]),
    ]);
    let beside = |flag: &str, example: &str| {
        format!(
            "cannot read files without a header: {flag}: expected it beside --raw-endian, found none; hint: for example {flag} {example}"
        )
    };
    let indicators: Vec<&str> = ropewalk::model::indicator::INDICATORS.iter().map(|i| i.name).collect();
    let wanted = [
        "cannot use a setting: --spacing: expected it once, found it 2 times: \"1\", \"2\"",
        "cannot use a setting: --region: expected FROM:TO for some of x, y, z, two numbers, the second larger, found \"3:1\"; \
         hint: for example --region x=0.5:1.5,z=0:pi",
        "cannot use a setting: --region-cells: expected FIRST:END for some of x, y, z, two whole numbers, the second larger, found \"1.5:3\"; \
         hint: for example --region-cells x=10:50,z=-8:24",
        "cannot use a setting: --order: expected a permutation of xyz (of xy for planes) with an optional c first or last, found \"zz\"; \
         hint: for example --order xyz",
        "cannot use a setting: --coordinates: expected the name of a dataset for some of x, y, z, found \"grid\"; \
         hint: for example --coordinates y=grid/y",
        "cannot use a setting: --lengths: expected three finite numbers above 0, or one for all axes, found \"1,2,3,4\"; \
         hint: for example --lengths 2pi,2pi,pi",
        "cannot use a setting: --periodic: expected a subset of xyz, or none, found nothing; hint: for example --periodic xz",
        &format!(
            "cannot read family: \"b: vortex > 1\": expected an indicator of this version, found \"vortex\"; hint: one of {}",
            indicators.join(", ")
        ),
        "cannot use a setting: --connectivity: expected one of 6, 18, 26, found \"7\"; hint: did you mean 6?",
        "cannot use a setting: --min-cells: expected a whole number of at least 1, found \"0\"; hint: for example --min-cells 8",
        "cannot use a setting: --viscosity: expected a number above 0, found \"-1\"; hint: for example --viscosity 0.002",
        "cannot use a setting: --labels: expected yes or no, found \"maybe\"; hint: for example --labels=yes",
        "cannot use a setting: --threads: expected a whole number from 0 to 1024, found \"many\"; hint: for example --threads 2",
        "cannot tell which snapshots: SNAPSHOT, --list: expected at least one path, found none; \
         hint: name one or more files, or quote a pattern",
        &beside("--raw-values", "f32"),
        &beside("--raw-shape", "64,64,64"),
        "cannot use family: \"a: q > 2\": expected a name of its own, found \"a\" twice; \
         hint: give every family another name before the colon",
    ];
    assert_eq!(faults.lines().collect::<Vec<_>>(), wanted);
}

#[test]
fn missing_size_is_told_with_flags() {
    let mut given = Given::new();
    given.flag(Key::Paths, vec!["a.h5".into()]);
    assert_eq!(
        check_settings(&given).unwrap_err().to_string(),
        "cannot settle the size of the box: --lengths, --spacing: expected one of them, found neither; hint: --lengths 2pi is a cube of that side"
    );
}
