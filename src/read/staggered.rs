//! Magnetic components stored on cell faces, brought to the samples by interpolation of order 8.
//!
//! Between equally spaced faces the weights are (-5, 49, -245, 1225, 1225, -245, 49, -5) / 2048: those of the polynomial of degree 7
//! through eight points at its middle. Near open faces and between unequally spaced ones they are Lagrange's, of the same degree.

use std::ops::Range;
use std::sync::Arc;

use crate::base::error::Result;
use crate::base::real::Real;
use crate::read::layers::Layer;
use crate::read::order::Window;
use crate::read::spec::Staggering;
use crate::space::grid::Grid;

/// Faces that an interpolation reads.
const WIDTH: usize = 8;
/// Weights at the middle of eight equally spaced points.
const MIDDLE: [f64; WIDTH] = {
    let d = 2048.0;
    [-5.0 / d, 49.0 / d, -245.0 / d, 1225.0 / d, 1225.0 / d, -245.0 / d, 49.0 / d, -5.0 / d]
};
/// Bytes of one component that are interpolated together, unless planes are thicker.
const BATCH_BYTES: usize = 8 << 20;

/// Where the value at one sample of an axis comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Taps {
    /// First face, wrapped only where it is used.
    first: isize,
    /// One weight a face; those beyond a short axis are 0.
    weights: [f64; WIDTH],
}

/// The taps of all samples of an axis, from its number of faces.
fn taps(grid: &Grid, axis: usize, upper: bool, faces: usize) -> Vec<Taps> {
    let n = grid.n[axis];
    let width = WIDTH.min(faces);
    // Face i lies before sample i, or behind it.
    let lowest = if upper { -(WIDTH as isize) / 2 } else { 1 - (WIDTH as isize) / 2 };
    let face = |i: usize| {
        let i = i as f64 + if upper { 0.5 } else { -0.5 };
        if grid.stretched[axis].is_some() { grid.position(axis, i) } else { i }
    };
    let uniform = grid.stretched[axis].is_none();
    let one = |i: usize| {
        let ideal = i as isize + lowest;
        if grid.periodic[axis] {
            return Taps { first: ideal, weights: MIDDLE };
        }
        let first = ideal.clamp(0, (faces - width) as isize);
        if uniform && first == ideal && width == WIDTH {
            return Taps { first, weights: MIDDLE };
        }
        let at = if uniform { i as f64 } else { grid.position(axis, i as f64) };
        let faces: Vec<f64> = (0..width).map(|k| face(first as usize + k)).collect();
        let mut weights = [0.0; WIDTH];
        for (k, w) in weights.iter_mut().take(width).enumerate() {
            *w = (0..width).filter(|&m| m != k).map(|m| (at - faces[m]) / (faces[k] - faces[m])).product();
        }
        Taps { first, weights }
    };
    (0..n).map(one).collect()
}

/// Brings three components from the faces to the samples.
pub(super) struct Centred<T> {
    inner: Box<dyn Layer<T>>,
    /// The first magnetic component.
    first: usize,
    /// Faces along each axis: as many as samples, or one more at an open face.
    faces: [usize; 3],
    /// Per axis; none where nothing is to be done.
    taps: Arc<[Option<Vec<Taps>>; 3]>,
    planes: Planes<T>,
    scratch: Vec<T>,
    padded: Vec<f64>,
}

/// Planes of the component along z that were read last.
struct Planes<T> {
    window: [Range<usize>; 2],
    held: Vec<(usize, Vec<T>)>,
}

impl<T: Real> Centred<T> {
    /// The components of `inner`, of which `first` and the next two are magnetic; windows of `inner` may reach the last face.
    pub fn new(inner: Box<dyn Layer<T>>, first: usize, grid: &Grid, staggering: Staggering, last_face: [bool; 3]) -> Self {
        let upper = staggering == Staggering::UpperFaces;
        // Across a periodic axis the last face is the first again.
        let faces = [0, 1, 2].map(|a| grid.n[a] + usize::from(last_face[a] && !grid.periodic[a]));
        let taps = Arc::new([0, 1, 2].map(|a| (grid.n[a] > 1).then(|| taps(grid, a, upper, faces[a]))));
        let planes = Planes { window: [0..0, 0..0], held: Vec::new() };
        Centred { inner, first, faces, taps, planes, scratch: Vec::new(), padded: Vec::new() }
    }

    /// Reads one component.
    fn component(&mut self, c: usize, at: &Window, to: &mut [T], among: usize) -> Result<()> {
        let mut out: Vec<Option<&mut [T]>> = (0..among).map(|_| None).collect();
        out[c] = Some(to);
        self.inner.read(at, &mut out)
    }

    /// Planes of a window to read together.
    fn batch(&self, at: &Window) -> usize {
        let plane = (at.size()[0] * at.size()[1] * size_of::<T>()).max(1);
        (BATCH_BYTES / plane).max(self.inner.natural_planes())
    }

    /// Along x: whole rows are read, then interpolated.
    fn along_x(&mut self, at: &Window, out: &mut [T], among: usize) -> Result<()> {
        let all = Arc::clone(&self.taps);
        let Some(taps) = &all[0] else { return self.component(self.first, at, out, among) };
        let n = self.faces[0];
        let wide = at.with(0, 0..n);
        let [nx, ny, _] = at.size();
        let (mut z, batch) = (at.range[2].start, self.batch(&wide));
        let mut scratch = std::mem::take(&mut self.scratch);
        let mut padded = std::mem::take(&mut self.padded);
        padded.resize(n + WIDTH, 0.0);
        let half = WIDTH / 2;
        while z < at.range[2].end {
            let part = wide.with(2, z..(z + batch).min(at.range[2].end));
            scratch.resize(part.values(), T::ZERO);
            self.component(self.first, &part, &mut scratch, among)?;
            let skip = (z - at.range[2].start) * ny * nx;
            for (row, out) in scratch.chunks_exact(n).zip(out[skip..].chunks_exact_mut(nx)) {
                for (p, v) in padded[half..].iter_mut().zip(row) {
                    *p = v.wide();
                }
                for k in 0..half {
                    padded[k] = row[(n * half + k - half) % n].wide();
                    padded[n + half + k] = row[k % n].wide();
                }
                for (o, t) in out.iter_mut().zip(&taps[at.range[0].clone()]) {
                    let from = &padded[(t.first + half as isize) as usize..];
                    *o = T::of(t.weights.iter().zip(from).map(|(w, v)| w * v).sum());
                }
            }
            z = part.range[2].end;
        }
        (self.scratch, self.padded) = (scratch, padded);
        Ok(())
    }

    /// Along y: all rows of the planes are read, then combined.
    fn along_y(&mut self, at: &Window, out: &mut [T], among: usize) -> Result<()> {
        let all = Arc::clone(&self.taps);
        let Some(taps) = &all[1] else { return self.component(self.first + 1, at, out, among) };
        let n = self.faces[1];
        let wide = at.with(1, 0..n);
        let [nx, ny, _] = at.size();
        let (mut z, batch) = (at.range[2].start, self.batch(&wide));
        let mut scratch = std::mem::take(&mut self.scratch);
        while z < at.range[2].end {
            let part = wide.with(2, z..(z + batch).min(at.range[2].end));
            scratch.resize(part.values(), T::ZERO);
            self.component(self.first + 1, &part, &mut scratch, among)?;
            let skip = (z - at.range[2].start) * ny * nx;
            for (plane, out) in scratch.chunks_exact(nx * n).zip(out[skip..].chunks_exact_mut(nx * ny)) {
                for (out, t) in out.chunks_exact_mut(nx).zip(&taps[at.range[1].clone()]) {
                    combine(t, out, |k| &plane[place(t, k, n) * nx..][..nx]);
                }
            }
            z = part.range[2].end;
        }
        self.scratch = scratch;
        Ok(())
    }

    /// Along z: a window of planes is kept from one plane to the next.
    fn along_z(&mut self, at: &Window, out: &mut [T], among: usize) -> Result<()> {
        let all = Arc::clone(&self.taps);
        let Some(taps) = &all[2] else { return self.component(self.first + 2, at, out, among) };
        let n = self.faces[2];
        let mut planes = std::mem::replace(&mut self.planes, Planes { window: [0..0, 0..0], held: Vec::new() });
        let window = [at.range[0].clone(), at.range[1].clone()];
        if planes.window != window {
            planes = Planes { window, held: Vec::new() };
        }
        let cells = at.size()[0] * at.size()[1];
        let batch = self.batch(at);
        for (z, out) in at.range[2].clone().zip(out.chunks_exact_mut(cells)) {
            let t = &taps[z];
            for k in 0..WIDTH.min(n) {
                let p = place(t, k, n);
                if planes.held.iter().any(|(held, _)| *held == p) {
                    continue;
                }
                // Planes that come next are read along, as far as this request needs them.
                let last = taps[at.range[2].end - 1].first + WIDTH as isize;
                let ahead = (last - (t.first + k as isize)).max(1) as usize;
                let end = (p + ahead.min(batch)).min(n);
                self.scratch.resize((end - p) * cells, T::ZERO);
                let mut scratch = std::mem::take(&mut self.scratch);
                self.component(self.first + 2, &at.with(2, p..end), &mut scratch, among)?;
                for (i, plane) in scratch.chunks_exact(cells).enumerate() {
                    if !planes.held.iter().any(|(held, _)| *held == p + i) {
                        planes.held.push((p + i, plane.to_vec()));
                    }
                }
                self.scratch = scratch;
            }
            let found: Vec<&[T]> = (0..WIDTH.min(n))
                .map(|k| place(t, k, n))
                .filter_map(|p| planes.held.iter().find(|(held, _)| *held == p).map(|(_, plane)| &plane[..]))
                .collect();
            combine(t, out, |k| found[k.min(found.len() - 1)]);
            let spare = planes.held.len().saturating_sub(WIDTH + batch);
            planes.held.drain(..spare);
        }
        // What lies behind is not needed again before the next pass.
        let spare = planes.held.len().saturating_sub(WIDTH);
        planes.held.drain(..spare);
        self.planes = planes;
        Ok(())
    }
}

/// Index of the face `k` of the taps on an axis of `n`.
fn place(t: &Taps, k: usize, n: usize) -> usize {
    (t.first + k as isize).rem_euclid(n as isize) as usize
}

/// The weighted sum of eight rows or planes.
fn combine<'a, T: Real>(t: &Taps, out: &mut [T], from: impl Fn(usize) -> &'a [T]) {
    let rows: [&[T]; WIDTH] = std::array::from_fn(|k| &from(k)[..out.len()]);
    for (i, o) in out.iter_mut().enumerate() {
        let mut sum = 0.0;
        for k in 0..WIDTH {
            sum += t.weights[k] * rows[k][i].wide();
        }
        *o = T::of(sum);
    }
}

impl<T: Real> Layer<T> for Centred<T> {
    fn samples(&self) -> [usize; 3] {
        self.inner.samples()
    }

    fn read(&mut self, at: &Window, out: &mut [Option<&mut [T]>]) -> Result<()> {
        let among = out.len();
        let mut own: [Option<&mut [T]>; 3] = [None, None, None];
        for (a, slot) in own.iter_mut().enumerate() {
            *slot = out[self.first + a].take();
        }
        if out.iter().any(Option::is_some) {
            self.inner.read(at, out)?;
        }
        let [x, y, z] = own;
        if let Some(to) = x {
            self.along_x(at, to, among)?;
        }
        if let Some(to) = y {
            self.along_y(at, to, among)?;
        }
        if let Some(to) = z {
            self.along_z(at, to, among)?;
        }
        Ok(())
    }

    fn natural_planes(&self) -> usize {
        self.inner.natural_planes()
    }

    /// Interpolation costs more than copying, and planes beside those asked for are read.
    fn is_costly(&self) -> bool {
        true
    }

    fn decoded_planes(&self) -> usize {
        self.inner.decoded_planes()
    }

    fn reader_bytes(&self, planes: usize) -> u64 {
        let [nx, ny, _] = self.faces;
        let plane = (nx * ny * size_of::<T>()).max(1);
        let batch = (BATCH_BYTES / plane).max(self.inner.natural_planes());
        // The batch that is interpolated; the planes held are those of one interpolation, and two batches before the first is let go.
        let together = batch.min(planes + WIDTH);
        let held = 2 * (WIDTH + together) * plane;
        self.inner.reader_bytes(planes.max(together)) + (together * plane + held) as u64
    }
}
