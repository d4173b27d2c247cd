//! Blocks of a plain array inside a file, by seeking: only the bytes asked for are read.

use std::fs::File;
use std::io::{ErrorKind, Read, Seek, SeekFrom};

use crate::base::error::Result;
use crate::base::real::Real;
use crate::read::header::{Header, Precision};

/// Bytes skipped rather than read when they lie between two wanted runs: a seek costs about as much
/// as copying this many.
const GAP: u64 = 16 << 10;

/// Most bytes read in one go into the buffer.
pub(super) const SPAN: u64 = 4 << 20;

/// An array stored in one piece, slowest axis first.
pub(super) struct RawArray {
    header: Header,
    file: File,
    offset: u64,
    /// Where the bytes stand when they are in several pieces; byte numbers are then those of the pieces joined.
    pieces: Vec<Piece>,
    swap: bool,
    buffer: Vec<u8>,
}

/// A piece of an array: the joined bytes from `joined` on stand in the file from `byte` on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Piece {
    /// Number of the first byte when all pieces are joined.
    pub joined: u64,
    /// Its place in the file.
    pub byte: u64,
}

/// A run of values that stand together in the file: first byte, and first place and number in the block.
#[derive(Clone, Copy)]
struct Run {
    byte: u64,
    place: usize,
    values: usize,
}

impl RawArray {
    /// The array whose first value is at byte `offset` of `file`.
    pub fn new(header: Header, file: File, offset: u64, big_endian: bool) -> RawArray {
        RawArray { header, file, offset, pieces: Vec::new(), swap: big_endian != cfg!(target_endian = "big"), buffer: Vec::new() }
    }

    /// The same in pieces, of which the first begins with byte 0; the array begins at byte `offset` of the pieces joined.
    #[must_use]
    pub fn in_pieces(mut self, pieces: Vec<Piece>) -> RawArray {
        self.pieces = pieces;
        self
    }

    /// Reads `count` values from `start` along every axis into `out`, slowest axis first.
    ///
    /// Values are widened where `T` is wider than what is stored.
    pub fn read_block<T: Real>(&mut self, start: &[usize], count: &[usize], out: &mut [T]) -> Result<()> {
        let width = self.header.precision.bytes() as u64;
        let same = size_of::<T>() as u64 == width;
        let mut batch: Vec<Run> = Vec::new();
        for run in runs(&self.header.shape, start, count, self.offset, width) {
            let end = run.byte + run.values as u64 * width;
            if let (Some(first), Some(last)) = (batch.first(), batch.last()) {
                let gap = run.byte - (last.byte + last.values as u64 * width);
                if gap > GAP || end - first.byte > SPAN {
                    self.read_batch(&batch, out)?;
                    batch.clear();
                }
            }
            // A long run needs no company: it goes straight to its place, or through the buffer in parts.
            if end - run.byte >= SPAN / 4 {
                self.read_batch(&batch, out)?;
                batch.clear();
                let part = if same { run.values } else { (SPAN / width) as usize };
                for first in (0..run.values).step_by(part) {
                    let values = part.min(run.values - first);
                    let byte = run.byte + first as u64 * width;
                    self.read_batch(&[Run { byte, place: run.place + first, values }], out)?;
                }
            } else {
                batch.push(run);
            }
        }
        self.read_batch(&batch, out)
    }

    fn read_batch<T: Real>(&mut self, batch: &[Run], out: &mut [T]) -> Result<()> {
        let (Some(first), Some(last)) = (batch.first(), batch.last()) else {
            return Ok(());
        };
        let width = self.header.precision.bytes();
        if batch.len() == 1 && size_of::<T>() == width {
            let out = &mut out[first.place..first.place + first.values];
            fill(&mut self.file, &self.header, &self.pieces, first.byte, bytemuck::cast_slice_mut(out))?;
            if self.swap {
                swap_in_place(out);
            }
            return Ok(());
        }
        let length = (last.byte - first.byte) as usize + last.values * width;
        self.buffer.resize(length, 0);
        fill(&mut self.file, &self.header, &self.pieces, first.byte, &mut self.buffer)?;
        for run in batch {
            let from = &self.buffer[(run.byte - first.byte) as usize..][..run.values * width];
            let to = &mut out[run.place..run.place + run.values];
            if size_of::<T>() == width {
                bytemuck::cast_slice_mut::<T, u8>(to).copy_from_slice(from);
                if self.swap {
                    swap_in_place(to);
                }
            } else {
                assert_eq!(self.header.precision, Precision::F32, "values are never narrowed");
                for (o, b) in to.iter_mut().zip(from.as_chunks::<4>().0) {
                    let bits = u32::from_ne_bytes(*b);
                    *o = T::of(f64::from(f32::from_bits(if self.swap { bits.swap_bytes() } else { bits })));
                }
            }
        }
        Ok(())
    }
}

fn fill(file: &mut File, header: &Header, pieces: &[Piece], byte: u64, to: &mut [u8]) -> Result<()> {
    let mut read = |byte: u64, to: &mut [u8]| {
        file.seek(SeekFrom::Start(byte)).and_then(|_| file.read_exact(to)).map_err(|e| {
            header
                .fault("cannot read values")
                .found(match e.kind() {
                    ErrorKind::UnexpectedEof => "the end of the file".into(),
                    _ => e.to_string(),
                })
                .hint("the file changed or its disk failed")
        })
    };
    if pieces.is_empty() {
        return read(byte, to);
    }
    let (mut byte, mut rest) = (byte, to);
    let mut next = pieces.partition_point(|p| p.joined <= byte);
    while !rest.is_empty() {
        let piece = pieces[next - 1];
        let left = pieces.get(next).map_or(u64::MAX, |p| p.joined - byte);
        let (now, later) = rest.split_at_mut(left.min(rest.len() as u64) as usize);
        read(piece.byte + (byte - piece.joined), now)?;
        byte += now.len() as u64;
        rest = later;
        next += 1;
    }
    Ok(())
}

fn swap_in_place<T: Real>(values: &mut [T]) {
    if size_of::<T>() == 4 {
        bytemuck::cast_slice_mut::<T, u32>(values).iter_mut().for_each(|v| *v = v.swap_bytes());
    } else {
        bytemuck::cast_slice_mut::<T, u64>(values).iter_mut().for_each(|v| *v = v.swap_bytes());
    }
}

/// The runs of a block in ascending order. Trailing axes taken whole join into one run.
fn runs(shape: &[usize], start: &[usize], count: &[usize], offset: u64, width: u64) -> impl Iterator<Item = Run> + use<> {
    let mut inner = shape.len() - 1;
    let mut values = count[inner];
    while inner > 0 && count[inner] == shape[inner] {
        inner -= 1;
        values *= count[inner];
    }
    let mut step = vec![width; shape.len()];
    for a in (0..shape.len() - 1).rev() {
        step[a] = step[a + 1] * shape[a + 1] as u64;
    }
    let base = offset + start.iter().zip(&step).map(|(&s, &w)| s as u64 * w).sum::<u64>();
    let outer = count[..inner].to_vec();
    let total: usize = outer.iter().product();
    (0..total).map(move |i| {
        let mut rest = i;
        let mut byte = base;
        for a in (0..outer.len()).rev() {
            byte += (rest % outer[a]) as u64 * step[a];
            rest /= outer[a];
        }
        Run { byte, place: i * values, values }
    })
}

#[cfg(test)]
mod tests {
    use std::io::Write;

    use super::*;

    /// Longer than `SPAN`, with rows longer than `GAP`.
    const SHAPE: [usize; 3] = [20, 9, 8192];

    fn check<T: Real>(array: &mut RawArray, start: [usize; 3], count: [usize; 3]) {
        let mut out = vec![T::ZERO; count.iter().product()];
        array.read_block(&start, &count, &mut out).unwrap();
        for (i, v) in out.iter().enumerate() {
            let at = [i / count[2] / count[1], i / count[2] % count[1], i % count[2]];
            let [a, b, c]: [usize; 3] = std::array::from_fn(|d| start[d] + at[d]);
            assert_eq!(v.wide(), ((a * SHAPE[1] + b) * SHAPE[2] + c) as f64, "{start:?} {count:?} {i}");
        }
    }

    #[test]
    fn long_runs_wide_gaps_and_full_buffers_arrive() {
        for big in [false, true] {
            let mut file = tempfile::tempfile().unwrap();
            file.write_all(b"head").unwrap();
            // Every index is below 2^24 and so exact in f32.
            let values = (0..SHAPE.iter().product()).map(|i| i as f32);
            let bytes: Vec<u8> = values.flat_map(|v| if big { v.to_be_bytes() } else { v.to_le_bytes() }).collect();
            assert!(bytes.len() as u64 > SPAN && SHAPE[2] as u64 * 4 > GAP);
            file.write_all(&bytes).unwrap();
            let header = Header { path: "array".into(), item: None, label: String::new(), shape: SHAPE.into(), precision: Precision::F32 };
            let mut array = RawArray::new(header, file, 4, big);
            for (start, count) in [
                ([0, 0, 0], SHAPE),
                ([3, 0, 0], [16, 9, 8192]),
                ([3, 2, 0], [5, 6, 8192]),
                ([0, 0, 8000], [20, 9, 192]),
                ([0, 8, 4000], [20, 1, 4100]),
                ([1, 0, 7], [19, 9, 8185]),
                ([19, 8, 8191], [1, 1, 1]),
            ] {
                check::<f32>(&mut array, start, count);
                check::<f64>(&mut array, start, count);
            }
        }
    }

    #[test]
    fn values_across_pieces_arrive() {
        // 12 values of 4 bytes in pieces of 10 bytes, so that values are cut, with 3 other bytes between them.
        let values: Vec<u8> = (0..12u16).flat_map(|i| f32::from(i).to_le_bytes()).collect();
        let (mut bytes, mut pieces) = (Vec::new(), Vec::new());
        for (i, part) in values.chunks(10).enumerate() {
            bytes.extend(b"...");
            pieces.push(Piece { joined: 10 * i as u64, byte: bytes.len() as u64 });
            bytes.extend(part);
        }
        let mut file = tempfile::tempfile().unwrap();
        file.write_all(&bytes).unwrap();
        let header = Header { path: "array".into(), item: None, label: String::new(), shape: vec![2, 2, 2], precision: Precision::F32 };
        let mut array = RawArray::new(header, file, 16, false).in_pieces(pieces);
        let mut out = [0.0f32; 8];
        array.read_block(&[0; 3], &[2; 3], &mut out).unwrap();
        assert_eq!(out, [4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 11.0]);
        let mut out = [0.0f64; 2];
        array.read_block(&[0, 0, 1], &[1, 2, 1], &mut out).unwrap();
        assert_eq!(out, [5.0, 7.0]);
    }
}
