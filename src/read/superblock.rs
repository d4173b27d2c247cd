//! Looks at the first bytes of an HDF5 file: is it one, and is it as long as it says.
//!
//! The layout of the superblock is from the HDF5 File Format Specification, version 3.0, section II.A.

use std::fs::File;
use std::io::{Read, Seek, SeekFrom};
use std::path::Path;

use crate::base::error::{Error, Result};

const SIGNATURE: [u8; 8] = *b"\x89HDF\r\n\x1a\n";
const WHAT: &str = "cannot read the HDF5 file";
const TRUNCATED: &str = "the file is truncated: copy or write it again";

/// Refuses files without a signature and files shorter than their superblock states.
pub(super) fn check(path: &Path) -> Result<()> {
    let io = |e: std::io::Error| Error::input(WHAT).at(path).found(e.to_string());
    let mut file = File::open(path).map_err(io)?;
    let length = file.metadata().map_err(io)?.len();
    let fault = || Error::input(WHAT).at(path);
    if length == 0 {
        return Err(fault().expected("an HDF5 signature").found("an empty file").hint(TRUNCATED));
    }
    let Some(at) = signature(&mut file, length).map_err(io)? else {
        let head = bytes(&mut file, 0, 8).map_err(io)?;
        if SIGNATURE.starts_with(&head) {
            return Err(short(fault(), length));
        }
        return Err(fault().expected("an HDF5 signature").found(format!("a file beginning \"{}\"", head.escape_ascii())).hint(
            "snapshots are HDF5 files, .npy files or folders of .npy files; files without a header need --raw-values and --raw-shape",
        ));
    };
    let block = bytes(&mut file, at, 96).map_err(io)?;
    let (Some(&version), Some(&width)) = (block.get(8), block.get(if block.get(8) < Some(&2) { 13 } else { 9 })) else {
        return Err(short(fault(), length));
    };
    // End of file is the third address of versions 0 and 1, which begin at 24 and 28, and of versions
    // 2 and 3, which begin at 12. Later versions are left to the library.
    let first = match version {
        0 => 24,
        1 => 28,
        2 | 3 => 12,
        _ => return Ok(()),
    };
    let width = usize::from(width);
    if width > 8 {
        return Ok(());
    }
    let Some(end) = block.get(first + 2 * width..first + 3 * width) else {
        return Err(short(fault(), length));
    };
    let end = end.iter().rev().fold(0u64, |sum, &b| sum << 8 | u64::from(b));
    if end > length {
        return Err(fault().expected(format!("{end} bytes, as its header says")).found(format!("{length}")).hint(TRUNCATED));
    }
    Ok(())
}

/// Where addresses count from, in a file whose addresses and lengths have 8 bytes.
pub(super) fn base(path: &Path) -> Option<u64> {
    let mut file = File::open(path).ok()?;
    let length = file.metadata().ok()?.len();
    let at = signature(&mut file, length).ok()??;
    let block = bytes(&mut file, at, 16).ok()?;
    let widths = match block.get(8)? {
        0 | 1 => block.get(13..15)?,
        2 | 3 => block.get(9..11)?,
        _ => return None,
    };
    (widths == [8, 8]).then_some(at)
}

/// The place of the signature: 0, or 512 and its doublings behind a user block.
fn signature(file: &mut File, length: u64) -> std::io::Result<Option<u64>> {
    let mut at = 0;
    while at < length {
        if bytes(file, at, 8)? == SIGNATURE {
            return Ok(Some(at));
        }
        at = if at == 0 { 512 } else { at * 2 };
    }
    Ok(None)
}

fn short(fault: Error, length: u64) -> Error {
    fault.expected("a complete superblock").found(format!("a file of {length} bytes")).hint(TRUNCATED)
}

fn bytes(file: &mut File, at: u64, count: u64) -> std::io::Result<Vec<u8>> {
    let mut read = Vec::new();
    file.seek(SeekFrom::Start(at))?;
    file.by_ref().take(count).read_to_end(&mut read)?;
    Ok(read)
}
