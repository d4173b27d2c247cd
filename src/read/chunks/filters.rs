//! Undoes what was done to a chunk when it was stored: checksum, gzip, shuffling.
//!
//! Filters follow the HDF5 File Format Specification, version 3.0, IV.A.2.l; gzip data are those of RFC 1950.

use ::hdf5::filters::Filter;
use flate2::{Decompress, FlushDecompress, Status};

/// One filter.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Step {
    /// First bytes of all values, then all second bytes, and so on.
    Shuffle,
    /// A zlib stream.
    Deflate,
    /// Four bytes behind the others.
    Fletcher32,
}

/// The filters of a dataset, in the order in which they were applied.
#[derive(Debug, Clone)]
pub(super) struct Pipeline {
    steps: Vec<Step>,
    /// Bytes of a value.
    width: usize,
}

/// Buffers of one thread.
pub(super) struct Scratch {
    /// The bytes as they are now.
    pub now: Vec<u8>,
    next: Vec<u8>,
    inflate: Decompress,
}

impl Scratch {
    /// Empty buffers.
    pub fn new() -> Scratch {
        Scratch { now: Vec::new(), next: Vec::new(), inflate: Decompress::new(true) }
    }
}

/// Bytes that the state of decompression takes: the window of 32 KiB and tables.
pub(super) const STATE_BYTES: usize = 64 << 10;
const CHECKSUM: usize = 4;

impl Pipeline {
    /// Nothing where a filter is not known here.
    pub fn of(filters: &[Filter], width: usize) -> Option<Pipeline> {
        let step = |f: &Filter| match f {
            Filter::Shuffle => Some(Step::Shuffle),
            Filter::Deflate(_) => Some(Step::Deflate),
            Filter::Fletcher32 => Some(Step::Fletcher32),
            _ => None,
        };
        let steps: Vec<Step> = filters.iter().map(step).collect::<Option<_>>()?;
        // The size in between two compressions is not known.
        let compressions = steps.iter().filter(|&&s| s == Step::Deflate).count();
        (compressions < 2 && steps.len() <= 32).then_some(Pipeline { steps, width })
    }

    /// The filters that a chunk with this mask went through.
    fn applied(&self, mask: u32) -> impl DoubleEndedIterator<Item = (usize, Step)> + '_ {
        self.steps.iter().copied().enumerate().filter(move |(i, _)| mask >> i & 1 == 0)
    }

    /// Whether a chunk with this mask stands in the file as it is in memory.
    pub fn is_plain(&self, mask: u32) -> bool {
        self.applied(mask).next().is_none()
    }

    /// Undoes the filters of the bytes in `scratch.now`, of which `plain` remain. Where `planes` is asked for, shuffling that
    /// was done first is left to the caller, which is told by `true`. Else says what is wrong: expected, found.
    pub fn undo(&self, mask: u32, plain: usize, planes: bool, scratch: &mut Scratch) -> Result<bool, (String, String)> {
        let mut left: Vec<(usize, Step)> = self.applied(mask).collect();
        while let Some((_, step)) = left.pop() {
            match step {
                Step::Fletcher32 => {
                    let length = scratch.now.len().saturating_sub(CHECKSUM);
                    let (values, sum) = scratch.now.split_at(length);
                    let said = <[u8; CHECKSUM]>::try_from(sum).map_or(0, u32::from_le_bytes);
                    let found = fletcher32(values);
                    // The library once wrote the two bytes of either sum in the other order, and reads both.
                    let exchanged = (found >> 8 & 0x00ff_00ff) | (found << 8 & 0xff00_ff00);
                    if sum.len() < CHECKSUM || (said != found && said != exchanged) {
                        return Err((format!("the checksum {said:#010x}"), format!("{found:#010x}")));
                    }
                    scratch.now.truncate(length);
                }
                Step::Deflate => {
                    // Checksums that were added before compression are inside.
                    let inside = left.iter().filter(|(_, s)| *s == Step::Fletcher32).count();
                    self.inflate(plain + CHECKSUM * inside, scratch)?;
                }
                Step::Shuffle => {
                    if planes && left.is_empty() && scratch.now.len() == plain {
                        return Ok(true);
                    }
                    unshuffle(self.width, scratch);
                }
            }
        }
        if scratch.now.len() != plain {
            return Err((format!("{plain} bytes"), format!("{}", scratch.now.len())));
        }
        Ok(false)
    }

    fn inflate(&self, length: usize, scratch: &mut Scratch) -> Result<(), (String, String)> {
        let expected = || format!("gzip data of {length} bytes");
        scratch.next.resize(length, 0);
        scratch.inflate.reset(true);
        let status = scratch.inflate.decompress(&scratch.now, &mut scratch.next, FlushDecompress::Finish);
        match status {
            Ok(Status::StreamEnd) if scratch.inflate.total_out() == length as u64 => {}
            Ok(Status::StreamEnd) => return Err((expected(), format!("{} bytes", scratch.inflate.total_out()))),
            Ok(_) if scratch.inflate.total_out() == length as u64 => return Err((expected(), "more or no end".into())),
            Ok(_) => return Err((expected(), format!("an end after {} bytes", scratch.inflate.total_out()))),
            Err(_) => return Err((expected(), "damaged ones".into())),
        }
        std::mem::swap(&mut scratch.now, &mut scratch.next);
        Ok(())
    }
}

/// Brings the bytes of every value together. Bytes behind the last whole value stay where they are.
fn unshuffle(width: usize, scratch: &mut Scratch) {
    let (from, to) = (&scratch.now, &mut scratch.next);
    let count = from.len() / width;
    to.resize(from.len(), 0);
    match width {
        4 => interleave::<4>(from, to),
        _ => interleave::<8>(from, to),
    }
    to[count * width..].copy_from_slice(&from[count * width..]);
    std::mem::swap(&mut scratch.now, &mut scratch.next);
}

fn interleave<const W: usize>(from: &[u8], to: &mut [u8]) {
    let count = from.len() / W;
    if count == 0 {
        return;
    }
    let values = to.as_chunks_mut::<W>().0;
    for (k, row) in from.chunks_exact(count).take(W).enumerate() {
        for (value, byte) in values.iter_mut().zip(row) {
            value[k] = *byte;
        }
    }
}

/// The checksum of J. Fletcher over words of 16 bits, the more significant byte first, with both sums modulo 65535.
fn fletcher32(bytes: &[u8]) -> u32 {
    let fold = |sum: u32| (sum & 0xffff) + (sum >> 16);
    let (mut one, mut two) = (0u32, 0u32);
    // So many words that no sum overflows.
    for part in bytes.chunks(2 * 360) {
        for word in part.chunks(2) {
            one += u32::from(word[0]) << 8 | word.get(1).map_or(0, |&b| u32::from(b));
            two += one;
        }
        (one, two) = (fold(one), fold(two));
    }
    (one, two) = (fold(one), fold(two));
    two << 16 | one
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn checksums_are_those_published() {
        // Test vectors for words of 16 bits, least significant byte first, as in the encyclopedic description of Fletcher's
        // checksum (values from memory): here the bytes of every word are exchanged.
        for (text, want) in [("badc\0e", 0xF04F_C729u32), ("badcfe", 0x5650_2D2A), ("badcfehg", 0xEBE1_9591)] {
            assert_eq!(fletcher32(text.as_bytes()), want, "{text}");
        }
    }

    #[test]
    fn shuffled_bytes_come_together() {
        let mut scratch = Scratch::new();
        scratch.now = vec![0, 4, 1, 5, 2, 6, 3, 7, 8, 9];
        unshuffle(4, &mut scratch);
        assert_eq!(scratch.now, [0, 1, 2, 3, 4, 5, 6, 7, 8, 9]);
    }
}
