//! The main job: snapshots in, a run folder out.

use std::path::{Path, PathBuf};
use std::time::Instant;

use serde_json::{Value, json};

use crate::base::error::{Error, Kind, Result};
use crate::base::observe::Observe;
use crate::base::par::Pool;
use crate::export::atomic::Folder;
use crate::export::{csv, json as dictionary};
use crate::model::request::{Outputs, Request, Surfaces};
use crate::model::snapshot::SnapshotRef;
use crate::model::surface::NoSurfaces;
use crate::read::{self, InputSpec, Opened};
use crate::run::analysis::{Analysis, Execution, Snapshot, analyse};
use crate::run::clock::Clock;
use crate::run::meshes::MeshFiles;
use crate::run::{provenance, summary};

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
    /// What changes nothing.
    pub execution: Execution,
    /// Worker threads; 0 takes one per core.
    pub threads: usize,
    /// The run folder.
    pub output: PathBuf,
    /// Whether an earlier run folder of that name is replaced.
    pub replace: bool,
}

/// What came out.
pub struct Outcome {
    /// The run folder.
    pub folder: PathBuf,
    /// Snapshots that were analysed.
    pub done: Vec<Analysis>,
    /// Snapshots that failed, with the reason.
    pub failed: Vec<(SnapshotRef, Error)>,
}

/// Runs the main job.
///
/// Headers of all snapshots are checked before anything long. A snapshot that cannot be used is reported and the others go on;
/// when none can be used, that is an error and nothing is written.
///
/// # Errors
/// `Usage` for a request that fits no snapshot, `Input` or `Data` when no snapshot is usable, `Output` for the run folder.
pub fn catalogue(config: &RunConfig, observe: &dyn Observe) -> Result<Outcome> {
    let started = Instant::now();
    let pool = Pool::new(config.threads)?;
    let clock = Clock::new(observe);
    let mut failed: Vec<(SnapshotRef, Error)> = Vec::new();
    let mut usable = Vec::new();
    for path in &config.snapshots {
        match read::open(path, &config.input).and_then(|o| check(&o, &path.path, &config.request)) {
            Ok(name) => usable.push((path.clone(), name)),
            Err(e) => failed.push((path.clone(), e)),
        }
    }
    if usable.is_empty() && failed.iter().all(|(_, e)| e.kind() == Kind::Usage) {
        // The request fits no snapshot: that is one fault, not one a snapshot.
        return Err(failed.into_iter().next().map_or_else(|| Error::usage("no snapshot given").hint("name one or more files"), |(_, e)| e));
    }
    failed.iter().for_each(|(_, e)| tell(e, config, observe));
    tell_apart(&mut usable)?;
    if usable.is_empty() {
        return Err(none_usable(failed));
    }
    let folder = Folder::create(&config.output, config.replace)?;
    let mut table = csv::header();
    let mut done = Vec::new();
    let mut snapshots: Vec<Value> = Vec::new();
    for (path, name) in &usable {
        let one = pool.run(|| one(path, name, config, &folder, &clock));
        match one {
            Ok((analysis, datasets)) => {
                for family in &analysis.families {
                    table.push_str(&pool.run(|| csv::lines(&family.rows)));
                }
                snapshots.push(summary::snapshot(&analysis, &path.to_string(), &datasets));
                done.push(analysis);
            }
            Err(e) if matches!(e.kind(), Kind::Input | Kind::Data) => {
                tell(&e, config, observe);
                failed.push((path.clone(), e));
            }
            Err(e) => return Err(e),
        }
    }
    if done.is_empty() {
        return Err(none_usable(failed));
    }
    let failures: Vec<Value> = failed.iter().map(|(p, e)| json!({ "path": p.to_string(), "error": e.to_string() })).collect();
    let what = json!({
        "program": provenance::program(),
        "request": summary::request(&config.request, &config.input),
        "conventions": summary::conventions(),
        "snapshots": snapshots,
        "failed": failures,
    });
    folder.write("catalogue.csv", table.as_bytes())?;
    folder.write("columns.json", dictionary::pretty(&dictionary::dictionary()).as_bytes())?;
    folder.write("run.json", dictionary::pretty(&what).as_bytes())?;
    let how = provenance::timing(&clock.stages(), started.elapsed().as_secs_f64(), pool.threads(), &done);
    folder.write("timing.json", dictionary::pretty(&how).as_bytes())?;
    Ok(Outcome { folder: folder.finish()?, done, failed })
}

pub(super) fn check(opened: &Opened, path: &Path, request: &Request) -> Result<String> {
    request.families_for(opened.source.fields()).map_err(|e| e.at(path))?;
    Ok(opened.name.clone())
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
        n => Error::input("cannot use any snapshot").expected("at least one that is usable").found(format!("{n} that are not")),
    }
}

fn one(path: &SnapshotRef, name: &str, config: &RunConfig, folder: &Folder, observe: &dyn Observe) -> Result<(Analysis, Vec<String>)> {
    let opened = read::open(path, &config.input)?;
    let fields = opened.source.fields();
    let snapshot =
        Snapshot { name: name.to_string(), time: opened.time, components: component_names(&opened.datasets, fields.components()) };
    let (request, execution) = (&config.request, &config.execution);
    let analysis = if request.surfaces == Surfaces::None {
        analyse(opened.source, snapshot, request, execution, observe, &mut NoSurfaces)?
    } else {
        let families = request.families_for(fields)?;
        let mut files =
            MeshFiles::new(folder, name, families, fields, &request.mesh_values, request.surfaces, opened.source.grid().is_flat())?;
        match analyse(opened.source, snapshot, request, execution, observe, &mut files) {
            Ok(analysis) => {
                files.finish()?;
                analysis
            }
            Err(e) => {
                files.abandon();
                return Err(e);
            }
        }
    };
    Ok((analysis, opened.datasets))
}

/// One name a component for messages; an array with a component axis stands for three.
fn component_names(datasets: &[String], components: usize) -> Vec<String> {
    if datasets.len() == components {
        return datasets.to_vec();
    }
    if datasets.len() * 3 == components {
        return datasets.iter().flat_map(|d| (0..3).map(move |c| format!("{d}[{c}]"))).collect();
    }
    Vec::new()
}
