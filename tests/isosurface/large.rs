//! Surfaces large enough to be made by several workers: the same for any number of them, and closed.

use ropewalk::base::par::Pool;
use ropewalk::math::isosurface::isosurface;
use ropewalk::math::surface::measure;
use ropewalk::space::patch::PatchShape;

use crate::patches::{Field, objects};
use crate::random::check_manifold;

/// The object that percolates through a random field at a low level.
fn giant(periodic: bool) -> (PatchShape, Vec<f32>, f64) {
    let n = [72; 3];
    let field = Field::noise(n, 21).smoothed(2);
    let level = field.quantile(0.35);
    let field = Field::of(n, |c| if !periodic && c.iter().any(|&k| k == 0 || k == 71) { -9.0 } else { field.at(c) });
    let found = objects(&field, level, 26, [periodic; 3], 1);
    let shape = found.into_iter().max_by_key(|s| s.cells).unwrap();
    let values = field.stored(&shape);
    (shape, values, level)
}

#[test]
fn a_percolating_surface_is_the_same_on_any_number_of_threads() {
    for periodic in [false, true] {
        let (shape, values, level) = giant(periodic);
        assert_eq!(shape.period[0].is_some(), periodic);
        let all = [1, 2, 3].map(|threads| {
            Pool::new(threads).unwrap().run(|| {
                let surface = isosurface(&shape, &values, level);
                let areas = surface.area_vectors([1.0, 0.8, 1.3]);
                let (normals, measures) = (surface.vertex_normals(&areas), measure(&surface, [1.0, 0.8, 1.3]));
                (surface, areas, normals, measures)
            })
        });
        assert!(all[0] == all[1] && all[0] == all[2]);
        let (surface, _, _, measures) = &all[0];
        assert!(surface.points.len() > 100_000, "{}", surface.points.len());
        let (v, e, f) = check_manifold(surface);
        assert_eq!(measures.open_edges, 0);
        assert_eq!(measures.euler_surface, v as i64 - e as i64 + f as i64);
    }
}

/// The definition: the triangle that runs along the edge the other way, found in a map of all directed edges.
#[test]
fn neighbours_are_the_triangles_across_the_edges() {
    for periodic in [false, true] {
        let (shape, values, level) = giant(periodic);
        let surface = isosurface(&shape, &values, level);
        let sides = |t: &[u32; 3]| [(t[0], t[1]), (t[1], t[2]), (t[2], t[0])];
        let owner: std::collections::HashMap<(u32, u32), u32> =
            surface.triangles.iter().enumerate().flat_map(|(i, t)| sides(t).map(|s| (s, i as u32))).collect();
        for (t, across) in surface.triangles.iter().zip(surface.neighbours()) {
            assert_eq!(across, sides(t).map(|(a, b)| owner[&(b, a)]));
        }
    }
}
