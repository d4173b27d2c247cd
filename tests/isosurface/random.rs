//! Isosurfaces of random fields: always closed manifolds, the same in every orientation, the same wherever they lie.

use std::collections::HashMap;

use crate::patches::{Field, intervals, objects};
use ropewalk::base::real::Real;
use ropewalk::math::isosurface::{Isosurface, isosurface};
use ropewalk::math::surface::{SurfaceMeasures, measure};
use ropewalk::space::patch::PatchShape;

/// Fields with every kind of trouble: white, smoothed, and of few values, where lengths and saddles tie.
fn fields(n: [usize; 3]) -> Vec<(&'static str, Field)> {
    let steps = |mut f: Field, levels: f64| {
        f.values.iter_mut().for_each(|v| *v = (*v * levels).round());
        f
    };
    vec![
        ("white", Field::noise(n, 1)),
        ("smoothed once", Field::noise(n, 2).smoothed(1)),
        ("smoothed", Field::noise(n, 3).smoothed(4)),
        ("few values", steps(Field::noise(n, 4), 12.0)),
        ("few smooth values", steps(Field::noise(n, 5).smoothed(2), 16.0)),
    ]
}

/// The definition of a closed, consistently wound manifold, checked with maps: every directed edge once with its
/// reverse once, and the triangles at a vertex form one ring. Returns the vertex, edge and triangle counts.
pub fn check_manifold(surface: &Isosurface) -> (usize, usize, usize) {
    let mut directed: HashMap<(u32, u32), u32> = HashMap::new();
    for t in &surface.triangles {
        for k in 0..3 {
            let (a, b, c) = (t[k], t[(k + 1) % 3], t[(k + 2) % 3]);
            assert!(a != b, "degenerate triangle {t:?}");
            assert!(directed.insert((a, b), c).is_none(), "edge {a}-{b} twice the same way");
        }
    }
    let mut degree = vec![0; surface.points.len()];
    let mut start = vec![u32::MAX; surface.points.len()];
    for &(a, b) in directed.keys() {
        assert!(directed.contains_key(&(b, a)), "edge {a}-{b} has one triangle");
        degree[a as usize] += 1;
        start[a as usize] = b;
    }
    for v in 0..surface.points.len() as u32 {
        let first = start[v as usize];
        assert!(first != u32::MAX, "vertex {v} has no triangle");
        let mut at = directed[&(v, first)];
        let mut ring = 1;
        while at != first {
            at = directed[&(v, at)];
            ring += 1;
        }
        assert_eq!(ring, degree[v as usize], "vertex {v} has two rings");
    }
    (surface.points.len(), directed.len() / 2, surface.triangles.len())
}

fn smallest_area(surface: &Isosurface) -> f64 {
    let area = |t: &[u32; 3]| {
        let (u, v) = (surface.vector(t[0], t[1]), surface.vector(t[0], t[2]));
        let c: [f64; 3] = std::array::from_fn(|k| u[(k + 1) % 3] * v[(k + 2) % 3] - u[(k + 2) % 3] * v[(k + 1) % 3]);
        0.5 * c.iter().map(|c| c * c).sum::<f64>().sqrt()
    };
    surface.triangles.iter().map(area).fold(f64::INFINITY, f64::min)
}

fn check_all<T: Real>(n: [usize; 3], periodic: [bool; 3]) -> usize {
    let mut wrapped = 0;
    for (name, mut field) in fields(n) {
        // Open faces: nothing above the level on the outermost cells, so that every object is closed.
        field.values.iter_mut().for_each(|v| *v = T::of(*v).wide());
        let low = field.values.iter().copied().fold(f64::INFINITY, f64::min);
        let inner = Field::of(n, |c| {
            let outermost = (0..3).any(|a| !periodic[a] && (c[a] == 0 || c[a] == n[a] - 1));
            if outermost { low } else { field.at(c) }
        });
        for share in [0.03, 0.2, 0.5] {
            let level = field.quantile(share);
            for connectivity in [6, 26] {
                for shape in objects(&inner, level, connectivity, periodic, 1) {
                    let surface = isosurface(&shape, &inner.stored::<T>(&shape), level);
                    let (v, e, f) = check_manifold(&surface);
                    let m = measure(&surface, [1.0, 0.8, 1.3]);
                    assert_eq!(m.open_edges, 0, "{name} {share}");
                    assert_eq!(m.euler_surface, v as i64 - e as i64 + f as i64);
                    assert_eq!(m.euler_surface % 2, 0, "{name} {share}");
                    assert!(smallest_area(&surface) > 1e-9, "{name} {share}");
                    assert!(m.area.is_finite() && m.mean_curvature_integral.is_finite());
                    assert!(m.volume.is_none_or(|v| v > 0.0), "{name} {share}: {m:?}");
                    wrapped += shape.period.iter().any(Option::is_some) as usize;
                    let laid = surface.unwrapped();
                    for t in &laid.triangles {
                        let p = t.map(|v| laid.points[v as usize]);
                        let far = |a: [f64; 3], b: [f64; 3]| (0..3).any(|k| (a[k] - b[k]).abs() > 1.0);
                        assert!(!far(p[0], p[1]) && !far(p[1], p[2]) && !far(p[2], p[0]));
                    }
                }
            }
        }
    }
    wrapped
}

#[test]
fn every_surface_is_a_closed_manifold() {
    assert_eq!(check_all::<f64>([14, 13, 15], [false; 3]), 0);
    assert!(check_all::<f32>([13, 14, 12], [true; 3]) > 10);
    assert!(check_all::<f64>([12, 11, 13], [true, false, false]) > 0);
    assert!(check_all::<f64>([11, 12, 13], [false, true, false]) > 0);
    assert!(check_all::<f64>([12, 13, 11], [false, false, true]) > 0);
}

/// Measures of all objects of a field added up, and their number.
fn total(field: &Field, level: f64, connectivity: usize, spacing: [f64; 3]) -> ([f64; 4], usize) {
    let mut sum = [0.0; 4];
    let shapes = objects(field, level, connectivity, [true; 3], 1);
    for shape in &shapes {
        let m = measure(&isosurface(shape, &field.stored::<f64>(shape), level), spacing);
        let SurfaceMeasures { area, volume, mean_curvature_integral, euler_surface, .. } = m;
        let parts = [area, volume.unwrap_or(0.0), mean_curvature_integral, euler_surface as f64];
        (0..4).for_each(|k| sum[k] += parts[k]);
    }
    (sum, shapes.len())
}

/// Same number of objects and Euler sum; area, volume and curvature to round-off. Volume, and curvature of convex and
/// concave parts, are differences: relative to the area.
fn assert_same(a: ([f64; 4], usize), b: ([f64; 4], usize), what: &str) {
    assert_eq!((a.1, a.0[3]), (b.1, b.0[3]), "{what}");
    for k in 0..3 {
        let error = (a.0[k] - b.0[k]).abs() / b.0[0];
        assert!(error < 1e-12, "{what}: {a:?} {b:?}");
    }
}

/// Compares a field with its 48 mirror images and axis permutations.
fn check_orientations(name: &str, field: &Field, level: f64, connectivity: usize) {
    let (n, spacing) = (field.n, [1.0, 0.85, 1.2]);
    let reference = total(field, level, connectivity, spacing);
    assert!(reference.1 > 0, "{name}");
    for order in [[0, 1, 2], [0, 2, 1], [1, 0, 2], [1, 2, 0], [2, 0, 1], [2, 1, 0]] {
        for mirrors in 0..8 {
            let turned = Field::of(order.map(|a| n[a]), |c| {
                let mut source = [0; 3];
                for (k, a) in order.into_iter().enumerate() {
                    let mirrored = mirrors >> k & 1 == 1;
                    source[a] = if mirrored { n[a] - 1 - c[k] } else { c[k] };
                }
                field.at(source)
            });
            let sum = total(&turned, level, connectivity, order.map(|a| spacing[a]));
            assert_same(sum, reference, &format!("{name} {order:?} {mirrors}"));
        }
    }
}

#[test]
fn mirrored_and_permuted_fields_measure_the_same() {
    for (name, field) in fields([10, 11, 12]) {
        for share in [0.05, 0.3] {
            for connectivity in [6, 26] {
                check_orientations(name, &field, field.quantile(share), connectivity);
            }
        }
    }
}

#[test]
fn tied_diagonals_prefer_no_direction() {
    // A plate of 2 x 2 cells between surroundings that alternate like a chessboard: the quadrilaterals on its two sides
    // are saddles with equal diagonals.
    let plate = Field::of([7, 7, 7], |c| {
        if c[2] == 3 && (3..5).contains(&c[0]) && (3..5).contains(&c[1]) { 1.0 } else { [-1.0, -3.0][(c[0] + c[1]) % 2] }
    });
    check_orientations("plate", &plate, 0.0, 26);
}

#[test]
fn cells_cut_out_of_larger_objects_have_closed_surfaces() {
    // A cell whose neighbours all have its own value, above the level, but belong to others: the neighbours count as at the
    // level, so the vertices lie as close to them as they may, 1 - 1e-4. An octahedron of that half-diagonal.
    let shape = PatchShape::around(intervals(vec![[2, 2, 2]]), 1, [5; 3], [true; 3], [None; 3]);
    let surface = isosurface(&shape, &[5.0f32; 27], 1.0);
    let volume = measure(&surface, [1.0; 3]).volume.unwrap();
    assert!((volume - 4.0 / 3.0 * 0.9999f64.powi(3)).abs() < 1e-12);
    // Cells picked without regard to the values.
    let (values, picks) = (Field::noise([9; 3], 11), Field::noise([9; 3], 12));
    let inner = |c: [i32; 3]| c.iter().all(|k| (1..8).contains(k));
    let all = (0..729).map(|i| [i % 9, i / 9 % 9, i / 81]);
    let picked = all.filter(|&c| inner(c) && picks.at(c.map(|k| k as usize)) > 0.0).collect();
    let shape = PatchShape::around(intervals(picked), 1, [9; 3], [false; 3], [None; 3]);
    let surface = isosurface(&shape, &values.stored::<f64>(&shape), 0.0);
    check_manifold(&surface);
    assert!(measure(&surface, [1.0; 3]).area.is_finite());
}

#[test]
fn shifted_periodic_fields_measure_the_same() {
    // Objects that cross a face, or close on themselves through the box, wherever the seam cuts them.
    let n = [12, 11, 13];
    for (name, field) in fields(n) {
        let level = field.quantile(0.2);
        let reference = total(&field, level, 26, [1.0; 3]);
        for shift in [[6, 0, 0], [0, 5, 0], [0, 0, 7], [4, 8, 2]] {
            let moved = Field::of(n, |c| field.at(std::array::from_fn(|a| (c[a] + shift[a]) % n[a])));
            let sum = total(&moved, level, 26, [1.0; 3]);
            assert_same(sum, reference, &format!("{name} {shift:?}"));
        }
    }
}

#[test]
fn wider_margins_change_nothing() {
    let field = Field::noise([12, 12, 12], 7).smoothed(1);
    let level = field.quantile(0.15);
    for periodic in [[false; 3], [true; 3]] {
        let narrow = objects(&field, level, 26, periodic, 1);
        let wide = objects(&field, level, 26, periodic, 3);
        for (a, b) in narrow.iter().zip(&wide) {
            let [s, t] = [a, b].map(|p| isosurface(p, &field.stored::<f64>(p), level));
            assert_eq!((s.points, s.triangles), (t.points, t.triangles));
        }
    }
}

#[test]
fn other_objects_count_as_outside() {
    // A three-dimensional chessboard, 6-connected: every cell is an object whose diagonal neighbours are others. Each
    // surface is the octahedron of a lone cell, of volume 1/6.
    let n = [9; 3];
    let field = Field::of(n, |c| {
        let inner = c.iter().all(|&k| (1..8).contains(&k));
        if inner && c.iter().sum::<usize>() % 2 == 1 { 1.0 } else { -1.0 }
    });
    let shapes = objects(&field, 0.0, 6, [false; 3], 1);
    assert_eq!(shapes.len(), field.values.iter().filter(|v| **v > 0.0).count());
    for shape in &shapes {
        let m = measure(&isosurface(shape, &field.stored::<f64>(shape), 0.0), [1.0; 3]);
        assert!((m.volume.unwrap() - 1.0 / 6.0).abs() < 1e-15);
        assert_eq!(m.euler_surface, 2);
    }
}
