//! The contour around one object of a plane: marching squares on the patch of a flat grid, its length and Euler number.

use std::collections::HashMap;

use crate::base::real::Real;
use crate::space::patch::PatchShape;

/// Oriented edges around an object, the inside on the left.
///
/// Every vertex lies on the grid edge between a cell of the object and one outside and has one edge coming in and one going out,
/// except at the rim where the object leaves the box through an open face.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Contour {
    /// Period in cells along x and y where coordinates wrap.
    pub period: [Option<i32>; 2],
    /// Positions x, y in fractional cell indices.
    pub points: Vec<[f64; 2]>,
    /// Stored cells at both ends of each vertex's grid edge and the position between them.
    pub cells: Vec<(u32, u32, f64)>,
    /// Two vertices an edge.
    pub edges: Vec<[u32; 2]>,
}

/// What is measured on a contour.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ContourMeasures {
    /// Length of all edges.
    pub perimeter: f64,
    /// Pieces of the body minus its holes; missing where the contour is open.
    pub euler: Option<i64>,
    /// Ends at open faces.
    pub open_ends: usize,
}

/// Closeness of a vertex to a cell centre, as for surfaces.
const NEAR: f64 = 1e-4;

/// Extracts the contour `values = level` around the object's own cells; cells of other objects count as outside, at most at the
/// level. In a square with opposite corners inside, `joined` decides whether they belong together (eight neighbours) or not (four).
///
/// # Panics
/// When `values` and the stored cells differ in number.
pub fn contour<T: Real>(shape: &PatchShape, values: &[T], level: f64, joined: bool) -> Contour {
    assert_eq!(values.len(), shape.cells, "values (left) of the stored cells (right)");
    let mut inside = vec![false; shape.cells];
    let mut place: HashMap<(i32, i32), u32> = HashMap::with_capacity(shape.cells);
    for s in &shape.stored {
        for k in 0..s.len as i32 {
            place.insert((s.x + k, s.y), (s.start as i32 + k) as u32);
        }
    }
    for i in &shape.object {
        for k in 0..i.len as i32 {
            inside[place[&(i.x + k, i.y)] as usize] = true;
        }
    }
    let period = [shape.period[0], shape.period[1]];
    let wrap = |v: i32, a: usize| period[a].map_or(v, |n| v.rem_euclid(n));
    let mut out = Contour { period, ..Contour::default() };
    let mut vertex: HashMap<(u32, u32), u32> = HashMap::new();
    for s in &shape.stored {
        for k in 0..s.len as i32 {
            let (x, y) = (s.x + k, s.y);
            // Corners of the square counter-clockwise from (x, y).
            let corner = |dx: i32, dy: i32| place.get(&(wrap(x + dx, 0), wrap(y + dy, 1))).copied();
            let (Some(b), Some(c), Some(d)) = (corner(1, 0), corner(1, 1), corner(0, 1)) else { continue };
            let cells = [(s.start as i32 + k) as u32, b, c, d];
            let offsets = [[0, 0], [1, 0], [1, 1], [0, 1]];
            let within = cells.map(|c| inside[c as usize]);
            // Side i runs from corner i to corner i + 1; a contour enters the square's boundary walk where inside turns to outside.
            let mut cross = |i: usize| {
                let j = (i + 1) % 4;
                let key = (cells[i].min(cells[j]), cells[i].max(cells[j]));
                *vertex.entry(key).or_insert_with(|| {
                    let (p, q) = if within[i] { (i, j) } else { (j, i) };
                    let high = values[cells[p] as usize].wide();
                    let low = values[cells[q] as usize].wide().min(level);
                    let t = if high > low { ((high - level) / (high - low)).clamp(NEAR, 1.0 - NEAR) } else { 0.5 };
                    let at = |a: usize| {
                        let from = f64::from(offsets[p][a]);
                        f64::from([x, y][a]) + from + t * (f64::from(offsets[q][a]) - from)
                    };
                    out.points.push([at(0), at(1)]);
                    out.cells.push((cells[p], cells[q], t));
                    out.points.len() as u32 - 1
                })
            };
            let leaving: Vec<usize> = (0..4).filter(|&i| within[i] && !within[(i + 1) % 4]).collect();
            let entering: Vec<usize> = (0..4).filter(|&i| !within[i] && within[(i + 1) % 4]).collect();
            match (leaving.as_slice(), entering.as_slice()) {
                // Walking counter-clockwise the inside ends at `leave`: from there the contour runs, inside on its left, to `enter`.
                (&[leave], &[enter]) => {
                    let edge = [cross(leave), cross(enter)];
                    out.edges.push(edge);
                }
                (leaves, enters) if leaves.len() == 2 => {
                    for &leave in leaves {
                        // Joined corners keep the outside corners apart: each of those is cut off by itself.
                        let enter = if joined { (leave + 1) % 4 } else { (leave + 3) % 4 };
                        debug_assert!(enters.contains(&enter));
                        let edge = [cross(leave), cross(enter)];
                        out.edges.push(edge);
                    }
                }
                _ => {}
            }
        }
    }
    out
}

impl Contour {
    /// The shortest vector from vertex `a` to vertex `b` modulo the periods, in cells.
    fn vector(&self, a: u32, b: u32) -> [f64; 2] {
        let (p, q) = (self.points[a as usize], self.points[b as usize]);
        std::array::from_fn(|k| {
            let d = q[k] - p[k];
            self.period[k].map_or(d, |n| d - f64::from(n) * (d / f64::from(n)).round())
        })
    }

    /// Values of a stored field at the vertices, linear along grid edges.
    pub fn interpolate<T: Real>(&self, field: &[T]) -> Vec<f64> {
        self.cells.iter().map(|&(a, b, t)| (1.0 - t) * field[a as usize].wide() + t * field[b as usize].wide()).collect()
    }

    /// Length and Euler number for cells of the given size. The Euler number is the total turning of the contour over 2π (Gauss–Bonnet
    /// in the plane).
    pub fn measure(&self, spacing: [f64; 2]) -> ContourMeasures {
        let n = self.points.len();
        let (mut incoming, mut outgoing) = (vec![None; n], vec![None; n]);
        let mut perimeter = 0.0;
        for &[a, b] in &self.edges {
            let d = self.vector(a, b);
            let d = [d[0] * spacing[0], d[1] * spacing[1]];
            perimeter += libm::hypot(d[0], d[1]);
            outgoing[a as usize] = Some(d);
            incoming[b as usize] = Some(d);
        }
        let (mut turning, mut open_ends) = (0.0, 0);
        for (i, o) in incoming.iter().zip(&outgoing) {
            match (i, o) {
                (Some(i), Some(o)) => turning += libm::atan2(i[0] * o[1] - i[1] * o[0], i[0] * o[0] + i[1] * o[1]),
                _ => open_ends += 1,
            }
        }
        let euler = (open_ends == 0).then(|| (turning / std::f64::consts::TAU).round() as i64);
        ContourMeasures { perimeter, euler, open_ends }
    }

    /// The contour without edges across a seam: positions, edges, and for each vertex the one it comes from.
    pub fn laid_out(&self) -> (Vec<[f64; 2]>, Vec<[u32; 2]>, Vec<u32>) {
        if self.period == [None; 2] {
            return (self.points.clone(), self.edges.clone(), (0..self.points.len() as u32).collect());
        }
        let n = self.points.len();
        let mut next = vec![None; n];
        let mut has_before = vec![false; n];
        for &[a, b] in &self.edges {
            next[a as usize] = Some(b);
            has_before[b as usize] = true;
        }
        let mut seen = vec![false; n];
        let (mut points, mut edges, mut source) = (Vec::new(), Vec::new(), Vec::new());
        // Open lines from their beginnings first, then what is left: loops.
        let starts = (0..n).filter(|&v| !has_before[v]).chain(0..n);
        for start in starts {
            if seen[start] {
                continue;
            }
            seen[start] = true;
            let first = points.len() as u32;
            let mut at = start as u32;
            let mut place = self.points[start];
            points.push(place);
            source.push(at);
            while let Some(to) = next[at as usize] {
                let d = self.vector(at, to);
                place = [place[0] + d[0], place[1] + d[1]];
                let here = points.len() as u32 - 1;
                let begin: [f64; 2] = points[first as usize];
                if to as usize == start && libm::hypot(place[0] - begin[0], place[1] - begin[1]) < 0.5 {
                    edges.push([here, first]);
                    break;
                }
                edges.push([here, here + 1]);
                points.push(place);
                source.push(to);
                // A line that closes on itself through the box ends at a copy of its first vertex.
                if std::mem::replace(&mut seen[to as usize], true) {
                    break;
                }
                at = to;
            }
        }
        (points, edges, source)
    }

    /// Outward unit normals, for the vertices named by `source`: the mean over the edges at a vertex, weighted by their lengths.
    pub fn normals(&self, spacing: [f64; 2], source: &[u32]) -> Vec<[f64; 2]> {
        let mut sums = vec![[0.0; 2]; self.points.len()];
        for &[a, b] in &self.edges {
            let d = self.vector(a, b);
            let out = [d[1] * spacing[1], -d[0] * spacing[0]];
            for v in [a, b] {
                sums[v as usize] = [sums[v as usize][0] + out[0], sums[v as usize][1] + out[1]];
            }
        }
        let unit = |v: [f64; 2]| {
            let l = libm::hypot(v[0], v[1]);
            if l > 0.0 { [v[0] / l, v[1] / l] } else { [0.0; 2] }
        };
        source.iter().map(|&s| unit(sums[s as usize])).collect()
    }

    /// Area enclosed, holes taken off; of no meaning for a contour that closes on itself through the box or is open.
    pub fn area(&self, spacing: [f64; 2]) -> f64 {
        let origin = self.points.first().copied().unwrap_or_default();
        let from = |v: u32| {
            let p = self.points[v as usize];
            [(p[0] - origin[0]) * spacing[0], (p[1] - origin[1]) * spacing[1]]
        };
        self.edges.iter().map(|&[a, b]| (from(a), from(b))).map(|(p, q)| 0.5 * (p[0] * q[1] - p[1] * q[0])).sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::space::patch::Interval;

    /// Cells of an n x n plane beyond a level, and the contour of the field around them.
    fn of(n: usize, f: impl Fn(f64, f64) -> f64, level: f64, joined: bool, periodic: bool) -> Contour {
        let mut object = Vec::new();
        for y in 0..n as i32 {
            for x in 0..n as i32 {
                if f(f64::from(x), f64::from(y)) > level {
                    object.push(Interval { x, y, z: 0, len: 1 });
                }
            }
        }
        let axes = [periodic, periodic, false];
        let period = axes.map(|p| p.then_some(n as i32));
        object.dedup_by(|b, a| {
            let joins = a.y == b.y && a.x + a.len as i32 == b.x;
            a.len += u32::from(joins);
            joins
        });
        let shape = PatchShape::around(object, 1, [n, n, 1], axes, period);
        let mut values = vec![0.0; shape.cells];
        for s in &shape.stored {
            for k in 0..s.len as i32 {
                values[s.start + k as usize] = f(f64::from(s.x + k), f64::from(s.y));
            }
        }
        contour(&shape, &values, level, joined)
    }

    /// Circle: 2πR and πR², second order in the cell size; unequal spacing stretches it to an ellipse of known area.
    #[test]
    fn a_circle_converges_at_second_order() {
        let error = |n: usize, r: f64| {
            let c = 0.5 * n as f64 + 0.13;
            let contour = of(n, |x, y| -((x - c).hypot(y - c + 0.4)), -r, true, false);
            let m = contour.measure([1.0, 1.0]);
            assert_eq!((m.euler, m.open_ends), (Some(1), 0));
            let area = contour.area([2.0, 0.5]);
            ((m.perimeter / (std::f64::consts::TAU * r) - 1.0).abs(), (area / (std::f64::consts::PI * r * r) - 1.0).abs())
        };
        let (coarse, fine) = (error(24, 6.0), error(90, 24.0));
        assert!(coarse.0 < 0.01 && coarse.1 < 0.02, "{coarse:?}");
        assert!(fine.0 < coarse.0 / 8.0 && fine.1 < coarse.1 / 8.0, "{coarse:?} {fine:?}");
    }

    #[test]
    fn rings_bands_and_corners_have_their_euler_numbers() {
        let ring = of(40, |x, y| -((x - 20.2).hypot(y - 19.7) - 10.0).abs(), -3.0, true, false);
        assert_eq!(ring.measure([1.0, 2.0]).euler, Some(0));
        // A band that closes on itself: two straight lines.
        let band = of(24, |_, y| -(y - 10.3).abs(), -3.6, true, true).measure([1.0, 1.0]);
        assert_eq!(band.euler, Some(0));
        let line = of(24, |_, y| -(y - 10.3).abs(), -3.6, true, true);
        let (points, edges, source) = line.laid_out();
        assert_eq!((points.len(), edges.len()), (50, 48), "each line ends at a copy of its first vertex");
        for [a, b] in &edges {
            let (p, q) = (points[*a as usize], points[*b as usize]);
            assert!((p[0] - q[0]).hypot(p[1] - q[1]) < 1.5);
        }
        let up = line.normals([1.0; 2], &source);
        assert!(points.iter().zip(&up).all(|(p, n)| (n[1] - (p[1] - 10.3).signum()).abs() < 1e-12 && n[0].abs() < 1e-12));
        assert!((band.perimeter - 48.0).abs() < 1e-9, "{}", band.perimeter);
        let corner = |x: f64, y: f64| f64::from(u8::from([(5.0, 5.0), (6.0, 6.0)].contains(&(x, y))));
        assert_eq!(of(12, corner, 0.5, true, false).measure([1.0; 2]).euler, Some(1));
        assert_eq!(of(12, corner, 0.5, false, false).measure([1.0; 2]).euler, Some(2));
        // Half a disc at an open edge.
        let cut = of(20, |x, y| -(x.hypot(y - 9.0)), -4.3, true, false).measure([1.0; 2]);
        assert_eq!((cut.euler, cut.open_ends), (None, 2));
    }
}
