//! What a file holds, and a guess at how it is to be read.

use std::f64::consts::TAU;
use std::fs;
use std::io::{ErrorKind, Read};
use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::contents::{self, Inside};
use crate::read::guess::View;
use crate::read::names::has_place;
use crate::read::series::split_group;
use crate::read::shelf::Shelf;
use crate::read::spec::InputSpec;
use crate::read::{guess, guess_raw, inspect_parts, superblock};

/// One array or dataset.
#[derive(Debug, Clone, PartialEq)]
pub struct Item {
    /// Path inside the file, or file name.
    pub name: String,
    /// Samples along every axis, slowest first.
    pub shape: Vec<usize>,
    /// Type of the values, e.g. `float32 little-endian`.
    pub values: String,
    /// How they are stored, e.g. `contiguous` or `chunks 64x64x64, gzip`.
    pub storage: String,
    /// Attributes with their values as text.
    pub attributes: Vec<(String, String)>,
}

/// What a file holds.
#[derive(Debug, Clone, PartialEq)]
pub struct Contents {
    /// The file or folder.
    pub path: PathBuf,
    /// What it is, e.g. `HDF5`.
    pub kind: String,
    /// Bytes on disk.
    pub bytes: u64,
    /// Its arrays.
    pub items: Vec<Item>,
    /// Attributes of the file itself.
    pub attributes: Vec<(String, String)>,
    /// Groups that look like steps of a run.
    pub steps: Vec<String>,
    /// How it would be read; lengths are 2 pi where nothing in the file says otherwise.
    pub guess: InputSpec,
    /// What was guessed and from what, one sentence each.
    pub reasons: Vec<String>,
    /// Time, where one is found.
    pub time: Option<f64>,
}

/// Looks into a file without reading values beyond headers, attributes, single numbers and coordinates.
///
/// A folder is read as `.npy` files; a file that is neither HDF5 nor `.npy` as one without a header, of which only cubic shapes are
/// guessed. `FILE:/GROUP` is one step of an HDF5 file. With `{field}` in the path every file whose name has the usual name of a
/// component in its place is one of the arrays.
///
/// # Errors
/// `Input` when it cannot be read.
pub fn inspect(path: &Path) -> Result<Contents> {
    if has_place(path) && !path.exists() {
        return inspect_parts::inspect(path);
    }
    let text = path.to_string_lossy();
    if let (file, Some(group)) = split_group(&text) {
        let (file, group) = (Path::new(file), group.trim_matches('/'));
        let inside = contents::hdf5(file)?;
        Shelf::new(file, Some(group))?;
        let bytes = fs::metadata(file).map_or(0, |m| m.len());
        return Ok(told(path, "HDF5", bytes, inside, View::Group(group)));
    }
    let there = fs::metadata(path).map_err(|e| {
        let error = Error::input("cannot look into the file").at(path);
        if e.kind() == ErrorKind::NotFound { error.found("nothing").hint("check the path") } else { error.found(e.to_string()) }
    })?;
    if there.is_dir() {
        let inside = contents::npy(path)?;
        let bytes = fs::read_dir(path).into_iter().flatten().flatten().filter_map(|e| e.metadata().ok()).map(|m| m.len()).sum();
        return Ok(told(path, "folder of npy files", bytes, inside, View::Whole));
    }
    if !there.is_file() {
        return Err(Error::input("cannot look into the file").at(path).expected("a file or a folder").found("a device or pipe"));
    }
    let bytes = there.len();
    if path.extension().is_some_and(|e| e == "npy") {
        let name = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        return Ok(told(path, "npy", bytes, contents::npy(path)?, View::Single(&name)));
    }
    match superblock::check(path) {
        Ok(()) => Ok(told(path, "HDF5", bytes, contents::hdf5(path)?, View::Whole)),
        Err(e) if bytes == 0 || begins_as_hdf5(path) => Err(e),
        Err(_) => headerless(path, bytes),
    }
}

fn begins_as_hdf5(path: &Path) -> bool {
    let mut head = Vec::new();
    let read = fs::File::open(path).and_then(|f| f.take(4).read_to_end(&mut head));
    read.is_ok() && head == b"\x89HDF"
}

pub(super) fn told(path: &Path, kind: &str, bytes: u64, inside: Inside, view: View<'_>) -> Contents {
    let guess = guess::guess(&inside, view);
    Contents {
        path: path.into(),
        kind: kind.into(),
        bytes,
        attributes: inside.attributes.into_iter().map(|a| (a.name, a.text)).collect(),
        items: inside.items,
        steps: guess.steps,
        guess: guess.spec,
        reasons: guess.reasons,
        time: guess.time,
    }
}

/// A file without a header, or of another kind: its size and its first values tell all that is known.
pub(super) fn headerless(path: &Path, bytes: u64) -> Result<Contents> {
    let mut told = Contents {
        path: path.into(),
        kind: "no known header".into(),
        bytes,
        items: Vec::new(),
        attributes: Vec::new(),
        steps: Vec::new(),
        guess: InputSpec { lengths: Some([TAU; 3]), ..InputSpec::default() },
        reasons: Vec::new(),
        time: None,
    };
    if let Some((kind, reason)) = guess_raw::other_kind(path)? {
        told.kind = kind.into();
        told.reasons.push(reason.into());
        return Ok(told);
    }
    let guess_raw::Guesses { fits, mut reasons } = guess_raw::fits(path, bytes)?;
    reasons.extend(fits.iter().map(|f| format!("its size fits {}", f.text())));
    if let Some(first) = fits.into_iter().next() {
        if first.components == 1 {
            reasons.push("with one component a file, {field} stands for the component's name in the path".into());
        }
        told.guess.raw = Some(first.layout);
        reasons.push("nothing tells the size of the box".into());
    } else if reasons.is_empty() {
        reasons.push("no cubic shape of float32 or float64 values has its size".into());
    }
    told.reasons = reasons;
    Ok(told)
}
