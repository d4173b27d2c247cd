//! Rows of a patch with quick access to a cell's neighbours, and the unwrapping of cells that lie modulo the box.

use std::collections::{HashMap, VecDeque};

use crate::space::patch::{Interval, PatchShape, Segment};
use crate::space::runs::Connectivity;

/// The stored cells of a patch by row.
pub struct PatchRows<'a> {
    shape: &'a PatchShape,
    /// Segments of each row: (z, y), first, one past the last.
    rows: Vec<((i32, i32), usize, usize)>,
    /// For each segment its row.
    row_of: Vec<u32>,
    /// For each row, the rows at (dy, dz) in the order of [`STEPS`].
    beside: Vec<[u32; 9]>,
}

const STEPS: [(i32, i32); 9] = [(0, 0), (-1, -1), (0, -1), (1, -1), (-1, 0), (1, 0), (-1, 1), (0, 1), (1, 1)];
const NONE: u32 = u32::MAX;

fn wrapped(i: i32, period: Option<i32>) -> i32 {
    period.map_or(i, |n| i.rem_euclid(n))
}

impl<'a> PatchRows<'a> {
    /// The rows of a patch.
    pub fn new(shape: &'a PatchShape) -> PatchRows<'a> {
        let mut rows: Vec<((i32, i32), usize, usize)> = Vec::new();
        let mut row_of = Vec::with_capacity(shape.stored.len());
        for (k, s) in shape.stored.iter().enumerate() {
            match rows.last_mut() {
                Some((key, _, end)) if *key == (s.z, s.y) => *end = k + 1,
                _ => rows.push(((s.z, s.y), k, k + 1)),
            }
            row_of.push(rows.len() as u32 - 1);
        }
        let find = |key: (i32, i32)| rows.binary_search_by_key(&key, |r| r.0).map_or(NONE, |k| k as u32);
        let beside = rows
            .iter()
            .map(|&((z, y), _, _)| STEPS.map(|(dy, dz)| find((wrapped(z + dz, shape.period[2]), wrapped(y + dy, shape.period[1])))))
            .collect();
        PatchRows { shape, rows, row_of, beside }
    }

    fn segment_of(&self, cell: u32) -> usize {
        self.shape.stored.partition_point(|s| s.start <= cell as usize) - 1
    }

    /// Coordinates x, y, z of a stored cell.
    pub fn place(&self, cell: u32) -> (i32, i32, i32) {
        let s = &self.shape.stored[self.segment_of(cell)];
        (s.x + (cell as usize - s.start) as i32, s.y, s.z)
    }

    fn in_row(&self, row: u32, x: i32) -> Option<u32> {
        let (_, from, to) = self.rows[row as usize];
        let segments: &[Segment] = &self.shape.stored[from..to];
        let x = wrapped(x, self.shape.period[0]);
        let k = segments.partition_point(|s| s.x <= x);
        let s = segments.get(k.checked_sub(1)?)?;
        (x < s.x + s.len as i32).then(|| (s.start + (x - s.x) as usize) as u32)
    }

    /// Calls `each` with every stored neighbour of a cell.
    pub fn neighbours(&self, cell: u32, connectivity: Connectivity, mut each: impl FnMut(u32)) {
        let segment = self.segment_of(cell);
        let s = &self.shape.stored[segment];
        let x = s.x + (cell as usize - s.start) as i32;
        for (&row, (dy, dz)) in self.beside[self.row_of[segment] as usize].iter().zip(STEPS) {
            let Some(reach) = connectivity.reach(dy, dz) else { continue };
            if row == NONE {
                continue;
            }
            // Along the row itself the neighbours are one step away whatever the connectivity.
            let reach = if (dy, dz) == (0, 0) { 1 } else { reach as i32 };
            for dx in -reach..=reach {
                if (dx, dy, dz) != (0, 0, 0)
                    && let Some(other) = self.in_row(row, x + dx)
                    && other != cell
                {
                    each(other);
                }
            }
        }
    }

    /// The stored cells that belong to the object, ascending.
    pub fn object_cells(&self) -> Vec<u32> {
        let mut out = Vec::new();
        for i in &self.shape.object {
            let row = self.rows.binary_search_by_key(&(i.z, i.y), |r| r.0);
            // Object cells are stored, and an interval lies within one segment.
            if let Some(first) = row.ok().and_then(|row| self.in_row(row as u32, i.x)) {
                out.extend(first..first + i.len);
            }
        }
        out.sort_unstable();
        out
    }
}

/// Lays connected cells, given modulo the box along the axes with a period, out in space. Returns the intervals, unwrapped when the
/// cells do not close on themselves and as given otherwise, and the axes along which they do.
pub fn unwrapped(
    intervals: &[Interval],
    connectivity: Connectivity,
    period: [Option<i32>; 3],
    n: [usize; 3],
) -> (Vec<Interval>, [bool; 3]) {
    let mut rows: HashMap<(i32, i32), Vec<usize>> = HashMap::new();
    for (k, i) in intervals.iter().enumerate() {
        rows.entry((i.z, i.y)).or_default().push(k);
    }
    let size = n.map(|v| v as i32);
    let mut boxes: Vec<Option<[i32; 3]>> = vec![None; intervals.len()];
    let mut spans = [false; 3];
    let mut queue = VecDeque::new();
    for seed in 0..intervals.len() {
        if boxes[seed].is_some() {
            continue;
        }
        boxes[seed] = Some([0; 3]);
        queue.push_back(seed);
        while let Some(k) = queue.pop_front() {
            let (here, at) = (intervals[k], boxes[k].unwrap_or_default());
            for (dy, dz) in STEPS {
                let Some(reach) = connectivity.reach(dy, dz) else { continue };
                let reach = if (dy, dz) == (0, 0) { 1 } else { reach as i32 };
                let (y, z) = (here.y + dy, here.z + dz);
                let key = (wrapped(z, period[2]), wrapped(y, period[1]));
                let images = if period[0].is_some() { -1..=1 } else { 0..=0 };
                for &other in rows.get(&key).into_iter().flatten() {
                    let o = intervals[other];
                    for image in images.clone() {
                        let x = o.x + image * size[0];
                        let touches = x <= here.x + here.len as i32 - 1 + reach && here.x <= x + o.len as i32 - 1 + reach;
                        if !touches || (other == k && image == 0) {
                            continue;
                        }
                        let seen = [at[0] + image, at[1] + (y - key.1) / size[1].max(1), at[2] + (z - key.0) / size[2].max(1)];
                        match boxes[other] {
                            None => {
                                boxes[other] = Some(seen);
                                queue.push_back(other);
                            }
                            Some(known) => (0..3).for_each(|a| spans[a] |= known[a] != seen[a]),
                        }
                    }
                }
            }
        }
    }
    if spans.contains(&true) {
        return (intervals.to_vec(), spans);
    }
    let mut out: Vec<Interval> = intervals
        .iter()
        .zip(boxes)
        .map(|(i, b)| {
            let b = b.unwrap_or_default();
            Interval { x: i.x + b[0] * size[0], y: i.y + b[1] * size[1], z: i.z + b[2] * size[2], len: i.len }
        })
        .collect();
    tidy(&mut out);
    (out, spans)
}

/// Sorts intervals and joins those that follow each other in a row.
pub fn tidy(intervals: &mut Vec<Interval>) {
    intervals.sort_unstable();
    intervals.dedup_by(|next, last| {
        let joins = next.z == last.z && next.y == last.y && last.x + last.len as i32 == next.x;
        if joins {
            last.len += next.len;
        }
        joins
    });
}

#[cfg(test)]
mod tests {
    use super::*;

    fn interval(x: i32, y: i32, z: i32, len: u32) -> Interval {
        Interval { x, y, z, len }
    }

    #[test]
    fn cells_across_faces_are_laid_out_and_rings_are_found() {
        let n = [8, 6, 5];
        let period = [Some(8), Some(6), Some(5)];
        let bent = [interval(0, 0, 0, 2), interval(7, 0, 0, 1), interval(7, 5, 0, 1), interval(7, 5, 4, 1)];
        let (out, spans) = unwrapped(&bent, Connectivity::Six, period, n);
        assert_eq!(spans, [false; 3]);
        assert_eq!(out.iter().map(|i| i.len).sum::<u32>(), 5);
        assert_eq!(out.len(), 3, "the first two lie in one row: {out:?}");
        let ring = [interval(0, 2, 2, 8)];
        assert_eq!(unwrapped(&ring, Connectivity::Six, period, n).1, [true, false, false]);
        let ring_z: Vec<Interval> = (0..5).map(|z| interval(3, 3, z, 1)).collect();
        assert_eq!(unwrapped(&ring_z, Connectivity::TwentySix, period, n).1, [false, false, true]);
    }

    #[test]
    fn neighbours_are_those_of_brute_force() {
        let object = vec![interval(0, 0, 0, 3), interval(5, 1, 0, 2), interval(1, 1, 1, 4), interval(6, 5, 3, 2)];
        let shape = PatchShape::around(object, 1, [8, 6, 5], [true; 3], [Some(8), Some(6), Some(5)]);
        let rows = PatchRows::new(&shape);
        let places: Vec<(i32, i32, i32)> = (0..shape.cells as u32).map(|c| rows.place(c)).collect();
        for (connectivity, most) in [(Connectivity::Six, 1), (Connectivity::Eighteen, 2), (Connectivity::TwentySix, 3)] {
            for (a, p) in places.iter().enumerate() {
                let mut got = Vec::new();
                rows.neighbours(a as u32, connectivity, |b| got.push(b as usize));
                got.sort_unstable();
                let gap = |u: i32, v: i32, n: i32| (u - v).rem_euclid(n).min((v - u).rem_euclid(n));
                let near = |q: &(i32, i32, i32)| {
                    let d = [gap(p.0, q.0, 8), gap(p.1, q.1, 6), gap(p.2, q.2, 5)];
                    d.iter().all(|&v| v <= 1) && (1..=most).contains(&d.iter().sum::<i32>())
                };
                let want: Vec<usize> = (0..places.len()).filter(|&b| near(&places[b])).collect();
                assert_eq!(got, want, "cell {a}");
            }
        }
    }
}
