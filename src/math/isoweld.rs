//! Joins the slabs of a surface into one, with the numbers a single walk would have given.

use std::ops::Range;

use crate::base::par;
use crate::math::isomesher::{NONE, Slab, join};
use crate::math::isosurface::{Isosurface, Part};

/// The surface made by one walk.
pub(super) fn single(mut slab: Slab) -> Isosurface {
    let edges = slab.edges.len();
    for (i, &first) in slab.fans.iter().enumerate() {
        let sides = (slab.centre_starts[i + 1] - slab.centre_starts[i]) as usize;
        for triangle in &mut slab.triangles[first as usize..][..sides] {
            triangle[2] = (edges + i) as u32;
        }
    }
    slab.points.append(&mut slab.centre_points);
    let parts = vec![Part { vertices: 0..edges, centres: edges..slab.points.len(), triangles: 0..slab.triangles.len() }];
    Isosurface {
        period: slab.period,
        points: slab.points,
        triangles: slab.triangles,
        edges: slab.edges,
        centre_starts: slab.centre_starts,
        centre_vertices: slab.centre_vertices,
        behind: slab.behind,
        parents: slab.parents,
        parts,
    }
}

/// What a slab fills of the surface.
struct Task<'a> {
    slab: &'a Slab,
    /// Slab index of each vertex to its index in the surface.
    renumbered: &'a [u32],
    part: &'a Part,
    points: &'a mut [[f64; 3]],
    centre_points: &'a mut [[f64; 3]],
    centre_vertices: &'a mut [u32],
    triangles: &'a mut [[u32; 3]],
    behind: &'a mut [[u32; 3]],
    parents: &'a mut [u32],
}

/// The surface of several slabs, in the order of their layers.
///
/// A single walk meets the vertices of a plane between two slabs in the lower one, so those keep the number they have there and
/// the upper slab's own vertices follow in their order; across the seam the first slab comes before the last.
pub(super) fn weld(slabs: Vec<Slab>) -> Isosurface {
    let mut parts: Vec<Part> = Vec::with_capacity(slabs.len());
    let (mut vertices, mut triangles) = (0, 0);
    for s in &slabs {
        let own = s.edges.len() - s.borrowed.len();
        parts.push(Part { vertices: vertices..vertices + own, centres: 0..0, triangles: triangles..triangles + s.triangles.len() });
        (vertices, triangles) = (vertices + own, triangles + s.triangles.len());
    }
    let edges = vertices;
    for (p, s) in parts.iter_mut().zip(&slabs) {
        p.centres = vertices..vertices + s.centre_points.len();
        vertices = p.centres.end;
    }
    assert!(
        vertices.max(triangles) < NONE as usize,
        "isosurface: expected fewer than 2^32 vertices and triangles, got {vertices}, {triangles}"
    );

    // A borrowed vertex is always another slab's own: of the one below, or across the seam of the first.
    let owner = |k: usize, plane: usize| if plane == 0 { 0 } else { k - 1 };
    let renumbered: Vec<Vec<u32>> = par::map_range(slabs.len(), |k| {
        let mut out = Vec::with_capacity(slabs[k].edges.len());
        let mut id = parts[k].vertices.start as u32;
        let mut borrowed = slabs[k].borrowed.iter();
        for run in own_runs(&slabs[k]) {
            out.extend(id..id + run.len() as u32);
            id += run.len() as u32;
            out.extend(borrowed.next().map(|&(_, plane, edge)| {
                let from = owner(k, plane);
                let there = slabs[from].vertex(plane, edge);
                let foreign = slabs[from].borrowed.partition_point(|b| b.0 < there);
                (parts[from].vertices.start - foreign) as u32 + there
            }));
        }
        out
    });

    let mut out = Isosurface {
        period: slabs[0].period,
        points: vec![[0.0; 3]; vertices],
        triangles: vec![[0; 3]; triangles],
        edges: Vec::with_capacity(edges),
        centre_starts: vec![0],
        centre_vertices: vec![0; slabs.iter().map(|s| s.centre_vertices.len()).sum()],
        behind: vec![[0; 3]; triangles],
        parents: vec![0; edges],
        parts: Vec::new(),
    };
    for s in &slabs {
        own_runs(s).for_each(|run| out.edges.extend_from_slice(&s.edges[run]));
        let before = *out.centre_starts.last().expect("a first start");
        out.centre_starts.extend(s.centre_starts[1..].iter().map(|c| before + c));
    }
    let (mut points, mut centre_points) = out.points.split_at_mut(edges);
    let mut centre_vertices = &mut out.centre_vertices[..];
    let (mut triangles, mut behind, mut parents) = (&mut out.triangles[..], &mut out.behind[..], &mut out.parents[..]);
    let mut tasks = Vec::with_capacity(slabs.len());
    for (k, slab) in slabs.iter().enumerate() {
        let part = &parts[k];
        tasks.push(Task {
            slab,
            renumbered: &renumbered[k],
            part,
            points: points.split_off_mut(..part.vertices.len()).expect("as counted"),
            centre_points: centre_points.split_off_mut(..part.centres.len()).expect("as counted"),
            centre_vertices: centre_vertices.split_off_mut(..slab.centre_vertices.len()).expect("as counted"),
            triangles: triangles.split_off_mut(..part.triangles.len()).expect("as counted"),
            behind: behind.split_off_mut(..part.triangles.len()).expect("as counted"),
            parents: parents.split_off_mut(..part.vertices.len()).expect("as counted"),
        });
    }
    par::map_owned(tasks, |k, task| {
        let (slab, part) = (task.slab, task.part);
        fill(task);
        // Sides at a plane between slabs: what the other slab left there.
        slab.loose
            .iter()
            .filter_map(|&(triangle, side, place)| {
                let (vertex, face) = (place / 4, place as usize % 4);
                let at = slab.borrowed.binary_search_by_key(&vertex, |b| b.0).ok()?;
                let (_, plane, edge) = slab.borrowed[at];
                let from = owner(k, plane);
                let other = slabs[from].last[slabs[from].vertex(plane, edge) as usize][face];
                let here = part.triangles.start + triangle as usize;
                (other != NONE).then(|| (here, side, other + parts[from].triangles.start as u32))
            })
            .collect::<Vec<_>>()
    })
    .into_iter()
    .flatten()
    .for_each(|(triangle, side, other)| out.behind[triangle][usize::from(side)] = other);
    for (slab, renumbered) in slabs.iter().zip(&renumbered) {
        for &(here, _, _) in &slab.borrowed {
            join(&mut out.parents, renumbered[here as usize], renumbered[slab.parents[here as usize] as usize]);
        }
    }
    out.parts = parts;
    out
}

/// The slab's own vertices, in runs between the borrowed ones.
fn own_runs(slab: &Slab) -> impl Iterator<Item = Range<usize>> + '_ {
    let ends = slab.borrowed.iter().map(|b| b.0 as usize).chain([slab.edges.len()]);
    let mut start = 0;
    ends.map(move |end| std::mem::replace(&mut start, end + 1)..end)
}

fn fill(task: Task) {
    let Task { slab, renumbered, part, points, centre_points, centre_vertices, triangles, behind, parents } = task;
    let mut at = 0;
    for run in own_runs(slab) {
        let to = at..at + run.len();
        points[to.clone()].copy_from_slice(&slab.points[run.clone()]);
        for (to, &p) in parents[to.clone()].iter_mut().zip(&slab.parents[run]) {
            *to = renumbered[p as usize];
        }
        at = to.end;
    }
    centre_points.copy_from_slice(&slab.centre_points);
    for (to, &v) in centre_vertices.iter_mut().zip(&slab.centre_vertices) {
        *to = renumbered[v as usize];
    }
    for (to, t) in triangles.iter_mut().zip(&slab.triangles) {
        *to = t.map(|v| if v == NONE { NONE } else { renumbered[v as usize] });
    }
    for (i, &first) in slab.fans.iter().enumerate() {
        let sides = (slab.centre_starts[i + 1] - slab.centre_starts[i]) as usize;
        for triangle in &mut triangles[first as usize..][..sides] {
            triangle[2] = (part.centres.start + i) as u32;
        }
    }
    let base = part.triangles.start as u32;
    for (to, b) in behind.iter_mut().zip(&slab.behind) {
        *to = b.map(|t| if t == NONE { NONE } else { t + base });
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::par::Pool;
    use crate::math::isocubes::extract_in_slabs;
    use crate::math::surface::measure;
    use crate::space::patch::{Interval, PatchShape};

    /// All cells of a rough random field above a level as one object, and the values around them.
    fn percolating(n: usize, share: u64, periodic: [bool; 3]) -> (PatchShape, Vec<f32>) {
        let mut state = 5u64;
        let mut field = vec![0.0f32; n * n * n];
        for v in &mut field {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            *v = ((state >> 33) % 1000) as f32 - (1000 - share) as f32;
        }
        // Layers without any cell: a slab may begin where no other ends.
        field[n * n * 5..n * n * 7].fill(-1.0);
        let mut object: Vec<Interval> = Vec::new();
        for (i, _) in field.iter().enumerate().filter(|(_, v)| **v > 0.0) {
            let [x, y, z] = [i % n, i / n % n, i / n / n].map(|c| c as i32);
            match object.last_mut() {
                Some(l) if (l.z, l.y, l.x + l.len as i32) == (z, y, x) => l.len += 1,
                _ => object.push(Interval { z, y, x, len: 1 }),
            }
        }
        let period = periodic.map(|p| p.then_some(n as i32));
        let shape = PatchShape::around(object, 1, [n; 3], periodic, period);
        let m = n as i32;
        let value = |x: i32, s: &crate::space::patch::Segment| field[((s.z * m + s.y) * m + x) as usize];
        let values = shape.stored.iter().flat_map(|s| (s.x..s.x + s.len as i32).map(move |x| value(x, s))).collect();
        (shape, values)
    }

    /// What the numbering says, without the parts and the way pieces are noted.
    fn bare(s: &Isosurface) -> Isosurface {
        Isosurface { parts: Vec::new(), parents: Vec::new(), ..s.clone() }
    }

    /// Slabs of one layer or several, on any number of threads, against the single walk.
    #[test]
    fn slabs_are_welded_to_the_surface_of_one_walk() {
        let spacing = [1.0, 0.8, 1.3];
        for periodic in [[false; 3], [true; 3], [false, true, true], [true, false, false]] {
            for share in [300, 30] {
                let (shape, values) = percolating(20, share, periodic);
                let whole = extract_in_slabs(&shape, &values, 0.0, usize::MAX);
                assert_eq!(whole.parts.len(), 1);
                let areas = whole.area_vectors(spacing);
                let (measures, normals) = (measure(&whole, spacing), whole.vertex_normals(&areas));
                for (least, threads) in [(1, 1), (1, 2), (1, 3), (40, 2), (150, 3), (400, 2)] {
                    let pool = Pool::new(threads).unwrap();
                    pool.run(|| {
                        let welded = extract_in_slabs(&shape, &values, 0.0, least);
                        assert!(welded.parts.len() > 1 || least > 40);
                        assert_eq!(bare(&welded), bare(&whole));
                        assert_eq!(welded.area_vectors(spacing), areas);
                        assert_eq!(welded.vertex_normals(&areas), normals);
                        assert_eq!(measure(&welded, spacing), measures, "{periodic:?} {share} {least}");
                    });
                }
            }
        }
    }
}
