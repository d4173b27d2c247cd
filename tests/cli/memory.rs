//! Memory: the budget and where it comes from, limits of the process that end in a refusal, what does not fit, what a killed run leaves.
#![cfg(target_os = "linux")]

use std::io::{BufRead, BufReader};
use std::process::{Command, Stdio};

use serde_json::Value;

use crate::place::{OPTIONS, Place, Ran};

/// Runs the program below a limit that the shell sets, in KiB: `v` of address space, `d` of data.
fn limited(place: &Place, limit: char, kib: u64, line: &str) -> Ran {
    let program = env!("CARGO_BIN_EXE_ropewalk");
    place.shell(&format!("ulimit -{limit} {kib} && exec '{program}' {line}"))
}

#[test]
fn the_budget_and_what_it_comes_from_stand_in_timing() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS} --memory 48MiB -o asked"));
    let timing = place.json("asked/timing.json");
    assert_eq!((&timing["memory_budget_bytes"], &timing["memory_budget_from"]), (&Value::from(48 << 20), &"--memory".into()));
    place.succeed(&format!("catalogue good.h5 {OPTIONS} -o default"));
    let timing = place.json("default/timing.json");
    let from = timing["memory_budget_from"].as_str().expect("a text");
    assert!(from.starts_with("half of ") || from.starts_with("what "), "{from}");
    let total = std::fs::read_to_string("/proc/meminfo").expect("Linux says what there is");
    let total: u64 = total.lines().next().and_then(|l| l.split_whitespace().nth(1)?.parse().ok()).expect("MemTotal comes first");
    let budget = timing["memory_budget_bytes"].as_u64().expect("bytes");
    assert!(budget >= 8 << 20 && budget <= total * 1024 / 2, "{budget} of {total} KiB");
    assert_eq!(place.read("asked/catalogue.csv"), place.read("default/catalogue.csv"));
    assert_eq!(place.read("asked/run.json"), place.read("default/run.json"));
}

/// Address space: 64 MiB of arena and 2 of stack for each of two threads and the one that reads, 32 for the program: these do not fit,
/// whatever the libraries take.
#[test]
fn too_little_for_the_program_itself_is_refused() {
    let place = Place::with_snapshot();
    let line = format!("catalogue good.h5 {OPTIONS} --threads 2");
    for kib in [60_000, 100_000, 150_000, 200_000, 235_000] {
        let ran = limited(&place, 'v', kib, &line);
        assert_eq!(ran.code, 4, "{kib}: {}", ran.err);
        assert!(
            ran.err.starts_with("error: cannot run within the memory there is: the limit of address space (ulimit -v): expected at least ")
        );
        assert!(ran.err.ends_with("hint: raise the limit, or take fewer threads: --threads 1\n"), "{}", ran.err);
        assert_eq!(ran.out, "");
    }
    for kib in [20_000, 40_000, 60_000] {
        let ran = limited(&place, 'd', kib, &line);
        assert_eq!(ran.code, 4, "{kib}: {}", ran.err);
        assert!(ran.err.contains("the limit of data (ulimit -d)"), "{}", ran.err);
    }
    // The plan of it is refused as well, and so is joining.
    assert_eq!(limited(&place, 'v', 60_000, &format!("{line} --dry-run")).code, 4);
    assert_eq!(limited(&place, 'v', 60_000, "gather nothing").code, 4);
    assert_eq!(place.listing(), ["good.h5"]);
}

/// Whatever the limit, a run is complete or refused; nothing is killed, and nothing half done has the name of a result.
#[test]
fn every_limit_ends_in_a_result_or_a_refusal() {
    let place = Place::with_snapshot();
    place.succeed(&format!("catalogue good.h5 {OPTIONS} -o whole"));
    let mut done = 0;
    for (limit, threads, kib) in [
        ('v', 1, 190_000),
        ('v', 1, 220_000),
        ('v', 2, 260_000),
        ('v', 2, 300_000),
        ('v', 2, 400_000),
        ('v', 5, 600_000),
        ('v', 16, 1_200_000),
        ('v', 2, 4_000_000),
        ('d', 1, 70_000),
        ('d', 2, 90_000),
        ('d', 2, 400_000),
    ] {
        let name = format!("{limit}_{threads}_{kib}");
        let ran = limited(&place, limit, kib, &format!("catalogue good.h5 {OPTIONS} --threads {threads} -o {name}"));
        assert!(ran.code == 0 || ran.code == 4, "{name}: {} {}", ran.code, ran.err);
        assert_eq!(place.path(&name).exists(), ran.code == 0);
        if ran.code == 0 {
            done += 1;
            assert_eq!(place.read(&format!("{name}/catalogue.csv")), place.read("whole/catalogue.csv"), "{name}");
            let budget = place.json(&format!("{name}/timing.json"))["memory_budget_bytes"].as_u64().expect("bytes");
            assert!(budget < kib * 1024, "{name}: {budget}");
        } else {
            assert!(ran.err.starts_with("error: cannot "), "{}", ran.err);
        }
    }
    assert!(done >= 2, "{done}");
    assert!(place.listing().iter().all(|f| !f.contains("unfinished")), "{:?}", place.listing());
}

#[test]
fn a_budget_beyond_a_limit_is_refused_with_what_would_fit() {
    let place = Place::with_snapshot();
    let ran = limited(&place, 'v', 1_000_000, &format!("catalogue good.h5 {OPTIONS} --threads 2 --memory 2GiB"));
    assert_eq!(ran.code, 4, "{}", ran.err);
    assert!(ran.err.starts_with("error: cannot take the memory budget asked for: the limit of address space (ulimit -v): "), "{}", ran.err);
    let hint = ran.err.split("hint: --memory ").nth(1).and_then(|h| h.split(' ').next()).expect("what would fit").to_string();
    assert_eq!(place.listing(), ["good.h5"]);
    let ran = limited(&place, 'v', 1_000_000, &format!("catalogue good.h5 {OPTIONS} --threads 2 --memory {hint}"));
    assert_eq!(ran.code, 0, "{hint}: {}", ran.err);
}

#[test]
fn scratch_is_empty_at_the_end() {
    let place = Place::with_snapshot();
    std::fs::create_dir(place.path("disk")).expect("a new folder");
    place.succeed(&format!("catalogue good.h5 {OPTIONS} --scratch disk"));
    place.succeed(&format!("catalogue good.h5 {OPTIONS} -o other"));
    let left: Vec<String> = place.listing().into_iter().filter(|f| f.contains("scratch") || f.starts_with("disk/")).collect();
    assert_eq!(left, ["disk/"]);
    for (named, found) in [("nowhere", "nothing"), ("good.h5", "something else")] {
        let ran = place.run(&format!("catalogue good.h5 {OPTIONS} -o third --scratch {named}"));
        assert_eq!(ran.code, 5);
        assert_eq!(
            ran.err,
            format!(
                "error: cannot make the folder for what does not fit into memory: {named}: expected a folder, found {found}; \
                 hint: --scratch DIR names one on a disk with room\n"
            )
        );
    }
    assert!(!place.path("third").exists() && !place.path("third.unfinished").exists());
}

/// Killed on the way, a run leaves its unfinished folder, which the next run of that name clears.
#[test]
fn a_killed_run_leaves_no_result() {
    let place = Place::new();
    let n = 96;
    let wave = |k: usize| (0..n * n * n).map(|i| ((i / k % n) as f32 * 0.2).sin()).collect::<Vec<f32>>();
    place.hdf5_shaped("large.h5", &[("u", wave(n), [n; 3]), ("v", wave(n * n), [n; 3]), ("w", wave(1), [n; 3])]);
    let line = "catalogue large.h5 --lengths 2pi --threads 1 --block-planes 1 --progress json -o run";
    let mut child = Command::new(env!("CARGO_BIN_EXE_ropewalk"))
        .args(line.split(' '))
        .current_dir(place.path(""))
        .stdout(Stdio::null())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the program starts");
    let lines = BufReader::new(child.stderr.take().expect("a pipe")).lines();
    let mut seen = lines.map(|l| l.expect("a line")).skip_while(|l| !(l.contains("\"begin\"") && l.contains("\"survey\"")));
    assert!(seen.next().is_some(), "the survey begins");
    child.kill().expect("a signal");
    assert!(!child.wait().expect("an end").success());
    let top: Vec<String> = place.listing().into_iter().filter(|f| f.matches('/').count() == usize::from(f.ends_with('/'))).collect();
    assert_eq!(top, ["large.h5", "run.unfinished/"]);
    place.succeed("catalogue large.h5 --lengths 2pi -o run -q");
    assert!(place.path("run").exists() && !place.path("run.unfinished").exists());
}
