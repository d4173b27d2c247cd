//! Triangulates one cube at a time: welded vertices on grid edges, face decisions, caps of the loops.

use crate::base::real::Real;
use crate::math::isocubes::next;
use crate::math::isosurface::{EdgeRef, Isosurface, cross, dot};
use crate::math::isotable::{AXIS_BIT, EDGES, FACES, LONGEST, TABLE, Table};
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

const NONE: u32 = u32::MAX;

/// The growing surface and the vertex indices of the planes of cells at hand.
pub(super) struct Mesher<'a, T> {
    values: &'a [T],
    level: f64,
    table: &'static Table,
    surface: Isosurface,
    /// First triangle of each centre vertex's fan: the centre's index is known when all edge vertices are counted.
    fans: Vec<u32>,
    centre_points: Vec<[f64; 3]>,
    /// Three vertex indices (edges along x, y, z) a stored cell, for a few planes at a time, each in its slot.
    vertices: Vec<u32>,
    slot_len: usize,
    /// Which stored plane each slot holds. The last slot keeps the first plane for the cubes across the seam.
    held: [usize; 3],
    /// First stored cell of each plane, and one past the last.
    plane_starts: Vec<usize>,
    /// What to add to 3 × stored index for the position in `vertices`, for the lower and the upper plane.
    shift: [usize; 2],
    y: [i32; 2],
    z: [i32; 2],
}

impl<'a, T: Real> Mesher<'a, T> {
    pub fn new(shape: &PatchShape, values: &'a [T], level: f64, plane_starts: Vec<usize>) -> Mesher<'a, T> {
        let largest = plane_starts.windows(2).map(|w| w[1] - w[0]).max().unwrap_or(0);
        let slots = if shape.period[2].is_some() { 3 } else { 2 };
        // Every interval has two crossings along x, rough surfaces have as many along y and z; two triangles a vertex.
        // A third more saves most surfaces from being copied to a larger place.
        let expected = 8 * shape.object.len();
        Mesher {
            values,
            level,
            table: &TABLE,
            surface: Isosurface {
                period: shape.period,
                points: Vec::with_capacity(expected),
                triangles: Vec::with_capacity(2 * expected),
                edges: Vec::with_capacity(expected),
                centre_starts: vec![0],
                centre_vertices: Vec::new(),
            },
            fans: Vec::new(),
            centre_points: Vec::new(),
            vertices: vec![NONE; slots * 3 * largest],
            slot_len: 3 * largest,
            held: [usize::MAX; 3],
            plane_starts,
            shift: [0; 2],
            y: [0; 2],
            z: [0; 2],
        }
    }

    /// Goes on to the cubes between two planes: their coordinates and their places among the stored planes.
    pub fn enter_plane(&mut self, z: [i32; 2], planes: [usize; 2]) {
        self.z = z;
        for (k, plane) in planes.into_iter().enumerate() {
            let last_slot = self.surface.period[2].is_some() && plane == 0;
            let slot = if last_slot { 2 } else { plane & 1 };
            let begin = slot * self.slot_len;
            let first = self.plane_starts[plane];
            if self.held[slot] != plane {
                self.held[slot] = plane;
                let cells = self.plane_starts[plane + 1] - first;
                self.vertices[begin..begin + 3 * cells].fill(NONE);
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
        let mut ids = [NONE; LONGEST];
        let mut spots = [[0.0; 3]; LONGEST];
        for l in table.loops(mask, joined) {
            let n = l.len as usize;
            for k in 0..n {
                let edge = EDGES[l.edges[k] as usize];
                let (corner, axis) = (edge.corner as usize, edge.axis as usize);
                let slot = (3 * cells[corner] + axis).wrapping_add(self.shift[corner >> 1 & 1]);
                let mut id = self.vertices[slot];
                if id == NONE {
                    id = self.surface.edges.len() as u32;
                    self.vertices[slot] = id;
                    let upper = corner | AXIS_BIT[axis];
                    let (a, b) = (height(corner), height(upper));
                    let t = (a / (a - b)).clamp(CLEARANCE, 1.0 - CLEARANCE);
                    self.add_vertex(x, corner, axis, [cells[corner], cells[upper]], t);
                }
                ids[k] = id;
                spots[k] = CORNERS[corner];
                spots[k][axis] = self.surface.edges[id as usize].t;
            }
            self.cap(&ids[..n], &spots[..n], x);
        }
    }

    fn add_vertex(&mut self, x: i32, corner: usize, axis: usize, cells: [usize; 2], t: f64) {
        let x = if corner & AXIS_BIT[0] == 0 { x } else { next(x, self.surface.period[0]) };
        let mut point = [x, self.y[corner & 1], self.z[corner >> 1 & 1]].map(f64::from);
        point[axis] += t;
        self.surface.points.push(point);
        self.surface.edges.push(EdgeRef { a: cells[0] as u32, b: cells[1] as u32, t });
    }

    /// Closes a loop by triangles. `ids` and `spots` are its vertices, the latter relative to the cube's lower corner.
    #[inline]
    fn cap(&mut self, ids: &[u32], spots: &[[f64; 3]], x: i32) {
        let triangles = &mut self.surface.triangles;
        match (ids, apex(spots)) {
            (&[a, b, c], _) => triangles.push([a, b, c]),
            (&[a, b, c, d], Some(0)) => triangles.extend([[a, b, c], [a, c, d]]),
            (&[a, b, c, d], Some(_)) => triangles.extend([[b, c, d], [b, d, a]]),
            (_, Some(first)) => {
                let [a, b, c, d, e] = FAN_OF_FIVE[first].map(|k| ids[k]);
                triangles.extend([[a, b, c], [a, c, d], [a, d, e]]);
            }
            (_, None) => {
                self.fans.push(triangles.len() as u32);
                let mut before = ids[ids.len() - 1];
                for &id in ids {
                    triangles.push([before, id, NONE]);
                    before = id;
                }
                let base = [x, self.y[0], self.z[0]].map(f64::from);
                self.centre_points.push(std::array::from_fn(|axis| {
                    let sum: f64 = spots.iter().map(|p| p[axis]).sum();
                    base[axis] + sum / spots.len() as f64
                }));
                self.surface.centre_vertices.extend_from_slice(ids);
                self.surface.centre_starts.push(self.surface.centre_vertices.len() as u32);
            }
        }
    }

    /// Numbers the centre vertices behind the edge vertices.
    pub fn finish(mut self) -> Isosurface {
        let surface = &mut self.surface;
        for (i, &first) in self.fans.iter().enumerate() {
            let id = (surface.edges.len() + i) as u32;
            let sides = surface.centre(i).len();
            for triangle in &mut surface.triangles[first as usize..][..sides] {
                triangle[2] = id;
            }
        }
        surface.points.append(&mut self.centre_points);
        self.surface
    }
}

/// Value above the level, made positive inside and not positive outside, whatever another object's cell may hold.
#[inline]
fn height(mask: u8, corner: usize, above: f64) -> f64 {
    if mask >> corner & 1 == 1 { above.max(f64::MIN_POSITIVE) } else { above.min(0.0) }
}

/// The loop vertex from which a fan of chords closes the loop, or `None` when it takes a centre vertex.
#[inline]
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
