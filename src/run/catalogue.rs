//! The main job: snapshots in, a run folder out.

use std::path::{Path, PathBuf};

use serde_json::{Value, json};

use crate::base::error::{Error, Kind, Result};
use crate::base::observe::Observe;
use crate::base::par::Pool;
use crate::export::atomic::Folder;
use crate::export::json as dictionary;
use crate::model::columns::Row;
use crate::model::request::{Outputs, Request};
use crate::model::schema::Schema;
use crate::model::snapshot::SnapshotRef;
use crate::read::{self, InputSpec, Opened};
use crate::run::analysis::{Analysis, Execution, Snapshot, analyse};
use crate::run::clock::Clock;
use crate::run::files::SnapshotFiles;
use crate::run::machine::Share;
use crate::run::memory;
use crate::run::parts::{self, FamilyOverview, PARTS, Part, Tables};
use crate::run::ready::check_grid;
use crate::run::remarks::remarks;
use crate::run::run_rms::{self, RunRms};
use crate::run::scratch::{self, ScratchFolder};
use crate::run::{provenance, summary};

/// Which snapshots a run goes through; in its folder while it is unfinished.
pub const PLAN: &str = "plan.json";

/// A settled run.
#[derive(Debug, Clone, PartialEq)]
pub struct RunConfig {
    /// Snapshots in the order of the catalogue.
    pub snapshots: Vec<SnapshotRef>,
    /// How to read them.
    pub input: InputSpec,
    /// What changes results.
    pub request: Request,
    /// What is written.
    pub outputs: Outputs,
    /// What changes nothing. A folder for what does not fit is made inside that of `scratch`, or below the run folder without one.
    pub execution: Execution,
    /// Where the memory budget of `execution` comes from, in words, for `timing.json`.
    pub memory_from: String,
    /// Worker threads; 0 takes one per core.
    pub threads: usize,
    /// The run folder.
    pub output: PathBuf,
    /// Whether an earlier run folder of that name is replaced.
    pub replace: bool,
}

impl RunConfig {
    /// How snapshots will be worked on: what does not fit has a place in the run folder, if nowhere else.
    pub(super) fn planned(&self) -> Execution {
        let scratch = self.execution.scratch.clone().or_else(|| Some(self.output.clone()));
        Execution { scratch, ..self.execution.clone() }
    }
}

/// What came out.
pub struct Outcome {
    /// The run folder.
    pub folder: PathBuf,
    /// What was found, by snapshot and family.
    pub overview: Vec<FamilyOverview>,
    /// What the numbers mean and how far they can be trusted, one sentence each.
    pub remarks: Vec<String>,
    /// Snapshots that failed, with the reason.
    pub failed: Vec<(SnapshotRef, Error)>,
}

/// Runs the main job.
///
/// Headers of all snapshots are checked before anything long. A snapshot that cannot be used is reported and the others go on;
/// when none can be used, that is an error and nothing is written.
///
/// # Errors
/// `Usage` for a request that fits no snapshot, `Input` or `Data` when no snapshot is usable, `Limit` when none fits into the memory
/// budget, `Output` for the run folder.
pub fn catalogue(config: &RunConfig, observe: &dyn Observe) -> Result<Outcome> {
    let clock = Clock::new(observe);
    let outcome = run(config, &clock);
    // A stage that failed is over as well.
    clock.done();
    outcome
}

fn run(config: &RunConfig, clock: &Clock<'_>) -> Result<Outcome> {
    clock.stage("open", 0);
    let pool = Pool::new(config.threads)?;
    scratch::check(config.execution.scratch.as_deref())?;
    let mut failed: Vec<(SnapshotRef, Error)> = Vec::new();
    let mut usable = Vec::new();
    for path in &config.snapshots {
        match read::open(path, &config.input).and_then(|o| pool.run(move || check(&o, &path.path, config))) {
            Ok(name) => usable.push((path.clone(), name)),
            Err(e) => failed.push((path.clone(), e)),
        }
    }
    if usable.is_empty() && failed.iter().all(|(_, e)| e.kind() == Kind::Usage) {
        // The request fits no snapshot: that is one fault, not one a snapshot.
        return Err(failed.into_iter().next().map_or_else(|| Error::usage("no snapshot given").hint("name one or more files"), |(_, e)| e));
    }
    failed.iter().for_each(|(_, e)| tell(e, config, clock));
    tell_apart(&mut usable)?;
    if usable.is_empty() {
        return Err(none_usable(failed));
    }
    let tables = Tables::new(&config.outputs)?;
    let folder = Folder::create(&config.output, config.replace)?;
    folder.subfolder(PARTS)?;
    let names: Vec<&str> = usable.iter().map(|(_, name)| name.as_str()).collect();
    folder.write(PLAN, dictionary::pretty(&json!({ "snapshots": names })).as_bytes())?;
    let schema = Schema { companions: config.request.companions.clone() };
    let scratch = ScratchFolder::new(config.execution.scratch.as_deref(), &folder)?;
    let execution = Execution { scratch: Some(scratch.path().to_path_buf()), ..config.execution.clone() };
    clock.done();
    let request = settled(config, &execution, &mut usable, &mut failed, &pool, clock)?;
    let common = parts::common(&summary::request(&request, &config.input));
    let mut done: Vec<Part> = Vec::new();
    let mut cells = 0;
    for (k, (path, name)) in usable.iter().enumerate() {
        clock.snapshot(name, k as u64 + 1, usable.len() as u64);
        match pool.run(|| one(path, name, config, &request, &execution, &folder, clock)) {
            Ok((analysis, datasets)) => {
                clock.stage("tables", 0);
                cells += analysis.grid.cells();
                let rows: Vec<&[Row]> = analysis.families.iter().map(|f| f.rows.as_slice()).collect();
                let snapshot = summary::snapshot(&analysis, &path.to_string(), &datasets);
                pool.run(|| parts::write(&folder, name, &schema, &common, tables, snapshot, &rows))?;
                done.push(Part::read(&folder.path(""), name)?);
                clock.done();
            }
            Err(e) if of_one_snapshot(&e) => {
                clock.done();
                tell(&e, config, clock);
                failed.push((path.clone(), e));
            }
            Err(e) => return Err(e),
        }
    }
    if done.is_empty() {
        return Err(none_usable(failed));
    }
    let failures: Vec<Value> = failed.iter().map(|(p, e)| json!({ "path": p.to_string(), "error": e.to_string() })).collect();
    clock.stage("tables", 0);
    let overview = parts::join(&folder, &done, &schema, tables, failures, &pool)?;
    clock.done();
    scratch.remove()?;
    let memory = Share { bytes: execution.memory, from: config.memory_from.clone() };
    let how = provenance::timing(clock, pool.threads(), &memory, cells);
    folder.write("timing.json", dictionary::pretty(&how).as_bytes())?;
    folder.remove(PLAN)?;
    Ok(Outcome { folder: folder.finish()?, overview, remarks: remarks(&done), failed })
}

pub(super) fn check(opened: &Opened, path: &Path, config: &RunConfig) -> Result<String> {
    config.request.families_for(opened.source.fields()).map_err(|e| e.at(path))?;
    check_grid(opened.source.grid(), &opened.name, &config.request).map_err(|e| e.at(path))?;
    memory::check(&opened.source, &opened.name, &config.request, &config.planned()).map_err(|e| e.at(path))?;
    Ok(opened.name.clone())
}

/// Whether an error says that one snapshot cannot be used, while others may.
fn of_one_snapshot(e: &Error) -> bool {
    matches!(e.kind(), Kind::Input | Kind::Data | Kind::Limit)
}

/// Tells a failure at once where other snapshots follow; that of the only snapshot is the error of the run.
fn tell(e: &Error, config: &RunConfig, observe: &dyn Observe) {
    if config.snapshots.len() > 1 {
        observe.failure(&format!("snapshot skipped: {e}"));
    }
}

/// Gives every snapshot a name of its own: where file names are equal, the names of the folders around them go before.
pub(super) fn tell_apart(snapshots: &mut [(SnapshotRef, String)]) -> Result<()> {
    let own: Vec<String> = snapshots.iter().map(|(_, name)| name.clone()).collect();
    let names = |depth: usize| -> Vec<String> {
        let named = |(s, _): &(SnapshotRef, String), own: &String| {
            let folders: Vec<String> =
                s.path.parent().into_iter().flat_map(Path::components).map(|c| c.as_os_str().to_string_lossy().into_owned()).collect();
            let near = &folders[folders.len().saturating_sub(depth)..];
            near.iter().filter(|f| !f.contains('/')).chain([own]).cloned().collect::<Vec<_>>().join("_")
        };
        snapshots.iter().zip(&own).map(|(s, own)| named(s, own)).collect()
    };
    let twice = |names: &[String]| (0..names.len()).find_map(|i| names[..i].iter().position(|n| *n == names[i]).map(|k| (k, i)));
    let deepest = snapshots.iter().map(|(s, _)| s.path.components().count()).max().unwrap_or(0);
    for depth in 0..=deepest {
        let tried = names(depth);
        if twice(&tried).is_none() {
            for (s, name) in snapshots.iter_mut().zip(tried) {
                s.1 = name;
            }
            return Ok(());
        }
    }
    let (first, second) = twice(&own).unwrap_or((0, 0));
    Err(Error::usage("cannot tell two snapshots apart")
        .at(&snapshots[second].0.path)
        .expected("a name of its own")
        .found(format!("the name \"{}\", also that of {}", own[second], snapshots[first].0))
        .hint("name every snapshot once"))
}

/// The error of a run in which no snapshot could be used.
pub(super) fn none_usable(mut failed: Vec<(SnapshotRef, Error)>) -> Error {
    match failed.len() {
        0 => Error::usage("no snapshot given").hint("name one or more files"),
        1 => failed.remove(0).1,
        n if failed.iter().all(|(_, e)| e.kind() == Kind::Limit) => {
            let e = Error::limit("cannot use any snapshot").expected("at least one that fits into the memory budget");
            e.found(format!("{n} that do not"))
        }
        n => Error::input("cannot use any snapshot").expected("at least one that is usable").found(format!("{n} that are not")),
    }
}

/// The request with the levels that depend on the whole run; a snapshot that fails on the way is taken out.
fn settled(
    config: &RunConfig,
    execution: &Execution,
    usable: &mut Vec<(SnapshotRef, String)>,
    failed: &mut Vec<(SnapshotRef, Error)>,
    pool: &Pool,
    clock: &Clock<'_>,
) -> Result<Request> {
    let mut request = config.request.clone();
    if !run_rms::is_wanted(&request.families) {
        return Ok(request);
    }
    let mut sums = RunRms::default();
    let mut good = Vec::new();
    let n = usable.len() as u64;
    for (k, (path, name)) in usable.drain(..).enumerate() {
        clock.snapshot(&name, k as u64 + 1, n);
        let added = open(&path, config, clock).and_then(|opened| pool.run(|| sums.add(opened, &name, &config.request, execution, clock)));
        match added {
            Ok(()) => good.push((path, name)),
            Err(e) if of_one_snapshot(&e) => {
                clock.done();
                tell(&e, config, clock);
                failed.push((path, e));
            }
            Err(e) => return Err(e),
        }
    }
    if good.is_empty() {
        return Err(none_usable(std::mem::take(failed)));
    }
    *usable = good;
    request.run_rms = sums.finish(&request.families)?;
    Ok(request)
}

/// Opens a snapshot, as a stage of its own.
fn open(path: &SnapshotRef, config: &RunConfig, clock: &Clock<'_>) -> Result<Opened> {
    clock.stage("open", 0);
    let opened = read::open(path, &config.input);
    clock.done();
    if let Ok(opened) = &opened {
        clock.plane_cells(opened.source.grid().plane_cells() as u64);
    }
    opened
}

fn one(
    path: &SnapshotRef,
    name: &str,
    config: &RunConfig,
    request: &Request,
    execution: &Execution,
    folder: &Folder,
    clock: &Clock<'_>,
) -> Result<(Analysis, Vec<String>)> {
    let opened = open(path, config, clock)?;
    let fields = opened.source.fields();
    let snapshot = Snapshot { name: name.to_string(), time: opened.time, components: opened.components };
    let families = request.families_for(fields)?;
    let flat = opened.source.grid().is_flat();
    let mut files = SnapshotFiles::new(folder, name, families, fields, flat, request, &config.outputs, execution.memory, clock)?;
    match analyse(opened.source, snapshot, request, execution, clock, &mut files) {
        Ok(mut analysis) => {
            clock.stage("files", 0);
            for warning in opened.notes.into_iter().chain(files.finish()?) {
                clock.warning(&format!("{name}: {warning}"));
                analysis.warnings.push(warning);
            }
            Ok((analysis, opened.datasets))
        }
        Err(e) => {
            files.abandon();
            Err(e)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A refusal of one snapshot is its failure, that of all is the run's; beside other failures the input is what to look at.
    #[test]
    fn refusals_for_want_of_memory() {
        let failed = |errors: &[Error]| errors.iter().map(|e| (SnapshotRef::from(PathBuf::from("a.h5")), e.clone())).collect::<Vec<_>>();
        let (little, bad) = (Error::limit("little"), Error::input("bad"));
        assert_eq!(none_usable(failed(std::slice::from_ref(&little))), little);
        let all = none_usable(failed(&[little.clone(), little.clone()]));
        assert_eq!(all.kind(), Kind::Limit);
        assert_eq!(all.to_string(), "cannot use any snapshot: expected at least one that fits into the memory budget, found 2 that do not");
        assert_eq!(none_usable(failed(&[little.clone(), bad.clone()])).kind(), Kind::Input);
        assert!(of_one_snapshot(&little) && of_one_snapshot(&bad) && !of_one_snapshot(&Error::output("full")));
    }
}
