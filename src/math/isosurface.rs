//! The triangulated isosurface around one object: vertices on grid edges, interpolation of fields to them, normals.
//!
//! The surface is found by marching cubes (Lorensen & Cline 1987) with the asymptotic decider on ambiguous faces
//! (Nielson & Hamann 1991) and no tunnels inside a cube, so that it is always a closed two-dimensional manifold
//! except where the object leaves the box through an open face.

use std::ops::Range;

use crate::base::par;
use crate::base::real::Real;
use crate::math::isocubes;
use crate::math::isomesher::NONE;
use crate::math::unwrap;
use crate::space::patch::PatchShape;

pub use crate::math::unwrap::Unwrapped;

/// A vertex on the grid edge between two stored cells, one inside the object and one outside.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct EdgeRef {
    /// Stored index of the lower cell along the edge's axis (the upper one is its neighbour, modulo the period).
    pub a: u32,
    /// Stored index of the upper cell.
    pub b: u32,
    /// Position between them: 0 at `a`, 1 at `b`; within [1e-4, 1 - 1e-4].
    pub t: f64,
}

impl EdgeRef {
    /// The value of a stored field here, linear along the edge.
    #[inline]
    pub fn of<T: Real>(&self, field: &[T]) -> f64 {
        (1.0 - self.t) * field[self.a as usize].wide() + self.t * field[self.b as usize].wide()
    }
}

/// Triangles over shared vertices, counter-clockwise seen from outside (the low side).
///
/// The first `edges.len()` vertices lie on grid edges, in the order of `edges`. The remaining ones are centre
/// vertices: each is the mean of the vertices of one loop around a cube, see [`Isosurface::centre`].
///
/// Coordinates along an axis with a period lie within `0..=period`; triangles may join vertices on both sides of the
/// seam, and a vector between two vertices of a triangle is always the shortest one modulo the period. Triangles reach
/// over one cell at most, so this is unique for periods from 3 cells on.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Isosurface {
    /// Period in cells along x, y, z where coordinates wrap, as in the patch.
    pub period: [Option<i32>; 3],
    /// Vertex positions x, y, z in fractional cell indices of the patch (cell centres at integers).
    pub points: Vec<[f64; 3]>,
    /// Three vertex indices a triangle.
    pub triangles: Vec<[u32; 3]>,
    /// Grid edges of the first vertices.
    pub edges: Vec<EdgeRef>,
    /// Start of each centre vertex's list in `centre_vertices`, and one past the last.
    pub(super) centre_starts: Vec<u32>,
    /// Edge vertices around each centre vertex.
    pub(super) centre_vertices: Vec<u32>,
    /// For each side 0-1, 1-2, 2-0 of each triangle the triangle across, where that has a lower index or, in a ring about a centre
    /// vertex, is the first; else `u32::MAX`. Every pair stands once, at the triangle whose turn comes when both are known.
    pub(super) behind: Vec<[u32; 3]>,
    /// For each edge vertex another of the same piece of the surface, of lower index, or itself for the first of a piece.
    pub(super) parents: Vec<u32>,
    /// What lies between some planes, in order: small surfaces have one part. Work on a large one is shared out by these.
    pub(super) parts: Vec<Part>,
}

/// Vertices and triangles that follow one another: edge vertices, centre vertices, triangles. Triangles of a part have vertices of their own
/// and of parts before.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Part {
    pub vertices: Range<usize>,
    pub centres: Range<usize>,
    pub triangles: Range<usize>,
}

/// Triangles a worker goes through at a time.
const TRIANGLES: usize = 1 << 14;

/// Extracts the surface `values = level` around the object's own cells.
///
/// `values` is parallel to the stored cells of `shape`. A cell is inside when it belongs to the object; cells of other
/// objects count as outside, at most at the level. Cubes of eight cell centres are visited when one corner at least is
/// inside; cubes with a corner that is not stored (beyond an open face) are left out and the surface ends there.
///
/// A loop of four vertices is closed by its shorter diagonal and one of five by its shortest fan, in cell units; longer
/// loops, where a chord could lie in a cube face, and ties get a centre vertex. Nothing depends on the direction
/// of the axes: a mirrored or axis-permuted field has the mirrored or permuted surface.
///
/// # Panics
/// When `values` and the stored cells differ in number, when there are 2^32 or more of them, or when an object cell is not
/// stored.
pub fn isosurface<T: Real>(shape: &PatchShape, values: &[T], level: f64) -> Isosurface {
    assert_eq!(values.len(), shape.cells, "isosurface: expected one value a stored cell ({}), got {}", shape.cells, values.len());
    assert!(u32::try_from(shape.cells).is_ok(), "isosurface: expected fewer than 2^32 stored cells, got {}", shape.cells);
    isocubes::extract(shape, values, level)
}

impl Isosurface {
    /// Indices of the edge vertices whose mean is the centre vertex `edges.len() + i`.
    pub fn centre(&self, i: usize) -> &[u32] {
        let span = self.centre_starts[i] as usize..self.centre_starts[i + 1] as usize;
        &self.centre_vertices[span]
    }

    /// Number of centre vertices.
    pub fn centres(&self) -> usize {
        self.points.len() - self.edges.len()
    }

    /// Values of a stored field at all vertices, in vertex order: linear along the grid edge, and the mean over the
    /// loop at centre vertices. Vector fields go through component by component.
    ///
    /// # Panics
    /// When `field` has fewer values than the patch has stored cells.
    pub fn interpolate<T: Real>(&self, field: &[T]) -> Vec<f64> {
        let edges = self.edges.iter().map(|e| e.of(field));
        edges.chain((0..self.centres()).map(|i| self.centre_of(i, field))).collect()
    }

    /// The value of a stored field at the centre vertex `edges.len() + i`.
    pub fn centre_of<T: Real>(&self, i: usize, field: &[T]) -> f64 {
        let around = self.centre(i);
        let sum: f64 = around.iter().map(|&v| self.edges[v as usize].of(field)).sum();
        sum / around.len() as f64
    }

    /// The shortest vector from vertex `a` to vertex `b` modulo the periods, in cells.
    #[inline]
    pub fn vector(&self, a: u32, b: u32) -> [f64; 3] {
        let (p, q) = (self.points[a as usize], self.points[b as usize]);
        std::array::from_fn(|axis| {
            let d = q[axis] - p[axis];
            match self.period[axis] {
                None => d,
                // Nearly all are shorter than half a period: no division for those.
                Some(n) if d.abs() < 0.5 * n as f64 => d,
                Some(n) => d - n as f64 * (d / n as f64).round(),
            }
        })
    }

    /// Twice the area of a triangle times its outward unit normal, in physical units for the given spacing.
    #[inline]
    pub(super) fn area_vector(&self, triangle: [u32; 3], spacing: [f64; 3]) -> [f64; 3] {
        let [a, b, c] = triangle;
        cross(scaled(self.vector(a, b), spacing), scaled(self.vector(a, c), spacing))
    }

    /// Twice the area of every triangle times its outward unit normal, in physical units for the given spacing.
    pub fn area_vectors(&self, spacing: [f64; 3]) -> Vec<[f64; 3]> {
        if self.parts.len() < 2 {
            return self.triangles.iter().map(|&t| self.area_vector(t, spacing)).collect();
        }
        let mut out = vec![[0.0; 3]; self.triangles.len()];
        par::for_chunks(&mut out, TRIANGLES, |k, chunk| {
            for (to, &t) in chunk.iter_mut().zip(&self.triangles[k * TRIANGLES..]) {
                *to = self.area_vector(t, spacing);
            }
        });
        out
    }

    /// Unit outward vertex normals in physical space, the area-weighted mean over the triangles at each vertex, from
    /// [`Isosurface::area_vectors`].
    ///
    /// A vertex whose triangles cancel exactly has the zero vector.
    pub fn vertex_normals(&self, area_vectors: &[[f64; 3]]) -> Vec<[f64; 3]> {
        let mut normals = vec![[0.0; 3]; self.points.len()];
        if let [_] = &self.parts[..] {
            for (triangle, area) in self.triangles.iter().zip(area_vectors) {
                for &v in triangle {
                    add(&mut normals[v as usize], area);
                }
            }
            normals.iter_mut().for_each(unit);
            return normals;
        }
        // Each part sums at its own vertices. What its triangles add to those of parts before comes later in the order of triangles
        // and is added afterwards, part by part.
        let (mut vertices, mut centres) = normals.split_at_mut(self.edges.len());
        let mut own = Vec::with_capacity(self.parts.len());
        for p in &self.parts {
            let vertices = vertices.split_off_mut(..p.vertices.len()).expect("parts hold all vertices");
            own.push((p, vertices, centres.split_off_mut(..p.centres.len()).expect("parts hold all centres")));
        }
        let late = par::map_owned(own, |_, (part, vertices, centres)| {
            let mut late = Vec::new();
            let triangles = part.triangles.clone();
            for (triangle, area) in self.triangles[triangles.clone()].iter().zip(&area_vectors[triangles]) {
                for &v in triangle {
                    let at = v as usize;
                    if at < part.vertices.start {
                        late.push((v, *area));
                    } else if at < part.vertices.end {
                        add(&mut vertices[at - part.vertices.start], area);
                    } else {
                        add(&mut centres[at - part.centres.start], area);
                    }
                }
            }
            late
        });
        for (v, area) in late.iter().flatten() {
            add(&mut normals[*v as usize], area);
        }
        par::for_chunks(&mut normals, TRIANGLES, |_, chunk| chunk.iter_mut().for_each(unit));
        normals
    }

    /// The surface without triangles across a seam: along axes with a period, positions continue from triangle to
    /// triangle, and vertices are repeated where the surface meets itself a period further on.
    ///
    /// A surface of more than 2^18 triangles is cut at the faces of the box instead, which takes one pass in the order of triangles:
    /// every triangle keeps its first vertex where it is stored and has the nearest images of the other two. Vertices come in the
    /// order in which they are stored, then the repeated ones in the order of their first use. One that is needed beyond a face alone
    /// is not repeated but moved there.
    pub fn unwrapped(&self) -> Unwrapped {
        unwrap::unwrap(self)
    }

    /// For each triangle the triangles across its edges 0-1, 1-2 and 2-0; `u32::MAX` where there is none.
    pub fn neighbours(&self) -> Vec<[u32; 3]> {
        let mut across = self.behind.clone();
        for (i, behind) in self.behind.iter().enumerate() {
            for side in 0..3 {
                if behind[side] != NONE {
                    let end = self.triangles[i][(side + 1) % 3];
                    let other = behind[side] as usize;
                    // The other triangle runs along the edge the other way.
                    let begin = self.triangles[other].iter().position(|&v| v == end).expect("both triangles have the edge");
                    across[other][begin] = i as u32;
                }
            }
        }
        across
    }
}

fn add(sum: &mut [f64; 3], v: &[f64; 3]) {
    for axis in 0..3 {
        sum[axis] += v[axis];
    }
}

fn unit(v: &mut [f64; 3]) {
    let length = dot(*v, *v).sqrt();
    if length > 0.0 {
        *v = v.map(|c| c / length);
    }
}

#[inline]
pub(super) fn scaled(v: [f64; 3], spacing: [f64; 3]) -> [f64; 3] {
    [v[0] * spacing[0], v[1] * spacing[1], v[2] * spacing[2]]
}

#[inline]
pub(super) fn dot(a: [f64; 3], b: [f64; 3]) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

#[inline]
pub(super) fn cross(a: [f64; 3], b: [f64; 3]) -> [f64; 3] {
    [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]]
}
