//! Reads at a position, from several threads at once.

use std::fs::File;
use std::io::Result;

/// Fills `to` with the bytes from `byte` on.
#[cfg(unix)]
pub(super) fn read_exact_at(file: &File, byte: u64, to: &mut [u8]) -> Result<()> {
    std::os::unix::fs::FileExt::read_exact_at(file, to, byte)
}

/// Fills `to` with the bytes from `byte` on.
#[cfg(windows)]
pub(super) fn read_exact_at(file: &File, mut byte: u64, mut to: &mut [u8]) -> Result<()> {
    while !to.is_empty() {
        let read = std::os::windows::fs::FileExt::seek_read(file, to, byte)?;
        if read == 0 {
            return Err(std::io::ErrorKind::UnexpectedEof.into());
        }
        byte += read as u64;
        to = &mut to[read..];
    }
    Ok(())
}
