//! One chunk and the places its values go to.

use std::ops::Range;

use crate::base::error::Result;
use crate::base::real::Real;
use crate::read::chunks::StoredChunks;
use crate::read::chunks::file::read_exact_at;
use crate::read::chunks::filters::Scratch;
use crate::read::chunks::index::Stored;
use crate::read::chunks::values::Values;

/// A decoded chunk that is kept.
pub(super) struct Held {
    pub bytes: Vec<u8>,
    /// Whether the bytes are still shuffled.
    pub planes: bool,
}

/// A chunk with the part of it that is wanted.
pub(super) struct Item<'a, 'o, T> {
    pub array: &'a StoredChunks,
    /// Place among all chunks of the array.
    pub place: usize,
    /// First index of the chunk along every axis.
    pub first: Vec<usize>,
    /// The samples wanted along x, y, z.
    pub range: [Range<usize>; 3],
    /// Per component its index along the component axis of the chunk, and where its values go: whole rows along x, by y, then z, in
    /// pieces of one or several.
    pub parts: Vec<(usize, Vec<&'o mut [T]>)>,
    /// Number of components that this chunk has for one read or another.
    pub needed: usize,
    /// Values where no chunk was written.
    pub fill: T,
    /// The chunk itself, where it was kept.
    pub held: Option<Held>,
    /// Whether it is to be kept after this.
    pub keep: bool,
}

impl<T: Real> Item<'_, '_, T> {
    /// Whether values of the chunk remain that are wanted in later planes.
    pub fn ends_inside(&self) -> bool {
        let z = self.array.axes.space[2];
        self.range[2].end < (self.first[z] + self.array.chunk[z]).min(self.array.header.shape[z])
    }

    /// Whether the chunk goes through filters: others are read in part, and never kept.
    pub fn is_decoded(&self) -> bool {
        self.array.index.get(self.place).is_some_and(|s| !self.array.pipeline.is_plain(s.mask))
    }

    /// Fetches and decodes the chunk, and delivers its values; returns it if it is kept.
    pub fn deliver(mut self, scratch: &mut Scratch) -> Result<Option<Held>> {
        let Some(stored) = self.array.index.get(self.place) else {
            let fill = self.fill;
            self.parts.iter_mut().flat_map(|(_, pieces)| pieces).for_each(|piece| piece.fill(fill));
            return Ok(None);
        };
        if let Some(held) = self.held.take() {
            self.scatter(&held.bytes, held.planes, 0);
            return Ok(self.keep.then_some(held));
        }
        let plain = self.array.plain();
        if self.array.pipeline.is_plain(stored.mask) {
            if stored.bytes as usize != plain {
                return Err(self.array.fault(&self.first, format!("{plain} bytes"), stored.bytes.to_string()));
            }
            let span = self.span();
            let width = self.array.header.precision.bytes();
            self.fetch(stored, span.start * width, span.len() * width, scratch)?;
            self.scatter(&scratch.now, false, span.start);
            return Ok(None);
        }
        self.fetch(stored, 0, stored.bytes as usize, scratch)?;
        // Rows are brought together as they are delivered where they stand in sequence.
        let rows = self.array.strides()[self.array.axes.space[0]] == 1;
        let undone = self.array.pipeline.undo(stored.mask, plain, rows, scratch);
        let planes = undone.map_err(|(expected, found)| self.array.fault(&self.first, expected, found))?;
        self.scatter(&scratch.now, planes, 0);
        Ok(self.keep.then(|| Held { bytes: std::mem::take(&mut scratch.now), planes }))
    }

    /// Reads bytes of the chunk into `scratch.now`.
    fn fetch(&self, stored: Stored, from: usize, count: usize, scratch: &mut Scratch) -> Result<()> {
        scratch.now.resize(count, 0);
        read_exact_at(&self.array.file, stored.byte.saturating_add(from as u64), &mut scratch.now).map_err(|e| {
            let found = if e.kind() == std::io::ErrorKind::UnexpectedEof { "the end of the file".into() } else { e.to_string() };
            self.array.fault(&self.first, format!("{count} bytes"), found)
        })
    }

    /// The values of the chunk from the first to the last that is wanted.
    fn span(&self) -> Range<usize> {
        let strides = self.array.strides();
        let mut span = 0..1;
        for a in 0..3 {
            let axis = self.array.axes.space[a];
            span.start += (self.range[a].start - self.first[axis]) * strides[axis];
            span.end += (self.range[a].end - 1 - self.first[axis]) * strides[axis];
        }
        let step = self.component_stride(&strides);
        let low = self.parts.iter().map(|(c, _)| *c).min().unwrap_or(0);
        let high = self.parts.iter().map(|(c, _)| *c).max().unwrap_or(0);
        span.start + low * step..span.end + high * step
    }

    fn component_stride(&self, strides: &[usize]) -> usize {
        self.array.axes.component.map_or(0, |end| strides[self.array.component_axis(end)])
    }

    /// Copies values to where they go; the first of `bytes` is value `skipped` of the chunk.
    fn scatter(&mut self, bytes: &[u8], planes: bool, skipped: usize) {
        let values = Values { bytes, planes, precision: self.array.header.precision, big: self.array.big };
        let strides = self.array.strides();
        let [sx, sy, sz] = self.array.axes.space.map(|a| strides[a]);
        let [x, y, z] = [0, 1, 2].map(|a| self.range[a].start - self.first[self.array.axes.space[a]]);
        let component = self.component_stride(&strides);
        let (nx, ny) = (self.range[0].len(), self.range[1].len());
        for (c, pieces) in &mut self.parts {
            let corner = *c * component + x * sx + y * sy + z * sz - skipped;
            for (row, to) in pieces.iter_mut().flat_map(|piece| piece.chunks_exact_mut(nx)).enumerate() {
                values.take(corner + row % ny * sy + row / ny * sz, sx, to);
            }
        }
    }
}
