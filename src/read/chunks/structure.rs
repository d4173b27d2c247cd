//! What the file itself says of a dataset where the library tells it slowly or not at all: the messages of its header, and the
//! B-tree of its chunks.
//!
//! Layouts are from the HDF5 File Format Specification, version 3.0: sections III.A.1 (version 1 B-trees), IV.A.1 (object headers),
//! IV.A.2.d, i and q (datatype, layout and continuation). What is written otherwise gives nothing, and is left to the library.

use std::fs::File;

use crate::read::chunks::file::read_exact_at;

/// Most bytes of one block of a header, and most blocks: the sizes of a damaged file may be anything.
const BLOCK_MOST: u64 = 1 << 20;
const BLOCKS_MOST: usize = 256;
/// Deepest B-tree.
const DEEPEST: u8 = 16;

/// A file whose addresses count from `base`.
pub(super) struct Structure<'a> {
    /// The file.
    pub file: &'a File,
    /// Its first byte behind a user block.
    pub base: u64,
}

/// The messages of a dataset that matter.
#[derive(Debug, Default)]
pub(super) struct Messages {
    /// Its storage.
    pub layout: Vec<u8>,
    /// The type of its values; empty where that is kept elsewhere.
    pub datatype: Vec<u8>,
}

/// One chunk of the B-tree: stored bytes, filter mask, first index along every axis, address.
pub(super) struct Entry {
    /// Size as stored.
    pub bytes: u32,
    /// Filters left out.
    pub mask: u32,
    /// First index along every axis of the dataset.
    pub first: Vec<u64>,
    /// First byte in the file.
    pub byte: u64,
}

fn number(bytes: &[u8], at: usize, width: usize) -> Option<u64> {
    Some(bytes.get(at..at + width)?.iter().rev().fold(0, |sum, &b| sum << 8 | u64::from(b)))
}

impl Structure<'_> {
    fn bytes(&self, address: u64, count: u64) -> Option<Vec<u8>> {
        let mut out = vec![0; usize::try_from(count).ok().filter(|_| count <= BLOCK_MOST)?];
        read_exact_at(self.file, self.base.checked_add(address)?, &mut out).ok()?;
        Some(out)
    }

    /// The messages of the object header at an address.
    pub fn messages(&self, address: u64) -> Option<Messages> {
        let head = self.bytes(address, 16)?;
        let second = head.starts_with(b"OHDR");
        // Version 2: flags, times and attribute limits where flagged, then the size of the first block.
        let flags = if second { *head.get(5)? } else { 0 };
        let mut blocks = if second {
            let at = 6 + if flags & 0x20 != 0 { 16 } else { 0 } + if flags & 0x10 != 0 { 4 } else { 0 };
            let width = 1 << (flags & 3);
            let size = number(&self.bytes(address, at as u64 + 8)?, at, width)?;
            vec![(address + (at + width) as u64, size)]
        } else {
            if head[0] != 1 {
                return None;
            }
            vec![(address + 16, number(&head, 8, 4)?)]
        };
        let mut out = Messages::default();
        let mut done = 0;
        while let Some(&(start, size)) = blocks.get(done) {
            done += 1;
            let block = self.bytes(start, size)?;
            // Continuations of version 2 have a signature and a checksum around them.
            let (mut at, end) = if second && done > 1 { (4, block.len().checked_sub(4)?) } else { (0, block.len()) };
            let prefix = if !second { 8 } else { 4 + if flags & 4 != 0 { 2 } else { 0 } };
            while at + prefix <= end {
                let (kind, size, said) = if second {
                    (number(&block, at, 1)?, number(&block, at + 1, 2)?, block[at + 3])
                } else {
                    (number(&block, at, 2)?, number(&block, at + 2, 2)?, block[at + 4])
                };
                let body = block.get(at + prefix..at + prefix + size as usize).filter(|_| at + prefix + size as usize <= end)?;
                match kind {
                    // A shared datatype stands elsewhere.
                    0x03 if said & 2 == 0 => out.datatype = body.to_vec(),
                    0x08 => out.layout = body.to_vec(),
                    0x10 if blocks.len() < BLOCKS_MOST => blocks.push((number(body, 0, 8)?, number(body, 8, 8)?)),
                    0x10 => return None,
                    _ => {}
                }
                at += prefix + size as usize;
            }
        }
        Some(out)
    }

    /// The chunks below a node of a B-tree, at most `most`; `axes` are those of the dataset.
    pub fn chunks(&self, root: u64, axes: usize, most: usize) -> Option<Vec<Entry>> {
        let mut out = Vec::new();
        self.below(root, axes, most, None, &mut out)?;
        Some(out)
    }

    fn below(&self, node: u64, axes: usize, most: usize, level: Option<u8>, out: &mut Vec<Entry>) -> Option<()> {
        let head = self.bytes(node, 24)?;
        // Signature, type of the nodes, level, entries, two neighbours.
        let (kind, own, entries) = (head[4], head[5], number(&head, 6, 2)? as usize);
        if !head.starts_with(b"TREE") || kind != 1 || own > DEEPEST || level.is_some_and(|above| own + 1 != above) {
            return None;
        }
        // Keys have one more offset, into the element, and one key follows the last child.
        let key = 8 + 8 * (axes + 1);
        let body = self.bytes(node + 24, (entries * (key + 8) + key) as u64)?;
        for entry in body.chunks_exact(key + 8).take(entries) {
            let child = number(entry, key, 8)?;
            if own > 0 {
                self.below(child, axes, most, Some(own), out)?;
                continue;
            }
            if out.len() == most {
                return None;
            }
            let first = (0..axes).map(|a| number(entry, 8 + 8 * a, 8)).collect::<Option<_>>()?;
            let byte = child.checked_add(self.base)?;
            out.push(Entry { bytes: number(entry, 0, 4)? as u32, mask: number(entry, 4, 4)? as u32, first, byte });
        }
        Some(())
    }
}

/// The address of the B-tree of chunks that a layout message names; none where no chunk was written yet.
pub(super) fn tree(layout: &[u8], axes: usize) -> Option<Option<u64>> {
    // Version 3, class 2 (chunked), dimensionality with one more for the element.
    if layout.get(..3)? != [3, 2, axes as u8 + 1] {
        return None;
    }
    let address = number(layout, 3, 8)?;
    Some((address != u64::MAX).then_some(address))
}

/// Whether a datatype message is that of IEEE 754 numbers of so many bytes with the most significant first.
pub(super) fn is_big_ieee(message: &[u8], bytes: usize) -> bool {
    // Class 1 of version 1 to 3, byte order, implied leading bit, place of the sign, size; then first bit and number of bits,
    // place and size of exponent and mantissa, bias.
    let (sign, rest): (u8, [u8; 12]) = match bytes {
        4 => (31, [0, 0, 32, 0, 23, 8, 0, 23, 127, 0, 0, 0]),
        _ => (63, [0, 0, 64, 0, 52, 11, 0, 52, 0xff, 3, 0, 0]),
    };
    let head = |m: &[u8]| m[0] & 0xf == 1 && m[1..8] == [0x21, sign, 0, bytes as u8, 0, 0, 0];
    message.len() >= 20 && head(message) && message[8..20] == rest
}
