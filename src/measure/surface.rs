//! The isosurface (in a plane the contour) of one object: its geometry, and the mesh with values at its vertices.

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
    let mesh = trace.with_mesh.then(|| mesh(grid, patch, &surface, &area_vectors, up, trace.id));
    Shaped { object: patch.object, outline: Outline::Surface(measures), mesh }
}

/// Moves points of a stretched grid to where they would have the same position if spacing were equal.
fn straighten(grid: &Grid, points: &mut [[f64; 3]]) {
    for a in (0..3).filter(|&a| grid.stretched[a].is_some()) {
        for p in points.iter_mut() {
            p[a] = (grid.position(a, p[a]) - grid.origin[a]) / grid.spacing[a];
        }
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
        let values = vertex_values(patch, up, |k| contour.interpolate(patch.field(k)));
        SurfaceMesh {
            id: trace.id,
            positions: points.iter().map(|p| place(grid, [p[0], p[1], 0.0])).collect(),
            normals: contour.normals(spacing, &source).into_iter().map(|n| [n[0] as f32, n[1] as f32, 0.0]).collect(),
            values: values.iter().map(|v| source.iter().map(|&s| v[s as usize]).collect()).collect(),
            triangles: Vec::new(),
            edges,
        }
    });
    Shaped { object: patch.object, outline: Outline::Contour(measures), mesh }
}

/// The values at the vertices in the order of [`SurfaceMesh::value_names`]; `at` interpolates a field of the patch.
fn vertex_values<T: Real>(patch: &Patch<T>, up: f64, at: impl Fn(usize) -> Vec<f64>) -> Vec<Vec<f32>> {
    let mut values: Vec<Vec<f32>> = vec![at(0).iter().map(|&v| (up * v) as f32).collect()];
    let vector = |first: usize| -> [Vec<f64>; 3] { std::array::from_fn(|c| at(first + c)) };
    let fields = patch.fields;
    let mut next = 1;
    let mut flow = None;
    if fields.velocity {
        let (u, w) = (vector(next), vector(next + 3));
        next += 6;
        values.push((0..u[0].len()).map(|i| dot(&u, &u, i).sqrt() as f32).collect());
        values.push(cosine(&u, &w));
        flow = Some(u);
    }
    if fields.magnetic {
        let (b, j) = (vector(next), vector(next + 3));
        next += 6;
        values.push(cosine(&j, &b));
        if let Some(u) = &flow {
            values.push(cosine(u, &b));
        }
    }
    for k in next..patch.carried() {
        values.push(at(k).iter().map(|&v| v as f32).collect());
    }
    values
}

fn mesh<T: Real>(grid: &Grid, patch: &Patch<T>, surface: &Isosurface, area_vectors: &[[f64; 3]], up: f64, id: u64) -> SurfaceMesh {
    let normals = surface.vertex_normals(area_vectors);
    let values = vertex_values(patch, up, |k| surface.interpolate(patch.field(k)));
    let single = |n: [f64; 3]| n.map(|v| v as f32);
    if patch.shape.period == [None; 3] {
        return SurfaceMesh {
            id,
            positions: surface.points.iter().map(|&p| place(grid, p)).collect(),
            normals: normals.into_iter().map(single).collect(),
            values,
            triangles: surface.triangles.clone(),
            edges: Vec::new(),
        };
    }
    let open = surface.unwrapped();
    SurfaceMesh {
        id,
        positions: open.points.iter().map(|&p| place(grid, p)).collect(),
        normals: open.source.iter().map(|&s| single(normals[s as usize])).collect(),
        values: values.iter().map(|v| open.source.iter().map(|&s| v[s as usize]).collect()).collect(),
        triangles: open.triangles,
        edges: Vec::new(),
    }
}

fn dot(a: &[Vec<f64>; 3], b: &[Vec<f64>; 3], i: usize) -> f64 {
    a[0][i] * b[0][i] + a[1][i] * b[1][i] + a[2][i] * b[2][i]
}

/// Cosine at every vertex, NaN where a vector vanishes: a missing value in a binary format.
fn cosine(a: &[Vec<f64>; 3], b: &[Vec<f64>; 3]) -> Vec<f32> {
    (0..a[0].len()).map(|i| (dot(a, b, i) / (dot(a, a, i) * dot(b, b, i)).sqrt()) as f32).collect()
}
