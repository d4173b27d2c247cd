//! From what was typed to a run configuration.

use std::path::PathBuf;

use ropewalk::base::error::{Error, Result};
use ropewalk::model::request::{Connectivity, CutOuts, Family, Frame, Outputs, Request, Scheme, Surfaces};
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::read::InputSpec;
use ropewalk::run::analysis::Execution;
use ropewalk::run::catalogue::RunConfig;

use crate::args::{Catalogue, ConnectivityArg, DerivativeArg, FrameArg, SurfacesArg, TableArg};

/// More than any machine has cores for.
const MOST_THREADS: usize = 1024;

/// Settles a `catalogue` command.
pub fn catalogue(a: &Catalogue) -> Result<RunConfig> {
    let families = a.families.iter().map(|f| Family::parse(f)).collect::<Result<Vec<_>>>()?;
    let coefficient = |name: &str, v: Option<f64>| match v {
        Some(v) if !(v.is_finite() && v > 0.0) => {
            Err(Error::usage("cannot use a coefficient").item(name).expected("a number above 0").found(v.to_string()))
        }
        v => Ok(v),
    };
    if a.min_cells == 0 {
        return Err(Error::usage("cannot use a size").item("--min-cells").expected("at least 1").found("0"));
    }
    if a.threads > MOST_THREADS {
        return Err(Error::usage("cannot use a number of threads")
            .item("--threads")
            .expected(format!("at most {MOST_THREADS}"))
            .found(a.threads.to_string())
            .hint("0 takes one per core"));
    }
    if let (Some(u), Some(b)) = (&a.velocity, &a.magnetic)
        && u == b
    {
        return Err(Error::usage("cannot read two fields")
            .item("--velocity, --magnetic")
            .expected("different datasets")
            .found(u.join(",")));
    }
    if a.block_planes == Some(0) {
        return Err(Error::usage("cannot use a thickness").item("--block-planes").expected("at least 1").found("0"));
    }
    Ok(RunConfig {
        snapshots: snapshots(&a.snapshots)?.into_iter().map(SnapshotRef::from).collect(),
        input: InputSpec {
            velocity: a.velocity.clone(),
            magnetic: a.magnetic.clone(),
            order: a.order.clone(),
            lengths: a.lengths.as_deref().map(|t| triple("--lengths", t)).transpose()?,
            spacing: a.spacing.as_deref().map(|t| triple("--spacing", t)).transpose()?,
            origin: triple("--origin", &a.origin)?,
            periodic: periodic(&a.periodic)?,
            ..InputSpec::default()
        },
        request: Request {
            families,
            connectivity: match a.connectivity {
                ConnectivityArg::Six => Connectivity::Six,
                ConnectivityArg::Eighteen => Connectivity::Eighteen,
                ConnectivityArg::TwentySix => Connectivity::TwentySix,
            },
            min_cells: a.min_cells,
            max_object_cells: a.max_object_cells,
            viscosity: coefficient("--viscosity", a.viscosity)?,
            resistivity: coefficient("--resistivity", a.resistivity)?,
            frame: match a.frame {
                FrameArg::Box => Frame::Box,
                FrameArg::Stored => Frame::Stored,
            },
            scheme: match a.derivative {
                DerivativeArg::Fd2 => Scheme::Fd2,
                DerivativeArg::Fd4 => Scheme::Fd4,
                DerivativeArg::Fd6 => Scheme::Fd6,
                DerivativeArg::Auto | DerivativeArg::Fd8 => Scheme::Fd8,
                DerivativeArg::Opt => Scheme::Opt,
                DerivativeArg::Spectral => Scheme::Spectral,
            },
            surfaces: match a.surfaces {
                SurfacesArg::Together => Surfaces::Together,
                SurfacesArg::Each => Surfaces::Each,
                SurfacesArg::None => Surfaces::None,
            },
            surface_min_cells: a.surface_min_cells,
            ..Request::default()
        },
        outputs: outputs(a)?,
        execution: Execution { block_planes: a.block_planes, ..Execution::default() },
        threads: a.threads,
        output: a.output.clone(),
        replace: a.replace,
    })
}

fn outputs(a: &Catalogue) -> Result<Outputs> {
    let default = Outputs::default();
    let named = |table: TableArg, default: bool| a.tables.as_ref().map_or(default, |t| t.contains(&table));
    Ok(Outputs {
        parquet: named(TableArg::Parquet, default.parquet),
        json_lines: named(TableArg::Jsonl, default.json_lines),
        labels: a.labels,
        cut_outs: CutOuts::parse(&a.cut_outs)?,
        cut_out_margin: a.cut_out_margin,
    })
}

/// Files as named; a name with * ? or [ that is no file is a pattern, its matches sorted by name.
fn snapshots(named: &[String]) -> Result<Vec<PathBuf>> {
    let mut out = Vec::new();
    for name in named {
        let path = PathBuf::from(name);
        if path.extension().is_some_and(|e| e == "toml") {
            return Err(Error::usage("cannot read a run file")
                .at(path)
                .hint("this version takes snapshots and options on the command line"));
        }
        if path.exists() || !name.contains(['*', '?', '[']) {
            out.push(path);
            continue;
        }
        let bad = |e: String| Error::usage("cannot read a pattern").item(format!("\"{name}\"")).found(e);
        let matches = glob::glob(name).map_err(|e| bad(e.to_string()))?;
        let mut found = matches.collect::<std::result::Result<Vec<_>, _>>().map_err(|e| bad(e.to_string()))?;
        if found.is_empty() {
            return Err(Error::input("cannot find snapshots")
                .item(format!("\"{name}\""))
                .expected("a pattern that matches a file")
                .found("no match")
                .hint("quote the pattern and check the folder"));
        }
        found.sort();
        out.extend(found);
    }
    Ok(out)
}

/// Three numbers, or one for all three; `2pi` and the like are understood.
fn triple(option: &str, text: &str) -> Result<[f64; 3]> {
    let wrong = || {
        Error::usage("cannot read an option")
            .item(option)
            .expected("three numbers, or one for all axes")
            .found(format!("\"{text}\""))
            .hint("for example 6.283185,6.283185,3.141593 or 2pi")
    };
    let number = |t: &str| -> Result<f64> {
        let t = t.trim();
        let (digits, factor) = match t.strip_suffix("pi") {
            Some("") => ("1", std::f64::consts::PI),
            Some(d) => (d, std::f64::consts::PI),
            None => (t, 1.0),
        };
        digits.parse::<f64>().map(|v| v * factor).map_err(|_| wrong())
    };
    let parts: Vec<&str> = text.split(',').collect();
    match parts.as_slice() {
        [one] => number(one).map(|v| [v; 3]),
        [x, y, z] => Ok([number(x)?, number(y)?, number(z)?]),
        _ => Err(wrong()),
    }
}

fn periodic(text: &str) -> Result<[bool; 3]> {
    let mut out = [false; 3];
    if text == "none" {
        return Ok(out);
    }
    if text.is_empty() {
        return Err(Error::usage("cannot read an option").item("--periodic").expected("a subset of xyz, or none").found("nothing"));
    }
    for c in text.chars() {
        match "xyz".find(c) {
            Some(a) if !out[a] => out[a] = true,
            _ => {
                return Err(Error::usage("cannot read an option")
                    .item("--periodic")
                    .expected("a subset of xyz, or none")
                    .found(format!("\"{text}\"")));
            }
        }
    }
    Ok(out)
}
