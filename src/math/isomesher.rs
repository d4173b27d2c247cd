//! Triangulates one cube at a time: shared vertices on grid edges, face decisions, caps of the loops, and which triangles meet
//! at an edge.

use crate::base::real::Real;
use crate::math::isocubes::next;
use crate::math::isosurface::{EdgeRef, Isosurface, Part, cross, dot};
use crate::math::isotable::{AXIS_BIT, EDGES, FACES, LONGEST, Loop, TABLE, Table};
use crate::space::patch::PatchShape;

/// Vertices keep this distance from the cell centres, in cells, so that no triangle shrinks to nothing.
const CLEARANCE: f64 = 1e-4;

/// Two chord lengths (or their squares) closer than this, relatively, are a tie: which is shorter would be left to round-off.
const TIE: f64 = 1e-10;

/// A quadrilateral whose corners span less than this volume (cubic cells, times 6) is flat: both diagonals give the
/// same surface.
const FLAT: f64 = 1e-13;

/// Positions of the cube corners relative to the lowest one.
const CORNERS: [[f64; 3]; 8] = [
    [0.0, 0.0, 0.0],
    [0.0, 1.0, 0.0],
    [0.0, 0.0, 1.0],
    [0.0, 1.0, 1.0],
    [1.0, 0.0, 0.0],
    [1.0, 1.0, 0.0],
    [1.0, 0.0, 1.0],
    [1.0, 1.0, 1.0],
];

/// The vertices of a loop of five from each apex on.
const FAN_OF_FIVE: [[usize; 5]; 5] = [[0, 1, 2, 3, 4], [1, 2, 3, 4, 0], [2, 3, 4, 0, 1], [3, 4, 0, 1, 2], [4, 0, 1, 2, 3]];

/// No vertex, or no triangle.
pub(super) const NONE: u32 = u32::MAX;

/// The vertex indices of the planes of cells at hand, and the surface that grows.
pub(super) struct Mesher<'a, T> {
    values: &'a [T],
    level: f64,
    table: &'static Table,
    sheet: Sheet,
    /// What to add to 3 × stored index for the position in `sheet.vertices`, for the lower and the upper plane.
    shift: [usize; 2],
    y: [i32; 2],
    z: [i32; 2],
    starts: &'a [usize],
}

/// The surface of the layers of cubes so far.
struct Sheet {
    period: [Option<i32>; 3],
    points: Vec<[f64; 3]>,
    edges: Vec<EdgeRef>,
    /// The third vertex of a triangle at a centre is `NONE`: its index is known when all edge vertices are counted.
    triangles: Vec<[u32; 3]>,
    /// For each side 0-1, 1-2, 2-0 of each triangle the triangle across, where that came before.
    behind: Vec<[u32; 3]>,
    /// First triangle of each centre vertex's fan.
    fans: Vec<u32>,
    centre_points: Vec<[f64; 3]>,
    centre_starts: Vec<u32>,
    centre_vertices: Vec<u32>,
    /// For each edge vertex one of a lower index in the same piece of the surface, or itself.
    parents: Vec<u32>,
    /// The last triangle on each of the four cube faces at every edge vertex.
    last: Vec<[u32; 4]>,
    /// How many edge vertices, centre vertices and triangles there were at the end of each part.
    ends: Vec<[usize; 3]>,
    /// Three vertex indices (edges along x, y, z) a stored cell, for a few planes at a time, each in its slot.
    vertices: Vec<u32>,
    slot_len: usize,
    /// Which stored plane each slot holds. The last slot keeps the first plane for the cubes across the seam.
    held: [usize; 3],
}

impl Sheet {
    /// Where the vertices of a stored plane are kept.
    fn slot(&self, plane: usize) -> usize {
        if self.period[2].is_some() && plane == 0 { 2 } else { plane & 1 }
    }

    /// Notes that the vertices of a loop belong to one piece; new ones have no parent yet.
    #[inline(always)]
    fn hang_together(&mut self, ids: &[u32]) {
        // Nearly always those that are not new have one parent.
        let (mut low, mut high) = (NONE, 0);
        for &id in ids {
            let parent = self.parents[id as usize];
            low = low.min(parent);
            high = high.max(parent.wrapping_add(1));
        }
        if low == NONE {
            low = ids.iter().copied().fold(NONE, u32::min);
        } else if high != low + 1 {
            low = NONE;
            for &id in ids {
                if self.parents[id as usize] != NONE {
                    low = match low {
                        NONE => root(&mut self.parents, id),
                        _ => join(&mut self.parents, low, id),
                    };
                }
            }
        }
        for &id in ids {
            let parent = &mut self.parents[id as usize];
            *parent = (*parent).min(low);
        }
    }
}

/// The first of all vertices known to be in the piece of `v`; shortens the way there.
fn root(parents: &mut [u32], mut v: u32) -> u32 {
    while parents[v as usize] != v {
        let up = parents[parents[v as usize] as usize];
        parents[v as usize] = up;
        v = up;
    }
    v
}

/// Makes one piece of two; returns its root.
fn join(parents: &mut [u32], a: u32, b: u32) -> u32 {
    let (a, b) = (root(parents, a), root(parents, b));
    parents[a.max(b) as usize] = a.min(b);
    a.min(b)
}

impl<'a, T: Real> Mesher<'a, T> {
    /// A mesher for the cubes of a patch; `starts` are the first stored cells of all planes and one past the last.
    pub fn new(shape: &PatchShape, values: &'a [T], level: f64, starts: &'a [usize]) -> Mesher<'a, T> {
        let largest = starts.windows(2).map(|w| w[1] - w[0]).max().unwrap_or(0);
        let slots = if shape.period[2].is_some() { 3 } else { 2 };
        // Every interval has two crossings along x, rough surfaces have as many along y and z; two triangles a vertex.
        // A third more saves most surfaces from being moved to a larger place. What is not used is never touched.
        let expected = 8 * shape.object.len();
        Mesher {
            values,
            level,
            table: &TABLE,
            sheet: Sheet {
                period: shape.period,
                points: Vec::with_capacity(expected),
                edges: Vec::with_capacity(expected),
                triangles: Vec::with_capacity(2 * expected),
                behind: Vec::with_capacity(2 * expected),
                fans: Vec::new(),
                centre_points: Vec::new(),
                centre_starts: vec![0],
                centre_vertices: Vec::new(),
                parents: Vec::with_capacity(expected),
                last: Vec::with_capacity(expected),
                ends: Vec::new(),
                vertices: vec![NONE; slots * 3 * largest],
                slot_len: 3 * largest,
                held: [usize::MAX; 3],
            },
            shift: [0; 2],
            y: [0; 2],
            z: [0; 2],
            starts,
        }
    }

    /// Goes on to the cubes between two planes: their coordinates and their places among the stored planes.
    pub fn enter_plane(&mut self, z: [i32; 2], planes: [usize; 2]) {
        self.z = z;
        let sheet = &mut self.sheet;
        for (k, plane) in planes.into_iter().enumerate() {
            let slot = sheet.slot(plane);
            let begin = slot * sheet.slot_len;
            let first = self.starts[plane];
            if sheet.held[slot] != plane {
                sheet.held[slot] = plane;
                let cells = self.starts[plane + 1] - first;
                sheet.vertices[begin..begin + 3 * cells].fill(NONE);
            }
            self.shift[k] = begin.wrapping_sub(3 * first);
        }
    }

    /// Goes on to the row of cubes between two rows of cells.
    pub fn enter_row(&mut self, y: [i32; 2]) {
        self.y = y;
    }

    /// Triangulates the cube with lower x coordinate `x`, inside corners `mask` and the given stored cells as corners.
    #[inline]
    pub fn cube(&mut self, mask: u8, x: i32, cells: [usize; 8]) {
        let (table, values, level) = (self.table, self.values, self.level);
        let height = |corner: usize| height(mask, corner, values[cells[corner]].wide() - level);
        // Asymptotic decider: the saddle value of the bilinear interpolant has the sign of the difference of the
        // diagonal products. Products commute exactly, so both cubes at the face and every mirror image agree.
        let joined = |face: usize| {
            let [a, b, c, d] = FACES[face].map(usize::from);
            let (ac, bd) = (height(a) * height(c), height(b) * height(d));
            if mask >> a & 1 == 1 { ac > bd } else { bd > ac }
        };
        for l in table.loops(mask, joined) {
            // One decision on the length, and no loops of unknown length after it.
            match l.len {
                3 => self.polygon::<3>(l, mask, x, &cells),
                4 => self.polygon::<4>(l, mask, x, &cells),
                5 => self.polygon::<5>(l, mask, x, &cells),
                _ => self.polygon::<LONGEST>(l, mask, x, &cells),
            }
        }
    }

    /// Makes the vertices of a loop of at most `N`, those that are not there yet, and closes it.
    #[inline]
    fn polygon<const N: usize>(&mut self, l: &Loop, mask: u8, x: i32, cells: &[usize; 8]) {
        let n = if N == LONGEST { l.len as usize } else { N };
        let mut ids = [NONE; N];
        let mut spots = [[0.0; 3]; N];
        for k in 0..n {
            let edge = EDGES[l.edges[k] as usize];
            let (corner, axis) = (edge.corner as usize, edge.axis as usize);
            let slot = (3 * cells[corner] + axis).wrapping_add(self.shift[corner >> 1 & 1]);
            let mut id = self.sheet.vertices[slot];
            if id == NONE {
                id = self.sheet.edges.len() as u32;
                self.sheet.vertices[slot] = id;
                let upper = corner | AXIS_BIT[axis];
                let height = |corner: usize| height(mask, corner, self.values[cells[corner]].wide() - self.level);
                let (a, b) = (height(corner), height(upper));
                let t = (a / (a - b)).clamp(CLEARANCE, 1.0 - CLEARANCE);
                self.add_vertex(x, corner, axis, [cells[corner], cells[upper]], t);
            }
            ids[k] = id;
            if N != 3 {
                spots[k] = CORNERS[corner];
                spots[k][axis] = self.sheet.edges[id as usize].t;
            }
        }
        self.sheet.hang_together(&ids[..n]);
        self.cap(&ids[..n], &spots[..n], &l.keys, x);
    }

    #[inline]
    fn add_vertex(&mut self, x: i32, corner: usize, axis: usize, cells: [usize; 2], t: f64) {
        let sheet = &mut self.sheet;
        let side = corner >> 1 & 1;
        let x = if corner & AXIS_BIT[0] == 0 { x } else { next(x, sheet.period[0]) };
        let mut point = [x, self.y[corner & 1], self.z[side]].map(f64::from);
        point[axis] += t;
        sheet.points.push(point);
        sheet.edges.push(EdgeRef { a: cells[0] as u32, b: cells[1] as u32, t });
        sheet.last.push([NONE; 4]);
        sheet.parents.push(NONE);
    }

    /// Closes a loop by triangles. `ids` and `spots` are its vertices, the latter relative to the cube's lower corner.
    #[inline(always)]
    fn cap(&mut self, ids: &[u32], spots: &[[f64; 3]], keys: &[u8; LONGEST], x: i32) {
        let first = self.sheet.triangles.len() as u32;
        match (ids, apex(spots)) {
            (&[a, b, c], _) => {
                let s = [0, 1, 2].map(|k| self.meet(ids, keys, k, first));
                self.sheet.triangles.push([a, b, c]);
                self.sheet.behind.push(s);
            }
            (_, Some(apex)) if ids.len() == 4 => {
                // Which diagonal is shorter is as good as random: no branch on it.
                let turn = |k: usize| (k + apex) & 3;
                let [a, b, c, d] = [0, 1, 2, 3].map(|k| ids[turn(k)]);
                let s = [0, 1].map(|k| self.meet(ids, keys, turn(k), first));
                let t = [2, 3].map(|k| self.meet(ids, keys, turn(k), first + 1));
                self.sheet.triangles.extend([[a, b, c], [a, c, d]]);
                self.sheet.behind.extend([[s[0], s[1], NONE], [first, t[0], t[1]]]);
            }
            (_, Some(apex)) => {
                let turned = FAN_OF_FIVE[apex];
                let [a, b, c, d, e] = turned.map(|k| ids[k]);
                let mut s = [NONE; 5];
                for (k, triangle) in [0, 0, 1, 2, 2].into_iter().enumerate() {
                    s[k] = self.meet(ids, keys, turned[k], first + triangle);
                }
                self.sheet.triangles.extend([[a, b, c], [a, c, d], [a, d, e]]);
                self.sheet.behind.extend([[s[0], s[1], NONE], [first, s[2], NONE], [first + 1, s[3], s[4]]]);
            }
            (_, None) => {
                let n = ids.len();
                for k in 0..n {
                    let (triangle, before) = (first + k as u32, (k + n - 1) % n);
                    let rim = self.meet(ids, keys, before, triangle);
                    self.sheet.triangles.push([ids[before], ids[k], NONE]);
                    let onward = if k + 1 == n { first } else { NONE };
                    let back = if k == 0 { NONE } else { triangle - 1 };
                    self.sheet.behind.push([rim, onward, back]);
                }
                let sheet = &mut self.sheet;
                sheet.fans.push(first);
                let base = [x, self.y[0], self.z[0]].map(f64::from);
                sheet.centre_points.push(std::array::from_fn(|axis| {
                    let sum: f64 = spots.iter().map(|p| p[axis]).sum();
                    base[axis] + sum / spots.len() as f64
                }));
                sheet.centre_vertices.extend_from_slice(ids);
                sheet.centre_starts.push(sheet.centre_vertices.len() as u32);
            }
        }
    }

    /// Leaves a triangle at segment `k` of a loop and returns the one that was left there from the other cube.
    #[inline(always)]
    fn meet(&mut self, ids: &[u32], keys: &[u8; LONGEST], k: usize, triangle: u32) -> u32 {
        let (vertex, face) = (ids[keys[k] as usize >> 2], keys[k] & 3);
        std::mem::replace(&mut self.sheet.last[vertex as usize][face as usize], triangle)
    }

    /// Ends a part of the surface.
    ///
    /// # Panics
    /// When there are 2^32 vertices or triangles.
    pub fn end_part(&mut self) {
        let sheet = &mut self.sheet;
        let (vertices, centres, triangles) = (sheet.edges.len(), sheet.fans.len(), sheet.triangles.len());
        let most = (vertices + centres).max(triangles);
        assert!(most < NONE as usize, "isosurface: expected fewer than 2^32 vertices and triangles, got {most}");
        sheet.ends.push([vertices, centres, triangles]);
    }

    /// The surface when all layers are done and the last part has ended.
    pub fn finish(self) -> Isosurface {
        let mut sheet = self.sheet;
        let edges = sheet.edges.len();
        for (i, &first) in sheet.fans.iter().enumerate() {
            let sides = (sheet.centre_starts[i + 1] - sheet.centre_starts[i]) as usize;
            for triangle in &mut sheet.triangles[first as usize..][..sides] {
                triangle[2] = (edges + i) as u32;
            }
        }
        sheet.points.append(&mut sheet.centre_points);
        let mut before = [0; 3];
        let part = |end: [usize; 3]| {
            let [v, c, t] = std::mem::replace(&mut before, end);
            Part { vertices: v..end[0], centres: edges + c..edges + end[1], triangles: t..end[2] }
        };
        Isosurface {
            period: sheet.period,
            points: sheet.points,
            triangles: sheet.triangles,
            edges: sheet.edges,
            centre_starts: sheet.centre_starts,
            centre_vertices: sheet.centre_vertices,
            behind: sheet.behind,
            parents: sheet.parents,
            parts: sheet.ends.into_iter().map(part).collect(),
        }
    }
}

/// Value above the level, made positive inside and not positive outside, whatever another object's cell may hold.
#[inline]
fn height(mask: u8, corner: usize, above: f64) -> f64 {
    if mask >> corner & 1 == 1 { above.max(f64::MIN_POSITIVE) } else { above.min(0.0) }
}

/// The loop vertex from which a fan of chords closes the loop, or `None` when it takes a centre vertex.
#[inline(always)]
fn apex(p: &[[f64; 3]]) -> Option<usize> {
    match p.len() {
        3 => Some(0),
        4 => {
            let (first, second) = (square(p[0], p[2]), square(p[1], p[3]));
            if (first - second).abs() > TIE * (first + second) {
                Some((second < first) as usize)
            } else {
                let [a, b, c] = [1, 2, 3].map(|k| difference(p[k], p[0]));
                (dot(a, cross(b, c)).abs() < FLAT).then_some(0)
            }
        }
        5 => {
            let chord: [f64; 5] = std::array::from_fn(|i| square(p[i], p[(i + 2) % 5]).sqrt());
            let (mut best, mut shortest, mut second) = (0, f64::INFINITY, f64::INFINITY);
            for i in 0..5 {
                let sum = chord[i] + chord[(i + 3) % 5];
                if sum < shortest {
                    (best, second, shortest) = (i, shortest, sum);
                } else {
                    second = second.min(sum);
                }
            }
            (second - shortest > TIE * shortest).then_some(best)
        }
        _ => None,
    }
}

fn difference(a: [f64; 3], b: [f64; 3]) -> [f64; 3] {
    [a[0] - b[0], a[1] - b[1], a[2] - b[2]]
}

/// Square of the distance.
fn square(a: [f64; 3], b: [f64; 3]) -> f64 {
    let d = difference(a, b);
    dot(d, d)
}
