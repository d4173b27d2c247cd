//! The parts of a run: what one snapshot contributes, complete or absent, and the tables that are joined from them.

use std::fs::{self, File};
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use serde_json::{Value, json};

use crate::base::error::{Error, Result};
use crate::base::par::Pool;
use crate::export::atomic::Folder;
use crate::export::json::pretty;
#[cfg(feature = "parquet")]
use crate::export::parquet::ParquetWriter;
use crate::export::{csv, json as dictionary, jsonl};
use crate::model::columns::{Col, Row, Value as Cell};
use crate::model::indicator::Indicator;
use crate::model::request::Outputs;
use crate::model::schema::Schema;
use crate::run::{provenance, summary};

/// Folder of the parts in a run folder.
pub const PARTS: &str = "parts";

/// Which tables a run writes beside `catalogue.csv`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Tables {
    /// `catalogue.parquet`.
    pub parquet: bool,
    /// `catalogue.jsonl`.
    pub json_lines: bool,
}

impl Tables {
    /// Those asked for.
    ///
    /// # Errors
    /// `Usage` when this build cannot write one.
    pub fn new(outputs: &Outputs) -> Result<Tables> {
        Tables { parquet: outputs.parquet, json_lines: outputs.json_lines }.check()
    }

    /// # Errors
    /// `Usage` when this build cannot write one.
    pub fn check(self) -> Result<Tables> {
        if self.parquet && !cfg!(feature = "parquet") {
            return Err(Error::usage("cannot write catalogue.parquet")
                .expected("a ropewalk with Parquet")
                .found("a build without it")
                .hint("build with --features parquet, or ask for other tables"));
        }
        Ok(self)
    }

    fn names(self) -> Vec<&'static str> {
        [(true, "csv"), (self.parquet, "parquet"), (self.json_lines, "jsonl")].into_iter().filter(|(yes, _)| *yes).map(|(_, n)| n).collect()
    }
}

/// One part as stored, without its rows.
#[derive(Debug, Clone, PartialEq)]
pub struct Part {
    /// The run folder that it lies in.
    pub run: PathBuf,
    /// Name of the snapshot.
    pub name: String,
    /// `parts/SNAPSHOT.json`: `program`, `request`, `tables`, `rows`, `snapshot`.
    pub what: Value,
}

/// What a part is about besides its snapshot; equal in all parts of a run.
pub fn common(request: &Value) -> Value {
    json!({ "program": provenance::program(request["portable"] == true), "request": request })
}

/// Writes the part of a snapshot; it counts once its `.json` is there.
///
/// # Errors
/// `Output`.
pub fn write(folder: &Folder, name: &str, schema: &Schema, common: &Value, tables: Tables, snapshot: Value, rows: &[&[Row]]) -> Result<()> {
    let text: String = rows.iter().map(|family| jsonl::lines(schema, family)).collect();
    folder.write_whole(&format!("{PARTS}/{name}.jsonl"), text.as_bytes())?;
    let count: usize = rows.iter().map(|family| family.len()).sum();
    let what = json!({
        "program": common["program"],
        "request": common["request"],
        "tables": tables.names(),
        "rows": count,
        "snapshot": snapshot,
    });
    folder.write_whole(&format!("{PARTS}/{name}.json"), pretty(&what).as_bytes())
}

impl Part {
    /// Reads a part without its rows.
    ///
    /// # Errors
    /// `Input` when it is not a part.
    pub fn read(run: &Path, name: &str) -> Result<Part> {
        let path = run.join(PARTS).join(format!("{name}.json"));
        let what = read_json(&path)?;
        let complete = what["rows"].is_u64() && what["snapshot"]["snapshot"] == name && what["request"].is_object();
        if !complete {
            return Err(Error::input("cannot read the part of a snapshot")
                .at(path)
                .expected(format!("program, request, rows and what is known of the snapshot {name}"))
                .found("other content")
                .hint("was it changed or renamed? Run that snapshot again"));
        }
        Ok(Part { run: run.to_path_buf(), name: name.to_string(), what })
    }

    /// The tables that its run writes.
    pub fn tables(&self) -> Tables {
        let has = |name: &str| self.what["tables"].as_array().is_some_and(|t| t.iter().any(|t| t == name));
        Tables { parquet: has("parquet"), json_lines: has("jsonl") }
    }

    /// The columns of its rows.
    ///
    /// # Errors
    /// `Input` when this version does not know a companion of it.
    pub fn schema(&self) -> Result<Schema> {
        let named = self.what["request"]["companions"].as_array().cloned().unwrap_or_default();
        let companion = |name: &Value| {
            name.as_str().and_then(Indicator::named).ok_or_else(|| {
                Error::input("cannot read the part of a snapshot")
                    .at(self.run.join(PARTS).join(format!("{}.json", self.name)))
                    .expected("indicators of this version as companions")
                    .found(name.to_string())
            })
        };
        Ok(Schema { companions: named.iter().map(companion).collect::<Result<_>>()? })
    }

    /// Its lines and rows.
    ///
    /// # Errors
    /// `Input` when they cannot be read or are not as many as there should be.
    pub fn rows(&self, schema: &Schema) -> Result<(String, Vec<Row>)> {
        let path = self.run.join(PARTS).join(format!("{}.jsonl", self.name));
        let text = fs::read_to_string(&path).map_err(|e| unreadable(&path, &e.to_string()))?;
        let rows = jsonl::parse(schema, &text).map_err(|e| e.at(&path))?;
        if self.what["rows"] != rows.len() {
            return Err(Error::input("cannot read the rows of a snapshot")
                .at(path)
                .expected(format!("{} rows", self.what["rows"]))
                .found(rows.len().to_string())
                .hint("the file was changed or cut: run that snapshot again"));
        }
        Ok((text, rows))
    }
}

/// Reads a JSON file.
///
/// # Errors
/// `Input`.
pub fn read_json(path: &Path) -> Result<Value> {
    let text = fs::read_to_string(path).map_err(|e| unreadable(path, &e.to_string()))?;
    serde_json::from_str(&text).map_err(|e| unreadable(path, &e.to_string()))
}

fn unreadable(path: &Path, found: &str) -> Error {
    Error::input("cannot read a file of a run folder").at(path).found(found).hint("the file is missing, was changed or cut")
}

/// One line of an overview.
#[derive(Debug, Clone, PartialEq)]
pub struct FamilyOverview {
    /// Name of the snapshot.
    pub snapshot: String,
    /// Name of the family.
    pub family: String,
    /// Its absolute level.
    pub level: f64,
    /// Listed objects.
    pub objects: u64,
    /// Share of the box they fill.
    pub volume: Option<f64>,
    /// Their share of the box's dissipation: Ohmic where the indicator is made of the magnetic field, else viscous.
    pub dissipation: Option<f64>,
    /// Objects of every class, in the order of their names below.
    pub classes: [u64; 4],
}

/// Classes in the order of [`FamilyOverview::classes`].
pub const CLASSES: [&str; 4] = ["filament", "sheet", "blob", "tangle"];

fn overview(snapshot: &Value, rows: &[Row], out: &mut Vec<FamilyOverview>) {
    let text = |v: &Value| v.as_str().unwrap_or_default().to_string();
    let is = |r: &Row, c: Col, name: &str| matches!(r.get(c), Cell::Text(t) if t == name);
    for f in snapshot["families"].as_array().into_iter().flatten() {
        let family = text(&f["family"]);
        let magnetic = f["indicator"].as_str().and_then(Indicator::named).is_some_and(|i| i.needs().magnetic);
        let shares = &f["shares"]["objects"];
        let of_class = |class: &str| rows.iter().filter(|r| is(r, Col::Family, &family) && is(r, Col::Class, class)).count() as u64;
        out.push(FamilyOverview {
            snapshot: text(&snapshot["snapshot"]),
            level: f["level"].as_f64().unwrap_or(f64::NAN),
            objects: f["objects"].as_u64().unwrap_or(0),
            volume: shares["volume"].as_f64(),
            dissipation: shares[if magnetic { "ohmic" } else { "viscous" }].as_f64(),
            classes: CLASSES.map(of_class),
            family,
        });
    }
}

/// Joins parts, in their order, into the tables and `run.json` of a run. Rows of one snapshot are held at a time.
///
/// # Errors
/// `Input` for parts that cannot be read, `Output`.
pub fn join(
    folder: &Folder,
    parts: &[Part],
    schema: &Schema,
    tables: Tables,
    failed: Vec<Value>,
    pool: &Pool,
) -> Result<Vec<FamilyOverview>> {
    let common = parts.first().map(|p| json!({ "program": p.what["program"], "request": p.what["request"] })).unwrap_or_default();
    let columns = dictionary::dictionary(schema);
    let mut csv = Table::create(folder, "catalogue.csv")?;
    csv.add(csv::header(schema).as_bytes())?;
    let mut lines = if tables.json_lines { Some(Table::create(folder, "catalogue.jsonl")?) } else { None };
    #[cfg(feature = "parquet")]
    let mut parquet = if tables.parquet {
        let metadata = vec![("ropewalk:columns", columns["columns"].to_string()), ("ropewalk:run", common.to_string())];
        let out = BufWriter::new(folder.file("catalogue.parquet")?);
        Some(ParquetWriter::new(out, schema, metadata).map_err(|e| e.at(folder.path("catalogue.parquet")))?)
    } else {
        None
    };
    let mut overviews = Vec::new();
    let mut snapshots = Vec::new();
    for part in parts {
        let (text, rows) = pool.run(|| part.rows(schema))?;
        csv.add(pool.run(|| csv::lines(&rows)).as_bytes())?;
        if let Some(lines) = &mut lines {
            lines.add(text.as_bytes())?;
        }
        #[cfg(feature = "parquet")]
        if let Some(parquet) = &mut parquet {
            parquet.add(&rows).map_err(|e| e.at(folder.path("catalogue.parquet")))?;
        }
        overview(&part.what["snapshot"], &rows, &mut overviews);
        snapshots.push(part.what["snapshot"].clone());
    }
    csv.finish()?;
    lines.map_or(Ok(()), Table::finish)?;
    #[cfg(feature = "parquet")]
    if let Some(parquet) = parquet {
        let out = parquet.finish().map_err(|e| e.at(folder.path("catalogue.parquet")))?;
        Table { out, path: folder.path("catalogue.parquet") }.finish()?;
    }
    let what = json!({
        "program": common["program"],
        "request": common["request"],
        "conventions": summary::conventions(),
        "snapshots": snapshots,
        "failed": failed,
    });
    folder.write("columns.json", pretty(&columns).as_bytes())?;
    folder.write("run.json", pretty(&what).as_bytes())?;
    Ok(overviews)
}

/// A table written row by row.
struct Table {
    out: BufWriter<File>,
    path: PathBuf,
}

impl Table {
    fn create(folder: &Folder, name: &str) -> Result<Table> {
        Ok(Table { out: BufWriter::new(folder.file(name)?), path: folder.path(name) })
    }

    fn add(&mut self, bytes: &[u8]) -> Result<()> {
        self.out.write_all(bytes).map_err(|e| self.failed(&e))
    }

    fn finish(mut self) -> Result<()> {
        self.out.flush().and_then(|()| self.out.get_ref().sync_all()).map_err(|e| self.failed(&e))
    }

    fn failed(&self, e: &std::io::Error) -> Error {
        Error::output("cannot write a table").at(&self.path).found(e.to_string())
    }
}
