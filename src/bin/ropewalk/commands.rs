//! What each command does.

use std::fmt::Write;
use std::path::{Path, PathBuf};
use std::process::ExitCode;

use ropewalk::base::error::{Error, Result};
use ropewalk::model::indicator::INDICATORS;
use ropewalk::model::request::{Family, Outputs, Request};
use ropewalk::model::schema::{Schema, companion_columns};
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::read::InputSpec;
use ropewalk::run::analysis::Execution;
use ropewalk::run::catalogue::{RunConfig, catalogue};
use ropewalk::run::gather::{GatherConfig, gather};
use ropewalk::run::machine::Machine;
use ropewalk::run::parts::{CLASSES, FamilyOverview};
use ropewalk::run::plan::{Place, plan};

use crate::args::{Args, Command, Demo, Gather};
use crate::console::{self, Console};
use crate::{exit, inspect, settle};

/// Runs the command.
pub fn run(args: &Args) -> Result<ExitCode> {
    match &args.command {
        Command::Catalogue(a) => {
            let config = settle::catalogue(a)?;
            if a.dry_run {
                return dry_run(&config);
            }
            let outcome = catalogue(&config, &Console::new(a.talk))?;
            if !a.talk.quiet {
                console::result(&overview(&outcome.overview, &outcome.remarks, &outcome.folder))?;
            }
            Ok(if outcome.failed.is_empty() { ExitCode::SUCCESS } else { ExitCode::from(exit::PARTIAL) })
        }
        Command::Inspect(a) => inspect::run(a),
        Command::Demo(a) => demo(a),
        Command::Gather(a) => gathered(a),
        Command::Columns => {
            console::result(&columns())?;
            Ok(ExitCode::SUCCESS)
        }
    }
}

/// Prints the plan; ends as the run would before its first plane.
fn dry_run(config: &RunConfig) -> Result<ExitCode> {
    let plan = plan(config)?;
    console::result(&plan.to_string())?;
    if plan.place == Place::Taken {
        return Err(Error::output("cannot make the run folder")
            .at(&plan.folder)
            .expected("nothing there")
            .found("a run folder or file of that name")
            .hint("name another with -o, or pass --replace to put this run in its place once it is complete"));
    }
    Ok(if plan.unusable.is_empty() { ExitCode::SUCCESS } else { ExitCode::from(exit::PARTIAL) })
}

/// One run of the demo.
struct DemoRun {
    /// Its folder below that of the demo.
    folder: &'static str,
    files: &'static [&'static str],
    families: &'static [&'static str],
    /// Coefficients that the snapshots were computed with.
    viscosity: f64,
    resistivity: Option<f64>,
}

const DEMO: [DemoRun; 2] = [
    DemoRun {
        folder: "mhd",
        files: &["mhd_0001.h5", "mhd_0002.h5", "mhd_0003.h5"],
        families: &["vorticity: vorticity > 2.5 rms", "current: current > 2 rms"],
        viscosity: 0.019,
        resistivity: Some(0.019),
    },
    DemoRun {
        folder: "hydro",
        files: &["hydro_0001.h5"],
        families: &["vorticity: vorticity > 2.5 rms"],
        viscosity: 0.018,
        resistivity: None,
    },
];

fn demo(a: &Demo) -> Result<ExitCode> {
    let data = demo_data(a.data.as_deref())?;
    let share = Machine::here().share(None, 0)?;
    let mut code = ExitCode::SUCCESS;
    let mut text = String::new();
    for run in &DEMO {
        let config = RunConfig {
            snapshots: run.files.iter().map(|f| SnapshotRef::from(data.join(f))).collect(),
            input: InputSpec { lengths: Some([std::f64::consts::TAU; 3]), ..InputSpec::default() },
            request: Request {
                families: run.families.iter().map(|f| Family::parse(f)).collect::<Result<_>>()?,
                viscosity: Some(run.viscosity),
                resistivity: run.resistivity,
                ..Request::default()
            },
            outputs: Outputs::default(),
            execution: Execution { memory: share.bytes, ..Execution::default() },
            memory_from: share.from.clone(),
            threads: 0,
            output: a.folder.join(run.folder),
            replace: a.replace,
        };
        let outcome = catalogue(&config, &Console::new(a.talk))?;
        if !outcome.failed.is_empty() {
            code = ExitCode::from(exit::PARTIAL);
        }
        let _ = writeln!(text, "{}", overview(&outcome.overview, &outcome.remarks, &outcome.folder));
    }
    text += &what_to_look_at(&a.folder);
    if !a.talk.quiet {
        console::result(&text)?;
    }
    Ok(code)
}

/// Where a newcomer goes from the demo's results.
fn what_to_look_at(folder: &Path) -> String {
    format!(
        "What to look at in {0}:\n\
         - {0}/mhd/catalogue.csv: one row an object; class, shares of the dissipation, cosines, lamb_sin2 and lorentz_sin2 (2/3 without alignment)\n\
         - {0}/mhd/run.json: levels, statistics of the box, alignment inside and outside the objects, shares that add up to 1\n\
         - {0}/mhd/surfaces/*/*.ply: surface meshes for any viewer; the vertex value object tells objects apart\n\
         - {0}/hydro: the same for a flow without magnetic field\n\
         - ropewalk columns: what every column means\n\
         Sort the current family by ohmic_share: a few objects hold more than half of what all of them dissipate. The grid is coarse\n\
         (64^3) and the flags column says so: under_resolved, fragmented.\n",
        folder.display()
    )
}

/// The demo data: where the user says, below the present folder, or in the source tree this program was built from.
fn demo_data(named: Option<&Path>) -> Result<PathBuf> {
    let first = DEMO[0].files[0];
    let built_from = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data");
    let places: Vec<PathBuf> = named.map_or_else(|| vec![PathBuf::from("demo-data"), built_from], |p| vec![p.to_path_buf()]);
    places.iter().find(|p| p.join(first).is_file()).cloned().ok_or_else(|| {
        Error::input("cannot find the demo data")
            .at(&places[0])
            .expected(first)
            .found("no such file")
            .hint("run it in the source tree, or name the folder with --data DIR")
    })
}

fn gathered(a: &Gather) -> Result<ExitCode> {
    // Refuses where there is too little for the program itself.
    Machine::here().share(None, 0)?;
    let config = GatherConfig { runs: a.runs.clone(), output: a.output.clone(), replace: a.replace, threads: 0 };
    let done = gather(&config, &Console::new(a.talk))?;
    if !a.talk.quiet {
        console::result(&overview(&done.overview, &done.remarks, &done.folder))?;
    }
    Ok(if done.missing.is_empty() { ExitCode::SUCCESS } else { ExitCode::from(exit::PARTIAL) })
}

/// A line a snapshot and family: what was found.
fn overview(found: &[FamilyOverview], remarks: &[String], folder: &Path) -> String {
    let mut out = String::new();
    let _ = writeln!(
        out,
        "{:<16} {:<12} {:>11} {:>8} {:>8} {:>11}  classes",
        "snapshot", "family", "level", "objects", "volume", "dissipation"
    );
    let percent = |share: Option<f64>| share.map_or("-".to_string(), |v| format!("{:.2}%", 100.0 * v));
    for f in found {
        let classes: Vec<String> = CLASSES.iter().zip(f.classes).filter(|(_, n)| *n > 0).map(|(c, n)| format!("{n} {c}")).collect();
        let line = format!(
            "{:<16} {:<12} {:>11} {:>8} {:>8} {:>11}  {}",
            f.snapshot,
            f.family,
            level(f.level),
            f.objects,
            percent(f.volume),
            percent(f.dissipation),
            classes.join(", ")
        );
        let _ = writeln!(out, "{}", line.trim_end());
    }
    for remark in remarks {
        let _ = writeln!(out, "{remark}");
    }
    let _ = writeln!(out, "{}", folder.display());
    out
}

/// Five decimals where they tell something.
fn level(v: f64) -> String {
    if v == 0.0 || (1e-2..1e6).contains(&v.abs()) { format!("{v:.5}") } else { format!("{v:.4e}") }
}

/// The dictionary of columns, then what `--companions` can add to it.
fn columns() -> String {
    let mut out = String::new();
    for c in Schema::default().columns() {
        entry(&mut out, &c.name, &c.unit, &c.definition, &c.source);
    }
    out += "\nColumns that --companions LIST adds, three for every indicator named\n\n";
    for (c, what) in companion_columns(INDICATORS[0].indicator).iter().zip(["Volume mean", "Smallest value", "Largest value"]) {
        let ending = c.name.strip_prefix(INDICATORS[0].name).unwrap_or_default();
        entry(&mut out, &format!("INDICATOR{ending}"), "of the indicator", &format!("{what} of the indicator over the object."), "");
    }
    out += "\nIndicators, for families and companions; L length, T time\n\n";
    for i in &INDICATORS {
        entry(&mut out, i.name, i.unit, i.definition, i.source);
    }
    out
}

fn entry(out: &mut String, name: &str, unit: &str, definition: &str, source: &str) {
    let _ = write!(out, "{name} [{unit}]\n    {definition}\n");
    if !source.is_empty() {
        let _ = writeln!(out, "    source: {source}");
    }
}
