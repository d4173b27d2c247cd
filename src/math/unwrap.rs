//! Lays a surface on the torus out in space: a small one cut where it meets itself a period further on, a large one at the faces
//! of the box.

use std::collections::{HashMap, VecDeque};

use crate::base::par;
use crate::math::isosurface::Isosurface;

/// Surfaces of more triangles are cut at the faces of the box.
const WALKED: usize = 1 << 18;

/// Triangles a worker goes through at a time.
const TRIANGLES: usize = 1 << 14;

/// A surface laid out without triangles across a seam.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Unwrapped {
    /// Vertex positions x, y, z in fractional cell indices.
    pub points: Vec<[f64; 3]>,
    /// Three vertex indices a triangle, in the order of the surface's triangles.
    pub triangles: Vec<[u32; 3]>,
    /// For each vertex the surface vertex it comes from: values at `points[i]` are those at `source[i]`.
    pub source: Vec<u32>,
}

/// A surface vertex at one image, in a list of all images of that vertex.
struct Copy {
    image: [i32; 3],
    next: u32,
}

const NONE: u32 = u32::MAX;

pub(super) fn unwrap(surface: &Isosurface) -> Unwrapped {
    let count = surface.points.len();
    if surface.period == [None; 3] {
        return Unwrapped { points: surface.points.clone(), triangles: surface.triangles.clone(), source: (0..count as u32).collect() };
    }
    if surface.triangles.len() > WALKED { cut_at_faces(surface) } else { walk(surface) }
}

/// From triangle to triangle across their edges, so that the surface stays in one piece as far as it can.
fn walk(surface: &Isosurface) -> Unwrapped {
    let count = surface.points.len();
    let across = surface.neighbours();
    let mut copies: Vec<Copy> = Vec::with_capacity(count);
    let mut newest = vec![NONE; count];
    let mut out = Unwrapped {
        points: Vec::with_capacity(count),
        triangles: vec![[NONE; 3]; surface.triangles.len()],
        source: Vec::with_capacity(count),
    };
    let mut place = |v: u32, image: [i32; 3], out: &mut Unwrapped| {
        let mut at = newest[v as usize];
        while at != NONE && copies[at as usize].image != image {
            at = copies[at as usize].next;
        }
        if at == NONE {
            at = copies.len() as u32;
            copies.push(Copy { image, next: newest[v as usize] });
            newest[v as usize] = at;
            out.points.push(point_at(surface, v, image));
            out.source.push(v);
        }
        at
    };

    // Breadth first, so that the cut lies as far from the start as it can. A waiting triangle carries the image of
    // the vertex it shares with the triangle that reached it.
    let mut waiting: VecDeque<(usize, u32, [i32; 3])> = VecDeque::new();
    let mut reached = vec![false; surface.triangles.len()];
    for start in 0..surface.triangles.len() {
        if reached[start] {
            continue;
        }
        reached[start] = true;
        waiting.push_back((start, surface.triangles[start][0], [0; 3]));
        while let Some((t, known, image)) = waiting.pop_front() {
            let corners = surface.triangles[t];
            let images = corners.map(|v| image_beside(surface, known, image, v));
            out.triangles[t] = std::array::from_fn(|k| place(corners[k], images[k], &mut out));
            for k in 0..3 {
                let other = across[t][k];
                if other != NONE && !reached[other as usize] {
                    reached[other as usize] = true;
                    waiting.push_back((other as usize, corners[k], images[k]));
                }
            }
        }
    }
    out
}

/// Every triangle where its first vertex is stored. A walk would go through memory at random; here all but the triangles across a
/// face are copied.
fn cut_at_faces(surface: &Isosurface) -> Unwrapped {
    let triangles = &surface.triangles;
    let count = surface.points.len();
    let across: Vec<Vec<(usize, [[i32; 3]; 3])>> = par::map_range(triangles.len().div_ceil(TRIANGLES), |k| {
        let first = k * TRIANGLES;
        let span = &triangles[first..triangles.len().min(first + TRIANGLES)];
        let images = span.iter().map(|t| t.map(|v| image_beside(surface, t[0], [0; 3], v)));
        images.enumerate().filter(|(_, images)| *images != [[0; 3]; 3]).map(|(i, images)| (first + i, images)).collect()
    });
    // Which vertices are needed where they are stored.
    let mut stays = vec![false; count];
    let mut crossing = across.iter().flatten().peekable();
    for (i, t) in triangles.iter().enumerate() {
        let images = crossing.next_if(|(at, _)| *at == i).map_or([[0; 3]; 3], |c| c.1);
        for (&v, image) in t.iter().zip(images) {
            stays[v as usize] |= image == [0; 3];
        }
    }
    let mut out = Unwrapped { points: surface.points.clone(), triangles: triangles.clone(), source: (0..count as u32).collect() };
    let mut placed: HashMap<(u32, [i32; 3]), u32> = HashMap::new();
    for (i, images) in across.into_iter().flatten() {
        let corners = triangles[i];
        for (k, image) in images.into_iter().enumerate().filter(|(_, image)| *image != [0; 3]) {
            let v = corners[k];
            out.triangles[i][k] = *placed.entry((v, image)).or_insert_with(|| {
                let point = point_at(surface, v, image);
                if !stays[v as usize] {
                    // A tip beyond a face, needed there alone: it moves.
                    stays[v as usize] = true;
                    out.points[v as usize] = point;
                    return v;
                }
                out.points.push(point);
                out.source.push(v);
                out.source.len() as u32 - 1
            });
        }
    }
    out
}

/// Where a vertex lies at an image.
fn point_at(surface: &Isosurface, v: u32, image: [i32; 3]) -> [f64; 3] {
    let p = surface.points[v as usize];
    std::array::from_fn(|axis| p[axis] + (image[axis] * surface.period[axis].unwrap_or(0)) as f64)
}

/// The image of `v` nearest to `known` at its given image.
fn image_beside(surface: &Isosurface, known: u32, image: [i32; 3], v: u32) -> [i32; 3] {
    let (p, q) = (surface.points[known as usize], surface.points[v as usize]);
    std::array::from_fn(|axis| match surface.period[axis] {
        None => 0,
        Some(n) if (q[axis] - p[axis]).abs() < 0.5 * n as f64 => image[axis],
        Some(n) => image[axis] - ((q[axis] - p[axis]) / n as f64).round() as i32,
    })
}
