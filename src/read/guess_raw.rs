//! A guess at the layout of a file without a header, from its size and from what looks like record markers.

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
        let markers = l
            .record_markers
            .map_or(String::new(), |m| format!(" with {m}-byte record markers, {}-endian", if l.big_endian { "big" } else { "little" }));
        format!("{n}x{n}x{n} samples of {components} in float{bits}{markers}")
    }
}

/// Cubic layouts that fit a file, the likeliest first, and what its record markers tell where it has some.
pub(super) fn fits(path: &Path, length: u64) -> Result<(Vec<Fit>, Option<String>)> {
    let mut head = Vec::new();
    let file = File::open(path).map_err(|e| Error::input("cannot look into the file").at(path).found(e.to_string()))?;
    file.take(8).read_to_end(&mut head).map_err(|e| Error::input("cannot look into the file").at(path).found(e.to_string()))?;
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
        let told = format!("it has {records} of {first} bytes between {marker}-byte markers, {order}-endian");
        return Ok((with_markers(&all, marker, big_endian), Some(told)));
    }
    let mut out = Vec::new();
    for double in [false, true] {
        for components in COMPONENTS {
            let width = if double { 8 } else { 4 };
            out.extend(cube(length, components * width).map(|n| Fit { layout: layout(n, double, false, None), components }));
        }
    }
    Ok((out, None))
}

fn with_markers(all: &[Record], marker: u8, big_endian: bool) -> Vec<Fit> {
    let mut out = Vec::new();
    for double in [false, true] {
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
