//! The isosurface (in a plane the contour) of one object: its geometry, and the mesh with values at its vertices.

use crate::base::par;
use crate::base::real::Real;
use crate::math::contour::{ContourMeasures, contour};
use crate::math::isosurface::{Isosurface, isosurface};
use crate::math::surface::{SurfaceMeasures, measure_with};
use crate::measure::patches::Patch;
use crate::model::request::{Connectivity, Side};
use crate::model::surface::SurfaceMesh;
use crate::space::grid::Grid;

/// Bytes a stored cell, at most but for rare shapes, that the surface of a patch takes while it is made, measured and written.
pub const MESH_BYTES: u64 = 160;

/// The measured outline of an object.
#[derive(Debug, Clone, PartialEq)]
pub enum Outline {
    /// Of an object in space.
    Surface(SurfaceMeasures),
    /// Of an object in a plane.
    Contour(ContourMeasures),
}

/// What the shape of an object yields.
pub struct Shaped {
    /// Index of the object in its family.
    pub object: usize,
    /// Geometry of its surface or contour.
    pub outline: Outline,
    /// The mesh, where one was asked for.
    pub mesh: Option<SurfaceMesh>,
}

/// How an object is outlined.
#[derive(Debug, Clone, Copy)]
pub struct Trace {
    /// Absolute level.
    pub level: f64,
    /// Which side of it is inside.
    pub side: Side,
    /// Neighbourhood, which decides what corners join in a plane.
    pub connectivity: Connectivity,
    /// The object's number.
    pub id: u64,
    /// Whether a mesh is wanted.
    pub with_mesh: bool,
}

/// Measures a complete patch.
pub fn shape<T: Real>(grid: &Grid, patch: &Patch<T>, trace: Trace) -> Shaped {
    // Patches carry the indicator with the inside up.
    let up = if trace.side == Side::Above { 1.0 } else { -1.0 };
    if grid.is_flat() {
        return plane_shape(grid, patch, trace, up);
    }
    let mut surface = isosurface(&patch.shape, patch.field(0), up * trace.level);
    straighten(grid, &mut surface.points);
    let area_vectors = surface.area_vectors(grid.spacing);
    let measures = measure_with(&surface, grid.spacing, &area_vectors);
    let mesh = trace.with_mesh.then(|| mesh(grid, patch, surface, &area_vectors, up, trace.id));
    Shaped { object: patch.object, outline: Outline::Surface(measures), mesh }
}

/// Moves points of a stretched grid to where they would have the same position if spacing were equal.
fn straighten(grid: &Grid, points: &mut [[f64; 3]]) {
    for a in (0..3).filter(|&a| grid.stretched[a].is_some()) {
        par::for_chunks(points, VERTICES, |_, chunk| {
            for p in chunk {
                p[a] = (grid.position(a, p[a]) - grid.origin[a]) / grid.spacing[a];
            }
        });
    }
}

/// The physical position of a straightened point.
fn place(grid: &Grid, p: [f64; 3]) -> [f32; 3] {
    std::array::from_fn(|a| (grid.origin[a] + p[a] * grid.spacing[a]) as f32)
}

fn plane_shape<T: Real>(grid: &Grid, patch: &Patch<T>, trace: Trace, up: f64) -> Shaped {
    let joined = trace.connectivity != Connectivity::Six;
    let mut contour = contour(&patch.shape, patch.field(0), up * trace.level, joined);
    let mut points: Vec<[f64; 3]> = contour.points.iter().map(|p| [p[0], p[1], 0.0]).collect();
    straighten(grid, &mut points);
    for (flat, p) in contour.points.iter_mut().zip(&points) {
        *flat = [p[0], p[1]];
    }
    let spacing = [grid.spacing[0], grid.spacing[1]];
    let measures = contour.measure(spacing);
    let mesh = trace.with_mesh.then(|| {
        let (points, edges, source) = contour.laid_out();
        let recipe = Recipe::new(patch, up);
        let mut values = vec![Vec::with_capacity(source.len()); recipe.values()];
        for &s in &source {
            let (a, b, t) = contour.cells[s as usize];
            let at = |f: &[T]| (1.0 - t) * f[a as usize].wide() + t * f[b as usize].wide();
            recipe.vertex(at, |k, value| values[k].push(value));
        }
        SurfaceMesh {
            id: trace.id,
            positions: points.iter().map(|p| place(grid, [p[0], p[1], 0.0])).collect(),
            normals: contour.normals(spacing, &source).into_iter().map(|n| [n[0] as f32, n[1] as f32, 0.0]).collect(),
            values,
            triangles: Vec::new(),
            edges,
        }
    });
    Shaped { object: patch.object, outline: Outline::Contour(measures), mesh }
}

/// How the fields of a patch become the values at a vertex, in the order of [`SurfaceMesh::value_names`].
struct Recipe<'a, T> {
    up: f64,
    velocity: bool,
    magnetic: bool,
    fields: Vec<&'a [T]>,
}

impl<'a, T: Real> Recipe<'a, T> {
    fn new(patch: &'a Patch<T>, up: f64) -> Recipe<'a, T> {
        let fields = (0..patch.carried()).map(|k| patch.field(k)).collect();
        Recipe { up, velocity: patch.fields.velocity, magnetic: patch.fields.magnetic, fields }
    }

    /// Number of values.
    fn values(&self) -> usize {
        let vectors = 6 * (usize::from(self.velocity) + usize::from(self.magnetic));
        let made = 2 * usize::from(self.velocity) + usize::from(self.magnetic) + usize::from(self.velocity && self.magnetic);
        self.fields.len() - vectors + made
    }

    /// Calls `put` with each value in turn; `at` interpolates a field.
    #[inline(always)]
    fn vertex(&self, at: impl Fn(&[T]) -> f64, mut put: impl FnMut(usize, f32)) {
        let mut place = 0;
        let mut put = |v: f64| {
            put(place, v as f32);
            place += 1;
        };
        let vector = |first: usize| -> [f64; 3] { std::array::from_fn(|c| at(self.fields[first + c])) };
        put(self.up * at(self.fields[0]));
        let mut next = 1;
        let mut flow = None;
        if self.velocity {
            let (u, w) = (vector(next), vector(next + 3));
            next += 6;
            put(dot(u, u).sqrt());
            put(cosine(u, w));
            flow = Some(u);
        }
        if self.magnetic {
            let (b, j) = (vector(next), vector(next + 3));
            next += 6;
            put(cosine(j, b));
            if let Some(u) = flow {
                put(cosine(u, b));
            }
        }
        for field in &self.fields[next..] {
            put(at(field));
        }
    }
}

fn dot(a: [f64; 3], b: [f64; 3]) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

/// Cosine between two vectors, NaN where one vanishes: a missing value in a binary format.
fn cosine(a: [f64; 3], b: [f64; 3]) -> f64 {
    dot(a, b) / (dot(a, a) * dot(b, b)).sqrt()
}

/// Vertices whose values are worked out by one worker.
const VERTICES: usize = 1 << 14;

/// The values at all vertices of a surface, each vertex visited once.
fn vertex_values<T: Real>(recipe: &Recipe<T>, surface: &Isosurface) -> Vec<Vec<f32>> {
    let count = surface.points.len();
    let mut values = vec![vec![0.0f32; count]; recipe.values()];
    let edges = surface.edges.len();
    let fill = |first: usize, out: &mut [&mut [f32]]| {
        let len = out[0].len();
        for i in 0..len {
            let v = first + i;
            match surface.edges.get(v) {
                Some(e) => recipe.vertex(|f| e.of(f), |k, value| out[k][i] = value),
                None => recipe.vertex(|f| surface.centre_of(v - edges, f), |k, value| out[k][i] = value),
            }
        }
    };
    if count <= VERTICES {
        fill(0, &mut values.iter_mut().map(|v| &mut v[..]).collect::<Vec<_>>());
        return values;
    }
    let mut columns: Vec<_> = values.iter_mut().map(|v| v.chunks_mut(VERTICES)).collect();
    let tasks: Vec<Vec<&mut [f32]>> =
        (0..count.div_ceil(VERTICES)).map(|_| columns.iter_mut().filter_map(Iterator::next).collect()).collect();
    par::map_owned(tasks, |k, mut out| fill(k * VERTICES, &mut out));
    values
}

/// Maps a list, on several workers where it is long.
fn mapped<A: Sync, B: Send + Copy + Default>(list: &[A], f: impl Fn(&A) -> B + Sync + Send) -> Vec<B> {
    if list.len() <= VERTICES {
        return list.iter().map(f).collect();
    }
    let mut out = vec![B::default(); list.len()];
    par::for_chunks(&mut out, VERTICES, |k, chunk| {
        for (to, from) in chunk.iter_mut().zip(&list[k * VERTICES..]) {
            *to = f(from);
        }
    });
    out
}

fn mesh<T: Real>(grid: &Grid, patch: &Patch<T>, surface: Isosurface, area_vectors: &[[f64; 3]], up: f64, id: u64) -> SurfaceMesh {
    let normals = surface.vertex_normals(area_vectors);
    let values = vertex_values(&Recipe::new(patch, up), &surface);
    let single = |n: [f64; 3]| n.map(|v| v as f32);
    let edges = Vec::new();
    if patch.shape.period == [None; 3] {
        return SurfaceMesh {
            id,
            positions: mapped(&surface.points, |&p| place(grid, p)),
            normals: mapped(&normals, |&n| single(n)),
            values,
            triangles: surface.triangles,
            edges,
        };
    }
    let open = surface.unwrapped();
    SurfaceMesh {
        id,
        positions: mapped(&open.points, |&p| place(grid, p)),
        normals: mapped(&open.source, |&s| single(normals[s as usize])),
        values: values.iter().map(|v| mapped(&open.source, |&s| v[s as usize])).collect(),
        triangles: open.triangles,
        edges,
    }
}
