//! Fourier transforms of periodic real fields, whole boxes; the only file that names the FFT library.
//!
//! Conventions, used by everything that touches a spectrum:
//!
//! * f(x) = Σ_m f̂_m exp(i 2π (m_x i/n_x + m_y j/n_y + m_z k/n_z)) at sample (i, j, k): coefficients are
//!   the Fourier amplitudes, so the forward transform carries the factor 1/(n_x n_y n_z) and the
//!   inverse none. A unit cosine has two coefficients of ½, the mean of the field is f̂_0, and
//!   Parseval reads ⟨f²⟩ = Σ_m |f̂_m|² over all modes.
//! * Real arrays are `[z][y][x]` with x fastest. Spectra are `[z][y][x]` with x fastest too, and
//!   hold n_x/2 + 1 (rounded down) coefficients along x: f̂_{-m} is the conjugate of f̂_m.
//! * Entry i along an axis of n samples is the signed wavenumber [`wavenumber`]`(i, n)`.

use std::sync::{Arc, Mutex};

use realfft::{ComplexToReal, RealFftPlanner, RealToComplex};
use rustfft::{Fft, FftPlanner};

use crate::base::par;

/// A double-precision complex number with fields `re` and `im`.
pub type Complex = rustfft::num_complex::Complex<f64>;

/// Columns transformed together: 8 complex numbers fill two cache lines of each row touched.
const BLOCK: usize = 8;

/// Signed integer wavenumber of entry `i` along an axis of `n` samples; the Nyquist entry n/2 of an
/// even axis is given as +n/2.
pub fn wavenumber(i: usize, n: usize) -> i64 {
    if 2 * i <= n { i as i64 } else { i as i64 - n as i64 }
}

/// A planned transform of one grid size. Shared freely between threads.
pub struct Fft3 {
    n: [usize; 3],
    real_forward: Arc<dyn RealToComplex<f64>>,
    real_inverse: Arc<dyn ComplexToReal<f64>>,
    forward: [Arc<dyn Fft<f64>>; 2],
    inverse: [Arc<dyn Fft<f64>>; 2],
    work_len: usize,
    idle: Mutex<Vec<Scratch>>,
}

/// Buffers of one worker, kept between calls.
struct Scratch {
    line: Vec<f64>,
    block: Vec<Complex>,
    work: Vec<Complex>,
}

impl Fft3 {
    /// Plans transforms of `n` samples along x, y, z; any size works, products of small primes are fast.
    ///
    /// # Panics
    /// When a size is 0.
    pub fn new(n: [usize; 3]) -> Fft3 {
        assert!(n.iter().all(|&n| n > 0), "expected sizes above 0, got {n:?}");
        let mut real = RealFftPlanner::new();
        let mut complex = FftPlanner::new();
        let real_forward = real.plan_fft_forward(n[0]);
        let real_inverse = real.plan_fft_inverse(n[0]);
        let forward = [1, 2].map(|a| complex.plan_fft_forward(n[a]));
        let inverse = [1, 2].map(|a| complex.plan_fft_inverse(n[a]));
        let lines = forward.iter().chain(&inverse).map(|p| p.get_inplace_scratch_len());
        let work_len = lines.chain([real_forward.get_scratch_len(), real_inverse.get_scratch_len()]).max().unwrap_or(0);
        Fft3 { n, real_forward, real_inverse, forward, inverse, work_len, idle: Mutex::new(Vec::new()) }
    }

    /// Samples along x, y, z.
    pub fn n(&self) -> [usize; 3] {
        self.n
    }

    /// Coefficients along x: n_x/2 + 1, rounded down.
    pub fn row(&self) -> usize {
        self.n[0] / 2 + 1
    }

    /// Samples of a real field.
    pub fn real_len(&self) -> usize {
        self.n[0] * self.n[1] * self.n[2]
    }

    /// Coefficients of a spectrum.
    pub fn spectrum_len(&self) -> usize {
        self.row() * self.n[1] * self.n[2]
    }

    /// Real samples to Fourier amplitudes.
    ///
    /// # Panics
    /// When a slice has the wrong length.
    pub fn forward(&self, real: &[f64], spectrum: &mut [Complex]) {
        self.check(real.len(), spectrum.len());
        let (nx, row) = (self.n[0], self.row());
        let plane = nx * self.n[1];
        par::for_chunks(spectrum, row * self.n[1], |z, out| {
            let mut scratch = self.take();
            let lines = real[z * plane..(z + 1) * plane].chunks(nx);
            for (line, out) in lines.zip(out.chunks_mut(row)) {
                scratch.line.copy_from_slice(line);
                let work = &mut scratch.work;
                self.real_forward.process_with_scratch(&mut scratch.line, out, work).expect("line lengths are those planned");
            }
            let mut rows: Vec<_> = out.chunks_mut(row).collect();
            columns(&*self.forward[0], &mut rows, &mut scratch, 1.0);
            self.give(scratch);
        });
        self.z_lines(&*self.forward[1], spectrum, 1.0 / self.real_len() as f64);
    }

    /// Fourier amplitudes to real samples. The spectrum is used as workspace and left meaningless.
    ///
    /// The imaginary part of coefficients that must be real for a real field is ignored.
    ///
    /// # Panics
    /// When a slice has the wrong length.
    pub fn inverse(&self, spectrum: &mut [Complex], real: &mut [f64]) {
        self.check(real.len(), spectrum.len());
        let (nx, row) = (self.n[0], self.row());
        self.z_lines(&*self.inverse[1], spectrum, 1.0);
        let planes = spectrum.chunks_mut(row * self.n[1]).zip(real.chunks_mut(nx * self.n[1]));
        par::map_owned(planes.collect(), |_, (plane, out)| {
            let mut scratch = self.take();
            let mut rows: Vec<_> = plane.chunks_mut(row).collect();
            columns(&*self.inverse[0], &mut rows, &mut scratch, 1.0);
            for (line, out) in rows.into_iter().zip(out.chunks_mut(nx)) {
                // Round-off left here by the y and z lines would be refused by the library.
                line[0].im = 0.0;
                if nx.is_multiple_of(2) {
                    line[row - 1].im = 0.0;
                }
                self.real_inverse
                    .process_with_scratch(line, out, &mut scratch.work)
                    .expect("line lengths are those planned and end coefficients are real");
            }
            self.give(scratch);
        });
    }

    /// Sets every coefficient to `f(index in the spectrum, signed wavenumbers x, y, z)`.
    ///
    /// # Panics
    /// When the slice has the wrong length.
    pub fn fill(&self, spectrum: &mut [Complex], f: impl Fn(usize, [i64; 3]) -> Complex + Sync + Send) {
        self.check(self.real_len(), spectrum.len());
        let plane = self.row() * self.n[1];
        par::for_chunks(spectrum, plane, |z, out| {
            for (i, c) in out.iter_mut().enumerate() {
                *c = f(z * plane + i, self.mode(z, i));
            }
        });
    }

    /// Multiplies every coefficient by `f(signed wavenumbers x, y, z)`.
    ///
    /// # Panics
    /// When the slice has the wrong length.
    pub fn scale(&self, spectrum: &mut [Complex], f: impl Fn([i64; 3]) -> f64 + Sync + Send) {
        self.check(self.real_len(), spectrum.len());
        let plane = self.row() * self.n[1];
        par::for_chunks(spectrum, plane, |z, out| {
            for (i, c) in out.iter_mut().enumerate() {
                *c *= f(self.mode(z, i));
            }
        });
    }

    /// Sum over all modes, conjugates included, of a quantity that is the same at m and -m; `f` gets
    /// the index in the spectrum and the signed wavenumbers. Summed in plane order whatever the
    /// number of threads.
    pub fn sum(&self, f: impl Fn(usize, [i64; 3]) -> f64 + Sync + Send) -> f64 {
        let plane = self.row() * self.n[1];
        let sums = par::map_range(self.n[2], |z| {
            let mut sum = 0.0;
            for i in 0..plane {
                let m = self.mode(z, i);
                let own_conjugate = m[0] == 0 || 2 * m[0] as usize == self.n[0];
                sum += if own_conjugate { 1.0 } else { 2.0 } * f(z * plane + i, m);
            }
            sum
        });
        sums.iter().sum()
    }

    /// Whether a mode lies on a Nyquist plane of an even axis, where a derivative has no sign.
    pub fn is_nyquist(&self, mode: [i64; 3]) -> bool {
        (0..3).any(|a| 2 * mode[a].unsigned_abs() as usize == self.n[a])
    }

    /// Signed wavenumbers of entry `i` of spectral plane `z`.
    fn mode(&self, z: usize, i: usize) -> [i64; 3] {
        let row = self.row();
        [(i % row) as i64, wavenumber(i / row, self.n[1]), wavenumber(z, self.n[2])]
    }

    /// Transforms along z and scales, one y at a time.
    fn z_lines(&self, plan: &dyn Fft<f64>, spectrum: &mut [Complex], scale: f64) {
        let row = self.row();
        let mut slabs: Vec<Vec<&mut [Complex]>> = Vec::new();
        slabs.resize_with(self.n[1], || Vec::with_capacity(self.n[2]));
        for (i, r) in spectrum.chunks_mut(row).enumerate() {
            slabs[i % self.n[1]].push(r);
        }
        par::map_owned(slabs, |_, mut rows| {
            let mut scratch = self.take();
            columns(plan, &mut rows, &mut scratch, scale);
            self.give(scratch);
        });
    }

    fn check(&self, real: usize, spectrum: usize) {
        let expected = (self.real_len(), self.spectrum_len());
        assert!(
            (real, spectrum) == expected,
            "expected {} samples and {} coefficients for {:?}, got {real} and {spectrum}",
            expected.0,
            expected.1,
            self.n
        );
    }

    fn take(&self) -> Scratch {
        let idle = self.idle.lock().expect("no holder of this lock can panic").pop();
        idle.unwrap_or_else(|| Scratch {
            line: vec![0.0; self.n[0]],
            block: vec![Complex::default(); BLOCK * self.n[1].max(self.n[2])],
            work: vec![Complex::default(); self.work_len],
        })
    }

    fn give(&self, scratch: Scratch) {
        self.idle.lock().expect("no holder of this lock can panic").push(scratch);
    }
}

/// Transforms all columns of a set of rows, gathering [`BLOCK`] of them at a time into contiguous lines.
fn columns(plan: &dyn Fft<f64>, rows: &mut [&mut [Complex]], scratch: &mut Scratch, scale: f64) {
    let n = rows.len();
    let width = rows[0].len();
    for first in (0..width).step_by(BLOCK) {
        let block = BLOCK.min(width - first);
        let lines = &mut scratch.block[..block * n];
        for (i, row) in rows.iter().enumerate() {
            for b in 0..block {
                lines[b * n + i] = row[first + b];
            }
        }
        plan.process_with_scratch(lines, &mut scratch.work);
        for (i, row) in rows.iter_mut().enumerate() {
            for b in 0..block {
                row[first + b] = lines[b * n + i] * scale;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use std::f64::consts::TAU;

    use super::*;

    /// Repeatable numbers in (-1, 1) without a generator: fractional parts of multiples of √2.
    fn samples(len: usize) -> Vec<f64> {
        (0..len).map(|i| 2.0 * ((i * i + 3 * i) as f64 * 2f64.sqrt()).fract() - 1.0).collect()
    }

    /// The defining sum of the discrete Fourier transform, at one wavenumber.
    fn direct(real: &[f64], n: [usize; 3], m: [i64; 3]) -> Complex {
        let mut sum = Complex::default();
        for (i, &value) in real.iter().enumerate() {
            let at = [i % n[0], i / n[0] % n[1], i / n[0] / n[1]];
            let turns: f64 = (0..3).map(|a| m[a] as f64 * at[a] as f64 / n[a] as f64).sum();
            sum += Complex::from_polar(value, -TAU * turns);
        }
        sum / real.len() as f64
    }

    #[test]
    fn equals_the_defining_sum() {
        // Even and odd sizes along every axis, and a row longer than one block of columns.
        for n in [[18, 5, 4], [7, 6, 3], [1, 4, 9], [20, 1, 2]] {
            let fft = Fft3::new(n);
            let real = samples(fft.real_len());
            let mut got = vec![Complex::default(); fft.spectrum_len()];
            fft.forward(&real, &mut got);
            let mut want = vec![Complex::default(); fft.spectrum_len()];
            fft.fill(&mut want, |_, m| direct(&real, n, m));
            for (i, (g, w)) in got.iter().zip(&want).enumerate() {
                assert!((g - w).norm() < 1e-14, "{n:?}, entry {i}: {g} instead of {w}");
            }
        }
    }

    #[test]
    fn single_waves_have_the_documented_amplitude_and_place() {
        let n = [8, 6, 10];
        let fft = Fft3::new(n);
        let real: Vec<f64> = (0..fft.real_len())
            .map(|i| {
                let (x, y, z) = (i % 8, i / 8 % 6, i / 48);
                let phase = |m: [f64; 3]| m[0] * x as f64 / 8.0 + m[1] * y as f64 / 6.0 + m[2] * z as f64 / 10.0;
                2.5 + 3.0 * (TAU * phase([2.0, -1.0, 3.0])).cos() + (TAU * phase([0.0, 1.0, -4.0])).sin()
            })
            .collect();
        let mut got = vec![Complex::default(); fft.spectrum_len()];
        fft.forward(&real, &mut got);
        let mut want = vec![Complex::default(); fft.spectrum_len()];
        let at = |x: usize, y: usize, z: usize| (z * 6 + y) * 5 + x;
        want[0] = Complex::new(2.5, 0.0);
        want[at(2, 5, 3)] = Complex::new(1.5, 0.0);
        // sin = (e^{iφ} - e^{-iφ})/2i, and m_x = 0 stores both halves.
        want[at(0, 1, 6)] = Complex::new(0.0, -0.5);
        want[at(0, 5, 4)] = Complex::new(0.0, 0.5);
        for (g, w) in got.iter().zip(&want) {
            assert!((g - w).norm() < 1e-14);
        }
    }

    #[test]
    fn parseval_and_round_trip() {
        for n in [[12, 9, 8], [15, 4, 6]] {
            let fft = Fft3::new(n);
            let real = samples(fft.real_len());
            let mut spectrum = vec![Complex::default(); fft.spectrum_len()];
            fft.forward(&real, &mut spectrum);
            let mean_square = real.iter().map(|v| v * v).sum::<f64>() / real.len() as f64;
            let power = fft.sum(|i, _| spectrum[i].norm_sqr());
            assert!((power / mean_square - 1.0).abs() < 1e-14);
            let mut back = vec![0.0; fft.real_len()];
            fft.inverse(&mut spectrum, &mut back);
            for (b, r) in back.iter().zip(&real) {
                assert!((b - r).abs() < 1e-14);
            }
        }
    }

    #[test]
    fn wavenumbers_and_nyquist_planes() {
        let even: Vec<i64> = (0..6).map(|i| wavenumber(i, 6)).collect();
        assert_eq!(even, [0, 1, 2, 3, -2, -1]);
        let odd: Vec<i64> = (0..5).map(|i| wavenumber(i, 5)).collect();
        assert_eq!(odd, [0, 1, 2, -2, -1]);
        let fft = Fft3::new([6, 5, 4]);
        assert!(fft.is_nyquist([3, 0, 0]) && fft.is_nyquist([0, 1, 2]));
        assert!(!fft.is_nyquist([2, 2, 1]));
    }

    #[test]
    #[should_panic(expected = "expected 60 samples and 36 coefficients")]
    fn wrong_lengths_are_refused() {
        Fft3::new([5, 4, 3]).forward(&[0.0; 59], &mut [Complex::default(); 36]);
    }
}
