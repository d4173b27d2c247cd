//! Where the chunks of a dataset stand in its file.

use ::hdf5::Dataset;
use ::hdf5::dataset::ChunkInfo;

use crate::read::chunks::structure::{Messages, Structure, tree};

/// Most chunks that an index holds.
const MOST: usize = 1 << 23;
/// Most chunks of which the library is asked one by one: it counts from the first each time.
const ASKED: usize = 4096;

/// A chunk in the file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Stored {
    /// First byte.
    pub byte: u64,
    /// Bytes as stored; 0 where the chunk was never written.
    pub bytes: u32,
    /// Filters left out.
    pub mask: u32,
}

const NEVER: Stored = Stored { byte: 0, bytes: 0, mask: 0 };

/// All chunks of a dataset, the slowest axis first.
pub(super) struct Index {
    grid: Vec<usize>,
    stored: Vec<Stored>,
    /// Bytes of the largest chunk as stored.
    pub largest: usize,
    /// Whether there are chunks that were never written.
    pub gaps: bool,
}

impl Index {
    /// The chunks of a dataset of `shape` in chunks of `chunk`; nothing where they cannot be told for certain or are too many.
    pub fn load(dataset: &Dataset, structure: &Structure, messages: Option<&Messages>, shape: &[usize], chunk: &[usize]) -> Option<Index> {
        let grid: Vec<usize> = shape.iter().zip(chunk).map(|(n, c)| n.div_ceil(*c)).collect();
        let all = grid.iter().try_fold(1usize, |all, &n| all.checked_mul(n)).filter(|&all| all <= MOST)?;
        let written = dataset.num_chunks().filter(|&n| n <= all)?;
        let mut index = Index { grid, stored: vec![NEVER; all], largest: 0, gaps: written < all };
        let root = messages.and_then(|m| tree(&m.layout, shape.len()));
        match root {
            Some(None) if written == 0 => {}
            Some(Some(root)) => {
                let entries = structure.chunks(root, shape.len(), written)?;
                if entries.len() != written {
                    return None;
                }
                for e in entries {
                    index.put(&e.first, chunk, Stored { byte: e.byte, bytes: e.bytes, mask: e.mask })?;
                }
                // What was found is what the library finds; its addresses may or may not count from the base.
                for i in [0, written.saturating_sub(1)].into_iter().filter(|_| written > 0) {
                    let info = dataset.chunk_info(i)?;
                    let own = index.stored[index.place(&info.offset, chunk)?];
                    let here = own.byte == info.addr || own.byte == info.addr.checked_add(structure.base)?;
                    if !here || (u64::from(own.bytes), own.mask) != (info.size, info.filter_mask) {
                        return None;
                    }
                }
            }
            // Behind a user block the library's addresses are ambiguous.
            _ if structure.base == 0 && written <= ASKED => {
                for i in 0..written {
                    let ChunkInfo { offset, filter_mask, addr, size } = dataset.chunk_info(i)?;
                    index.put(&offset, chunk, Stored { byte: addr, bytes: u32::try_from(size).ok()?, mask: filter_mask })?;
                }
            }
            _ => return None,
        }
        Some(index)
    }

    fn place(&self, first: &[u64], chunk: &[usize]) -> Option<usize> {
        let mut place = 0;
        for ((&at, &size), &n) in first.iter().zip(chunk).zip(&self.grid) {
            let at = usize::try_from(at).ok().filter(|at| at % size == 0 && at / size < n)?;
            place = place * n + at / size;
        }
        Some(place)
    }

    fn put(&mut self, first: &[u64], chunk: &[usize], stored: Stored) -> Option<()> {
        let place = self.place(first, chunk)?;
        // Chunks stored twice, or empty, are no sound index.
        if self.stored[place] != NEVER || stored.bytes == 0 {
            return None;
        }
        self.largest = self.largest.max(stored.bytes as usize);
        self.stored[place] = stored;
        Some(())
    }

    /// A chunk by its place among all, the slowest axis first; nothing where it was never written.
    pub fn get(&self, place: usize) -> Option<Stored> {
        Some(self.stored[place]).filter(|s| *s != NEVER)
    }

    /// Number of chunks, written or not.
    pub fn len(&self) -> usize {
        self.stored.len()
    }

    /// Bytes of the index itself.
    pub fn bytes(&self) -> usize {
        self.stored.len() * size_of::<Stored>()
    }
}
