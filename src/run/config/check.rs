//! Settings against each other: what contradicts, what is missing. Nothing is opened.

use std::path::{Component, Path, PathBuf};

use crate::base::error::Error;
use crate::model::request::{Family, Indicator, Request};
use crate::model::source::Fields;
use crate::run::config::given::Node;
use crate::run::config::registry::Key;
use crate::run::config::settle::{Entries, Settled, is_pattern};
use crate::run::config::values::Reader;

const AXES: [&str; 3] = ["x", "y", "z"];
/// Part by which the Kolmogorov length may differ from the one of viscosity and dissipation: figures are rounded.
const KOLMOGOROV_TOLERANCE: f64 = 0.01;

/// Adds every contradiction and everything missing to the faults.
pub(super) fn contradictions(r: &mut Reader<'_>, settled: &Settled, entries: &Entries) {
    snapshots(r, settled);
    named_twice(r, entries);
    extent_of_box(r, settled);
    faces(r, settled);
    datasets(r, settled);
    raw(r, settled);
    kolmogorov(r, settled);
    fields(r, entries);
    family_names(r, entries);
    cut_outs(r, entries);
    folder(r, settled);
}

/// Notes a contradiction between settings, unless one of them has a fault already.
fn against(r: &mut Reader<'_>, what: &str, keys: &[Key], finish: impl FnOnce(Error) -> Error) {
    if keys.iter().any(|k| r.is_broken(*k)) {
        return;
    }
    let e = finish(r.given.about(what, keys));
    r.faults.push(e);
}

/// The form of a setting that one may write where it is missing.
fn write(r: &Reader<'_>, key: Key, value: (&str, &str)) -> String {
    let label = r.given.label(key);
    if label.starts_with("--") { format!("{label} {}", value.1) } else { format!("{} = {}", key.setting().name, value.0) }
}

fn snapshots(r: &mut Reader<'_>, s: &Settled) {
    let keys = [Key::Paths, Key::Lists];
    if s.series.paths.is_empty() && s.series.lists.is_empty() && !r.given.torn {
        let hint = if r.given.file.is_some() { "paths = [\"run/*.h5\"]" } else { "name one or more files, or quote a pattern" };
        against(r, "cannot tell which snapshots", &keys, |e| e.expected("at least one path").found("none").hint(hint));
    }
    let times = s.series.times.len();
    let plain = s.series.lists.is_empty() && s.series.steps.is_none() && !s.series.paths.iter().any(|p| is_pattern(p));
    let paths = s.series.paths.len();
    if times > 0 && plain && paths > 0 && times != paths {
        against(r, "cannot give the snapshots their times", &[Key::Times], |e| {
            e.expected(format!("{paths}, one a snapshot")).found(times.to_string()).hint("without it, the times in the files are taken")
        });
    }
}

/// A snapshot is one row set of the catalogue: named twice, it would stand there twice.
fn named_twice(r: &mut Reader<'_>, entries: &Entries) {
    let paths: Vec<(PathBuf, &str, &Node)> = entries.paths.iter().map(|(p, n)| (tidy(Path::new(p)), p.as_str(), n)).collect();
    let lists: Vec<(PathBuf, &str, &Node)> = entries.lists.iter().map(|(p, n)| (tidy(p), p.to_str().unwrap_or("a list"), n)).collect();
    for (key, all) in [(Key::Paths, paths), (Key::Lists, lists)] {
        for (i, (full, said, node)) in all.iter().enumerate() {
            if all[..i].iter().filter(|(other, _, _)| other == full).count() == 1 {
                let e = Error::usage("cannot take snapshots twice").item(r.given.label(key)).expected("every path once");
                r.push(key, node.line, e.found(format!("{said} again")).hint("drop one of them"));
            }
        }
    }
}

fn extent_of_box(r: &mut Reader<'_>, s: &Settled) {
    let what = "cannot settle the size of the box";
    let keys = [Key::Lengths, Key::Spacing];
    match (r.given.has(Key::Lengths), r.given.has(Key::Spacing)) {
        (true, true) => against(r, what, &keys, |e| e.expected("one of them").found("both").hint("drop one of them")),
        (false, false) if !r.given.torn && !r.is_broken(Key::Coordinates) => {
            let has = |a: usize| s.config.input.coordinates[a].is_some();
            // Coordinates of x and y can be enough: a plane has no size along z, and only its file tells that it is one.
            let without: Vec<&str> = if has(0) && has(1) { Vec::new() } else { (0..3).filter(|a| !has(*a)).map(|a| AXES[a]).collect() };
            if !without.is_empty() {
                let hint = write(r, Key::Lengths, ("\"2pi\"", "2pi")) + " is a cube of that side";
                let axes = if without.len() == 3 { String::new() } else { format!(" for {}", without.join(", ")) };
                against(r, what, &keys, |e| e.expected(format!("one of them{axes}")).found("neither").hint(hint));
            }
        }
        _ => {}
    }
    let both: Vec<&str> = {
        let named = |key| r.given.node(key).map(|_| Reader::new(r.given).stretches(key)).unwrap_or([None; 3]);
        let (positions, cells) = (named(Key::Region), named(Key::RegionCells));
        (0..3).filter(|a| positions[*a].is_some() && cells[*a].is_some()).map(|a| AXES[a]).collect()
    };
    if !both.is_empty() {
        against(r, "cannot cut a part out of the box", &[Key::Region, Key::RegionCells], |e| {
            e.expected("one of them for each axis").found(format!("both for {}", both.join(", "))).hint("positions or indices, not both")
        });
    }
}

fn faces(r: &mut Reader<'_>, s: &Settled) {
    // A plane is open along z, and only its file tells that it is one.
    let open: Vec<&str> = (0..2).filter(|a| !s.config.input.periodic[*a]).map(|a| AXES[a]).collect();
    if s.config.request.filter.is_some() && !open.is_empty() {
        against(r, "cannot filter", &[Key::Filter, Key::Periodic], |e| {
            let e = e.expected("a box periodic along every axis").found(format!("{} open", open.join(", ")));
            e.hint("leave the filter out, or filter the fields before they are stored")
        });
    }
}

fn datasets(r: &mut Reader<'_>, s: &Settled) {
    let input = &s.config.input;
    let one = |name: &Option<String>| name.iter().cloned().collect::<Vec<_>>();
    let named = [
        (Key::Velocity, input.velocity.clone().unwrap_or_default()),
        (Key::Magnetic, input.magnetic.clone().unwrap_or_default()),
        (Key::Buoyancy, one(&input.buoyancy)),
        (Key::Density, one(&input.density)),
    ];
    for (i, (second, names)) in named.iter().enumerate() {
        for (first, others) in &named[..i] {
            let same = |a: &str, b: &str| a.trim_start_matches('/') == b.trim_start_matches('/');
            let both: Vec<&str> = names.iter().filter(|n| others.iter().any(|o| same(n, o))).map(String::as_str).collect();
            if !both.is_empty() {
                against(r, "cannot read two fields from one dataset", &[*first, *second], |e| {
                    e.expected("different datasets").found(format!("{} in both", both.join(", "))).hint("every dataset is one field")
                });
            }
        }
    }
    if input.staggering != crate::read::Staggering::Centres && r.given.has(Key::Velocity) && !r.given.has(Key::Magnetic) {
        let hint = write(r, Key::Magnetic, ("[\"bx\", \"by\", \"bz\"]", "bx,by,bz")) + " names it";
        against(r, "cannot place the magnetic components", &[Key::Staggering], |e| {
            e.expected("a magnetic field").found("a velocity alone").hint(hint)
        });
    }
}

fn raw(r: &mut Reader<'_>, s: &Settled) {
    let keys = [Key::RawValues, Key::RawShape, Key::RawEndian, Key::RawOffset, Key::RawRecords];
    let Some(given) = keys.into_iter().find(|k| r.given.has(*k)) else { return };
    for (key, value) in [(Key::RawValues, ("\"f32\"", "f32")), (Key::RawShape, ("[64, 64, 64]", "64,64,64"))] {
        if !r.given.has(key) && !r.given.torn {
            let beside = r.given.label(given);
            let line = r.given.node(given).and_then(|n| n.line);
            let hint = write(r, key, value);
            let e = Error::usage("cannot read files without a header").item(r.given.label(key));
            let e = e.expected(format!("it beside {beside}")).found("none").hint(format!("for example {hint}"));
            r.push(key, line, e);
        }
    }
    let Some(layout) = &s.config.input.raw else { return };
    let axes = s.config.input.order.chars().filter(|c| *c != 'c').count();
    let sizes = layout.shape.len();
    // A plane has no size along z.
    if sizes != axes && sizes != 2 && !r.is_broken(Key::Order) {
        let order = &s.config.input.order;
        against(r, "cannot read files without a header", &[Key::RawShape], |e| {
            let e = e.expected(format!("{axes} numbers, one an axis of {order}")).found(sizes.to_string());
            e.hint("the component axis is not among them; a plane has two")
        });
    }
}

/// The length follows from viscosity and dissipation, or contradicts them.
fn kolmogorov(r: &mut Reader<'_>, s: &Settled) {
    let q = &s.config.request;
    let (Some(nu), Some(epsilon), Some(length)) = (q.viscosity, q.dissipation, q.kolmogorov_length) else { return };
    let own = (nu.powi(3) / epsilon).powf(0.25);
    if (own - length).abs() > KOLMOGOROV_TOLERANCE * length {
        against(r, "cannot settle the Kolmogorov length", &[Key::Viscosity, Key::Dissipation, Key::KolmogorovLength], |e| {
            let e = e.expected(format!("the length (viscosity^3/dissipation)^(1/4) = {own:.4e}")).found(format!("{length:.4e}"));
            e.hint("correct one of them, or leave the dissipation or the length out")
        });
    }
}

/// Families, companions and mesh values against the fields that will be there, as far as the names tell.
fn fields(r: &mut Reader<'_>, entries: &Entries) {
    let has = |k: Key| r.given.has(k);
    let guessed = !has(Key::Velocity) && !has(Key::Magnetic);
    let fields = Fields {
        velocity: guessed || has(Key::Velocity),
        magnetic: guessed || has(Key::Magnetic),
        buoyancy: has(Key::Buoyancy),
        compressible: has(Key::Density),
    };
    // A coefficient with a fault of its own is not missing.
    let some = |k: Key| r.given.has(k).then_some(1.0);
    let known = Request { viscosity: some(Key::Viscosity), resistivity: some(Key::Resistivity), ..Request::default() };
    let any = Family::defaults(fields);
    for (family, node) in &entries.families {
        let own = Request { families: vec![family.clone()], ..known.clone() };
        if let Err(e) = own.families_for(fields) {
            r.push(Key::Families, node.line, with_keys(e, node, family.indicator, fields, &known));
        }
    }
    for (key, list) in [(Key::Companions, &entries.companions), (Key::MeshValues, &entries.mesh_values)] {
        for (indicator, node) in list {
            let mut own = Request { families: any.clone(), ..known.clone() };
            if key == Key::Companions {
                own.companions.push(*indicator)
            } else {
                own.mesh_values.push(*indicator)
            }
            if let Err(e) = own.families_for(fields) {
                r.push(key, node.line, with_keys(e, node, *indicator, fields, &known));
            }
        }
    }
}

/// The error about something an indicator needs, its hint in the words of the place where the indicator stands.
fn with_keys(e: Error, node: &Node, indicator: Indicator, fields: Fields, known: &Request) -> Error {
    if node.line.is_none() {
        return e;
    }
    let needs = indicator.needs();
    let (key, rest) = if needs.velocity && !fields.velocity {
        (Key::Velocity, " names its datasets")
    } else if needs.magnetic && !fields.magnetic {
        (Key::Magnetic, " names its datasets")
    } else if needs.buoyancy && !fields.buoyancy {
        (Key::Buoyancy, " names its dataset")
    } else if indicator == Indicator::DissipationViscous && known.viscosity.is_none() {
        (Key::Viscosity, ", or strain instead")
    } else if indicator == Indicator::DissipationOhmic && known.resistivity.is_none() {
        (Key::Resistivity, ", or current instead")
    } else {
        return e;
    };
    let s = key.setting();
    e.hint(format!("{} = {} below [{}]{rest}", s.name, s.example, s.table))
}

/// The name of a family as written, whatever else is wrong with it.
fn name_in(text: &str) -> Option<&str> {
    text.split_once(':').map(|(name, _)| name.trim()).filter(|n| !n.is_empty())
}

fn family_names(r: &mut Reader<'_>, entries: &Entries) {
    let mut names: Vec<&str> = Vec::new();
    for (text, node) in &entries.family_texts {
        let Some(name) = name_in(text) else { continue };
        if names.contains(&name) {
            let e = Error::usage("cannot use family").item(format!("\"{}\"", text.trim())).expected("a name of its own");
            let e = e.found(format!("\"{name}\" twice")).hint("give every family another name before the colon");
            r.push(Key::Families, node.line, e);
        }
        names.push(name);
    }
}

fn cut_outs(r: &mut Reader<'_>, entries: &Entries) {
    let texts = &entries.family_texts;
    let defaults = Family::defaults(Fields::BOTH);
    let names: Vec<&str> = match (texts.is_empty(), r.is_broken(Key::Families)) {
        (true, true) => return,
        (true, false) => defaults.iter().map(|f| f.name.as_str()).collect(),
        // Of a family without a colon the first word may be the name.
        (false, _) => texts.iter().filter_map(|(t, _)| name_in(t).or_else(|| t.split_whitespace().next())).collect(),
    };
    for (name, node) in entries.cut_out_families.iter().filter(|(f, _)| !names.contains(&f.as_str())) {
        let e = Error::usage("cannot cut out objects").item(r.given.label(Key::CutOuts));
        let e = e.expected(format!("a family: {}", names.join(", "))).found(format!("\"{name}\"")).hint("FAMILY:ID, ID or largest:N");
        r.push(Key::CutOuts, node.line, e);
    }
}

/// The run folder may not be where snapshots are.
fn folder(r: &mut Reader<'_>, s: &Settled) {
    let output = tidy(&s.config.output);
    for path in &s.series.paths {
        let file = path.split(":/").next().unwrap_or(path);
        let folder = Path::new(file).parent().filter(|p| !is_pattern(&p.to_string_lossy()));
        let same = tidy(Path::new(file)) == output || folder.is_some_and(|p| tidy(p) == output);
        if same {
            against(r, "cannot write beside the snapshots", &[Key::Folder], |e| {
                let e = e.expected("a run folder of its own").found(format!("the folder of {path}"));
                e.hint("name another, which need not exist")
            });
            return;
        }
    }
}

/// An absolute path without `.` and `..`, as far as its text tells.
fn tidy(path: &Path) -> PathBuf {
    let path = if path.as_os_str().is_empty() { Path::new(".") } else { path };
    let full = std::path::absolute(path).unwrap_or_else(|_| path.to_path_buf());
    let mut out = PathBuf::new();
    for part in full.components() {
        match part {
            Component::ParentDir => {
                out.pop();
            }
            Component::CurDir => {}
            other => out.push(other),
        }
    }
    out
}
