//! The parts of a run: what one snapshot contributes, complete or absent, and the tables that are joined from them.

use std::fs::{self, File};
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use serde_json::{Value, json};

use crate::base::error::{Error, Result};
use crate::base::par::{self, Pool};
use crate::export::atomic::Folder;
use crate::export::json::pretty;
use crate::export::jsonl::Lines;
#[cfg(feature = "parquet")]
use crate::export::parquet::ParquetWriter;
use crate::export::{csv, json as dictionary};
use crate::model::columns::{Cell, Col, Row};
use crate::model::indicator::Indicator;
use crate::model::request::Outputs;
use crate::model::schema::Schema;
use crate::run::lines::{Chunk, Chunks};
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

/// Rows that a work item writes as lines.
const ROWS: usize = 256;

/// Work items whose lines are held until they are written.
const AT_ONCE: usize = 16;

/// Behind the name of a file of which only a part may be there.
const WRITING: &str = ".writing";

/// Writes the part of a snapshot; it counts once its `.json` is there.
///
/// # Errors
/// `Output`.
pub fn write(folder: &Folder, name: &str, schema: &Schema, common: &Value, tables: Tables, snapshot: Value, rows: &[&[Row]]) -> Result<()> {
    let lines = Lines::new(schema);
    let names = ["jsonl", "json"].map(|end| format!("{PARTS}/{name}.{end}"));
    let [mut out, mut about] =
        [Table::create(folder, &format!("{}{WRITING}", names[0]))?, Table::create(folder, &format!("{}{WRITING}", names[1]))?];
    let items: Vec<&[Row]> = rows.iter().flat_map(|family| family.chunks(ROWS)).collect();
    for some in items.chunks(AT_ONCE) {
        for text in par::map(some, |_, rows| lines.text(rows)) {
            out.add(text.as_bytes())?;
        }
    }
    let count: usize = rows.iter().map(|family| family.len()).sum();
    let what = json!({
        "program": common["program"],
        "request": common["request"],
        "tables": tables.names(),
        "rows": count,
        "snapshot": snapshot,
    });
    about.add(pretty(&what).as_bytes())?;
    // Both are on the disk before one has its name, the one that counts last.
    complete(vec![out, about])?;
    for name in names {
        let path = folder.path(&name);
        fs::rename(folder.path(&format!("{name}{WRITING}")), &path)
            .map_err(|e| Error::output("cannot name a file").at(&path).found(e.to_string()))?;
    }
    Ok(())
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

    /// Goes through its rows: `work` makes something of the rows of each chunk of lines, in parallel, which `take` is given in
    /// order with the lines themselves. `at_once` chunks are held at a time.
    ///
    /// # Errors
    /// `Input` when they cannot be read or are not as many as there should be, and those of `take`.
    fn rows<R: Send>(
        &self,
        lines: &Lines,
        at_once: usize,
        work: impl Fn(Vec<Row>) -> R + Sync + Send,
        mut take: impl FnMut(Chunk, R) -> Result<()>,
    ) -> Result<()> {
        let path = self.run.join(PARTS).join(format!("{}.jsonl", self.name));
        let mut chunks = Chunks::open(&path).map_err(|e| unreadable(&path, &e.to_string()))?;
        loop {
            let some = chunks.some(at_once).map_err(|e| unreadable(&path, &e.to_string()))?;
            if some.is_empty() {
                break;
            }
            let made = par::map(&some, |_, chunk| lines.parse(&chunk.text, chunk.first).map(&work));
            for (chunk, made) in some.into_iter().zip(made) {
                take(chunk, made.map_err(|e| e.at(&path))?)?;
            }
        }
        if self.what["rows"] != chunks.lines() {
            return Err(Error::input("cannot read the rows of a snapshot")
                .at(path)
                .expected(format!("{} rows", self.what["rows"]))
                .found(chunks.lines().to_string())
                .hint("the file was changed or cut: run that snapshot again"));
        }
        Ok(())
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

/// Objects of a snapshot by family and class.
#[derive(Default)]
struct Classes(Vec<(String, [u64; CLASSES.len()])>);

impl Classes {
    fn add(&mut self, rows: &[Row]) {
        for row in rows {
            let (Cell::Text(family), Cell::Text(class)) = (row.get(Col::Family), row.get(Col::Class)) else { continue };
            let at = self.0.iter().position(|(name, _)| name == family).unwrap_or_else(|| {
                self.0.push((family.to_string(), [0; CLASSES.len()]));
                self.0.len() - 1
            });
            if let Some(k) = CLASSES.iter().position(|c| *c == class) {
                self.0[at].1[k] += 1;
            }
        }
    }

    fn of(&self, family: &str) -> [u64; CLASSES.len()] {
        self.0.iter().find(|(name, _)| name == family).map_or([0; CLASSES.len()], |(_, counts)| *counts)
    }
}

fn overview(snapshot: &Value, classes: &Classes, out: &mut Vec<FamilyOverview>) {
    let text = |v: &Value| v.as_str().unwrap_or_default().to_string();
    for f in snapshot["families"].as_array().into_iter().flatten() {
        let family = text(&f["family"]);
        let magnetic = f["indicator"].as_str().and_then(Indicator::named).is_some_and(|i| i.needs().magnetic);
        let shares = &f["shares"]["objects"];
        out.push(FamilyOverview {
            snapshot: text(&snapshot["snapshot"]),
            level: f["level"].as_f64().unwrap_or(f64::NAN),
            objects: f["objects"].as_u64().unwrap_or(0),
            volume: shares["volume"].as_f64(),
            dissipation: shares[if magnetic { "ohmic" } else { "viscous" }].as_f64(),
            classes: classes.of(&family),
            family,
        });
    }
}

/// Joins parts, in their order, into the tables and `run.json` of a run. Some chunks of rows are held at a time, and those of one
/// row group of a Parquet file.
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
    let lines = Lines::new(schema);
    let mut csv = Table::create(folder, "catalogue.csv")?;
    csv.add(csv::header(schema).as_bytes())?;
    let mut json_lines = if tables.json_lines { Some(Table::create(folder, "catalogue.jsonl")?) } else { None };
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
        let mut classes = Classes::default();
        let text = |rows: Vec<Row>| {
            let mut out = String::new();
            rows.iter().for_each(|row| csv::push_row(&mut out, row));
            (out, rows)
        };
        let take = |chunk: Chunk, (text, rows): (String, Vec<Row>)| {
            csv.add(text.as_bytes())?;
            if let Some(table) = &mut json_lines {
                table.add(chunk.text.as_bytes())?;
            }
            classes.add(&rows);
            #[cfg(feature = "parquet")]
            if let Some(parquet) = &mut parquet {
                parquet.add(rows).map_err(|e| e.at(folder.path("catalogue.parquet")))?;
            }
            Ok(())
        };
        pool.run(|| part.rows(&lines, 2 * pool.threads(), text, take))?;
        overview(&part.what["snapshot"], &classes, &mut overviews);
        snapshots.push(part.what["snapshot"].clone());
    }
    let mut written = vec![csv];
    written.extend(json_lines);
    #[cfg(feature = "parquet")]
    if let Some(parquet) = parquet {
        let out = pool.run(|| parquet.finish()).map_err(|e| e.at(folder.path("catalogue.parquet")))?;
        written.push(Table { out, path: folder.path("catalogue.parquet") });
    }
    let what = json!({
        "program": common["program"],
        "request": common["request"],
        "conventions": summary::conventions(),
        "snapshots": snapshots,
        "failed": failed,
    });
    for (name, value) in [("columns.json", &columns), ("run.json", &what)] {
        let mut file = Table::create(folder, name)?;
        file.add(pretty(value).as_bytes())?;
        written.push(file);
    }
    pool.run(|| complete(written))?;
    Ok(overviews)
}

/// A file written piece by piece.
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

    fn failed(&self, e: &std::io::Error) -> Error {
        Error::output("cannot write a table").at(&self.path).found(e.to_string())
    }
}

/// Brings files to the disk, at the same time: each waits for the device, not for a core.
fn complete(files: Vec<Table>) -> Result<()> {
    let done = par::map_owned(files, |_, mut file| {
        let written = file.out.flush().and_then(|()| file.out.get_ref().sync_all());
        written.map_err(|e| file.failed(&e))
    });
    done.into_iter().collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::columns::Value as Of;

    const FAMILIES: [&str; 2] = ["vorticity", "q"];

    /// Rows whose values differ in length, more than are held at a time.
    fn rows() -> Vec<Vec<Row>> {
        let row = |family: usize, i: i64| {
            let mut row = Row::default();
            row.set(Col::Snapshot, Of::Text("s, \"é\"".into()));
            row.set(Col::Family, Of::Text(FAMILIES[family].into()));
            row.set(Col::Class, Of::Text(CLASSES[i as usize % 4].into()));
            row.set(Col::Id, Of::Integer(i + 1));
            row.set(Col::Cells, Of::Integer(i * i));
            row.number(Col::Peak, Some((i as f64 + 0.5).sqrt() * 10f64.powi((i % 40) as i32 - 20)));
            row.number(Col::Level, (i % 3 > 0).then_some(f64::from(i as f32 / 7.0)));
            row.set(Col::HistogramUVorticity, Of::Counts((0..20).map(|k| (i * k) as u64).collect()));
            row
        };
        [3000, 1500].into_iter().enumerate().map(|(f, n)| (0..n).map(|i| row(f, i)).collect()).collect()
    }

    /// What a run folder holds after a snapshot was written and joined, file by file.
    fn joined(rows: &[Vec<Row>], threads: usize, failed: Vec<Value>) -> (Vec<(String, Vec<u8>)>, Vec<FamilyOverview>) {
        let place = tempfile::tempdir().unwrap();
        let folder = Folder::create(&place.path().join("run"), false).unwrap();
        folder.subfolder(PARTS).unwrap();
        let pool = Pool::new(threads).unwrap();
        let schema = Schema::default();
        let tables = Tables { parquet: cfg!(feature = "parquet"), json_lines: true };
        let families: Vec<Value> = FAMILIES.iter().map(|f| json!({ "family": f, "indicator": f, "level": 1.0, "objects": 5 })).collect();
        let snapshot = json!({ "snapshot": "s", "families": families });
        let slices: Vec<&[Row]> = rows.iter().map(Vec::as_slice).collect();
        pool.run(|| write(&folder, "s", &schema, &common(&json!({})), tables, snapshot, &slices)).unwrap();
        let part = Part::read(&folder.path(""), "s").unwrap();
        assert_eq!(part.tables(), tables);
        let overview = join(&folder, &[part], &schema, tables, failed, &pool).unwrap();
        let run = folder.finish().unwrap();
        let names = ["catalogue.csv", "catalogue.jsonl", "catalogue.parquet", "run.json", "columns.json", "parts/s.jsonl", "parts/s.json"];
        let there = names.iter().filter(|n| run.join(n).is_file());
        assert_eq!(fs::read_dir(run.join(PARTS)).unwrap().count(), 2, "nothing half written is left");
        (there.map(|n| (n.to_string(), fs::read(run.join(n)).unwrap())).collect(), overview)
    }

    /// Reading parts back in chunks gives what the rows themselves would give, whatever the number of threads.
    #[test]
    fn tables_are_those_of_the_rows_in_memory() {
        let rows = rows();
        let (files, overview) = joined(&rows, 1, Vec::new());
        for threads in [2, 3] {
            assert!(joined(&rows, threads, Vec::new()).0 == files, "{threads} threads");
        }
        let of = |name: &str| &files.iter().find(|(n, _)| n == name).unwrap().1;
        let mut text = csv::header(&Schema::default());
        rows.iter().flatten().for_each(|row| csv::push_row(&mut text, row));
        assert!(*of("catalogue.csv") == text.into_bytes());
        let lines = Lines::new(&Schema::default());
        let text: String = rows.iter().map(|family| lines.text(family)).collect();
        assert!(text.len() > 4 << 20, "several chunks: {}", text.len());
        assert!(*of("catalogue.jsonl") == text.into_bytes());
        assert!(of("catalogue.jsonl") == of("parts/s.jsonl"));
        #[cfg(feature = "parquet")]
        {
            let columns = dictionary::dictionary(&Schema::default())["columns"].to_string();
            let run = json!({ "program": provenance::program(false), "request": {} }).to_string();
            let metadata = vec![("ropewalk:columns", columns), ("ropewalk:run", run)];
            let mut direct = ParquetWriter::new(Vec::new(), &Schema::default(), metadata).unwrap();
            rows.into_iter().for_each(|family| direct.add(family).unwrap());
            assert!(*of("catalogue.parquet") == direct.finish().unwrap());
        }
        let classes: Vec<[u64; 4]> = overview.iter().map(|o| o.classes).collect();
        assert_eq!(classes, [[750; 4], [375; 4]]);
    }

    #[test]
    fn a_part_that_was_cut_or_changed_is_refused() {
        let place = tempfile::tempdir().unwrap();
        let (files, _) = joined(&rows(), 2, Vec::new());
        fs::create_dir(place.path().join(PARTS)).unwrap();
        let lines = &files.iter().find(|(n, _)| n == "parts/s.jsonl").unwrap().1;
        let about = &files.iter().find(|(n, _)| n == "parts/s.json").unwrap().1;
        fs::write(place.path().join("parts/s.json"), about).unwrap();
        let refused = |bytes: &[u8]| {
            fs::write(place.path().join("parts/s.jsonl"), bytes).unwrap();
            let folder = Folder::create(&place.path().join("run"), false).unwrap();
            let part = Part::read(place.path(), "s").unwrap();
            join(&folder, &[part], &Schema::default(), Tables::default(), Vec::new(), &Pool::new(2).unwrap()).err().map(|e| e.to_string())
        };
        assert_eq!(refused(lines), None);
        let last = lines[..lines.len() - 1].iter().rposition(|&b| b == b'\n').unwrap() + 1;
        let told = refused(&lines[..last]).unwrap();
        assert!(told.contains("expected 4500 rows") && told.contains("found 4499"), "{told}");
        let told = refused(&lines[..last + 100]).unwrap();
        assert!(told.contains("line 4500"), "{told}");
    }
}
