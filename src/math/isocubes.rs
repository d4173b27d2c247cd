//! Walks the cubes around an object, plane by plane and row by row, and has those at its surface triangulated.
//!
//! While passing them, the walk notes borders between planes: what lies between two of them is a part of the surface. Measuring a
//! large surface is shared out by its parts. Where the borders are depends on the patch alone.

use std::ops::Range;

use crate::base::real::Real;
use crate::math::isomesher::Mesher;
use crate::math::isosurface::Isosurface;
use crate::space::patch::PatchShape;

/// Stored segments a part holds at least, except the last: some ten thousand vertices.
const PART: usize = 4096;

/// See [`crate::math::isosurface::isosurface`].
pub(super) fn extract<T: Real>(shape: &PatchShape, values: &[T], level: f64) -> Isosurface {
    extract_in_parts(shape, values, level, PART)
}

/// As [`extract`], with parts of at least `least` segments.
fn extract_in_parts<T: Real>(shape: &PatchShape, values: &[T], level: f64, least: usize) -> Isosurface {
    let rows = Rows::new(shape);
    let layers = rows.layers(shape.period[2]);
    let parts = rows.parts(&layers, least);
    let walk = Walk { shape, rows: &rows, inside: mark_inside(shape) };
    let mut mesher = Mesher::new(shape, values, level, &rows.starts);
    for part in parts {
        for &[low, high] in &layers[part] {
            mesher.enter_plane([low, high].map(|p| rows.planes[p].at), [low, high]);
            walk.layer(&mut mesher, [low, high]);
        }
        mesher.end_part();
    }
    mesher.finish()
}

/// 1 for the object's own cells, parallel to the stored cells; a few zeros more, so that words can be read up to the last cell.
fn mark_inside(shape: &PatchShape) -> Vec<u8> {
    let mut inside = vec![0; shape.cells + WORD];
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

/// A group of consecutive entries sharing a coordinate: the segments of a row, or the rows of a plane.
#[derive(Debug, Clone, Copy)]
struct Line {
    at: i32,
    first: usize,
    end: usize,
}

/// Rows and planes of the stored segments.
struct Rows {
    planes: Vec<Line>,
    rows: Vec<Line>,
    /// First stored cell of each plane, and one past the last.
    starts: Vec<usize>,
}

impl Rows {
    fn new(shape: &PatchShape) -> Rows {
        let mut out = Rows { planes: Vec::new(), rows: Vec::new(), starts: Vec::new() };
        for (i, s) in shape.stored.iter().enumerate() {
            let new_plane = out.planes.last().is_none_or(|p| p.at != s.z);
            if new_plane {
                out.planes.push(Line { at: s.z, first: out.rows.len(), end: out.rows.len() });
                out.starts.push(s.start);
            }
            if new_plane || out.rows.last().is_none_or(|r| r.at != s.y) {
                out.rows.push(Line { at: s.y, first: i, end: i });
                out.planes.last_mut().expect("a plane was pushed").end = out.rows.len();
            }
            out.rows.last_mut().expect("a row was pushed").end = i + 1;
        }
        out.starts.push(shape.cells);
        out
    }

    fn rows_of(&self, plane: usize) -> &[Line] {
        &self.rows[self.planes[plane].first..self.planes[plane].end]
    }

    /// Stored planes with the one after them: between these lie cubes.
    fn layers(&self, period: Option<i32>) -> Vec<[usize; 2]> {
        pairs(&self.planes, period).collect()
    }

    /// Spans of layers with about equally many segments.
    fn parts(&self, layers: &[[usize; 2]], least: usize) -> Vec<Range<usize>> {
        let mut out = Vec::new();
        let (mut first, mut segments) = (0, 0);
        for (k, &[low, _]) in layers.iter().enumerate() {
            let rows = self.rows_of(low);
            segments += rows[rows.len() - 1].end - rows[0].first;
            if segments >= least || k + 1 == layers.len() {
                out.push(first..k + 1);
                (first, segments) = (k + 1, 0);
            }
        }
        if out.is_empty() {
            out.push(0..0);
        }
        out
    }
}

/// Places of every line and of the one at the next coordinate, where there is one.
fn pairs(lines: &[Line], period: Option<i32>) -> impl Iterator<Item = [usize; 2]> {
    (0..lines.len()).filter_map(move |i| {
        let after = next(lines[i].at, period);
        let k = if after == 0 && lines[i].at != -1 { 0 } else { i + 1 };
        lines.get(k).is_some_and(|l| l.at == after).then_some([i, k])
    })
}

/// The coordinate after `at`.
pub(super) fn next(at: i32, period: Option<i32>) -> i32 {
    if period == Some(at + 1) { 0 } else { at + 1 }
}

/// Cells looked at together.
const WORD: usize = 8;

/// The walk through the cubes.
struct Walk<'a> {
    shape: &'a PatchShape,
    rows: &'a Rows,
    /// 1 for the object's own cells, parallel to the stored cells.
    inside: Vec<u8>,
}

impl Walk<'_> {
    /// Visits all cubes between two planes.
    fn layer<T: Real>(&self, mesher: &mut Mesher<T>, planes: [usize; 2]) {
        let [low, high] = planes.map(|p| self.rows.rows_of(p));
        let mut at = 0;
        for [i, k] in pairs(low, self.shape.period[1]) {
            let y = [low[i].at, low[k].at];
            while high.get(at).is_some_and(|l| l.at < y[0]) {
                at += 1;
            }
            let after = if k > i { at + 1 } else { 0 };
            // A row beyond an open face is not stored: the surface ends here.
            let (Some(c), Some(d)) = (high.get(at), high.get(after)) else { continue };
            if [c.at, d.at] == y {
                mesher.enter_row(y);
                // Row r of a cube row lies at y[r & 1] in plane r >> 1, like the corner bits.
                self.row(mesher, [low[i], low[k], *c, *d]);
            }
        }
    }

    /// Visits the cubes with all corners in four rows of stored segments.
    fn row<T: Real>(&self, mesher: &mut Mesher<T>, rows: [Line; 4]) {
        let stored = &self.shape.stored;
        let mut at = rows.map(|r| r.first);
        while (0..4).all(|r| at[r] < rows[r].end) {
            let segments = at.map(|k| &stored[k]);
            let ends = segments.map(|s| s.x + s.len as i32);
            let low = segments.iter().map(|s| s.x).fold(i32::MIN, i32::max);
            let high = ends.into_iter().fold(i32::MAX, i32::min);
            if high - low > 1 {
                self.cubes(mesher, low, (high - low - 1) as usize, segments.map(|s| s.start + (low - s.x) as usize));
            }
            for r in 0..4 {
                at[r] += (ends[r] == high) as usize;
            }
        }
        if let Some(n) = self.shape.period[0] {
            let (first, last) = (rows.map(|r| stored[r.first]), rows.map(|r| stored[r.end - 1]));
            if (0..4).all(|r| first[r].x == 0 && last[r].x + last[r].len as i32 == n) {
                let (near, far) = (last.map(|s| s.start + s.len as usize - 1), first.map(|s| s.start));
                let column = |cells: [usize; 4]| (0..4).fold(0, |m, r| m | self.inside[cells[r]] << r);
                let mask = column(near) | column(far) << 4;
                if mask != 0 && mask != 255 {
                    mesher.cube(mask, n - 1, [near[0], near[1], near[2], near[3], far[0], far[1], far[2], far[3]]);
                }
            }
        }
    }

    /// Visits `count` cubes from `x` on; `near` are the stored indices of the first cube's corners at lower x, in row order.
    fn cubes<T: Real>(&self, mesher: &mut Mesher<T>, x: i32, count: usize, near: [usize; 4]) {
        const LOW: u64 = 0x7f7f_7f7f_7f7f_7f7f;
        /// The high bit of every byte that is zero.
        fn zeros(v: u64) -> u64 {
            !(((v & LOW) + LOW) | v | LOW)
        }
        let mut done = 0;
        while done < count {
            // Eight columns of four corners, a byte each, are seven cubes.
            let column = |r: usize| {
                let from = near[r] + done;
                let bytes: [u8; WORD] = self.inside[from..from + WORD].try_into().expect("eight bytes");
                u64::from_le_bytes(bytes) << r
            };
            let columns = column(0) | column(1) | column(2) | column(3);
            let masks = columns | columns >> 8 << 4;
            let cubes = (count - done).min(WORD - 1);
            let mut crossed = !(zeros(masks) | zeros(!masks)) & !LOW & ((1 << (8 * cubes)) - 1);
            while crossed != 0 {
                let byte = crossed.trailing_zeros() as usize / 8;
                crossed &= crossed - 1;
                let j = done + byte;
                let n = near.map(|c| c + j);
                let cells = [n[0], n[1], n[2], n[3], n[0] + 1, n[1] + 1, n[2] + 1, n[3] + 1];
                mesher.cube((masks >> (8 * byte)) as u8, x + j as i32, cells);
            }
            done += cubes;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::par::Pool;
    use crate::math::surface::measure;
    use crate::space::patch::Interval;

    /// All cells of a rough random field above a level as one object, and the values around them.
    fn percolating(n: usize, share: u64, periodic: [bool; 3]) -> (PatchShape, Vec<f32>) {
        let mut state = 5u64;
        let mut field = vec![0.0f32; n * n * n];
        for v in &mut field {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            *v = ((state >> 33) % 1000) as f32 - (1000 - share) as f32;
        }
        // Layers without any cell: a part may begin where no other ends.
        field[n * n * 5..n * n * 7].fill(-1.0);
        let mut object: Vec<Interval> = Vec::new();
        for (i, _) in field.iter().enumerate().filter(|(_, v)| **v > 0.0) {
            let [x, y, z] = [i % n, i / n % n, i / n / n].map(|c| c as i32);
            match object.last_mut() {
                Some(l) if (l.z, l.y, l.x + l.len as i32) == (z, y, x) => l.len += 1,
                _ => object.push(Interval { z, y, x, len: 1 }),
            }
        }
        let period = periodic.map(|p| p.then_some(n as i32));
        let shape = PatchShape::around(object, 1, [n; 3], periodic, period);
        let m = n as i32;
        let value = |x: i32, s: &crate::space::patch::Segment| field[((s.z * m + s.y) * m + x) as usize];
        let values = shape.stored.iter().flat_map(|s| (s.x..s.x + s.len as i32).map(move |x| value(x, s))).collect();
        (shape, values)
    }

    /// Parts of one layer or several, on any number of threads, against the whole surface as one part.
    #[test]
    fn parts_change_nothing() {
        let spacing = [1.0, 0.8, 1.3];
        for periodic in [[false; 3], [true; 3], [false, true, true], [true, false, false]] {
            for share in [300, 30] {
                let (shape, values) = percolating(20, share, periodic);
                let whole = extract_in_parts(&shape, &values, 0.0, usize::MAX);
                assert_eq!(whole.parts.len(), 1);
                let areas = whole.area_vectors(spacing);
                let (measures, normals) = (measure(&whole, spacing), whole.vertex_normals(&areas));
                for (least, threads) in [(1, 1), (1, 2), (1, 3), (40, 2), (150, 3), (400, 2)] {
                    let pool = Pool::new(threads).unwrap();
                    pool.run(|| {
                        let cut = extract_in_parts(&shape, &values, 0.0, least);
                        assert!(cut.parts.len() > 1 || least > 40);
                        assert_eq!(cut.parts.iter().map(|p| p.triangles.len()).sum::<usize>(), cut.triangles.len());
                        assert_eq!(cut.parts.iter().map(|p| p.vertices.len() + p.centres.len()).sum::<usize>(), cut.points.len());
                        assert_eq!(Isosurface { parts: whole.parts.clone(), ..cut.clone() }, whole);
                        assert_eq!(cut.area_vectors(spacing), areas);
                        assert_eq!(cut.vertex_normals(&areas), normals);
                        assert_eq!(measure(&cut, spacing), measures, "{periodic:?} {share} {least}");
                    });
                }
            }
        }
    }
}
