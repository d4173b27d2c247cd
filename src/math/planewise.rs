//! The spectrum of a periodic box in two steps: plane by plane along x and y, then row by row along z. Nothing needs the whole box.
//!
//! A row of a spectrum holds the real parts of its n_x/2 + 1 coefficients, then the imaginary ones; along y and z coefficients stand
//! in the order of the transform ([`Dft::order`]), since nobody needs them sorted.

use crate::base::real::Real;
use crate::math::fft::wavenumber;
use crate::math::lanes::{Dft, LANES, Lane};
use crate::math::lines::{LineScratch, TOGETHER, both, gather, scatter};

/// Transforms of boxes of one size.
pub struct Planewise {
    n: [usize; 3],
    axes: [Dft<f64>; 3],
    /// Where each wavenumber stands along x.
    places: Vec<usize>,
}

impl Planewise {
    /// Boxes of `n` samples along x, y, z.
    ///
    /// # Panics
    /// When a size is 0.
    pub fn new(n: [usize; 3]) -> Planewise {
        let axes = n.map(Dft::new);
        let places = axes[0].places();
        Planewise { n, axes, places }
    }

    /// Coefficients of a row.
    pub fn coefficients(&self) -> usize {
        self.n[0] / 2 + 1
    }

    /// Values of a row of a spectrum: the parts of all coefficients.
    pub fn width(&self) -> usize {
        2 * self.coefficients()
    }

    /// The signed wavenumbers along an axis, in the order they stand in.
    pub fn wavenumbers(&self, axis: usize) -> Vec<i64> {
        let n = self.n[axis];
        if axis == 0 {
            return (0..self.coefficients()).map(|m| m as i64).collect();
        }
        self.axes[axis].order().iter().map(|&i| wavenumber(i, n)).collect()
    }

    /// A plane of samples, transformed along x and y; not scaled.
    ///
    /// # Panics
    /// When a slice has the wrong length.
    pub fn forward<T: Real>(&self, plane: &[T], out: &mut [f64], scratch: &mut LineScratch<f64>) {
        let (nx, h, width) = (self.n[0], self.coefficients(), self.width());
        self.check(plane.len(), out.len());
        let dft = &self.axes[0];
        let entries = scratch.entries(dft.buffer());
        for (lines, rows) in plane.chunks(nx * TOGETHER).zip(out.chunks_mut(width * TOGETHER)) {
            gather(lines, |_| 0.0, &mut entries[..nx]);
            dft.forward(entries);
            for m in 0..h {
                let (there, back) = (&entries[self.places[m]], &entries[self.places[(nx - m) % nx]]);
                for l in 0..LANES {
                    for (row, [re, im]) in [l, l + LANES].into_iter().zip(both(there, back, l)) {
                        if row * width < rows.len() {
                            (rows[row * width + m], rows[row * width + h + m]) = (re, im);
                        }
                    }
                }
            }
        }
        let mut rows: Vec<&mut [f64]> = out.chunks_exact_mut(width).collect();
        self.columns(&self.axes[1], &mut rows, scratch, |entries, _| self.axes[1].forward(entries));
    }

    /// Back to samples, scaled by 1/(n_x n_y n_z); the spectrum is used as workspace.
    ///
    /// # Panics
    /// When a slice has the wrong length.
    pub fn inverse<T: Real>(&self, spectrum: &mut [f64], out: &mut [T], scratch: &mut LineScratch<f64>) {
        let (nx, h, width) = (self.n[0], self.coefficients(), self.width());
        self.check(out.len(), spectrum.len());
        let mut rows: Vec<&mut [f64]> = spectrum.chunks_exact_mut(width).collect();
        self.columns(&self.axes[1], &mut rows, scratch, |entries, _| self.axes[1].inverse(entries));
        let dft = &self.axes[0];
        let scale = 1.0 / self.n.iter().product::<usize>() as f64;
        let entries = scratch.entries(dft.buffer());
        for (rows, lines) in spectrum.chunks(width * TOGETHER).zip(out.chunks_mut(nx * TOGETHER)) {
            // f + ig again: F + iG at m, and the conjugates of F and G at -m; what must be real for a real line is taken for real.
            for m in 0..h {
                let own = m == 0 || 2 * m == nx;
                let coefficient = |row: usize| match rows.get(row * width..(row + 1) * width) {
                    Some(row) => [row[m], if own { 0.0 } else { row[h + m] }],
                    None => [0.0; 2],
                };
                for l in 0..LANES {
                    let (f, g) = (coefficient(l), coefficient(l + LANES));
                    let there = &mut entries[self.places[m]];
                    (there.re[l], there.im[l]) = (f[0] - g[1], f[1] + g[0]);
                    if !own {
                        let back = &mut entries[self.places[nx - m]];
                        (back.re[l], back.im[l]) = (f[0] + g[1], g[0] - f[1]);
                    }
                }
            }
            dft.inverse(entries);
            scatter(&entries[..nx], lines, |v| T::of(v * scale));
        }
    }

    /// Transforms rows of all z along z, multiplies every coefficient with `factor(place along x, place along z)`, and transforms
    /// back.
    ///
    /// # Panics
    /// When there are not n_z rows, or one has the wrong length.
    pub fn scale_along_z(&self, rows: &mut [&mut [f64]], scratch: &mut LineScratch<f64>, factor: impl Fn(usize, usize) -> f64) {
        let dft = &self.axes[2];
        let h = self.coefficients();
        assert!(rows.len() == self.n[2] && rows.iter().all(|r| r.len() == 2 * h), "expected {} rows of {}", self.n[2], 2 * h);
        self.columns(dft, rows, scratch, |entries, first| {
            dft.forward(entries);
            for (k, entry) in entries[..dft.n()].iter_mut().enumerate() {
                for l in 0..LANES.min(h - first) {
                    let f = factor(first + l, k);
                    entry.re[l] *= f;
                    entry.im[l] *= f;
                }
            }
            dft.inverse(entries);
        });
    }

    /// Transforms the columns of rows of coefficients with `f(entries, first column)`, some of them at a time.
    fn columns(&self, dft: &Dft<f64>, rows: &mut [&mut [f64]], scratch: &mut LineScratch<f64>, f: impl Fn(&mut [Lane<f64>], usize)) {
        let h = self.coefficients();
        let entries = scratch.entries(dft.buffer());
        for first in (0..h).step_by(LANES) {
            let here = LANES.min(h - first);
            for (entry, row) in entries.iter_mut().zip(&*rows) {
                *entry = Lane::ZERO;
                entry.re[..here].copy_from_slice(&row[first..first + here]);
                entry.im[..here].copy_from_slice(&row[h + first..h + first + here]);
            }
            f(entries, first);
            for (entry, row) in entries.iter().zip(rows.iter_mut()) {
                row[first..first + here].copy_from_slice(&entry.re[..here]);
                row[h + first..h + first + here].copy_from_slice(&entry.im[..here]);
            }
        }
    }

    fn check(&self, samples: usize, values: usize) {
        let [nx, ny, _] = self.n;
        let expected = (nx * ny, self.width() * ny);
        assert_eq!((samples, values), expected, "samples and spectral values of a plane");
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::fft::{Complex, Fft3};

    /// Against the general-purpose library, for sizes even, odd and prime, with more rows than go together and fewer.
    #[test]
    fn equals_the_transform_of_the_whole_box() {
        for n in [[12, 15, 10], [7, 37, 6], [20, 5, 1], [9, 18, 17], [1, 4, 3], [34, 16, 8]] {
            let box_of = Fft3::new(n);
            let planewise = Planewise::new(n);
            let real: Vec<f64> = (0..box_of.real_len()).map(|i| ((i * i + 3 * i) as f64 * 2f64.sqrt()).fract() + 3.0).collect();
            let mut wanted = vec![Complex::default(); box_of.spectrum_len()];
            box_of.forward(&real, &mut wanted);
            let (plane, width, h) = (n[0] * n[1], planewise.width(), planewise.coefficients());
            let mut found = vec![0.0; width * n[1] * n[2]];
            let mut scratch = LineScratch::default();
            for (samples, out) in real.chunks(plane).zip(found.chunks_mut(width * n[1])) {
                planewise.forward(samples, out, &mut scratch);
            }
            // A factor that picks out one wave: what is left along z is that wave alone.
            let places = [1, 2].map(|a| planewise.axes[a].places());
            for m in [[0, 0, 0], [h - 1, n[1] / 2, n[2] / 2], [h / 2, n[1] - 1, n[2] - 1]] {
                let mut copy = found.clone();
                let y = places[0][m[1]];
                let mut rows: Vec<&mut [f64]> = copy.chunks_mut(width).skip(y).step_by(n[1]).collect();
                let only = |x: usize, z: usize| f64::from(u8::from(x == m[0] && z == places[1][m[2]]));
                planewise.scale_along_z(&mut rows, &mut scratch, only);
                let at = Complex::new(rows[0][m[0]], rows[0][h + m[0]]) / box_of.real_len() as f64;
                let wanted = wanted[(m[2] * n[1] + m[1]) * h + m[0]];
                assert!((at - wanted).norm() < 1e-14, "{n:?} {m:?}: {at}, wanted {wanted}");
            }
            // There and back.
            for y in 0..n[1] {
                let mut rows: Vec<&mut [f64]> = found.chunks_mut(width).skip(y).step_by(n[1]).collect();
                planewise.scale_along_z(&mut rows, &mut scratch, |_, _| 1.0);
            }
            let mut back = vec![0.0f64; plane];
            for (z, spectrum) in found.chunks_mut(width * n[1]).enumerate() {
                planewise.inverse(spectrum, &mut back, &mut scratch);
                assert!(back.iter().zip(&real[z * plane..]).all(|(b, r)| (b - r).abs() < 1e-13), "{n:?}");
            }
        }
    }
}
