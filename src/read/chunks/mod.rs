//! Chunked arrays of HDF5 files read without the library: every chunk is fetched by its place in the file and decoded on a worker.
//!
//! Understood are IEEE 754 numbers in either byte order behind shuffling, gzip and checksums, in any order. The library says which
//! chunks there are (and what stands where none was written); datasets it may read in another way than from the bytes at hand
//! (other filters, links into other files, damaged or unusual structures) are left to it.

use std::fs::File;
use std::path::Path;

use ::hdf5::dataset::{ChunkOpts, Layout};
use ::hdf5::{Dataset, H5Type};

use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::read::chunks::filters::Pipeline;
use crate::read::chunks::index::Index;
use crate::read::chunks::structure::{Structure, is_big_ieee};
use crate::read::hdf5::ChunkedArray;
use crate::read::header::Header;
use crate::read::order::{Axes, End};
use crate::read::superblock;

mod decoder;
mod file;
mod filters;
mod index;
mod item;
mod structure;
mod values;

pub(super) use decoder::{Decoder, Request};

/// An array in chunks whose places are known.
pub(super) struct StoredChunks {
    header: Header,
    axes: Axes,
    file: File,
    index: Index,
    pipeline: Pipeline,
    /// Edges of a chunk, slowest axis first, one for an axis that was put in.
    chunk: Vec<usize>,
    big: bool,
    /// Reads a value where no chunk was written; there if such chunks are.
    pub library: Option<ChunkedArray>,
}

impl StoredChunks {
    /// Readies a dataset of the file at `path`; nothing where the library has to read it.
    pub fn of(path: &Path, dataset: &Dataset, header: &Header, axes: &Axes) -> Option<StoredChunks> {
        // A link may lead into another file, whose bytes are not those of `path`.
        if dataset.layout() != Layout::Chunked || Path::new(&dataset.filename()) != path {
            return None;
        }
        if dataset.dcpl().ok()?.chunk_opts().is_some_and(|o| o.contains(ChunkOpts::DONT_FILTER_PARTIAL_CHUNKS)) {
            return None;
        }
        let edges = dataset.chunk()?;
        let width = header.precision.bytes();
        let plain = edges.iter().try_fold(width, |all, &c| all.checked_mul(c)).filter(|&all| all > 0 && all <= u32::MAX as usize)?;
        let pipeline = Pipeline::of(&dataset.filters(), width)?;
        let file = File::open(path).ok()?;
        let structure = Structure { file: &file, base: superblock::base(path)? };
        let messages = address(dataset).and_then(|a| structure.messages(a));
        let dtype = dataset.dtype().ok()?;
        let big = if dtype.is::<f32>() || dtype.is::<f64>() {
            cfg!(target_endian = "big")
        } else if messages.as_ref().is_some_and(|m| is_big_ieee(&m.datatype, width)) {
            true
        } else {
            return None;
        };
        let index = Index::load(dataset, &structure, messages.as_ref(), &dataset.shape(), &edges)?;
        // What gzip cannot make smaller is stored as it is: chunks much larger than their values are damaged or strange.
        if index.largest > 2 * plain + 4096 {
            return None;
        }
        let header = Header { shape: axes.full(&dataset.shape()), ..header.clone() };
        Some(StoredChunks { header, axes: *axes, file, index, pipeline, chunk: axes.full(&edges), big, library: None })
    }

    /// What stands where no chunk was written, asked of the library; 0 where nothing is missing.
    pub fn fill<T: Real + H5Type>(&self) -> Result<T> {
        let missing = (0..self.index.len()).find(|&place| self.index.get(place).is_none());
        let (Some(library), Some(mut place)) = (&self.library, missing) else { return Ok(T::ZERO) };
        let mut first = vec![0; self.chunk.len()];
        for a in (0..first.len()).rev() {
            first[a] = place % self.across(a) * self.chunk[a];
            place /= self.across(a);
        }
        let mut value = [T::ZERO];
        library.read_block(&first, &vec![1; first.len()], &mut value)?;
        Ok(value[0])
    }

    /// Whether chunks are missing, so that `library` is needed.
    pub fn has_gaps(&self) -> bool {
        self.index.gaps
    }

    /// Bytes of the values of a chunk.
    fn plain(&self) -> usize {
        self.chunk.iter().product::<usize>() * self.header.precision.bytes()
    }

    /// Edge of a chunk along the component axis.
    fn components(&self) -> usize {
        self.axes.component.map_or(1, |end| self.chunk[self.component_axis(end)])
    }

    fn component_axis(&self, end: End) -> usize {
        match end {
            End::First => 0,
            End::Last => self.chunk.len() - 1,
        }
    }

    /// Distance of neighbours along every axis inside a chunk.
    fn strides(&self) -> Vec<usize> {
        (0..self.chunk.len()).map(|a| self.chunk[a + 1..].iter().product()).collect()
    }

    /// Number of chunks along an axis.
    fn across(&self, axis: usize) -> usize {
        self.header.shape[axis].div_ceil(self.chunk[axis])
    }

    /// The place of a chunk among all from its place along every axis.
    fn place(&self, along: &[usize]) -> usize {
        along.iter().enumerate().fold(0, |place, (a, &k)| place * self.across(a) + k)
    }

    /// Chunks that hold one plane of every component.
    fn layer(&self) -> usize {
        (0..self.chunk.len()).filter(|&a| a != self.axes.space[2]).map(|a| self.across(a)).product()
    }

    /// The error about a chunk, which begins at `first`: what was expected and found.
    fn fault(&self, first: &[usize], expected: String, found: String) -> Error {
        let real = first.iter().enumerate().filter(|(a, _)| Some(*a) != self.axes.put_in);
        let place = real.map(|(_, i)| i.to_string()).collect::<Vec<_>>().join(",");
        self.header
            .fault("cannot read values")
            .expected(format!("{expected} in the chunk that begins at {place}"))
            .found(found)
            .hint("the file is damaged: copy or write it again")
    }
}

/// The address of the header of a dataset.
///
/// The library's wrapper shows it nowhere but in the debug form of its token: one number, or the bytes of one. Whatever is made of it
/// is checked by what stands there and by what the library says of the chunks.
fn address(dataset: &Dataset) -> Option<u64> {
    let text = format!("{:?}", dataset.loc_info().ok()?.token);
    let numbers = text.split(|c: char| !c.is_ascii_digit()).filter(|t| !t.is_empty()).filter_map(|t| t.parse().ok());
    match numbers.collect::<Vec<u64>>()[..] {
        [address] => Some(address),
        ref bytes if bytes.len() >= 8 => {
            Some(bytes[bytes.len() - 16.min(bytes.len())..][..8].iter().rev().fold(0, |sum, b| sum << 8 | (b & 0xff)))
        }
        _ => None,
    }
}
