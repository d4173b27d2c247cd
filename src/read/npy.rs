//! `.npy` files: header, checks of size and type, single files and folders of them.
//!
//! The format is NumPy Enhancement Proposal 1 (versions 1.0, 2.0 and 3.0).

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::arrange::arrange;
use crate::read::header::{Header, Precision, shape_text, wrong_type};
use crate::read::names::{Choice, Field, GUESSES, HINT, PLACE, choose, has_vector, named, with_name};
use crate::read::order::Order;
use crate::read::raw::RawArray;
use crate::read::source::{Array, Arrays, Store};
use crate::read::spec::InputSpec;

const WHAT: &str = "cannot read the npy file";
/// Most files named in a message.
const LISTED: usize = 12;
/// Longest header read: NumPy's own are a few hundred bytes.
const HEADER_LIMIT: usize = 1 << 20;

/// A file with its header read.
struct NpyFile {
    header: Header,
    file: File,
    offset: u64,
    big_endian: bool,
}

/// One file: the velocity, unless only the magnetic field is named.
pub(super) fn open_file(path: &Path, spec: &InputSpec, order: &Order) -> Result<Arrays> {
    let own = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
    let all = named(spec);
    if all.len() > 1 || all.first().is_some_and(|(field, _)| !field.is_vector()) {
        let flags: Vec<&str> = all.iter().map(|(field, _)| field.flag()).collect();
        return Err(Error::usage("cannot read several fields from one npy file")
            .at(path)
            .item(flags.join(", "))
            .expected("--velocity or --magnetic alone")
            .found(if all.len() == 1 { "a scalar".to_string() } else { format!("{} fields", all.len()) })
            .hint("put the files into a folder and give the folder"));
    }
    let (field, named) = all.into_iter().next().map_or((Field::Velocity, None), |(field, names)| (field, Some(names)));
    if let Some(names) = named
        && !(names.len() == 1 && with_extension(&names[0]) == own)
    {
        return Err(Error::usage("cannot use the dataset names")
            .at(path)
            .item(field.flag())
            .expected(format!("{own}, the file itself"))
            .found(names.join(","))
            .hint("for one file a component give their folder"));
    }
    let file = read_header(path, own.clone())?;
    assemble(&[(field, vec![own])], vec![file], spec, order)
}

/// A folder: names are those of the files in it.
pub(super) fn open_folder(folder: &Path, spec: &InputSpec, order: &Order) -> Result<Arrays> {
    let file_of = |name: &str| folder.join(with_extension(name));
    let choices = choose(spec, |name| shape_in(&file_of(name))).map_err(|e| e.at(folder))?;
    if !has_vector(&choices) {
        return Err(Error::input("cannot find a velocity or magnetic field")
            .at(folder)
            .expected(format!("npy files named {GUESSES}"))
            .found(listing(folder))
            .hint(HINT));
    }
    let mut files = Vec::new();
    for (field, name) in each(&choices) {
        let path = file_of(name);
        if !path.is_file() {
            return Err(Error::input("cannot find the file").at(&path).found(format!("only {}", listing(folder))).hint(field.hint()));
        }
        files.push(read_header(&path, label(folder, name))?);
    }
    assemble(&choices, files, spec, order)
}

/// Files whose names are those of a path with the component's name in its place.
pub(super) fn open_many(path: &Path, spec: &InputSpec, order: &Order) -> Result<Arrays> {
    let choices = choose(spec, |name| shape_in(&with_name(path, name))).map_err(|e| e.at(path))?;
    if !has_vector(&choices) {
        return Err(Error::input("cannot find a velocity or magnetic field")
            .at(path)
            .expected(format!("npy files with {GUESSES} in place of {PLACE}"))
            .found("none of them")
            .hint(HINT));
    }
    let mut files = Vec::new();
    for (field, name) in each(&choices) {
        let path = with_name(path, name);
        if !path.is_file() {
            return Err(Error::input("cannot find the file").at(&path).found("nothing").hint(field.hint()));
        }
        let own = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        files.push(read_header(&path, own)?);
    }
    assemble(&choices, files, spec, order)
}

/// Every name with its field.
fn each(choices: &[Choice]) -> impl Iterator<Item = (Field, &String)> {
    choices.iter().flat_map(|(field, names)| names.iter().map(move |name| (*field, name)))
}

/// The shape of a file, if there is one. A damaged one counts as present, so that its damage is reported and not its absence.
fn shape_in(path: &Path) -> Option<Vec<usize>> {
    path.is_file().then(|| read_header(path, String::new()).map_or(vec![0; 4], |f| f.header.shape))
}

/// Shape, slowest axis first, and type of the values of a file.
pub(super) fn describe(path: &Path) -> Result<(Vec<usize>, String)> {
    let file = read_header(path, String::new())?;
    let order = if file.big_endian { "big" } else { "little" };
    Ok((file.header.shape, format!("float{} {order}-endian", 8 * file.header.precision.bytes())))
}

/// The values of a file with one axis, and whether they are in single precision.
pub(super) fn line(path: &Path) -> Result<(Vec<f64>, bool)> {
    let file = read_header(path, String::new())?;
    let shape = file.header.shape.clone();
    if shape.len() != 1 {
        let found = file.header.shape_text();
        return Err(Error::input("cannot use the coordinates").at(path).expected("an array with one axis").found(found));
    }
    let single = file.header.precision == Precision::F32;
    let mut values = vec![0.0; shape[0]];
    RawArray::new(file.header, file.file, file.offset, file.big_endian).read_block(&[0], &shape, &mut values)?;
    Ok((values, single))
}

fn assemble(choices: &[Choice], files: Vec<NpyFile>, spec: &InputSpec, order: &Order) -> Result<Arrays> {
    let headers: Vec<Header> = files.iter().map(|f| f.header.clone()).collect();
    let arrangement = arrange(choices, &headers, order, spec.staggering)?;
    let arrays = files.into_iter().zip(arrangement.axes).map(|(f, axes)| {
        let header = Header { shape: axes.full(&f.header.shape), ..f.header };
        let store = Store::Raw(RawArray::new(header.clone(), f.file, f.offset, f.big_endian));
        Array { header, axes, store, depth: 1, filtered: false }
    });
    let arrays = Arrays::new(arrays.collect(), arrangement.slots, arrangement.samples);
    Ok(Arrays { last_face: arrangement.last_face, ..arrays })
}

fn with_extension(name: &str) -> String {
    if name.ends_with(".npy") { name.into() } else { format!("{name}.npy") }
}

fn label(folder: &Path, name: &str) -> String {
    let folder = folder.file_name().map_or(".".into(), |n| n.to_string_lossy());
    format!("{folder}/{}", with_extension(name))
}

fn listing(folder: &Path) -> String {
    let mut files: Vec<PathBuf> = std::fs::read_dir(folder)
        .into_iter()
        .flatten()
        .flatten()
        .map(|entry| entry.path())
        .filter(|p| p.extension().is_some_and(|e| e == "npy"))
        .collect();
    files.sort();
    if files.is_empty() {
        return "no npy file".into();
    }
    let mut named: Vec<String> = files
        .iter()
        .take(LISTED)
        .map(|p| {
            let name = p.file_name().unwrap_or_default().to_string_lossy();
            match read_header(p, String::new()) {
                Ok(f) => format!("{name} {}", shape_text(&f.header.shape)),
                Err(_) => format!("{name} (not usable)"),
            }
        })
        .collect();
    if files.len() > LISTED {
        named.push(format!("and {} more", files.len() - LISTED));
    }
    named.join(", ")
}

fn read_header(path: &Path, label: String) -> Result<NpyFile> {
    let io = |e: std::io::Error| Error::input(WHAT).at(path).found(e.to_string());
    let fault = || Error::input(WHAT).at(path);
    let mut file = File::open(path).map_err(io)?;
    let length = file.metadata().map_err(io)?.len();
    let truncated = || {
        fault()
            .expected("a complete header")
            .found(format!("a file of {length} bytes"))
            .hint("the file is truncated: copy or write it again")
    };
    let mut take = |count: usize| -> Result<Vec<u8>> {
        let mut read = Vec::new();
        file.by_ref().take(count as u64).read_to_end(&mut read).map_err(io)?;
        Ok(read)
    };
    let head = take(8)?;
    if !head.starts_with(b"\x93NUMPY") {
        return Err(fault()
            .expected("the signature \"\\x93NUMPY\"")
            .found(if head.is_empty() { "an empty file".into() } else { format!("a file beginning \"{}\"", head.escape_ascii()) })
            .hint("write it with numpy.save"));
    }
    if head.len() < 8 {
        return Err(truncated());
    }
    let digits = match (head[6], head[7]) {
        (1, 0) => 2,
        (2 | 3, 0) => 4,
        (major, minor) => {
            return Err(fault().expected("format version 1.0, 2.0 or 3.0").found(format!("{major}.{minor}")));
        }
    };
    let size = take(digits)?;
    if size.len() < digits {
        return Err(truncated());
    }
    let size = size.iter().rev().fold(0usize, |sum, &b| sum << 8 | usize::from(b));
    if size > HEADER_LIMIT {
        return Err(fault().expected(format!("a header of at most {HEADER_LIMIT} bytes")).found(format!("{size}")));
    }
    let text = take(size)?;
    if text.len() < size {
        return Err(truncated());
    }
    let text = String::from_utf8_lossy(&text);
    let Some(said) = Dictionary::parse(&text) else {
        return Err(fault()
            .expected("a header with descr, fortran_order and shape")
            .found(format!("{:?}", text.trim().chars().take(80).collect::<String>())));
    };
    let (precision, big_endian) = match said.descr {
        "'<f4'" => (Precision::F32, false),
        "'>f4'" => (Precision::F32, true),
        "'<f8'" => (Precision::F64, false),
        "'>f8'" => (Precision::F64, true),
        other => return Err(wrong_type(|e| e.at(path), other.chars().take(80).collect())),
    };
    let mut shape = said.shape;
    if said.fortran {
        shape.reverse();
    }
    let offset = (8 + digits + size) as u64;
    let bytes = shape.iter().try_fold(precision.bytes() as u64, |all, &n| all.checked_mul(n as u64));
    let wanted = bytes.and_then(|b| b.checked_add(offset));
    if wanted != Some(length) {
        return Err(fault()
            .expected(wanted.map_or("a possible shape".into(), |w| format!("{w} bytes, as its header says")))
            .found(if wanted.is_some() { format!("{length}") } else { shape_text(&shape) })
            .hint("the file is truncated or damaged: copy or write it again"));
    }
    let header = Header { path: path.into(), item: None, label, shape, precision };
    Ok(NpyFile { header, file, offset, big_endian })
}

/// The three entries of a header.
struct Dictionary<'a> {
    descr: &'a str,
    fortran: bool,
    shape: Vec<usize>,
}

impl Dictionary<'_> {
    /// Understands the literal that NumPy writes: string keys, one each, no nesting but in `descr`.
    fn parse(text: &str) -> Option<Dictionary<'_>> {
        let body = text.trim().strip_prefix('{')?.strip_suffix('}')?;
        let after = |key: &str| {
            let at = body.find(&format!("'{key}'"))? + key.len() + 2;
            body[at..].trim_start().strip_prefix(':').map(str::trim_start)
        };
        let descr = after("descr")?;
        let end = if descr.starts_with('[') { descr.rfind(']')? + 1 } else { descr[1..].find('\'')? + 2 };
        let fortran = after("fortran_order")?;
        let fortran = match (fortran.starts_with("True"), fortran.starts_with("False")) {
            (true, _) => true,
            (_, true) => false,
            _ => return None,
        };
        let shape = after("shape")?.strip_prefix('(')?.split_once(')')?.0;
        let shape = shape.split(',').map(str::trim).filter(|n| !n.is_empty()).map(|n| n.parse().ok()).collect::<Option<_>>()?;
        Some(Dictionary { descr: descr.get(..end)?, fortran, shape })
    }
}
