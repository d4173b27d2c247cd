//! A guess at the layout of a file without a header, from its size, its first values and what looks like record markers.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use crate::base::error::{Error, Result};
use crate::read::records::{Record, number, records};
use crate::read::spec::RawLayout;

/// Numbers of components that are likely, the likeliest first.
const COMPONENTS: [u64; 7] = [3, 6, 1, 4, 7, 2, 8];
/// Fewest samples along an axis that are worth a guess.
const FEWEST: u64 = 8;

/// A layout that fits, and how many components it has.
pub(super) struct Fit {
    /// The layout.
    pub layout: RawLayout,
    /// Components.
    pub components: u64,
}

impl Fit {
    /// The fit as text.
    pub fn text(&self) -> String {
        let l = &self.layout;
        let bits = if l.double { 64 } else { 32 };
        let components = if self.components == 1 { "1 component".into() } else { format!("{} components", self.components) };
        let n = l.shape[0];
        let markers = match l.record_markers {
            Some(m) => format!(" with {m}-byte record markers, {}-endian", if l.big_endian { "big" } else { "little" }),
            None if l.big_endian => ", big-endian".into(),
            None => String::new(),
        };
        format!("{n}x{n}x{n} samples of {components} in float{bits}{markers}")
    }
}

/// Values looked at, in bytes.
const LOOKED_AT: u64 = 64 << 10;
/// Share of them that must be of sane magnitude. Of double values taken for single ones about two thirds are by chance, of values
/// taken in the other byte order about a third.
const SANE: f64 = 0.9;
const SMALLEST: f64 = 1e-12;
const LARGEST: f64 = 1e12;

/// What a file without a header may be.
pub(super) struct Guesses {
    /// Cubic layouts that fit, the likeliest first.
    pub fits: Vec<Fit>,
    /// From what, one sentence each.
    pub reasons: Vec<String>,
}

/// What the file is by its first bytes, if it is surely no array of numbers, and what to do with it.
pub(super) fn other_kind(path: &Path) -> Result<Option<(&'static str, &'static str)>> {
    let head = beginning(path, LOOKED_AT)?;
    let is_text = |text: &str| text.chars().all(|c| !c.is_control() || "\t\n\r\u{c}".contains(c));
    let text = match std::str::from_utf8(&head) {
        Ok(text) => Some(text),
        // A letter may be cut at the end.
        Err(e) if e.error_len().is_none() => std::str::from_utf8(&head[..e.valid_up_to()]).ok(),
        Err(_) => None,
    };
    Ok(if head.starts_with(b"PK\x03\x04") {
        Some((
            "zip archive",
            "it is an archive, such as numpy.savez writes, and not a snapshot: store its arrays as .npy files in a folder",
        ))
    } else if head.starts_with(b"\x1f\x8b") {
        Some(("gzip file", "it is a compressed file and not a snapshot: unpack it"))
    } else if text.is_some_and(|t| !t.is_empty() && is_text(t)) {
        Some(("text", "it is a text and not a snapshot"))
    } else {
        None
    })
}

fn beginning(path: &Path, bytes: u64) -> Result<Vec<u8>> {
    let io = |e: std::io::Error| Error::input("cannot look into the file").at(path).found(e.to_string());
    let mut head = Vec::new();
    File::open(path).and_then(|f| f.take(bytes).read_to_end(&mut head)).map_err(io)?;
    Ok(head)
}

/// Cubic layouts that fit a file and the values it begins with.
pub(super) fn fits(path: &Path, length: u64) -> Result<Guesses> {
    let head = beginning(path, LOOKED_AT + 8)?;
    for (marker, big_endian) in [(4u8, false), (4, true), (8, false), (8, true)] {
        let Some(bytes) = head.get(..marker.into()) else { continue };
        let first = number(bytes, big_endian).unsigned_abs();
        if first == 0 || first > length {
            continue;
        }
        // Records of one length to the end of the file are no accident.
        let Ok(all) = records(path, 0, marker, big_endian, &[first]) else { continue };
        if all.iter().any(|r| r.pieces.len() != 1) {
            continue;
        }
        let order = if big_endian { "big" } else { "little" };
        let records = if all.len() == 1 { "1 record".into() } else { format!("{} records", all.len()) };
        let mut reasons = vec![format!("it has {records} of {first} bytes between {marker}-byte markers, {order}-endian")];
        let within = usize::try_from(first).unwrap_or(usize::MAX);
        let values = &head[marker.into()..];
        let types = types(&values[..values.len().min(within)], &[big_endian]);
        if types.is_empty() {
            reasons.push("its values are of no sane magnitude in either type".into());
            return Ok(Guesses { fits: Vec::new(), reasons });
        }
        let fits = with_markers(&all, marker, big_endian, &types);
        if fits.is_empty() {
            reasons.push("its records are no cubes of values: give their shape".into());
        }
        return Ok(Guesses { fits, reasons });
    }
    let types = types(&head, &[false, true]);
    let mut fits = Vec::new();
    for &(double, big_endian) in &types {
        let width = if double { 8 } else { 4 };
        for components in COMPONENTS {
            fits.extend(cube(length, components * width).map(|n| Fit { layout: layout(n, double, big_endian, None), components }));
        }
    }
    let mut reasons = Vec::new();
    if types.is_empty() {
        reasons.push("its values are of no sane magnitude in any type and byte order".into());
    }
    Ok(Guesses { fits, reasons })
}

/// Types (double, big-endian) in which most values are finite and of sane magnitude, the likeliest first.
fn types(bytes: &[u8], orders: &[bool]) -> Vec<(bool, bool)> {
    let mut out = Vec::new();
    for double in [false, true] {
        for &big_endian in orders {
            if out.iter().all(|(d, _)| *d != double) && is_sane(bytes, double, big_endian) {
                out.push((double, big_endian));
            }
        }
    }
    out
}

fn is_sane(bytes: &[u8], double: bool, big_endian: bool) -> bool {
    let ordered = |b: &[u8]| b.iter().rev().copied().collect::<Vec<u8>>();
    let value = |b: &[u8]| -> f64 {
        let b = if big_endian { b.to_vec() } else { ordered(b) };
        match b[..] {
            [a, b, c, d] => f64::from(f32::from_be_bytes([a, b, c, d])),
            [a, b, c, d, e, f, g, h] => f64::from_be_bytes([a, b, c, d, e, f, g, h]),
            _ => f64::NAN,
        }
    };
    let values: Vec<f64> = bytes.chunks_exact(if double { 8 } else { 4 }).map(value).collect();
    let good = values.iter().filter(|v| **v == 0.0 || (SMALLEST..=LARGEST).contains(&v.abs())).count();
    // Short doubles end in zeros: as single values every other one would be 0 and the rest not.
    let zeros = |parity: usize| values.iter().skip(parity).step_by(2).all(|v| *v == 0.0);
    let halves = !double && zeros(usize::from(big_endian)) && !zeros(usize::from(!big_endian));
    !values.is_empty() && !halves && good as f64 >= SANE * values.len() as f64
}

fn with_markers(all: &[Record], marker: u8, big_endian: bool, types: &[(bool, bool)]) -> Vec<Fit> {
    let mut out = Vec::new();
    for &(double, _) in types {
        let width = if double { 8 } else { 4 };
        for components in COMPONENTS {
            let each = all.len() as u64 == components;
            if !each && all.len() != 1 {
                continue;
            }
            let n = cube(all[0].bytes, if each { width } else { components * width });
            out.extend(n.map(|n| Fit { layout: layout(n, double, big_endian, Some(marker)), components }));
        }
    }
    out
}

fn layout(n: u64, double: bool, big_endian: bool, record_markers: Option<u8>) -> RawLayout {
    RawLayout { double, big_endian, shape: vec![n as usize; 3], offset: 0, record_markers }
}

/// The edge of a cube of values of `width` bytes.
fn cube(bytes: u64, width: u64) -> Option<u64> {
    let n = ((bytes / width) as f64).cbrt().round() as u64;
    (n >= FEWEST && n.checked_pow(3).and_then(|c| c.checked_mul(width)) == Some(bytes)).then_some(n)
}
