//! Exact derivatives and power spectra of periodic lines, many of them side by side.
//!
//! Two real lines go as real and imaginary part of one complex line: the derivative of f + ig is f' + ig'. Which two is a matter
//! of their places alone.

use std::f64::consts::TAU;
use std::sync::Arc;

use crate::base::real::Real;
use crate::math::fft::wavenumber;
use crate::math::lanes::{Dft, LANES, Lane};

/// Real lines that are transformed together.
pub const TOGETHER: usize = 2 * LANES;

/// Entries that lines are spread over at a time: they stay in the nearest cache until all lines are.
const FEW: usize = 16;

/// The exact derivative of periodic lines of one length: f̂_m becomes i k_m f̂_m, the Nyquist wave of an even length, whose
/// derivative has no sign, becomes 0. Cheap to copy, shared freely between threads.
#[derive(Clone)]
pub struct LineDerivative<T>(Arc<Planned<T>>);

struct Planned<T> {
    dft: Dft<T>,
    /// k_m / n in the order of the transform, the factor of both transforms included.
    factors: Vec<T>,
}

impl<T> std::fmt::Debug for LineDerivative<T> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str("LineDerivative")
    }
}

/// Buffers of one worker that transforms lines.
#[derive(Debug, Clone)]
pub struct LineScratch<T>(Vec<Lane<T>>);

impl<T> Default for LineScratch<T> {
    fn default() -> Self {
        LineScratch(Vec::new())
    }
}

impl<T: Real> LineScratch<T> {
    /// So many entries, with anything in them.
    pub fn entries(&mut self, len: usize) -> &mut [Lane<T>] {
        self.0.resize(len.max(self.0.len()), Lane::ZERO);
        &mut self.0[..len]
    }
}

impl<T: Real> LineDerivative<T> {
    /// Lines of `n` samples `spacing` apart.
    ///
    /// # Panics
    /// When `n` is 0.
    pub fn new(n: usize, spacing: f64) -> Self {
        let dft = Dft::new(n);
        let factor = |&i: &usize| if 2 * i == n { 0.0 } else { TAU * wavenumber(i, n) as f64 / (n as f64 * spacing) / n as f64 };
        let factors = dft.order().iter().map(factor).map(T::of).collect();
        LineDerivative(Arc::new(Planned { dft, factors }))
    }

    /// The derivative of one line.
    ///
    /// # Panics
    /// When a slice has another length than planned.
    pub fn row(&self, line: &[T], out: &mut [T], scratch: &mut LineScratch<T>) {
        self.rows(line, out, scratch);
    }

    /// The derivatives of lines that follow each other.
    ///
    /// # Panics
    /// When a slice has another length than a multiple of the one planned.
    pub fn rows(&self, lines: &[T], out: &mut [T], scratch: &mut LineScratch<T>) {
        let n = self.0.dft.n();
        assert!(lines.len().is_multiple_of(n) && lines.len() == out.len(), "expected lines of {n} samples, got {}", lines.len());
        let entries = scratch.entries(self.0.dft.buffer());
        for (lines, out) in lines.chunks(n * TOGETHER).zip(out.chunks_mut(n * TOGETHER)) {
            gather(lines, |line| line[0], &mut entries[..n]);
            self.0.dft.turned(&self.0.factors, entries);
            scatter(&entries[..n], out, |v| v);
        }
    }

    /// The derivatives of all columns of a set of rows: sample i of every line lies in `from[i]`.
    ///
    /// # Panics
    /// When the number of rows is not the length planned, or rows differ in length.
    pub fn columns(&self, from: &[&[T]], to: &mut [&mut [T]], scratch: &mut LineScratch<T>) {
        self.through(Some(from), to, scratch);
    }

    /// As [`LineDerivative::columns`], in place.
    ///
    /// # Panics
    /// As there.
    pub fn columns_in_place(&self, rows: &mut [&mut [T]], scratch: &mut LineScratch<T>) {
        self.through(None, rows, scratch);
    }

    fn through(&self, from: Option<&[&[T]]>, to: &mut [&mut [T]], scratch: &mut LineScratch<T>) {
        let Planned { dft, factors } = &*self.0;
        let n = dft.n();
        assert!(to.len() == n && from.is_none_or(|f| f.len() == n), "expected {n} rows, got {}", to.len());
        let entries = scratch.entries(dft.buffer());
        let width = to[0].len();
        for first in (0..width).step_by(TOGETHER) {
            let here = first..(first + TOGETHER).min(width);
            // A large mean would cost digits of what varies: each line is measured from its first value.
            let base = padded(&from.map_or(&*to[0], |f| f[0])[here.clone()]);
            for (i, entry) in entries[..n].iter_mut().enumerate() {
                let values = padded(&from.map_or(&*to[i], |f| f[i])[here.clone()]);
                for l in 0..LANES {
                    entry.re[l] = values[l] - base[l];
                    entry.im[l] = values[l + LANES] - base[l + LANES];
                }
            }
            dft.turned(factors, entries);
            for (row, entry) in to.iter_mut().zip(&*entries) {
                let row = &mut row[here.clone()];
                match <&mut [T; TOGETHER]>::try_from(&mut *row) {
                    Ok(row) => {
                        for l in 0..LANES {
                            (row[l], row[l + LANES]) = (entry.re[l], entry.im[l]);
                        }
                    }
                    Err(_) => row.iter_mut().zip(entry.re.iter().chain(&entry.im)).for_each(|(v, e)| *v = *e),
                }
            }
        }
    }
}

/// Values with zeros behind; whole stretches, which are most, go by a copy of known length.
#[inline(always)]
fn padded<T: Real>(values: &[T]) -> [T; TOGETHER] {
    <&[T; TOGETHER]>::try_from(values).copied().unwrap_or_else(|_| std::array::from_fn(|l| values.get(l).copied().unwrap_or(T::ZERO)))
}

/// At most [`TOGETHER`] lines that follow each other, each measured from a base of its own, side by side.
pub(super) fn gather<T: Real, U: Real>(lines: &[T], base: impl Fn(&[T]) -> U, entries: &mut [Lane<U>]) {
    let n = entries.len();
    if lines.len() < n * TOGETHER {
        entries.fill(Lane::ZERO);
    }
    let mut bases = [U::ZERO; TOGETHER];
    for (b, line) in bases.iter_mut().zip(lines.chunks_exact(n)) {
        *b = base(line);
    }
    for (k, few) in entries.chunks_mut(FEW).enumerate() {
        for (l, line) in lines.chunks_exact(n).enumerate() {
            let values = few.iter_mut().zip(&line[k * FEW..]);
            let value = |v: T| U::of(v.wide()) - bases[l];
            if l < LANES {
                values.for_each(|(e, &v)| e.re[l] = value(v));
            } else {
                values.for_each(|(e, &v)| e.im[l - LANES] = value(v));
            }
        }
    }
}

/// Lines side by side, one after the other; every value as `value` makes it.
pub(super) fn scatter<T: Copy, U>(entries: &[Lane<T>], lines: &mut [U], value: impl Fn(T) -> U) {
    for (k, few) in entries.chunks(FEW).enumerate() {
        for (l, line) in lines.chunks_exact_mut(entries.len()).enumerate() {
            let values = line[k * FEW..].iter_mut().zip(few);
            if l < LANES {
                values.for_each(|(v, e)| *v = value(e.re[l]));
            } else {
                values.for_each(|(v, e)| *v = value(e.im[l - LANES]));
            }
        }
    }
}

/// The coefficients F and G of the real lines f and g of lane `l`, from those of f + ig at m and -m: Z_m = F + iG, and the conjugate
/// of Z_-m is F - iG.
#[inline(always)]
pub(super) fn both(there: &Lane<f64>, back: &Lane<f64>, l: usize) -> [[f64; 2]; 2] {
    let (a, b) = ([there.re[l], there.im[l]], [back.re[l], back.im[l]]);
    [[0.5 * (a[0] + b[0]), 0.5 * (a[1] - b[1])], [0.5 * (a[1] + b[1]), 0.5 * (b[0] - a[0])]]
}

/// Power spectra of periodic lines of one length.
#[derive(Clone)]
pub struct LinePower(Arc<Power>);

struct Power {
    dft: Dft<f64>,
    /// Where each wavenumber stands in a transformed line.
    places: Vec<usize>,
}

impl LinePower {
    /// Lines of `n` samples.
    ///
    /// # Panics
    /// When `n` is 0.
    pub fn new(n: usize) -> LinePower {
        let dft = Dft::new(n);
        let places = dft.places();
        LinePower(Arc::new(Power { dft, places }))
    }

    /// Adds |f̂_m|² + |f̂_-m|² of every line to `power[m]`, m from 0 to n/2: all together a line's mean square. The lines follow each
    /// other and are added in their order.
    ///
    /// # Panics
    /// When a slice has the wrong length.
    pub fn add(&self, lines: &[f64], power: &mut [f64], scratch: &mut LineScratch<f64>) {
        let Power { dft, places } = &*self.0;
        let n = dft.n();
        assert!(lines.len().is_multiple_of(n), "expected lines of {n} samples, got {}", lines.len());
        assert_eq!(power.len(), n / 2 + 1, "wavenumbers");
        let scale = 1.0 / (n * n) as f64;
        let entries = scratch.entries(dft.buffer());
        for lines in lines.chunks(n * TOGETHER) {
            let mut bases = [0.0; TOGETHER];
            for (base, line) in bases.iter_mut().zip(lines.chunks_exact(n)) {
                *base = line[0];
            }
            gather(lines, |line| line[0], &mut entries[..n]);
            dft.forward(entries);
            for (m, p) in power.iter_mut().enumerate() {
                let (there, back) = (&entries[places[m]], &entries[places[(n - m) % n]]);
                let mut squares = [0.0; TOGETHER];
                for l in 0..LANES {
                    let [mut f, mut g] = both(there, back, l);
                    if m == 0 {
                        f[0] += n as f64 * bases[l];
                        g[0] += n as f64 * bases[l + LANES];
                    }
                    squares[l] = f[0] * f[0] + f[1] * f[1];
                    squares[l + LANES] = g[0] * g[0] + g[1] * g[1];
                }
                let weight = if m == 0 || 2 * m == n { scale } else { 2.0 * scale };
                for s in &squares[..lines.len() / n] {
                    *p += weight * s;
                }
            }
        }
    }
}
