//! Fortran sequential records: length markers before and after every record, checked, and records cut into pieces.
//!
//! Markers are 4 or 8 bytes. A record too long for a 4-byte marker is cut into subrecords: the marker before a subrecord is negative
//! when another follows, that behind it when another goes before (common practice of compilers, no source).

use std::fs::File;
use std::io::{Read, Seek, SeekFrom};
use std::path::Path;

use crate::base::error::{Error, Result};
use crate::read::raw::Piece;

/// Most pieces and records looked for: snapshots have one record a component.
const MOST: usize = 1 << 16;

/// A record: its length and where its bytes are.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Record {
    /// Bytes without markers.
    pub bytes: u64,
    /// Its pieces; one unless it has subrecords.
    pub pieces: Vec<Piece>,
}

/// Reads the markers of all records from `offset` to the end of the file. Lengths other than `allowed` are refused.
pub(super) fn records(path: &Path, offset: u64, marker: u8, big_endian: bool, allowed: &[u64]) -> Result<Vec<Record>> {
    let io = |e: std::io::Error| Error::input("cannot read the records").at(path).found(e.to_string());
    let mut file = File::open(path).map_err(io)?;
    let length = file.metadata().map_err(io)?.len();
    let width = u64::from(marker);
    let mut read = |at: u64| -> Result<i64> {
        if at + width > length {
            return Err(Error::input("cannot read the records")
                .at(path)
                .expected(format!("a length marker at byte {at}"))
                .found(format!("the end of the file at {length}"))
                .hint("the file is truncated, or has no records"));
        }
        let mut bytes = [0u8; 8];
        let bytes = &mut bytes[..marker.into()];
        file.seek(SeekFrom::Start(at)).and_then(|_| file.read_exact(bytes)).map_err(io)?;
        Ok(number(bytes, big_endian))
    };
    let mut out: Vec<Record> = Vec::new();
    let mut at = offset;
    while at < length {
        let fault = |at: u64| Error::input("cannot read the records").at(path).item(format!("record {} at byte {at}", out.len() + 1));
        let mut record = Record { bytes: 0, pieces: Vec::new() };
        loop {
            let begins = read(at)?;
            let bytes = begins.unsigned_abs();
            let whole = begins >= 0 && record.pieces.is_empty();
            let cut = begins < 0 && marker == 8;
            if cut
                || (whole && !allowed.contains(&bytes))
                || record.bytes.saturating_add(bytes) > allowed.iter().copied().max().unwrap_or(0)
            {
                let list: Vec<String> = allowed.iter().map(u64::to_string).collect();
                let error =
                    fault(at).expected(format!("a length of {} bytes, as the shape says", list.join(" or "))).found(begins.to_string());
                let swapped = turned(begins, marker).unsigned_abs();
                return Err(if allowed.contains(&swapped) {
                    error.hint(format!("the markers fit {}-endian values", if big_endian { "little" } else { "big" }))
                } else {
                    error.hint("check shape, precision, byte order and width of the markers")
                });
            }
            record.pieces.push(Piece { joined: record.bytes, byte: at + width });
            let ends = read(at + width + bytes)?;
            // Behind a subrecord the sign tells whether another went before.
            let first = record.pieces.len() == 1;
            if ends.unsigned_abs() != bytes || (begins != ends && marker == 8) || (bytes > 0 && marker == 4 && (ends < 0) == first) {
                let wanted = if first { bytes as i64 } else { -(bytes as i64) };
                return Err(fault(at)
                    .expected(format!("the marker {wanted} behind the record"))
                    .found(ends.to_string())
                    .hint("the file is damaged, or has no records"));
            }
            record.bytes += bytes;
            at += 2 * width + bytes;
            if begins >= 0 || marker == 8 || record.pieces.len() > MOST {
                break;
            }
        }
        if !allowed.contains(&record.bytes) {
            let list: Vec<String> = allowed.iter().map(u64::to_string).collect();
            return Err(fault(at)
                .expected(format!("subrecords of {} bytes together", list.join(" or ")))
                .found(record.bytes.to_string())
                .hint("check shape, precision and byte order"));
        }
        out.push(record);
        if out.len() > MOST {
            return Err(Error::input("cannot read the records").at(path).expected("one record a component").found(format!("over {MOST}")));
        }
    }
    Ok(out)
}

/// A signed marker of 4 or 8 bytes.
pub(super) fn number(bytes: &[u8], big_endian: bool) -> i64 {
    let mut ordered = bytes.to_vec();
    if !big_endian {
        ordered.reverse();
    }
    let sign = if ordered[0] & 0x80 != 0 { -1i64 } else { 0 };
    ordered.iter().fold(sign, |all, &b| all << 8 | i64::from(b))
}

/// A marker read in the other byte order.
fn turned(value: i64, marker: u8) -> i64 {
    if marker == 4 { i64::from((value as i32).swap_bytes()) } else { value.swap_bytes() }
}
