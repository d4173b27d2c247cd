//! What is said where: results on standard output, the rest on standard error, nothing but errors when quiet.

use crate::place::{OPTIONS, Place};

#[test]
fn the_overview_is_all_of_standard_output() {
    let place = Place::with_snapshot();
    let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS}"));
    assert_eq!(ran.err, "", "no progress where there is no terminal");
    let lines: Vec<&str> = ran.out.lines().collect();
    assert_eq!(lines.len(), 5, "{}", ran.out);
    assert_eq!(lines[0], "snapshot         family             level  objects   volume dissipation  classes");
    assert!(lines[1].starts_with("good             v "), "{}", lines[1]);
    assert!(lines[2].starts_with("rms: root of the volume mean of the square"), "{}", lines[2]);
    assert!(lines[3].starts_with("gradient variance of the velocity that fd8 loses, from sampled lines: "), "{}", lines[3]);
    assert_eq!(lines[4], "ropewalk-run");
    let rows = place.read("ropewalk-run/catalogue.csv").lines().count() - 1;
    let told: usize = lines[1].split_whitespace().nth(3).and_then(|n| n.parse().ok()).expect("a number of objects");
    assert_eq!(told, rows);
}

#[test]
fn quiet_says_nothing() {
    let place = Place::with_snapshot();
    let ran = place.succeed("catalogue good.h5 --lengths 2pi --family 'none: vorticity > 50 rms' -q");
    assert_eq!((ran.out.as_str(), ran.err.as_str()), ("", ""));
}

#[test]
fn warnings_go_to_standard_error_and_into_the_results() {
    let place = Place::with_snapshot();
    let ran = place.succeed("catalogue good.h5 --lengths 2pi --family 'none: vorticity > 900'");
    let text = "family none: no object of at least 27 cells beyond the level 900";
    assert_eq!(ran.err, format!("warning: good: {text}\n"));
    assert_eq!(place.json("ropewalk-run/run.json")["snapshots"][0]["warnings"], serde_json::json!([text]));
    assert_eq!(place.read("ropewalk-run/catalogue.csv").lines().count(), 1, "the header alone");
}

#[test]
fn a_wrong_axis_order_is_warned_about() {
    let place = Place::with_snapshot();
    let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS} --order xyz"));
    let lines: Vec<&str> = ran.err.lines().filter(|l| l.contains("not divergence-free")).collect();
    assert_eq!(lines.len(), 1, "{}", ran.err);
    assert!(lines[0].starts_with("warning: good: the velocity is not divergence-free: rms(div)/rms(curl) = "), "{}", lines[0]);
}

#[test]
fn verbose_names_the_stages() {
    let place = Place::with_snapshot();
    let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS} -v"));
    assert_eq!(ran.err, "open\nopen\nread: 16 planes\nsurvey: 16 planes\ndetection: 16 planes\nshapes: 16 planes\nfiles\ntables\ntables\n");
}
