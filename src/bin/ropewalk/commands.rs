//! What each command does.

use std::fmt::Write;
use std::path::{Path, PathBuf};
use std::process::ExitCode;

use ropewalk::base::error::{Error, Result};
use ropewalk::model::columns::{COLUMNS, Col, Row, Value};
use ropewalk::model::request::Request;
use ropewalk::read::InputSpec;
use ropewalk::run::analysis::Execution;
use ropewalk::run::catalogue::{Outcome, RunConfig, catalogue};

use crate::args::{Args, Command, Demo};
use crate::console::{self, Console};
use crate::{exit, settle};

/// Runs the command.
pub fn run(args: &Args) -> Result<ExitCode> {
    match &args.command {
        Command::Catalogue(a) => {
            let outcome = catalogue(&settle::catalogue(a)?, &Console::new(a.talk))?;
            console::result(&overview(&outcome));
            Ok(if outcome.failed.is_empty() { ExitCode::SUCCESS } else { ExitCode::from(exit::PARTIAL) })
        }
        Command::Demo(a) => demo(a),
        Command::Columns => {
            console::result(&columns());
            Ok(ExitCode::SUCCESS)
        }
    }
}

/// Files of the demo run, and the coefficients they were computed with.
const DEMO_FILES: [&str; 4] = ["mhd_0001.h5", "mhd_0002.h5", "mhd_0003.h5", "hydro_0001.h5"];

fn demo(a: &Demo) -> Result<ExitCode> {
    let data = demo_data(a.data.as_deref())?;
    let run = |files: &[&str], folder: PathBuf, viscosity: f64, resistivity: Option<f64>| {
        let config = RunConfig {
            snapshots: files.iter().map(|f| data.join(f)).collect(),
            input: InputSpec { lengths: Some([std::f64::consts::TAU; 3]), ..InputSpec::default() },
            request: Request { viscosity: Some(viscosity), resistivity, ..Request::default() },
            execution: Execution::default(),
            threads: 0,
            output: folder,
            replace: a.replace,
        };
        catalogue(&config, &Console::new(a.talk))
    };
    let outcome = run(&DEMO_FILES, a.folder.clone(), 0.01, Some(0.01))?;
    console::result(&overview(&outcome));
    Ok(ExitCode::SUCCESS)
}

/// The demo data: where the user says, below the present folder, or in the source tree this program was built from.
fn demo_data(named: Option<&Path>) -> Result<PathBuf> {
    let built_from = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data");
    let places: Vec<PathBuf> = named.map_or_else(|| vec![PathBuf::from("demo-data"), built_from], |p| vec![p.to_path_buf()]);
    places.iter().find(|p| p.join(DEMO_FILES[0]).is_file()).cloned().ok_or_else(|| {
        Error::input("cannot find the demo data")
            .at(&places[0])
            .expected(DEMO_FILES[0])
            .found("no such file")
            .hint("run it in the source tree, or name the folder with --data DIR")
    })
}

/// A few lines a family: what was found.
fn overview(outcome: &Outcome) -> String {
    let mut out = String::new();
    let _ = writeln!(
        out,
        "{:<16} {:<12} {:>11} {:>8} {:>8} {:>11}  classes",
        "snapshot", "family", "level", "objects", "volume", "dissipation"
    );
    for a in &outcome.done {
        for f in &a.families {
            let sum = |c: Col| f.rows.iter().filter_map(|r| r.get(c).as_f64()).sum::<f64>();
            let volume = sum(Col::Cells) / a.survey.cells as f64;
            let dissipation =
                if a.fields.magnetic && f.family.indicator.needs().magnetic { sum(Col::OhmicShare) } else { sum(Col::ViscousShare) };
            let _ = writeln!(
                out,
                "{:<16} {:<12} {:>11.5} {:>8} {:>7.2}% {:>10.2}%  {}",
                a.snapshot.name,
                f.family.name,
                f.level,
                f.rows.len(),
                100.0 * volume,
                100.0 * dissipation,
                classes(&f.rows)
            );
        }
    }
    let _ = writeln!(out, "{}", outcome.folder.display());
    out
}

fn classes(rows: &[Row]) -> String {
    let count = |name: &str| rows.iter().filter(|r| matches!(r.get(Col::Class), Value::Text(t) if t == name)).count();
    let parts: Vec<String> = ["filament", "sheet", "blob", "tangle"]
        .iter()
        .map(|c| (c, count(c)))
        .filter(|(_, n)| *n > 0)
        .map(|(c, n)| format!("{n} {c}"))
        .collect();
    parts.join(", ")
}

fn columns() -> String {
    let mut out = String::new();
    for c in COLUMNS {
        let _ = write!(out, "{} [{}]\n    {}\n", c.name, c.unit.text(), c.definition);
        if !c.source.is_empty() {
            let _ = writeln!(out, "    source: {}", c.source);
        }
    }
    out
}
