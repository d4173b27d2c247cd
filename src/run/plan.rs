//! What a run would do, as data: snapshots, passes, bytes to read, memory, files to be written. Only headers are opened.

use std::fmt;
use std::path::PathBuf;

use crate::base::budget::size;
use crate::base::error::{Error, Kind, Result};
use crate::base::par::{self, Pool};
use crate::base::real::Real;
use crate::derive::Deriver;
use crate::model::request::{CutOuts, Extent, Family, Outputs, Request, Surfaces};
use crate::model::snapshot::SnapshotRef;
use crate::model::source::{AnySource, Fields, PlaneSource};
use crate::read::{self, Opened};
use crate::run::analysis::Execution;
use crate::run::catalogue::{RunConfig, check, none_usable, tell_apart};
use crate::run::cutouts::HELD_BYTES;
use crate::run::machine::{PROGRAM_BYTES, THREAD_BYTES};
use crate::run::memory::{Arrangement, arrange};
use crate::run::parts::{PARTS, Tables};
use crate::run::ready::derived;
use crate::run::run_rms;
use crate::space::grid::Grid;

/// Bytes that the patch and surface of an open object take a cell, roughly.
const OBJECT_BYTES: u64 = 200;

/// What a run would do.
#[derive(Debug, Clone, PartialEq)]
pub struct Plan {
    /// Usable snapshots in the order of the catalogue.
    pub snapshots: Vec<SnapshotPlan>,
    /// The others, with the reason.
    pub unusable: Vec<(SnapshotRef, Error)>,
    /// The run folder.
    pub folder: PathBuf,
    /// What stands there now.
    pub place: Place,
    /// Files to be written below it; `ID` stands for every object's.
    pub files: Vec<String>,
}

/// What stands where the run folder is to be.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Place {
    /// Nothing.
    Free,
    /// Something that will be replaced if it is an earlier run.
    Replaced,
    /// Something that is in the way.
    Taken,
}

/// What would be done with one snapshot.
#[derive(Debug, Clone, PartialEq)]
pub struct SnapshotPlan {
    /// Its name in the catalogue.
    pub name: String,
    /// Where it is.
    pub snapshot: SnapshotRef,
    /// Samples, spacing, origin, periodic axes.
    pub grid: Grid,
    /// `f32` or `f64`.
    pub precision: &'static str,
    /// Names of the components.
    pub components: Vec<&'static str>,
    /// Its time, where known.
    pub time: Option<f64>,
    /// The families.
    pub families: Vec<Family>,
    /// Passes in their order.
    pub passes: Vec<PassPlan>,
    /// What it is estimated to need.
    pub memory: Memory,
}

/// One pass over the planes.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct PassPlan {
    /// Its name, as in `timing.json`.
    pub name: &'static str,
    /// Bytes of values to read from files, uncompressed; 0 where planes are in memory.
    pub bytes: u64,
}

/// An estimate of the memory one snapshot takes, in bytes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Memory {
    /// Buffers of the threads.
    pub threads: u64,
    /// Blocks of planes that are read ahead, worked on, or kept as halo.
    pub blocks: u64,
    /// The whole snapshot, where it is read once and kept: costly ones always, others where reading them turns out to be slow.
    pub kept: u64,
    /// The families' indicators, where they are kept.
    pub indicators: u64,
    /// Filtered fields.
    pub filter: u64,
    /// Spectral derivatives along z.
    pub spectral: u64,
    /// Files for what does not fit; not part of the memory.
    pub disk: u64,
    /// Open objects and their surfaces, at most: one of the largest size that is measured, or the box.
    pub objects: u64,
    /// Planes of cut-outs that are held until they are written, at most.
    pub cut_outs: u64,
}

impl Memory {
    /// All of it, with what the program itself takes.
    pub fn total(&self) -> u64 {
        PROGRAM_BYTES
            + self.threads
            + self.blocks
            + self.kept
            + self.indicators
            + self.filter
            + self.spectral
            + self.objects
            + self.cut_outs
    }
}

impl SnapshotPlan {
    /// Bytes to read in all passes.
    pub fn bytes(&self) -> u64 {
        self.passes.iter().map(|p| p.bytes).sum()
    }
}

impl Plan {
    /// Bytes to read in all.
    pub fn bytes(&self) -> u64 {
        self.snapshots.iter().map(SnapshotPlan::bytes).sum()
    }

    /// Memory of the snapshot that takes most: they are worked on one after the other.
    pub fn memory(&self) -> u64 {
        self.snapshots.iter().map(|s| s.memory.total()).max().unwrap_or(0)
    }
}

/// Makes the plan of a run.
///
/// # Errors
/// Those that the run itself would meet before its first plane, but for a run folder that is in the way: that is part of the plan.
pub fn plan(config: &RunConfig) -> Result<Plan> {
    let mut unusable: Vec<(SnapshotRef, Error)> = Vec::new();
    let mut usable = Vec::new();
    let mut opened = Vec::new();
    let pool = Pool::new(config.threads)?;
    for snapshot in &config.snapshots {
        let one = read::open(snapshot, &config.input).and_then(|o| {
            pool.run(move || check(&o, &snapshot.path, config).and_then(|name| Ok((looked_at(&o, snapshot, config)?, name))))
        });
        match one {
            Ok((seen, name)) => {
                usable.push((snapshot.clone(), name));
                opened.push(seen);
            }
            Err(e) => unusable.push((snapshot.clone(), e)),
        }
    }
    if usable.is_empty() {
        if let [(_, e), ..] = unusable.as_slice()
            && unusable.iter().all(|(_, e)| e.kind() == Kind::Usage)
        {
            return Err(e.clone());
        }
        return Err(none_usable(unusable));
    }
    tell_apart(&mut usable)?;
    Tables::new(&config.outputs)?;
    for (seen, (_, name)) in opened.iter_mut().zip(usable) {
        seen.name = name;
    }
    let there = config.output.symlink_metadata().is_ok();
    let place = match (there, config.replace) {
        (false, _) => Place::Free,
        (true, true) => Place::Replaced,
        (true, false) => Place::Taken,
    };
    let files = files(&opened, &config.request, &config.outputs);
    Ok(Plan { snapshots: opened, unusable, folder: config.output.clone(), place, files })
}

/// The plan of one snapshot; its name follows.
fn looked_at(opened: &Opened, snapshot: &SnapshotRef, config: &RunConfig) -> Result<SnapshotPlan> {
    let (request, execution, outputs) = (&config.request, &config.planned(), &config.outputs);
    let grid = opened.source.grid().clone();
    let fields = opened.source.fields();
    let families = request.families_for(fields).map_err(|e| e.at(&snapshot.path))?;
    let Source { precision, width, halo, spectral, arrangement } = match &opened.source {
        AnySource::F32(s) => source(&**s, &opened.name, &families, request, execution),
        AnySource::F64(s) => source(&**s, &opened.name, &families, request, execution),
    }?;
    let plane = grid.plane_cells() as u64 * fields.components() as u64 * width as u64;
    let whole = plane * grid.n[2] as u64;
    let memory = Memory {
        threads: THREAD_BYTES * par::threads() as u64,
        blocks: arrangement.blocks,
        kept: if arrangement.keep_planes { whole } else { 0 },
        indicators: if arrangement.keep_indicators { arrangement.indicators } else { 0 },
        filter: arrangement.filtered,
        spectral: arrangement.lines,
        disk: arrangement.disk,
        objects: object_bytes(&grid, fields, request, &families, width),
        cut_outs: cut_out_bytes(&outputs.cut_outs, families.len(), &grid, (fields.components() + 1) * width),
    };
    // Planes beyond both periodic faces are read again.
    let costly = opened_costly(&opened.source);
    let halo = if costly { 0 } else { 2 * halo as u64 * plane };
    let Arrangement { keep_planes, keep_indicators, filtered, .. } = arrangement;
    let reading = Reading { whole, halo, keep_planes: keep_planes && costly, filtered: filtered > 0, keep_indicators, spectral };
    let passes = passes(&families, outputs, request, &reading);
    let components = fields.names();
    Ok(SnapshotPlan {
        name: opened.name.clone(),
        snapshot: snapshot.clone(),
        grid,
        precision,
        components,
        time: opened.time,
        families,
        passes,
        memory,
    })
}

/// Bytes of cut-outs held at a time: never more than whole boxes for all that are asked for, with the fields and the indicator.
fn cut_out_bytes(asked: &CutOuts, families: usize, grid: &Grid, bytes_a_cell: usize) -> u64 {
    let objects = match asked {
        CutOuts::None => 0,
        CutOuts::Largest(n) => *n,
        CutOuts::Named(list) => list.len(),
    };
    let whole = grid.cells().saturating_mul(bytes_a_cell as u64);
    whole.saturating_mul((objects * families) as u64).min(HELD_BYTES as u64)
}

/// What the plan needs to know of an opened source.
struct Source {
    precision: &'static str,
    /// Bytes a value.
    width: usize,
    /// Planes of halo on each side of a periodic z-axis.
    halo: usize,
    /// Whether derivatives along z are taken of whole lines.
    spectral: bool,
    arrangement: Arrangement,
}

fn source<T: Real>(
    source: &dyn PlaneSource<T>,
    name: &str,
    families: &[Family],
    request: &Request,
    execution: &Execution,
) -> Result<Source> {
    let plan = derived(families, request);
    let deriver = Deriver::<T>::new(source.grid(), source.fields(), plan.clone());
    Ok(Source {
        precision: T::NAME,
        width: size_of::<T>(),
        halo: deriver.halo(),
        spectral: deriver.wanted_z_lines().is_some(),
        arrangement: arrange(source, &plan, request, families, execution, name)?,
    })
}

/// Whether planes beyond a periodic face are kept rather than read again.
fn opened_costly(source: &AnySource) -> bool {
    match source {
        AnySource::F32(s) => s.is_costly(),
        AnySource::F64(s) => s.is_costly(),
    }
}

/// What a pass costs.
struct Reading {
    /// All planes.
    whole: u64,
    /// Planes read again beyond periodic faces.
    halo: u64,
    /// Whether the snapshot is read once and kept.
    keep_planes: bool,
    /// Whether filtered fields are in memory.
    filtered: bool,
    /// Whether the families' indicators are kept from the survey to the detection.
    keep_indicators: bool,
    /// Whether derivatives along z are taken of whole lines.
    spectral: bool,
}

/// The passes over one snapshot.
fn passes(families: &[Family], outputs: &Outputs, request: &Request, reading: &Reading) -> Vec<PassPlan> {
    let mut out: Vec<PassPlan> = Vec::new();
    let mut in_memory = false;
    let mut add = |name: &'static str, bytes: u64, in_memory: bool| {
        out.push(PassPlan { name, bytes: if in_memory { 0 } else { bytes } });
    };
    // Everything up to the survey is done once before, where the rms of the run is wanted.
    for _ in 0..1 + usize::from(run_rms::is_wanted(families)) {
        add("read", reading.whole, false);
        in_memory = reading.keep_planes;
        if request.filter.is_some() {
            add("filter", reading.whole, in_memory);
            in_memory = reading.filtered;
            add("read", reading.whole, in_memory);
        }
        if reading.spectral {
            add("lines", reading.whole, in_memory);
        }
        add("survey", reading.whole + reading.halo, in_memory);
    }
    let all = reading.whole + reading.halo;
    add("detection", all, in_memory || reading.keep_indicators);
    for _ in families.iter().filter(|f| matches!(f.extent(), Extent::FromPeaks { .. })) {
        add("peaks", all, in_memory);
        add("sums", all, in_memory);
    }
    if outputs.cut_outs != CutOuts::None {
        add("cut-outs", all, in_memory);
    }
    add("shapes", all, in_memory);
    out
}

/// Open objects at most: the box in one object of the largest size that is measured, its surface, and what its vertices carry; all
/// cells of the box where objects are grown from peaks, whose regions are split whatever their size.
fn object_bytes(grid: &Grid, fields: Fields, request: &Request, families: &[Family], value_bytes: usize) -> u64 {
    /// Bytes a cell to sort the cells of a region and tell its slopes apart.
    const PEAK_BYTES: u64 = 40;
    let meshes = request.surfaces != Surfaces::None;
    let vectors = 6 * (usize::from(fields.velocity) + usize::from(fields.magnetic));
    let carried = if meshes { vectors + request.mesh_values.len() } else { 0 };
    // A value of the patch, and the same interpolated to the vertices beside it.
    let cell = OBJECT_BYTES + (carried * (value_bytes + 12)) as u64;
    let shapes = cell * grid.cells().min(request.max_object_cells);
    let grown = families.iter().any(|f| matches!(f.extent(), Extent::FromPeaks { .. }));
    shapes.max(if grown { (PEAK_BYTES + value_bytes as u64) * grid.cells() } else { 0 })
}

fn files(snapshots: &[SnapshotPlan], request: &Request, outputs: &Outputs) -> Vec<String> {
    let mut out = vec!["catalogue.csv".to_string()];
    let mut add = |wanted: bool, name: String| out.extend(wanted.then_some(name));
    add(outputs.parquet, "catalogue.parquet".into());
    add(outputs.json_lines, "catalogue.jsonl".into());
    for name in ["columns.json", "run.json", "timing.json"] {
        add(true, name.into());
    }
    for s in snapshots {
        add(true, format!("{PARTS}/{}.json", s.name));
        add(true, format!("{PARTS}/{}.jsonl", s.name));
        for f in &s.families {
            match request.surfaces {
                Surfaces::None => {}
                Surfaces::Together => add(true, format!("surfaces/{}/{}.ply", s.name, f.name)),
                Surfaces::Each => add(true, format!("surfaces/{}/{}/ID.ply", s.name, f.name)),
            }
            add(outputs.labels, format!("labels/{}/{}.h5", s.name, f.name));
            add(outputs.cut_outs != CutOuts::None, format!("cutouts/{}/{}/ID.h5", s.name, f.name));
        }
    }
    out
}

impl fmt::Display for Plan {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let total = self.snapshots.len() + self.unusable.len();
        writeln!(f, "{} of {total} snapshots can be used; nothing was read but headers, nothing is written.\n", self.snapshots.len())?;
        writeln!(
            f,
            "{:<20} {:<18} {:<5} {:<24} {:>10} {:>10} {:>10}",
            "snapshot", "samples x y z", "type", "components", "time", "to read", "memory"
        )?;
        for s in &self.snapshots {
            let n = s.grid.n.map(|n| n.to_string()).join(" x ");
            let time = s.time.map_or_else(String::new, |t| t.to_string());
            let (read, memory) = (size(s.bytes()), size(s.memory.total()));
            let line =
                format!("{:<20} {n:<18} {:<5} {:<24} {time:>10} {read:>10} {memory:>10}", s.name, s.precision, s.components.join(","));
            writeln!(f, "{}", line.trim_end())?;
        }
        for (snapshot, e) in &self.unusable {
            writeln!(f, "{snapshot}: not usable: {e}")?;
        }
        for (title, text) in
            [("Box", boxes as fn(&SnapshotPlan) -> Vec<String>), ("Families", families), ("Passes", told), ("Memory", parts)]
        {
            writeln!(f, "\n{title}")?;
            let mut groups: Vec<(Vec<String>, usize)> = Vec::new();
            for lines in self.snapshots.iter().map(text) {
                match groups.iter_mut().find(|(g, _)| *g == lines) {
                    Some((_, n)) => *n += 1,
                    None => groups.push((lines, 1)),
                }
            }
            for (lines, n) in &groups {
                if groups.len() > 1 {
                    writeln!(f, "  of {n} {}", if *n == 1 { "snapshot" } else { "snapshots" })?;
                }
                lines.iter().try_for_each(|l| writeln!(f, "  {l}"))?;
            }
        }
        writeln!(f, "\nTo read in all: {} of uncompressed values", size(self.bytes()))?;
        writeln!(f, "Memory: about {}, of which objects take what they need; an estimate", size(self.memory()))?;
        let place = match self.place {
            Place::Free => "new",
            Place::Replaced => "takes the place of what is there, if that is a run folder",
            Place::Taken => "is there already, and not replaced without --replace",
        };
        writeln!(f, "\nRun folder {}: {place}", self.folder.display())?;
        self.files.iter().try_for_each(|name| writeln!(f, "  {name}"))
    }
}

fn boxes(s: &SnapshotPlan) -> Vec<String> {
    let three = |v: [f64; 3]| v.map(|v| v.to_string()).join(", ");
    let periodic: String = ["x", "y", "z"].iter().zip(s.grid.periodic).filter(|(_, p)| *p).map(|(a, _)| *a).collect();
    let mut out = vec![
        format!("lengths {}", three([0, 1, 2].map(|a| s.grid.length(a)))),
        format!("spacing {}", three(s.grid.spacing)),
        format!("first sample at {}", three(s.grid.origin)),
        format!("periodic axes: {}", if periodic.is_empty() { "none" } else { &periodic }),
    ];
    let stretched: String = ["x", "y", "z"].iter().zip(&s.grid.stretched).filter(|(_, c)| c.is_some()).map(|(a, _)| *a).collect();
    if !stretched.is_empty() {
        out.push(format!("unequal spacing, the mean is shown: {stretched}"));
    }
    out
}

fn families(s: &SnapshotPlan) -> Vec<String> {
    s.families.iter().map(ToString::to_string).collect()
}

fn told(s: &SnapshotPlan) -> Vec<String> {
    s.passes.iter().map(|p| format!("{:<10} {:>10}", p.name, if p.bytes == 0 { "in memory".to_string() } else { size(p.bytes) })).collect()
}

fn parts(s: &SnapshotPlan) -> Vec<String> {
    let m = &s.memory;
    [
        ("the program itself", PROGRAM_BYTES + m.threads),
        ("blocks of planes", m.blocks),
        ("the snapshot at most", m.kept),
        ("indicators, kept", m.indicators),
        ("filtered fields", m.filter),
        ("derivatives along z", m.spectral),
        ("objects, at most", m.objects),
        ("cut-outs, at most", m.cut_outs),
        ("on disk meanwhile", m.disk),
    ]
    .into_iter()
    .filter(|(_, n)| *n > 0)
    .map(|(name, n)| format!("{name:<20} {:>10}", size(n)))
    .collect()
}
