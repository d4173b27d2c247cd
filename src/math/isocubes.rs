//! Walks the cubes around an object, plane by plane and row by row, and has those at its surface triangulated.

use crate::base::real::Real;
use crate::math::isomesher::Mesher;
use crate::math::isosurface::Isosurface;
use crate::space::patch::{Interval, PatchShape, Segment};

/// See [`crate::math::isosurface::isosurface`].
pub(super) fn extract<T: Real>(shape: &PatchShape, values: &[T], level: f64) -> Isosurface {
    let object = Rows::new(shape.object.iter().map(|i| (i.z, i.y)));
    let stored = Rows::new(shape.stored.iter().map(|s| (s.z, s.y)));
    let mut plane_starts: Vec<usize> = stored.planes.iter().map(|p| shape.stored[stored.rows[p.first].first].start).collect();
    plane_starts.push(shape.cells);
    let mut mesher = Mesher::new(shape, values, level, plane_starts);
    let mut walk = Walk { shape, inside: mark_inside(shape), rows: Vec::new(), spans: Vec::new() };
    let period = shape.period[2];
    for z in cubes_below(object.planes.iter().map(|p| p.at), period) {
        let above = next(z, period);
        let (Some(low), Some(high)) = (stored.plane(z), stored.plane(above)) else {
            continue;
        };
        mesher.enter_plane([z, above], [low, high]);
        let own = [z, above].map(|z| match object.plane(z) {
            Some(plane) => object.rows_of(plane),
            None => &[],
        });
        walk.plane(&mut mesher, own, [low, high].map(|p| stored.rows_of(p)));
    }
    mesher.finish()
}

/// 1 for the object's own cells, parallel to the stored cells.
fn mark_inside(shape: &PatchShape) -> Vec<u8> {
    let mut inside = vec![0; shape.cells];
    let mut segments = shape.stored.iter();
    let mut segment = segments.next();
    for i in &shape.object {
        while let Some(s) = segment
            && (s.z, s.y, s.x + s.len as i32) < (i.z, i.y, i.x + i.len as i32)
        {
            segment = segments.next();
        }
        let holds = segment.filter(|s| (s.z, s.y) == (i.z, i.y) && s.x <= i.x);
        let Some(s) = holds else {
            panic!("isosurface: expected every object cell stored, got {i:?} outside all segments");
        };
        let first = s.start + (i.x - s.x) as usize;
        inside[first..first + i.len as usize].fill(1);
    }
    inside
}

/// A group of consecutive entries sharing a coordinate: the intervals of a row, or the rows of a plane.
#[derive(Debug, Clone, Copy)]
struct Line {
    at: i32,
    first: usize,
    end: usize,
}

/// Rows and planes of a list sorted by (z, y, x).
struct Rows {
    planes: Vec<Line>,
    rows: Vec<Line>,
}

impl Rows {
    fn new(keys: impl Iterator<Item = (i32, i32)>) -> Rows {
        let (mut planes, mut rows): (Vec<Line>, Vec<Line>) = (Vec::new(), Vec::new());
        for (i, (z, y)) in keys.enumerate() {
            let new_plane = planes.last().is_none_or(|p| p.at != z);
            if new_plane {
                planes.push(Line { at: z, first: rows.len(), end: rows.len() });
            }
            if new_plane || rows.last().is_none_or(|r| r.at != y) {
                rows.push(Line { at: y, first: i, end: i });
                planes.last_mut().expect("a plane was pushed").end = rows.len();
            }
            rows.last_mut().expect("a row was pushed").end = i + 1;
        }
        Rows { planes, rows }
    }

    /// Index of the plane at `z`.
    fn plane(&self, z: i32) -> Option<usize> {
        self.planes.binary_search_by_key(&z, |p| p.at).ok()
    }

    fn rows_of(&self, plane: usize) -> &[Line] {
        &self.rows[self.planes[plane].first..self.planes[plane].end]
    }
}

/// The coordinate after `at`.
pub(super) fn next(at: i32, period: Option<i32>) -> i32 {
    if period == Some(at + 1) { 0 } else { at + 1 }
}

/// The coordinate before `at`.
fn previous(at: i32, period: Option<i32>) -> i32 {
    match period {
        Some(n) if at == 0 => n - 1,
        _ => at - 1,
    }
}

/// Lower coordinates of the cubes touching any of the given ascending coordinates, ascending.
fn cubes_below(at: impl Iterator<Item = i32>, period: Option<i32>) -> Vec<i32> {
    let mut cubes = Vec::new();
    for c in at {
        cubes.extend([previous(c, period), c]);
    }
    cubes.sort_unstable();
    cubes.dedup();
    cubes
}

/// Finds lines by ascending coordinate, each search going on from the last.
#[derive(Debug, Clone, Copy, Default)]
struct Cursor(usize);

impl Cursor {
    fn find(&mut self, lines: &[Line], at: i32) -> Option<Line> {
        while lines.get(self.0).is_some_and(|l| l.at < at) {
            self.0 += 1;
        }
        lines.get(self.0).copied().filter(|l| l.at == at)
    }
}

/// The walk through the cubes, with its scratch lists.
struct Walk<'a> {
    shape: &'a PatchShape,
    /// 1 for the object's own cells, parallel to the stored cells.
    inside: Vec<u8>,
    rows: Vec<i32>,
    /// Spans of cubes (first, last) along x.
    spans: Vec<(i32, i32)>,
}

impl Walk<'_> {
    /// Visits all cubes between two planes: `own` holds the object's rows in them, `cells` the stored rows.
    fn plane<T: Real>(&mut self, mesher: &mut Mesher<T>, own: [&[Line]; 2], cells: [&[Line]; 2]) {
        let period = self.shape.period[1];
        self.rows.clear();
        for line in own.into_iter().flatten() {
            self.rows.extend([previous(line.at, period), line.at]);
        }
        self.rows.sort_unstable();
        self.rows.dedup();

        let mut own_cursors = [Cursor::default(); 4];
        let mut cell_cursors = [Cursor::default(); 4];
        for i in 0..self.rows.len() {
            let low = self.rows[i];
            let y = [low, next(low, period)];
            // Row r of a cube row lies at y[r & 1] in plane r >> 1, like the corner bits.
            let find = |cursors: &mut [Cursor; 4], lines: [&[Line]; 2], r: usize| {
                let (lines, at) = (lines[r >> 1], y[r & 1]);
                if at < low {
                    // Beyond the seam: the first row, behind the cursor.
                    return lines.first().copied().filter(|l| l.at == at);
                }
                cursors[r].find(lines, at)
            };
            let stored = [0, 1, 2, 3].map(|r| find(&mut cell_cursors, cells, r));
            let object = [0, 1, 2, 3].map(|r| find(&mut own_cursors, own, r));
            // A row beyond an open face is not stored: the surface ends here.
            let [Some(a), Some(b), Some(c), Some(d)] = stored else {
                continue;
            };
            gather_spans(&mut self.spans, &self.shape.object, object, self.shape.period[0]);
            mesher.enter_row(y);
            self.row(mesher, [a, b, c, d]);
        }
    }

    /// Visits the cubes of the gathered spans over four rows of stored segments.
    fn row<T: Real>(&self, mesher: &mut Mesher<T>, rows: [Line; 4]) {
        let stored = &self.shape.stored;
        let period = self.shape.period[0];
        let mut at = rows.map(|r| r.first);
        for &(first, last) in &self.spans {
            let seam = period == Some(last + 1);
            let last_plain = if seam { last - 1 } else { last };
            if first <= last_plain {
                // A cell the dilation stores in all four rows, also where an open face clips the span's first cell.
                let probe = if period.is_some() { first } else { first + 1 };
                let (mut low, mut high) = (first, last_plain + 1);
                let segments: [Segment; 4] = std::array::from_fn(|r| {
                    while at[r] + 1 < rows[r].end && stored[at[r] + 1].x <= probe {
                        at[r] += 1;
                    }
                    let s = stored[at[r]];
                    low = low.max(s.x);
                    high = high.min(s.x + s.len as i32 - 1);
                    s
                });
                if low < high {
                    let cells = segments.map(|s| s.start + (low - s.x) as usize);
                    self.cubes(mesher, low, (high - low) as usize, cells, cells.map(|c| c + 1));
                }
            }
            if seam {
                let near = rows.map(|r| stored[r.end - 1].start + stored[r.end - 1].len as usize - 1);
                self.cubes(mesher, last, 1, near, rows.map(|r| stored[r.first].start));
            }
        }
    }

    /// Visits `count` cubes from `x` on; `near` and `far` are the stored indices of the first cube's corners at lower
    /// and upper x, in row order.
    fn cubes<T: Real>(&self, mesher: &mut Mesher<T>, x: i32, count: usize, near: [usize; 4], far: [usize; 4]) {
        let ahead = far.map(|first| &self.inside[first..first + count]);
        let mut left = (0..4).fold(0, |m, r| m | self.inside[near[r]] << r);
        for j in 0..count {
            let right = (0..4).fold(0, |m, r| m | ahead[r][j] << r);
            let mask = left | right << 4;
            left = right;
            if mask != 0 && mask != 255 {
                let (n, f) = (near, far);
                let cells = [n[0], n[1], n[2], n[3], f[0], f[1], f[2], f[3]].map(|c| c + j);
                mesher.cube(mask, x + j as i32, cells);
            }
        }
    }
}

/// Spans of cubes (first, last) along x that touch the object in one of four rows, ascending, disjoint, not adjacent.
fn gather_spans(spans: &mut Vec<(i32, i32)>, object: &[Interval], rows: [Option<Line>; 4], period: Option<i32>) {
    spans.clear();
    for line in rows.into_iter().flatten() {
        for i in &object[line.first..line.end] {
            let last = i.x + i.len as i32 - 1;
            match period {
                Some(n) if i.x == 0 => spans.extend([(0, last), (n - 1, n - 1)]),
                _ => spans.push((i.x - 1, last)),
            }
        }
    }
    spans.sort_unstable();
    spans.dedup_by(|span, before| {
        let touch = span.0 <= before.1 + 1;
        if touch {
            before.1 = before.1.max(span.1);
        }
        touch
    });
}
