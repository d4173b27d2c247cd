//! Dilation of an object's intervals by a margin: along x within rows, then along y within planes, then along z.

use crate::space::patch::{Interval, PatchShape, Segment};

/// How dilated cells behave at the ends of an axis.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Axis {
    /// Clipped to `0..n`.
    Open(i32),
    /// Goes on.
    Endless,
    /// Modulo the number of cells.
    Wrapped(i32),
}

/// Spans `start..end` along x.
type Span = (i32, i32);

/// A row of spans, by their places in the span list.
#[derive(Debug, Clone, Copy)]
struct Row {
    y: i32,
    first: usize,
    end: usize,
}

/// A plane of rows, by their places in the row list.
#[derive(Debug, Clone, Copy)]
struct Plane {
    z: i32,
    first: usize,
    end: usize,
}

/// Cells as sorted planes of sorted rows of sorted spans, disjoint and not adjacent.
#[derive(Default)]
struct Cells {
    planes: Vec<Plane>,
    rows: Vec<Row>,
    spans: Vec<Span>,
}

/// Rows of some cells to be merged with others, moved by `shift` along y.
#[derive(Clone, Copy)]
struct Source<'a> {
    rows: &'a [Row],
    shift: i32,
}

pub(super) fn dilate(object: Vec<Interval>, margin: i32, axes: [Axis; 3], period: [Option<i32>; 3]) -> PatchShape {
    let wide = along_x(&object, margin, axes[0]);
    let flat = along_y(&wide, margin, axes[1]);
    let full = along_z(&flat, margin, axes[2]);
    let mut stored = Vec::with_capacity(full.spans.len());
    let mut cells = 0;
    for plane in &full.planes {
        for row in &full.rows[plane.first..plane.end] {
            for &(start, end) in &full.spans[row.first..row.end] {
                let len = (end - start) as u32;
                stored.push(Segment { z: plane.z, y: row.y, x: start, len, start: cells });
                cells += len as usize;
            }
        }
    }
    PatchShape { period, object, stored, cells }
}

fn along_x(object: &[Interval], margin: i32, axis: Axis) -> Cells {
    let mut out = Cells::default();
    out.spans.reserve(object.len());
    let mut row_spans = Vec::new();
    for plane in object.chunk_by(|a, b| a.z == b.z) {
        let first_row = out.rows.len();
        for row in plane.chunk_by(|a, b| a.y == b.y) {
            row_spans.clear();
            for i in row {
                let (start, end) = (i.x - margin, i.x + i.len as i32 + margin);
                match axis {
                    Axis::Endless => row_spans.push((start, end)),
                    Axis::Open(n) => row_spans.push((start.max(0), end.min(n))),
                    Axis::Wrapped(n) => {
                        row_spans.push((start.max(0), end.min(n)));
                        if start < 0 {
                            row_spans.push(((start + n).max(0), n));
                        }
                        if end > n {
                            row_spans.push((0, (end - n).min(n)));
                        }
                    }
                }
            }
            out.push_row(row[0].y, &mut row_spans);
        }
        out.close_plane(plane[0].z, first_row);
    }
    out
}

fn along_y(cells: &Cells, margin: i32, axis: Axis) -> Cells {
    let mut out = Cells::default();
    let mut merger = Merger::default();
    let mut sources = Vec::new();
    for plane in &cells.planes {
        let rows = &cells.rows[plane.first..plane.end];
        sources.clear();
        for shift in -margin..=margin {
            // The rows that stay within 0..n after the shift, and those that come back from the other side.
            let (below, above) = match axis {
                Axis::Endless => (0, rows.len()),
                Axis::Open(n) | Axis::Wrapped(n) => (rows.partition_point(|r| r.y + shift < 0), rows.partition_point(|r| r.y + shift < n)),
            };
            sources.push(Source { rows: &rows[below..above], shift });
            if let Axis::Wrapped(n) = axis {
                sources.push(Source { rows: &rows[..below], shift: shift + n });
                sources.push(Source { rows: &rows[above..], shift: shift - n });
            }
        }
        let first_row = out.rows.len();
        merger.merge(&mut sources, &cells.spans, &mut out);
        out.close_plane(plane.z, first_row);
    }
    out
}

fn along_z(cells: &Cells, margin: i32, axis: Axis) -> Cells {
    // Pairs (plane to write, plane to read), sorted by the plane to write.
    let mut pairs = Vec::with_capacity(cells.planes.len() * (2 * margin as usize + 1));
    for (i, plane) in cells.planes.iter().enumerate() {
        for z in plane.z - margin..=plane.z + margin {
            match axis {
                Axis::Open(n) if z < 0 || z >= n => {}
                Axis::Wrapped(n) => pairs.push((z.rem_euclid(n), i)),
                Axis::Open(_) | Axis::Endless => pairs.push((z, i)),
            }
        }
    }
    pairs.sort_unstable();
    let mut out = Cells::default();
    out.spans.reserve(cells.spans.len());
    let mut merger = Merger::default();
    let mut sources = Vec::new();
    for group in pairs.chunk_by(|a, b| a.0 == b.0) {
        sources.clear();
        sources.extend(group.iter().map(|&(_, i)| {
            let plane = cells.planes[i];
            Source { rows: &cells.rows[plane.first..plane.end], shift: 0 }
        }));
        let first_row = out.rows.len();
        merger.merge(&mut sources, &cells.spans, &mut out);
        out.close_plane(group[0].0, first_row);
    }
    out
}

impl Cells {
    /// Appends a row made of any spans; `spans` is left sorted.
    fn push_row(&mut self, y: i32, spans: &mut [Span]) {
        spans.sort_unstable();
        let first = self.spans.len();
        let mut open: Option<Span> = None;
        for &(start, end) in spans.iter() {
            match &mut open {
                Some(o) if start <= o.1 => o.1 = o.1.max(end),
                _ => self.spans.extend(open.replace((start, end))),
            }
        }
        self.spans.extend(open);
        self.rows.push(Row { y, first, end: self.spans.len() });
    }

    /// Makes a plane of the rows from `first` on, unless there are none.
    fn close_plane(&mut self, z: i32, first: usize) {
        if first < self.rows.len() {
            self.planes.push(Plane { z, first, end: self.rows.len() });
        }
    }
}

/// Scratch list for merging rows.
#[derive(Default)]
struct Merger {
    spans: Vec<Span>,
}

impl Merger {
    /// Appends to `out` the union of all sources, row by row; leaves the sources empty.
    fn merge(&mut self, sources: &mut [Source], spans: &[Span], out: &mut Cells) {
        let front = |s: &Source| s.rows.first().map(|r| r.y + s.shift);
        while let Some(y) = sources.iter().filter_map(front).min() {
            self.spans.clear();
            for s in sources.iter_mut().filter(|s| front(s) == Some(y)) {
                self.spans.extend_from_slice(&spans[s.rows[0].first..s.rows[0].end]);
                s.rows = &s.rows[1..];
            }
            out.push_row(y, &mut self.spans);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::BTreeSet;

    /// The definition: every cell moved by every offset of the cube of side 2 margin + 1, one at a time.
    fn by_cells(object: &[Interval], margin: i32, axes: [Axis; 3]) -> BTreeSet<[i32; 3]> {
        let mut cells = BTreeSet::new();
        for i in object {
            for x in i.x..i.x + i.len as i32 {
                for dz in -margin..=margin {
                    for dy in -margin..=margin {
                        for dx in -margin..=margin {
                            let moved = [i.z + dz, i.y + dy, x + dx];
                            let place = |k: usize| match axes[2 - k] {
                                Axis::Endless => Some(moved[k]),
                                Axis::Open(n) => (0..n).contains(&moved[k]).then_some(moved[k]),
                                Axis::Wrapped(n) => Some(moved[k].rem_euclid(n)),
                            };
                            if let (Some(z), Some(y), Some(x)) = (place(0), place(1), place(2)) {
                                cells.insert([z, y, x]);
                            }
                        }
                    }
                }
            }
        }
        cells
    }

    /// Deterministic scattered cells in 0..n as intervals.
    fn scattered(n: [i32; 3], share: u64, seed: u64) -> Vec<Interval> {
        let mut state = seed;
        let mut object: Vec<Interval> = Vec::new();
        for z in 0..n[2] {
            for y in 0..n[1] {
                for x in 0..n[0] {
                    state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
                    if (state >> 33) % 1000 >= share {
                        continue;
                    }
                    match object.last_mut() {
                        Some(l) if (l.z, l.y, l.x + l.len as i32) == (z, y, x) => l.len += 1,
                        _ => object.push(Interval { z, y, x, len: 1 }),
                    }
                }
            }
        }
        object
    }

    #[test]
    fn agrees_with_moving_every_cell() {
        let n = [9, 8, 7];
        for (seed, share) in [(1, 20), (2, 100), (3, 500), (4, 900), (5, 5)] {
            let object = scattered(n, share, seed);
            for kinds in 0..27 {
                let axes: [Axis; 3] = std::array::from_fn(|a| match kinds / [1, 3, 9][a] % 3 {
                    0 => Axis::Open(n[a]),
                    1 => Axis::Endless,
                    _ => Axis::Wrapped(n[a]),
                });
                for margin in 0..=4 {
                    let periodic = axes.map(|a| !matches!(a, Axis::Open(_)));
                    let period = axes.map(|a| if let Axis::Wrapped(n) = a { Some(n) } else { None });
                    let shape = PatchShape::around(object.clone(), margin as usize, n.map(|n| n as usize), periodic, period);
                    let mut cells = Vec::new();
                    for (k, s) in shape.stored.iter().enumerate() {
                        assert_eq!(s.start, cells.len());
                        if let Some(before) = k.checked_sub(1).map(|k| shape.stored[k])
                            && (before.z, before.y) == (s.z, s.y)
                        {
                            assert!(before.x + (before.len as i32) < s.x, "adjacent segments");
                        }
                        cells.extend((s.x..s.x + s.len as i32).map(|x| [s.z, s.y, x]));
                    }
                    assert_eq!(shape.cells, cells.len());
                    assert!(cells.is_sorted());
                    let expected = by_cells(&object, margin, axes);
                    assert!(cells.iter().eq(expected.iter()), "{axes:?} margin {margin}");
                }
            }
        }
    }
}
