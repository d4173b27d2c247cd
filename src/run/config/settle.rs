//! From settings as found to a run: every value read, every fault told.

use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::model::indicator::{INDICATORS, Indicator};
use crate::model::request::{Connectivity, CutOuts, Family, Filter, Outputs, Request, Scheme, Surfaces};
use crate::read::series::{self, Series};
use crate::read::{InputSpec, RawLayout, Staggering, TimeSource};
use crate::run::analysis::Execution;
use crate::run::catalogue::RunConfig;
use crate::run::config::check;
use crate::run::config::given::{Given, Node};
use crate::run::config::nearest::nearest;
use crate::run::config::registry::Key;
use crate::run::config::values::Reader;
use crate::run::machine::Machine;

/// More than any machine has cores for.
const MOST_THREADS: u64 = 1024;
/// More cells of margin than any box has.
const MOST_MARGIN: u64 = 1 << 20;

/// Settings without a fault, before the snapshots have been looked for.
#[derive(Debug, Clone, PartialEq)]
pub struct Settled {
    /// Where the snapshots are named.
    pub series: Series,
    /// The run; its snapshots are still to come.
    pub config: RunConfig,
}

/// What checks need of a list: each value with its place.
pub(super) type Placed<T> = Vec<(T, Node)>;

/// Lists whose entries are checked one by one.
pub(super) struct Entries {
    pub families: Placed<Family>,
    /// All families as they are written, with those that cannot be read.
    pub family_texts: Placed<String>,
    pub companions: Placed<Indicator>,
    pub mesh_values: Placed<Indicator>,
    /// Families that cut-outs name.
    pub cut_out_families: Placed<String>,
    pub paths: Placed<String>,
    pub lists: Placed<PathBuf>,
}

/// Reads and checks all settings, without a look at any snapshot.
///
/// # Errors
/// `Usage` with every fault, those of the run file in the order of its lines.
pub fn check(given: &Given) -> Result<Settled> {
    let mut r = Reader::new(given);
    let (paths, lists) = sources(&mut r);
    let series = series(&mut r, &paths, &lists);
    let input = input(&mut r);
    let family_texts = r.texts(Key::Families).unwrap_or_default();
    let (cut_outs, cut_out_families) = cut_outs(&mut r);
    let entries = Entries {
        families: families(&mut r, &family_texts),
        family_texts,
        companions: indicators(&mut r, Key::Companions),
        mesh_values: indicators(&mut r, Key::MeshValues),
        cut_out_families,
        paths,
        lists,
    };
    let plane = is_plane(&r, &input.order);
    let request = request(&mut r, &entries, plane);
    let outputs = outputs(&mut r, cut_outs);
    let config = RunConfig {
        snapshots: Vec::new(),
        input,
        request,
        outputs,
        execution: Execution {
            block_planes: r.whole(Key::BlockPlanes, 1, u64::MAX).map(|n| usize::try_from(n).unwrap_or(usize::MAX)),
            memory: r.size(Key::Memory).unwrap_or(Execution::default().memory),
            scratch: r.text(Key::Scratch).map(|t| path(&r, Key::Scratch, &t)),
        },
        memory_from: String::new(),
        threads: r.whole(Key::Threads, 0, MOST_THREADS).unwrap_or(0) as usize,
        output: r.text(Key::Folder).map_or_else(|| PathBuf::from("ropewalk-run"), |t| path(&r, Key::Folder, &t)),
        replace: r.switch(Key::Replace).unwrap_or(false),
    };
    let settled = Settled { series, config };
    check::contradictions(&mut r, &settled, &entries);
    let mut faults = r.faults;
    // Stable: faults without a line follow those with one, in the order found.
    faults.sort_by_key(|e| e.at_line().unwrap_or(usize::MAX));
    Error::usage_all(faults)?;
    Ok(settled)
}

/// Reads and checks all settings, settles the memory budget, and finds the snapshots.
///
/// # Errors
/// `Usage` with every fault; `Limit` where there is no memory to run in; those of [`series::expand`].
pub fn settle(given: &Given) -> Result<RunConfig> {
    let Settled { series, mut config } = check(given)?;
    let asked = given.has(Key::Memory).then_some(config.execution.memory);
    let share = Machine::here().share(asked, config.threads)?;
    (config.execution.memory, config.memory_from) = (share.bytes, share.from);
    let snapshots = series::expand(&series, &config.input)?;
    Ok(RunConfig { snapshots, ..config })
}

/// A path as it is to be opened: in a run file it starts from the folder of that file.
fn path(r: &Reader<'_>, key: Key, text: &str) -> PathBuf {
    match r.given.node(key).and_then(|n| n.line) {
        Some(_) => r.given.folder().join(text),
        None => PathBuf::from(text),
    }
}

/// Whether a path is a pattern.
pub(super) fn is_pattern(text: &str) -> bool {
    text.contains(['*', '?', '['])
}

/// A path or pattern as it is to be looked for. The folder of the run file stands for itself, whatever characters it has.
fn pattern(r: &Reader<'_>, text: &str) -> String {
    let plain = path(r, Key::Paths, text);
    if !is_pattern(text) || plain.exists() || plain.as_os_str() == text || PathBuf::from(text).is_absolute() {
        return plain.to_string_lossy().into_owned();
    }
    let folder = series::literal(&r.given.folder().to_string_lossy());
    Path::new(&folder).join(text).to_string_lossy().into_owned()
}

/// Paths and lists as they are to be looked for.
fn sources(r: &mut Reader<'_>) -> (Placed<String>, Placed<PathBuf>) {
    let paths = r.texts(Key::Paths).unwrap_or_default();
    let lists = r.texts(Key::Lists).unwrap_or_default();
    let paths = paths.into_iter().map(|(t, n)| (pattern(r, &t), n)).collect();
    (paths, lists.into_iter().map(|(t, n)| (path(r, Key::Lists, &t), n)).collect())
}

fn series(r: &mut Reader<'_>, paths: &Placed<String>, lists: &Placed<PathBuf>) -> Series {
    Series {
        paths: paths.iter().map(|(p, _)| p.clone()).collect(),
        lists: lists.iter().map(|(p, _)| p.clone()).collect(),
        steps: r.text(Key::Steps),
        times: r.numbers(Key::Times).unwrap_or_default(),
    }
}

fn input(r: &mut Reader<'_>) -> InputSpec {
    let (positions, cells) = (r.stretches(Key::Region), r.stretches(Key::RegionCells));
    let order = order(r).unwrap_or_else(|| "zyx".to_string());
    let plane = is_plane(r, &order);
    let coordinates = r.coordinates();
    // The positions of an axis with coordinates follow from them; a plane has no size along z.
    let known = |a: usize| coordinates[a].is_some() || r.is_broken(Key::Coordinates) || (a == 2 && plane);
    let free = [0, 1, 2].map(known);
    InputSpec {
        velocity: vector(r, Key::Velocity),
        magnetic: vector(r, Key::Magnetic),
        buoyancy: r.text(Key::Buoyancy),
        density: r.text(Key::Density),
        order,
        lengths: r.sizes(Key::Lengths, free, plane),
        spacing: r.sizes(Key::Spacing, free, plane),
        origin: r.position(Key::Origin, plane).unwrap_or([0.0; 3]),
        periodic: r.axes(Key::Periodic).unwrap_or([true; 3]),
        coordinates,
        staggering: match r.choice(Key::Staggering) {
            Some("lower") => Staggering::LowerFaces,
            Some("upper") => Staggering::UpperFaces,
            _ => Staggering::Centres,
        },
        region: std::array::from_fn(|a| positions[a].or(cells[a])),
        raw: raw(r),
        time: TimeSource { attribute: r.text(Key::TimeAttribute), dataset: r.text(Key::TimeDataset), name: time_name(r) },
    }
}

/// Whether two numbers stand for a place or size: on what is said to be a plane, or what may be one as its order cannot be read.
fn is_plane(r: &Reader<'_>, order: &str) -> bool {
    r.is_broken(Key::Order) || order.chars().filter(|c| *c != 'c').count() == 2
}

/// Datasets of a vector field: three, two on a plane, or one with a component axis.
fn vector(r: &mut Reader<'_>, key: Key) -> Option<Vec<String>> {
    let names: Vec<String> = r.list(key)?.into_iter().map(|(t, _)| t).collect();
    let node = r.given.node(key)?;
    if !(1..=3).contains(&names.len()) {
        r.unlike(key, node, "three names (one dataset a component; two on a plane), or one (a component axis)");
    }
    if (1..names.len()).any(|i| names[..i].contains(&names[i])) {
        r.unlike(key, node, "different datasets for the components");
    }
    (!r.is_broken(key)).then_some(names)
}

/// Axis letters: x, y and mostly z in some order, with a c at one end where there is a component axis.
fn order(r: &mut Reader<'_>) -> Option<String> {
    let text = r.text(Key::Order)?;
    let inner = text.strip_prefix('c').or_else(|| text.strip_suffix('c')).unwrap_or(&text);
    let mut letters: Vec<char> = inner.chars().collect();
    letters.sort_unstable();
    if letters == ['x', 'y', 'z'] || letters == ['x', 'y'] {
        return Some(text);
    }
    if let Some(node) = r.given.node(Key::Order) {
        r.unlike(Key::Order, node, "a permutation of xyz (of xy for planes) with an optional c first or last");
    }
    None
}

fn raw(r: &mut Reader<'_>) -> Option<RawLayout> {
    let values = r.choice(Key::RawValues);
    let endian = r.choice(Key::RawEndian);
    let offset = r.whole(Key::RawOffset, 0, u64::MAX);
    let records = r.choice(Key::RawRecords);
    let shape = r.numbers(Key::RawShape).and_then(|sizes| {
        let whole = |v: &f64| (v.fract() == 0.0 && (1.0..=1e9).contains(v)).then_some(*v as usize);
        let shape: Option<Vec<usize>> = sizes.iter().map(whole).collect();
        if shape.is_none()
            && let Some(node) = r.given.node(Key::RawShape)
        {
            r.unlike(Key::RawShape, node, "whole numbers of at least 1");
        }
        shape
    });
    Some(RawLayout {
        double: values? == "f64",
        big_endian: endian == Some("big"),
        shape: shape?,
        offset: offset.unwrap_or(0),
        record_markers: match records {
            Some("4") => Some(4),
            Some("8") => Some(8),
            _ => None,
        },
    })
}

fn time_name(r: &mut Reader<'_>) -> Option<String> {
    let text = r.text(Key::TimeName)?;
    if text.matches("{time}").count() == 1 {
        return Some(text);
    }
    if let Some(node) = r.given.node(Key::TimeName) {
        r.unlike(Key::TimeName, node, "a file name with {time} once in it");
    }
    None
}

fn families(r: &mut Reader<'_>, texts: &Placed<String>) -> Placed<Family> {
    let mut out = Vec::new();
    for (text, node) in texts {
        match Family::parse(text) {
            Ok(family) => out.push((family, node.clone())),
            Err(e) => r.push(Key::Families, node.line, e),
        }
    }
    out
}

fn indicators(r: &mut Reader<'_>, key: Key) -> Placed<Indicator> {
    let mut out: Placed<Indicator> = Vec::new();
    for (name, node) in r.list(key).unwrap_or_default() {
        match Indicator::named(&name) {
            Some(i) if out.iter().any(|(o, _)| *o == i) => {
                r.fault(key, &node, "every indicator once", format!("\"{name}\" twice"), "drop one".to_string());
            }
            Some(i) => out.push((i, node)),
            None => {
                let names = INDICATORS.iter().map(|i| i.name);
                let hint = nearest(&name, names.clone())
                    .map_or_else(|| format!("one of {}", names.collect::<Vec<_>>().join(", ")), |n| format!("did you mean {n}?"));
                r.fault(key, &node, "names of indicators", format!("\"{name}\""), hint);
            }
        }
    }
    out
}

fn request(r: &mut Reader<'_>, entries: &Entries, plane: bool) -> Request {
    let default = Request::default();
    let plain = |list: &Placed<Indicator>| list.iter().map(|(i, _)| *i).collect();
    Request {
        families: entries.families.iter().map(|(f, _)| f.clone()).collect(),
        connectivity: match r.choice(Key::Connectivity) {
            Some("6") => Connectivity::Six,
            Some("18") => Connectivity::Eighteen,
            _ => Connectivity::TwentySix,
        },
        min_cells: r.whole(Key::MinCells, 1, u64::MAX).unwrap_or(default.min_cells),
        max_object_cells: r.whole(Key::MaxObjectCells, 1, u64::MAX).unwrap_or(default.max_object_cells),
        viscosity: r.positive(Key::Viscosity),
        resistivity: r.positive(Key::Resistivity),
        dissipation: r.positive(Key::Dissipation),
        kolmogorov_length: r.positive(Key::KolmogorovLength),
        frame: r.frame(plane).unwrap_or(default.frame),
        scheme: r.choice(Key::Derivative).and_then(Scheme::named).unwrap_or(default.scheme),
        filter: filter(r),
        portable: r.switch(Key::Portable).unwrap_or(default.portable),
        companions: plain(&entries.companions),
        mesh_values: plain(&entries.mesh_values),
        surfaces: match r.choice(Key::Surfaces) {
            Some("each") => Surfaces::Each,
            Some("none") => Surfaces::None,
            _ => Surfaces::Together,
        },
        surface_min_cells: r.whole(Key::SurfaceMinCells, 0, u64::MAX).unwrap_or(default.surface_min_cells),
        ..default
    }
}

fn filter(r: &mut Reader<'_>) -> Option<Filter> {
    let text = r.text(Key::Filter)?;
    match Filter::parse(&text) {
        Ok(filter) => Some(filter),
        Err(e) => {
            let line = r.given.node(Key::Filter).and_then(|n| n.line);
            r.push(Key::Filter, line, e);
            None
        }
    }
}

fn outputs(r: &mut Reader<'_>, cut_outs: Option<CutOuts>) -> Outputs {
    let default = Outputs::default();
    let tables = tables(r);
    Outputs {
        parquet: tables.as_ref().map_or(default.parquet, |t| t.iter().any(|t| t == "parquet")),
        json_lines: tables.as_ref().map_or(default.json_lines, |t| t.iter().any(|t| t == "jsonl")),
        labels: r.switch(Key::Labels).unwrap_or(default.labels),
        cut_outs: cut_outs.unwrap_or(default.cut_outs),
        cut_out_margin: r.whole(Key::CutOutMargin, 0, MOST_MARGIN).map_or(default.cut_out_margin, |n| n as usize),
    }
}

fn tables(r: &mut Reader<'_>) -> Option<Vec<String>> {
    const KINDS: [&str; 3] = ["csv", "parquet", "jsonl"];
    let mut out = Vec::new();
    for (kind, node) in r.list(Key::Tables)? {
        if KINDS.contains(&kind.as_str()) {
            out.push(kind);
        } else {
            let hint = nearest(&kind, KINDS).map_or_else(|| "csv is always written".to_string(), |k| format!("did you mean {k}?"));
            r.fault(Key::Tables, &node, "some of csv, parquet, jsonl", format!("\"{kind}\""), hint);
        }
    }
    Some(out)
}

/// What is asked for, none where some of it cannot be read, and the families that are named.
fn cut_outs(r: &mut Reader<'_>) -> (Option<CutOuts>, Placed<String>) {
    let mut families = Vec::new();
    let Some(items) = r.list(Key::CutOuts) else { return (None, families) };
    let alone = items.len() == 1;
    let mut named = Vec::new();
    for (text, node) in &items {
        let (family, number) = match text.rsplit_once(':') {
            Some((f, n)) => (Some(f.trim().to_string()), n.trim()),
            None => (None, text.as_str()),
        };
        match (family.as_deref(), number.parse::<u64>()) {
            (None, _) if text == "none" && alone => return (Some(CutOuts::None), families),
            (Some("largest"), Ok(n)) if n > 0 && alone => return (Some(CutOuts::Largest(n as usize)), families),
            (Some("largest"), _) | (_, Err(_)) => r.unlike(Key::CutOuts, node, "largest:N, or ids like 12 or FAMILY:12, or none"),
            (_, Ok(id)) => {
                families.extend(family.clone().map(|f| (f, node.clone())));
                named.push((family, id));
            }
        }
    }
    ((!r.is_broken(Key::CutOuts)).then_some(CutOuts::Named(named)), families)
}
