//! Surfaces large enough to be measured by several workers: the same for any number of them, closed, and laid out in one pass.

use std::collections::HashSet;

use ropewalk::base::par::Pool;
use ropewalk::math::isosurface::isosurface;
use ropewalk::math::surface::measure;
use ropewalk::space::patch::PatchShape;

use crate::bodies::check_unwrapped;
use crate::patches::{Field, intervals, objects};
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

/// White noise has tips of every kind at the faces.
#[test]
fn a_large_surface_is_cut_at_the_faces_of_the_box() {
    let n = [52, 50, 54];
    let field = Field::noise(n, 8);
    let cells: Vec<[i32; 3]> = (0..n[0] * n[1] * n[2])
        .map(|i| [i % n[0], i / n[0] % n[1], i / n[0] / n[1]])
        .filter(|c| field.at(*c) > 0.2)
        .map(|c| c.map(|v| v as i32))
        .collect();
    for periodic in [[true; 3], [true, false, false], [false, true, true]] {
        let shape =
            PatchShape::around(intervals(cells.clone()), 1, n, periodic, std::array::from_fn(|a| periodic[a].then_some(n[a] as i32)));
        let surface = isosurface(&shape, &field.stored::<f64>(&shape), 0.2);
        assert!(surface.triangles.len() > 1 << 18, "{}", surface.triangles.len());
        check_unwrapped(&surface, [1.0, 0.8, 1.3]);
        let laid = surface.unwrapped();
        // Stored vertices first, in their order; those behind them in the order of their first use.
        let count = surface.points.len();
        assert!(laid.source[..count].iter().enumerate().all(|(i, &s)| s as usize == i));
        assert!(laid.points.len() > count && laid.points.len() < count + count / 10, "{count} {}", laid.points.len());
        let mut next = count as u32;
        for &v in laid.triangles.iter().flatten().filter(|&&v| v as usize >= count) {
            assert!(v <= next);
            next = next.max(v + 1);
        }
        assert_eq!(next as usize, laid.points.len());
        // Every vertex is used, and none stands twice at one place.
        let used: HashSet<u32> = laid.triangles.iter().flatten().copied().collect();
        assert_eq!(used.len(), laid.points.len());
        let places: HashSet<(u32, [u64; 3])> = laid.source.iter().zip(&laid.points).map(|(&s, p)| (s, p.map(f64::to_bits))).collect();
        assert_eq!(places.len(), laid.points.len());
        // The first vertex of a triangle lies where it is stored; a tip that is needed beyond a face alone is moved.
        let moved = |v: u32| laid.points[v as usize] != surface.points[laid.source[v as usize] as usize];
        assert!(laid.triangles.iter().all(|t| !moved(t[0])));
        assert!((0..count as u32).any(moved), "a tip that moves");
        for threads in [1, 3] {
            assert!(Pool::new(threads).unwrap().run(|| surface.unwrapped()) == laid);
        }
    }
}
