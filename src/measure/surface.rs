//! The isosurface of one object: its geometry, and the mesh with values at its vertices.

use crate::base::real::Real;
use crate::math::isosurface::{Isosurface, isosurface};
use crate::math::surface::{SurfaceMeasures, measure_with};
use crate::measure::patches::Patch;
use crate::model::request::Side;
use crate::model::surface::SurfaceMesh;
use crate::space::grid::Grid;

/// What the shape of an object yields.
pub struct Shaped {
    /// Index of the object in its family.
    pub object: usize,
    /// Geometry of its surface.
    pub measures: SurfaceMeasures,
    /// The mesh, where one was asked for.
    pub mesh: Option<SurfaceMesh>,
}

/// Measures a complete patch. `level` is absolute.
pub fn shape<T: Real>(grid: &Grid, patch: &Patch<T>, level: f64, side: Side, id: u64, with_mesh: bool) -> Shaped {
    // Patches carry the indicator with the inside up.
    let up = if side == Side::Above { 1.0 } else { -1.0 };
    let surface = isosurface(&patch.shape, patch.field(0), up * level);
    let area_vectors = surface.area_vectors(grid.spacing);
    let measures = measure_with(&surface, grid.spacing, &area_vectors);
    let mesh = with_mesh.then(|| mesh(grid, patch, &surface, &area_vectors, up, id));
    Shaped { object: patch.object, measures, mesh }
}

fn mesh<T: Real>(grid: &Grid, patch: &Patch<T>, surface: &Isosurface, area_vectors: &[[f64; 3]], up: f64, id: u64) -> SurfaceMesh {
    let normals = surface.vertex_normals(area_vectors);
    let mut values: Vec<Vec<f32>> = vec![surface.interpolate(patch.field(0)).iter().map(|&v| (up * v) as f32).collect()];
    let vector = |first: usize| -> [Vec<f64>; 3] { std::array::from_fn(|c| surface.interpolate(patch.field(first + c))) };
    let fields = patch.fields;
    let mut at = 1;
    let mut flow = None;
    if fields.velocity {
        let (u, w) = (vector(at), vector(at + 3));
        at += 6;
        values.push((0..u[0].len()).map(|i| dot(&u, &u, i).sqrt() as f32).collect());
        values.push(cosine(&u, &w));
        flow = Some(u);
    }
    if fields.magnetic {
        let (b, j) = (vector(at), vector(at + 3));
        values.push(cosine(&j, &b));
        if let Some(u) = &flow {
            values.push(cosine(u, &b));
        }
    }
    let place = |p: [f64; 3]| -> [f32; 3] { std::array::from_fn(|a| grid.position(a, p[a]) as f32) };
    let single = |n: [f64; 3]| n.map(|v| v as f32);
    if patch.shape.period == [None; 3] {
        return SurfaceMesh {
            id,
            positions: surface.points.iter().map(|&p| place(p)).collect(),
            normals: normals.into_iter().map(single).collect(),
            values,
            triangles: surface.triangles.clone(),
        };
    }
    let open = surface.unwrapped();
    SurfaceMesh {
        id,
        positions: open.points.iter().map(|&p| place(p)).collect(),
        normals: open.source.iter().map(|&s| single(normals[s as usize])).collect(),
        values: values.iter().map(|v| open.source.iter().map(|&s| v[s as usize]).collect()).collect(),
        triangles: open.triangles,
    }
}

fn dot(a: &[Vec<f64>; 3], b: &[Vec<f64>; 3], i: usize) -> f64 {
    a[0][i] * b[0][i] + a[1][i] * b[1][i] + a[2][i] * b[2][i]
}

/// Cosine at every vertex, NaN where a vector vanishes: a missing value in a binary format.
fn cosine(a: &[Vec<f64>; 3], b: &[Vec<f64>; 3]) -> Vec<f32> {
    (0..a[0].len()).map(|i| (dot(a, b, i) / (dot(a, a, i) * dot(b, b, i)).sqrt()) as f32).collect()
}
