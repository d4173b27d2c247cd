//! Meshes of random objects as a sink receives them: whole, continuous, with unit normals, and in agreement with the row.

use std::collections::HashMap;
use std::f64::consts::TAU;

use crate::common::{BOTH, Outcome, Vector, cross, dot, minus, norm, number, request, run, stored, text};
use ropewalk::model::columns::{Col, Row, Value};
use ropewalk::model::surface::SurfaceMesh;
use ropewalk::space::grid::Grid;
use ropewalk::synth::random::solenoidal;

const FAMILIES: [&str; 3] = ["w: vorticity > 1.6 rms", "calm: speed < 0.5 rms", "j: current > 1.1 rms"];

fn random(periodic: [bool; 3]) -> Outcome {
    let (n, lengths) = ([30, 26, 34], [TAU, 5.0, 6.5]);
    let grid = Grid::periodic(n, lengths).with_periodic(periodic).with_origin([-1.0, 2.0, 0.5]);
    let field = |seed| solenoidal(n, lengths, seed, |k| k * (-k / 2.5).exp(), 0.0);
    let components: Vec<Vec<f64>> = field(31).into_iter().chain(field(32)).collect();
    run(stored::<f32>(grid.clone(), BOTH, &components), &request(&FAMILIES))
}

fn corners(m: &SurfaceMesh, t: [u32; 3]) -> [Vector; 3] {
    t.map(|v| m.positions[v as usize].map(f64::from))
}

/// Directed edges of the triangles: each at most once, so that two triangles share an edge in opposite senses.
fn rim(m: &SurfaceMesh) -> usize {
    let mut edges: HashMap<(u32, u32), i32> = HashMap::new();
    for t in &m.triangles {
        for k in 0..3 {
            let (a, b) = (t[k], t[(k + 1) % 3]);
            assert_ne!(a, b, "an edge without length");
            let count = edges.entry((a, b)).or_insert(0);
            *count += 1;
            assert_eq!(*count, 1, "two triangles run along edge {a}-{b} the same way");
        }
    }
    edges.keys().filter(|&&(a, b)| !edges.contains_key(&(b, a))).count()
}

fn check(o: &Outcome, k: usize, row: &Row, m: &SurfaceMesh) {
    let grid = &o.analysis.grid;
    let wraps = !text(row, Col::Wraps).is_empty();
    let cut = !text(row, Col::OpenFaces).is_empty();
    let level = o.family(k).level;
    let range = &o.analysis.survey.indicators[k];
    let slack = 1e-4 * (range.max - range.min);
    assert_eq!([m.normals.len(), m.values[0].len()], [m.positions.len(); 2]);
    assert_eq!(m.values.len(), SurfaceMesh::value_names(BOTH, &[]).len());
    assert!(m.normals.iter().all(|n| (norm(n.map(f64::from)) - 1.0).abs() < 1e-6), "unit normals");
    // Interpolated back, the indicator is the level: to 1e-4 of the step across the edge, where a vertex keeps clear of a sample.
    assert!(m.values[0].iter().all(|&v| (f64::from(v) - level).abs() < slack), "indicator at the vertices");
    for cosines in &m.values[2..] {
        assert!(cosines.iter().all(|c| c.abs() <= 1.0 + 1e-6), "cosines");
    }
    // Longest edge inside one cube of cells, and no triangle faces away from the normals of all its corners.
    let diagonal = norm(grid.spacing);
    let (mut area, mut volume, mut against, mut sides) = (0.0, 0.0, 0.0, 0.0);
    let origin = m.positions[0].map(f64::from);
    for &t in &m.triangles {
        let [p, q, r] = corners(m, t);
        for side in [minus(q, p), minus(r, q), minus(p, r)] {
            sides += norm(side);
            assert!(norm(side) < diagonal * (1.0 + 1e-5), "edge of {} in cells of diagonal {diagonal}", norm(side));
        }
        let n = cross(minus(q, p), minus(r, p));
        area += 0.5 * norm(n);
        volume += dot(minus(p, origin), n) / 6.0;
        against += if t.iter().all(|&v| dot(n, m.normals[v as usize].map(f64::from)) < 0.0) { 0.5 * norm(n) } else { 0.0 };
    }
    assert!(against == 0.0, "triangles against their normals: {against} of {area}");
    let rim = rim(m);
    // Surfaces end at the outermost samples of an open axis.
    for a in (0..3).filter(|&a| !grid.periodic[a]) {
        let (low, high) = (grid.position(a, 0.0), grid.position(a, (grid.n[a] - 1) as f64));
        let slack = 1e-5 * grid.length(a);
        assert!(m.positions.iter().all(|p| (low - slack..=high + slack).contains(&f64::from(p[a]))), "inside the box");
    }
    if wraps {
        return;
    }
    if cut {
        assert_eq!(row.get(Col::SurfaceArea), &Value::Missing);
        return;
    }
    assert_eq!(rim, 0, "closed");
    let (s, t) = (number(row, Col::SurfaceArea), number(row, Col::ShapefinderThickness));
    // Single-precision positions below 16 are off by up to 4.8e-7 along each axis.
    let off = 3f64.sqrt() * 4.8e-7;
    assert!((area - s).abs() < off * sides, "area {area} {s}");
    // T = 3V/S holds the enclosed volume; outward normals make it positive.
    assert!((volume - t * s / 3.0).abs() < off * area && volume > 0.0, "volume {volume} {}", t * s / 3.0);
    // Closed surfaces: V − E + F with 2E = 3F is twice the body's Euler number.
    let euler = m.positions.len() as i64 - m.triangles.len() as i64 / 2;
    assert_eq!(row.get(Col::Euler), &Value::Integer(euler / 2));
    assert_eq!(euler % 2, 0);
    // The mesh lies around the centroid of its cells, not an image of it a box away.
    for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
        let range = m.positions.iter().fold((f32::INFINITY, f32::NEG_INFINITY), |(l, h), p| (l.min(p[a]), h.max(p[a])));
        let c = number(row, col);
        assert!((f64::from(range.0) - 1e-5..=f64::from(range.1) + 1e-5).contains(&c), "centroid {c} within {range:?}");
    }
}

#[test]
fn meshes_of_random_objects() {
    let mut kinds = [0; 3];
    for periodic in [[true; 3], [false; 3], [false, true, false]] {
        let o = random(periodic);
        for k in 0..FAMILIES.len() {
            assert_eq!(o.rows(k).len(), o.meshes[k].len());
            for row in o.rows(k) {
                check(&o, k, row, o.mesh(k, number(row, Col::Id) as u64));
                let (wraps, cut) = (!text(row, Col::Wraps).is_empty(), !text(row, Col::OpenFaces).is_empty());
                kinds[if wraps { 2 } else { usize::from(cut) }] += 1;
            }
        }
    }
    assert!(kinds[0] > 100 && kinds[1] > 50 && kinds[2] > 0, "closed, cut, wrapping: {kinds:?}");
}
