//! Joins the parts of a run that separate jobs made (a job array over snapshots) into one run folder.

use std::cmp::Ordering;
use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::time::Instant;

use serde_json::{Value, json};

use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::base::par::Pool;
use crate::export::atomic::{Folder, unfinished};
use crate::export::json::pretty;
use crate::run::catalogue::PLAN;
use crate::run::parts::{self, FamilyOverview, PARTS, Part, Tables};
use crate::run::remarks::remarks;

/// What is gathered and where to.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct GatherConfig {
    /// Run folders, finished or not: of an unfinished one (`NAME.unfinished`) the complete parts are taken.
    pub runs: Vec<PathBuf>,
    /// The run folder to make.
    pub output: PathBuf,
    /// Whether an earlier run folder of that name is replaced.
    pub replace: bool,
    /// Worker threads; 0 takes one per core.
    pub threads: usize,
}

/// What came out.
pub struct Gathered {
    /// The run folder.
    pub folder: PathBuf,
    /// What was found, by snapshot and family.
    pub overview: Vec<FamilyOverview>,
    /// What the numbers mean and how far they can be trusted, one sentence each.
    pub remarks: Vec<String>,
    /// Snapshots that are not in it: they failed, or their run was not finished.
    pub missing: Vec<String>,
}

/// Folders of a run that hold files of each snapshot.
const OF_SNAPSHOTS: [&str; 3] = ["surfaces", "labels", "cutouts"];

/// Gathers. Snapshots are ordered by time where all have one, else by name, numbers in names by their value; the tables and
/// `run.json` are those of one run over the snapshots in that order.
///
/// # Errors
/// `Input` when a folder holds no run, when requests or programs differ, or a snapshot is there twice; `Output`.
pub fn gather(config: &GatherConfig, observe: &dyn Observe) -> Result<Gathered> {
    let started = Instant::now();
    let pool = Pool::new(config.threads)?;
    let mut all: Vec<Part> = Vec::new();
    let mut failed: Vec<Value> = Vec::new();
    let mut missing: Vec<String> = Vec::new();
    for run in &config.runs {
        let found = contents(run)?;
        let building = unfinished(&config.output);
        if same(&found.run, &building) {
            return Err(Error::output("cannot gather")
                .at(&found.run)
                .expected("a folder that the result does not take the place of")
                .found("the name under which the result is built")
                .hint("name another folder with -o"));
        }
        if !found.lacking.is_empty() {
            observe.warning(&format!("{}: unfinished, without {}", run.display(), found.lacking.join(", ")));
        }
        all.extend(found.parts);
        failed.extend(found.failed);
        missing.extend(found.lacking);
    }
    let Some(first) = all.first() else {
        let places: Vec<String> = config.runs.iter().map(|r| r.display().to_string()).collect();
        return Err(Error::input("cannot gather").item(places.join(", ")).expected("at least one complete part").found("none"));
    };
    let schema = first.schema()?;
    for other in &all[1..] {
        agree(first, other)?;
    }
    once(&all)?;
    let there = |path: &Value| all.iter().any(|p| p.what["snapshot"]["path"] == *path);
    // A snapshot that another job went through after all is no failure of the whole, nor is it missing.
    failed.retain(|f| !there(&f["path"]));
    missing.retain(|name| all.iter().all(|p| p.name != *name));
    for f in &failed {
        observe.failure(&format!("snapshot failed in its run: {}", f["error"].as_str().unwrap_or_default()));
        missing.push(f["path"].as_str().unwrap_or_default().to_string());
    }
    order(&mut all);
    let tables = all
        .iter()
        .map(Part::tables)
        .fold(Tables::default(), |a, b| Tables { parquet: a.parquet || b.parquet, json_lines: a.json_lines || b.json_lines });
    let tables = tables.check()?;

    let folder = Folder::create(&config.output, config.replace)?;
    folder.subfolder(PARTS)?;
    for part in &all {
        for file in [format!("{PARTS}/{}.jsonl", part.name), format!("{PARTS}/{}.json", part.name)] {
            folder.adopt(&part.run.join(&file), &file)?;
        }
        for kind in OF_SNAPSHOTS {
            let from = part.run.join(kind).join(&part.name);
            if from.is_dir() {
                folder.subfolder(kind)?;
                folder.adopt(&from, &format!("{kind}/{}", part.name))?;
            }
        }
    }
    let overview = parts::join(&folder, &all, &schema, tables, failed, &pool)?;
    let from: Vec<String> = config.runs.iter().map(|r| r.display().to_string()).collect();
    let how = json!({ "seconds": started.elapsed().as_secs_f64(), "threads": pool.threads(), "gathered": from });
    folder.write("timing.json", pretty(&how).as_bytes())?;
    Ok(Gathered { folder: folder.finish()?, remarks: remarks(&all), overview, missing })
}

fn same(a: &Path, b: &Path) -> bool {
    matches!((a.canonicalize(), b.canonicalize()), (Ok(a), Ok(b)) if a == b)
}

/// What a run folder holds.
struct Contents {
    run: PathBuf,
    parts: Vec<Part>,
    /// Snapshots whose part is not complete.
    lacking: Vec<String>,
    failed: Vec<Value>,
}

fn contents(given: &Path) -> Result<Contents> {
    // The folder of the parts names its run as well.
    let inside = given.file_name().is_some_and(|n| n == PARTS) && !given.join(PARTS).is_dir();
    let run = if inside { given.parent().unwrap_or(given).to_path_buf() } else { given.to_path_buf() };
    let folder = run.join(PARTS);
    if !folder.is_dir() {
        let found = if given.exists() { "no folder parts in it" } else { "nothing" };
        let error = Error::input("cannot gather").at(given).expected("a run folder with its parts").found(found);
        return Err(if unfinished(given).is_dir() {
            error.hint(format!("{} is there: name it to take its complete parts", unfinished(given).display()))
        } else {
            error
        });
    }
    let entries = fs::read_dir(&folder).and_then(|d| d.map(|e| e.map(|e| e.path())).collect::<std::io::Result<Vec<_>>>());
    let entries = entries.map_err(|e| Error::input("cannot read a run folder").at(&folder).found(e.to_string()))?;
    let mut names: Vec<String> = entries
        .iter()
        .filter(|p| p.extension().is_some_and(|e| e == "json"))
        .filter_map(|p| p.file_stem().map(|s| s.to_string_lossy().into_owned()))
        .collect();
    names.sort();
    let parts: Vec<Part> = names.iter().map(|name| Part::read(&run, name)).collect::<Result<_>>()?;
    let finished = run.join("run.json");
    let (mut lacking, mut failed) = (Vec::new(), Vec::new());
    if finished.is_file() {
        failed = parts::read_json(&finished)?["failed"].as_array().cloned().unwrap_or_default();
    } else if run.join(PLAN).is_file() {
        let planned = parts::read_json(&run.join(PLAN))?;
        let planned = planned["snapshots"].as_array().into_iter().flatten().filter_map(Value::as_str).map(str::to_string);
        lacking = planned.filter(|name| !names.contains(name)).collect();
    }
    Ok(Contents { run, parts, lacking, failed })
}

/// Whether two parts answer the same request, by the same program.
fn agree(first: &Part, other: &Part) -> Result<()> {
    let flat = |part: &Part| {
        let mut out = BTreeMap::new();
        for key in ["program", "request"] {
            flatten(key, &part.what[key], &mut out);
        }
        out
    };
    let (a, b) = (flat(first), flat(other));
    let keys: std::collections::BTreeSet<&String> = a.keys().chain(b.keys()).collect();
    let text = |v: Option<&Value>| v.map_or("nothing".to_string(), Value::to_string);
    let place = |p: &Part| p.run.join(PARTS).join(format!("{}.json", p.name));
    let differing: Vec<&&String> = keys.iter().filter(|k| a.get(**k) != b.get(**k)).collect();
    if differing.is_empty() {
        return Ok(());
    }
    let said: Vec<String> = differing.iter().map(|k| format!("{k} {} there and {} here", text(a.get(**k)), text(b.get(**k)))).collect();
    let error = Error::input("cannot gather")
        .at(place(other))
        .expected(format!("the program and request of {}", place(first).display()))
        .found(said.join("; "));
    Err(if differing.iter().any(|k| k.starts_with("request.run_rms")) {
        error.hint("a level in run-rms depends on all snapshots of a run: give its absolute value to every job")
    } else {
        error.hint("a catalogue answers one request: run the others again with the same options")
    })
}

fn flatten(key: &str, value: &Value, out: &mut BTreeMap<String, Value>) {
    match value {
        Value::Object(map) if !map.is_empty() => map.iter().for_each(|(k, v)| flatten(&format!("{key}.{k}"), v, out)),
        // Nothing in it is the same as its absence.
        Value::Object(_) => {}
        _ => {
            out.insert(key.to_string(), value.clone());
        }
    }
}

/// Every snapshot must be there once.
fn once(parts: &[Part]) -> Result<()> {
    let mut seen: BTreeMap<&str, &Part> = BTreeMap::new();
    for part in parts {
        if let Some(other) = seen.insert(&part.name, part) {
            return Err(Error::input("cannot gather")
                .at(&part.run)
                .expected("every snapshot once")
                .found(format!("the snapshot {}, which is also in {}", part.name, other.run.display()))
                .hint("name each run once, and give files of different snapshots different names"));
        }
    }
    Ok(())
}

fn order(parts: &mut [Part]) {
    let time = |p: &Part| p.what["snapshot"]["time"].as_f64();
    let timed = parts.iter().all(|p| time(p).is_some());
    parts.sort_by(|a, b| {
        let by_time = if timed { time(a).partial_cmp(&time(b)).unwrap_or(Ordering::Equal) } else { Ordering::Equal };
        by_time.then_with(|| natural(&a.name, &b.name))
    });
}

/// Order of names in which numbers count by their value: `s2` before `s10`.
fn natural(a: &str, b: &str) -> Ordering {
    let (mut a, mut b) = (a, b);
    loop {
        let digits = |t: &str| t.len() - t.trim_start_matches(|c: char| c.is_ascii_digit()).len();
        let (m, n) = (digits(a), digits(b));
        if m > 0 && n > 0 {
            let (p, q) = (a[..m].trim_start_matches('0'), b[..n].trim_start_matches('0'));
            // Without leading zeros the longer number is the larger one; written shorter comes first among equals.
            let order = p.len().cmp(&q.len()).then_with(|| p.cmp(q)).then_with(|| m.cmp(&n));
            if order != Ordering::Equal {
                return order;
            }
            (a, b) = (&a[m..], &b[n..]);
            continue;
        }
        let (mut x, mut y) = (a.chars(), b.chars());
        match (x.next(), y.next()) {
            (Some(p), Some(q)) if p == q => (a, b) = (x.as_str(), y.as_str()),
            (p, q) => return p.cmp(&q),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_in_names_count_by_value() {
        let mut names = ["s10", "s2", "s", "s02", "t1", "s2b", "s2a10", "s2a9", "é3", "1", "10", "9"];
        names.sort_by(|a, b| natural(a, b));
        assert_eq!(names, ["1", "9", "10", "s", "s2", "s2a9", "s2a10", "s2b", "s02", "s10", "t1", "é3"]);
    }

    #[test]
    fn differing_keys_are_all_named() {
        let part = |run: &str, what: Value| Part { run: run.into(), name: "s".into(), what };
        let a = part("a", json!({ "program": { "version": "1" }, "request": { "min_cells": 4, "run_rms": {}, "families": ["v"] } }));
        let b = part("b", json!({ "program": { "version": "2" }, "request": { "min_cells": 5, "families": ["v"] } }));
        let message = agree(&a, &b).unwrap_err().to_string();
        assert!(message.contains("program.version \"1\" there and \"2\" here; request.min_cells 4 there and 5 here"), "{message}");
        let c =
            part("c", json!({ "program": { "version": "1" }, "request": { "min_cells": 4, "run_rms": { "v": 2.5 }, "families": ["v"] } }));
        let message = agree(&a, &c).unwrap_err().to_string();
        assert!(message.contains("request.run_rms.v nothing there and 2.5 here; hint: a level in run-rms"), "{message}");
        agree(&a, &a).unwrap();
    }
}
