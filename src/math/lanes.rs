//! Fourier transforms of complex lines side by side, one vector lane a line: the same bits at any vector width, on any machine.
//!
//! Lanes never meet and nothing is contracted to fused operations, so that the width chosen at run time changes no bit. Twiddle
//! factors come from the `libm` crate: those of the system's library differ in their last bit from machine to machine.

use std::cmp::Ordering;

use crate::base::real::Real;

/// Complex lines that are transformed together.
pub const LANES: usize = 8;

/// Entries whose passes are made together, so that they stay in the nearest cache.
const TILE: usize = 256;

/// The largest prime factor of a length with a butterfly of its own.
const LARGEST: usize = 13;

/// One entry of every line.
#[derive(Debug, Clone, Copy)]
#[repr(C, align(64))]
pub struct Lane<T> {
    /// Real parts.
    pub re: [T; LANES],
    /// Imaginary parts.
    pub im: [T; LANES],
}

impl<T: Real> Lane<T> {
    /// Nothing but zeros.
    pub const ZERO: Lane<T> = Lane { re: [T::ZERO; LANES], im: [T::ZERO; LANES] };

    #[inline(always)]
    fn plus(self, other: Self) -> Self {
        Lane { re: each(|l| self.re[l] + other.re[l]), im: each(|l| self.im[l] + other.im[l]) }
    }

    #[inline(always)]
    fn minus(self, other: Self) -> Self {
        Lane { re: each(|l| self.re[l] - other.re[l]), im: each(|l| self.im[l] - other.im[l]) }
    }

    /// Times a real number.
    #[inline(always)]
    fn scaled(self, k: T) -> Self {
        Lane { re: each(|l| k * self.re[l]), im: each(|l| k * self.im[l]) }
    }

    /// Times w, or the conjugate of w.
    #[inline(always)]
    fn times<const CONJUGATE: bool>(self, [c, s]: Pair<T>) -> Self {
        let Lane { re, im } = self;
        if CONJUGATE {
            Lane { re: each(|l| re[l] * c + im[l] * s), im: each(|l| im[l] * c - re[l] * s) }
        } else {
            Lane { re: each(|l| re[l] * c - im[l] * s), im: each(|l| re[l] * s + im[l] * c) }
        }
    }

    /// Times i k.
    #[inline(always)]
    fn turned(self, k: T) -> Self {
        Lane { re: each(|l| -(k * self.im[l])), im: each(|l| k * self.re[l]) }
    }

    /// Times -i forward, i on the way back.
    #[inline(always)]
    fn quarter<const BACK: bool>(self) -> Self {
        if BACK { Lane { re: each(|l| -self.im[l]), im: self.re } } else { Lane { re: self.im, im: each(|l| -self.re[l]) } }
    }
}

#[inline(always)]
fn each<T>(f: impl Fn(usize) -> T) -> [T; LANES] {
    std::array::from_fn(f)
}

/// Real and imaginary part.
type Pair<T> = [T; 2];

/// cos and sin of 2π i/n, the quadrant taken off exactly.
fn turn(i: usize, n: usize) -> [f64; 2] {
    let (quadrant, rest) = (4 * (i % n) / n, 4 * (i % n) % n);
    let half = std::f64::consts::FRAC_PI_2 * (rest.min(n - rest) as f64 / n as f64);
    let (c, s) = (libm::cos(half), libm::sin(half));
    let [c, s] = match (2 * rest).cmp(&n) {
        Ordering::Less => [c, s],
        // Both are the root of a half.
        Ordering::Equal => [c, c],
        Ordering::Greater => [s, c],
    };
    match quadrant {
        0 => [c, s],
        1 => [-s, c],
        2 => [-c, -s],
        _ => [s, -c],
    }
}

/// exp(-2πi j/n).
fn root<T: Real>(j: usize, n: usize) -> Pair<T> {
    let [c, s] = turn(j, n);
    [T::of(c), T::of(-s)]
}

/// One pass: butterflies of `radix` entries that lie `m` apart.
struct Pass<T> {
    radix: usize,
    m: usize,
    /// Of the outputs from 1 on, butterfly by butterfly.
    twiddles: Vec<Pair<T>>,
    /// exp(-2πi j/radix).
    roots: Vec<Pair<T>>,
}

/// A transform whose length has small prime factors. Forward it takes entries in order and leaves wavenumbers as in `order`;
/// backward it takes them so: nothing is ever sorted.
struct Smooth<T> {
    passes: Vec<Pass<T>>,
    order: Vec<usize>,
}

fn radices(mut n: usize) -> Option<Vec<usize>> {
    let mut out = Vec::new();
    for radix in [4, 2, 3, 5, 7, 11, LARGEST] {
        while n.is_multiple_of(radix) {
            n /= radix;
            out.push(radix);
        }
    }
    // Fours last: the middle of forward and backward is made in one go for them.
    out.reverse();
    (n == 1).then_some(out)
}

impl<T: Real> Smooth<T> {
    fn new(n: usize) -> Option<Self> {
        let (mut passes, mut order) = (Vec::new(), vec![0]);
        let (mut len, mut step) = (n, 1);
        for radix in radices(n)? {
            let m = len / radix;
            let twiddles = (0..m).flat_map(|j| (1..radix).map(move |q| root(j * q, len))).collect();
            let roots = (0..radix).map(|j| root(j, radix)).collect();
            passes.push(Pass { radix, m, twiddles, roots });
            order = order.iter().flat_map(|&o| (0..radix).map(move |q| o + q * step)).collect();
            (len, step) = (m, step * radix);
        }
        Some(Smooth { passes, order })
    }
}

/// Transforms of lines of one length, whatever its factors.
pub struct Dft<T> {
    smooth: Smooth<T>,
    chirp: Option<Chirp<T>>,
    n: usize,
}

/// A transform of any length as a convolution of a smooth one: jk = (j² + k² − (k − j)²)/2 (Bluestein 1970).
struct Chirp<T> {
    /// exp(-πi j²/n).
    turns: Vec<Pair<T>>,
    /// The transform of their conjugates, in the order of the smooth transform, over its length.
    spectrum: Vec<Pair<T>>,
    order: Vec<usize>,
}

impl<T: Real> Dft<T> {
    /// Lines of `n` entries.
    ///
    /// # Panics
    /// When `n` is 0.
    pub fn new(n: usize) -> Self {
        assert!(n > 0, "expected lines of at least 1 sample");
        if let Some(smooth) = Smooth::new(n) {
            return Dft { smooth, chirp: None, n };
        }
        let is_handy = |m: &usize| radices(*m).is_some_and(|r| r.iter().all(|&r| r <= 5));
        let len = (2 * n - 1..).find(is_handy).expect("there is a power of 2");
        let plan = |m| Smooth::new(m).expect("its factors were looked at");
        // Squares of indices are taken modulo 2n, where their turns repeat.
        let turns: Vec<Pair<f64>> = (0..n).map(|j| root(j * j % (2 * n), 2 * n)).collect();
        let mut kernel = vec![Lane::<f64>::ZERO; len];
        for (j, &[re, im]) in turns.iter().enumerate() {
            for at in [j, (len - j) % len] {
                (kernel[at].re[0], kernel[at].im[0]) = (re, -im);
            }
        }
        forward(&Smooth::new(len).expect("its factors were looked at").passes, &mut kernel);
        let narrow = |[re, im]: Pair<f64>, scale: f64| [T::of(re * scale), T::of(im * scale)];
        let spectrum = kernel.iter().map(|k| narrow([k.re[0], k.im[0]], 1.0 / len as f64)).collect();
        let chirp = Chirp { turns: turns.into_iter().map(|t| narrow(t, 1.0)).collect(), spectrum, order: (0..n).collect() };
        Dft { smooth: plan(len), chirp: Some(chirp), n }
    }

    /// Entries of a line.
    pub fn n(&self) -> usize {
        self.n
    }

    /// Entries that a buffer must have; those behind the line are workspace.
    pub fn buffer(&self) -> usize {
        self.smooth.order.len()
    }

    /// Which wavenumber, from 0 to n - 1, stands at each place of a transformed line.
    pub fn order(&self) -> &[usize] {
        self.chirp.as_ref().map_or(&self.smooth.order, |c| &c.order)
    }

    /// Where each wavenumber stands in a transformed line.
    pub fn places(&self) -> Vec<usize> {
        let mut places = vec![0; self.n];
        for (place, &m) in self.order().iter().enumerate() {
            places[m] = place;
        }
        places
    }

    /// Sums over samples f_j exp(-2πi jk/n), not scaled.
    ///
    /// # Panics
    /// When the buffer has another length than [`Dft::buffer`].
    pub fn forward(&self, data: &mut [Lane<T>]) {
        self.check(data);
        match &self.chirp {
            None => forward(&self.smooth.passes, data),
            Some(chirp) => convolve::<T, false>(&self.smooth, chirp, data),
        }
    }

    /// Sums over wavenumbers f_k exp(2πi jk/n), not scaled.
    ///
    /// # Panics
    /// As [`Dft::forward`].
    pub fn inverse(&self, data: &mut [Lane<T>]) {
        self.check(data);
        match &self.chirp {
            None => inverse(&self.smooth.passes, data),
            Some(chirp) => convolve::<T, true>(&self.smooth, chirp, data),
        }
    }

    /// Forward, times `i factors` (in the order of [`Dft::order`]), and back.
    ///
    /// # Panics
    /// As [`Dft::forward`], and when there are not n factors.
    pub fn turned(&self, factors: &[T], data: &mut [Lane<T>]) {
        self.check(data);
        assert_eq!(factors.len(), self.n, "factors");
        if self.chirp.is_none() {
            return there_and_back(&self.smooth.passes, factors, data);
        }
        self.forward(data);
        for (x, &k) in data.iter_mut().zip(factors) {
            *x = x.turned(k);
        }
        self.inverse(data);
    }

    fn check(&self, data: &[Lane<T>]) {
        assert_eq!(data.len(), self.buffer(), "entries of a buffer of lines");
    }
}

/// Butterflies of 4.
#[inline(always)]
fn four<T: Real, const BACK: bool>([a, b, c, d]: [Lane<T>; 4]) -> [Lane<T>; 4] {
    let (t0, t1, t2, t3) = (a.plus(c), a.minus(c), b.plus(d), b.minus(d).quarter::<BACK>());
    [t0.plus(t2), t1.plus(t3), t0.minus(t2), t1.minus(t3)]
}

/// Twiddles come before butterflies on the way back, after them forward.
#[inline(always)]
fn fours<T: Real, const BACK: bool>(pass: &Pass<T>, data: &mut [Lane<T>]) {
    let m = pass.m;
    if m == 1 {
        for x in data.as_chunks_mut::<4>().0 {
            *x = four::<T, BACK>(*x);
        }
        return;
    }
    for block in data.chunks_exact_mut(4 * m) {
        let (ab, cd) = block.split_at_mut(2 * m);
        let ((a, b), (c, d)) = (ab.split_at_mut(m), cd.split_at_mut(m));
        for ((((x0, x1), x2), x3), w) in a.iter_mut().zip(b).zip(c).zip(d).zip(pass.twiddles.as_chunks::<3>().0) {
            if BACK {
                let x = [*x0, x1.times::<true>(w[0]), x2.times::<true>(w[1]), x3.times::<true>(w[2])];
                [*x0, *x1, *x2, *x3] = four::<T, true>(x);
            } else {
                let y = four::<T, false>([*x0, *x1, *x2, *x3]);
                [*x0, *x1, *x2, *x3] = [y[0], y[1].times::<false>(w[0]), y[2].times::<false>(w[1]), y[3].times::<false>(w[2])];
            }
        }
    }
}

#[inline(always)]
fn threes<T: Real, const BACK: bool>(pass: &Pass<T>, data: &mut [Lane<T>]) {
    let m = pass.m;
    // cos and -sin of 120°.
    let [half, height] = pass.roots[1];
    for block in data.chunks_exact_mut(3 * m) {
        let (a, bc) = block.split_at_mut(m);
        let (b, c) = bc.split_at_mut(m);
        for (((x0, x1), x2), w) in a.iter_mut().zip(b).zip(c).zip(pass.twiddles.as_chunks::<2>().0) {
            let (mut b, mut c) = (*x1, *x2);
            if BACK {
                (b, c) = (b.times::<true>(w[0]), c.times::<true>(w[1]));
            }
            let (sum, middle) = (b.plus(c), x0.plus(b.plus(c).scaled(half)));
            let side = b.minus(c).turned(if BACK { -height } else { height });
            let (mut y1, mut y2) = (middle.plus(side), middle.minus(side));
            if !BACK {
                (y1, y2) = (y1.times::<false>(w[0]), y2.times::<false>(w[1]));
            }
            [*x0, *x1, *x2] = [x0.plus(sum), y1, y2];
        }
    }
}

#[inline(always)]
fn twos<T: Real, const BACK: bool>(pass: &Pass<T>, data: &mut [Lane<T>]) {
    for block in data.chunks_exact_mut(2 * pass.m) {
        let (a, b) = block.split_at_mut(pass.m);
        for ((x0, x1), &w) in a.iter_mut().zip(b).zip(&pass.twiddles) {
            let other = if BACK { x1.times::<true>(w) } else { *x1 };
            let difference = x0.minus(other);
            [*x0, *x1] = [x0.plus(other), if BACK { difference } else { difference.times::<false>(w) }];
        }
    }
}

/// Butterflies of any radix, by their defining sums.
#[inline(always)]
fn sums<T: Real, const BACK: bool>(pass: &Pass<T>, data: &mut [Lane<T>]) {
    let (radix, m) = (pass.radix, pass.m);
    let mut x = [Lane::<T>::ZERO; LARGEST];
    for block in data.chunks_exact_mut(radix * m) {
        for (j, w) in pass.twiddles.chunks_exact(radix - 1).enumerate() {
            for q in 0..radix {
                x[q] = block[j + q * m];
                if BACK && q > 0 {
                    x[q] = x[q].times::<true>(w[q - 1]);
                }
            }
            for q in 0..radix {
                let mut sum = x[0];
                for (s, x) in x[..radix].iter().enumerate().skip(1) {
                    sum = sum.plus(x.times::<BACK>(pass.roots[q * s % radix]));
                }
                if !BACK && q > 0 {
                    sum = sum.times::<false>(w[q - 1]);
                }
                block[j + q * m] = sum;
            }
        }
    }
}

#[inline(always)]
fn one_pass<T: Real, const BACK: bool>(pass: &Pass<T>, data: &mut [Lane<T>]) {
    match pass.radix {
        4 => fours::<T, BACK>(pass, data),
        3 => threes::<T, BACK>(pass, data),
        2 => twos::<T, BACK>(pass, data),
        _ => sums::<T, BACK>(pass, data),
    }
}

/// The passes over everything, those over parts of at most [`TILE`] entries, and how long the parts are.
#[inline(always)]
fn tiled<T>(passes: &[Pass<T>]) -> (&[Pass<T>], &[Pass<T>], usize) {
    let (outer, inner) = passes.split_at(passes.iter().take_while(|p| p.radix * p.m > TILE).count());
    (outer, inner, inner.first().map_or(1, |p| p.radix * p.m))
}

#[multiversion::multiversion(targets("x86_64+avx2"))]
fn forward<T: Real>(passes: &[Pass<T>], data: &mut [Lane<T>]) {
    for pass in passes {
        one_pass::<T, false>(pass, data);
    }
}

#[multiversion::multiversion(targets("x86_64+avx2"))]
fn inverse<T: Real>(passes: &[Pass<T>], data: &mut [Lane<T>]) {
    for pass in passes.iter().rev() {
        one_pass::<T, true>(pass, data);
    }
}

/// Forward, times i k, and back; a last pass of fours is made together with its way back.
#[multiversion::multiversion(targets("x86_64+avx2"))]
fn there_and_back<T: Real>(passes: &[Pass<T>], factors: &[T], data: &mut [Lane<T>]) {
    let (outer, inner, len) = tiled(passes);
    for pass in outer {
        one_pass::<T, false>(pass, data);
    }
    let (ends_on_four, rest) = match inner {
        [rest @ .., last] if last.radix == 4 => (true, rest),
        _ => (false, inner),
    };
    for (part, k) in data.chunks_exact_mut(len).zip(factors.chunks_exact(len)) {
        for pass in rest {
            one_pass::<T, false>(pass, part);
        }
        if ends_on_four {
            for (x, k) in part.as_chunks_mut::<4>().0.iter_mut().zip(k.as_chunks::<4>().0) {
                let y = four::<T, false>(*x);
                *x = four::<T, true>([y[0].turned(k[0]), y[1].turned(k[1]), y[2].turned(k[2]), y[3].turned(k[3])]);
            }
        } else {
            for (x, &k) in part.iter_mut().zip(k) {
                *x = x.turned(k);
            }
        }
        for pass in rest.iter().rev() {
            one_pass::<T, true>(pass, part);
        }
    }
    for pass in outer.iter().rev() {
        one_pass::<T, true>(pass, data);
    }
}

/// A transform of any length; backward everything is conjugated.
#[multiversion::multiversion(targets("x86_64+avx2"))]
fn convolve<T: Real, const BACK: bool>(smooth: &Smooth<T>, chirp: &Chirp<T>, data: &mut [Lane<T>]) {
    let (line, behind) = data.split_at_mut(chirp.turns.len());
    for (x, &w) in line.iter_mut().zip(&chirp.turns) {
        *x = x.times::<BACK>(w);
    }
    behind.fill(Lane::ZERO);
    for pass in &smooth.passes {
        one_pass::<T, false>(pass, data);
    }
    for (x, &w) in data.iter_mut().zip(&chirp.spectrum) {
        *x = x.times::<BACK>(w);
    }
    for pass in smooth.passes.iter().rev() {
        one_pass::<T, true>(pass, data);
    }
    for (x, &w) in data.iter_mut().zip(&chirp.turns) {
        *x = x.times::<BACK>(w);
    }
}

#[cfg(test)]
mod tests {
    use std::f64::consts::TAU;

    use super::*;

    /// Repeatable numbers in (-1, 1) without a generator: fractional parts of multiples of √2.
    fn lines<T: Real>(dft: &Dft<T>) -> Vec<Lane<T>> {
        let value = |i: usize| T::of(2.0 * ((i * i + 3 * i) as f64 * 2f64.sqrt()).fract() - 1.0);
        let mut out: Vec<Lane<T>> = (0..dft.n())
            .map(|i| Lane { re: std::array::from_fn(|l| value(i * LANES + l)), im: std::array::from_fn(|l| value(7 + i + 1000 * l)) })
            .collect();
        out.resize(dft.buffer(), Lane::ZERO);
        out
    }

    fn check<T: Real>(n: usize, tolerance: f64) {
        let dft = Dft::<T>::new(n);
        let before = lines(&dft);
        let mut found = before.clone();
        dft.forward(&mut found);
        let largest = (n as f64).sqrt();
        for (place, &k) in dft.order().iter().enumerate() {
            for l in [0, LANES - 1] {
                // The defining sum.
                let mut sum = [0.0; 2];
                for (j, x) in before[..n].iter().enumerate() {
                    let (s, c) = (-TAU * (j * k % n) as f64 / n as f64).sin_cos();
                    let (re, im) = (x.re[l].wide(), x.im[l].wide());
                    sum = [sum[0] + re * c - im * s, sum[1] + re * s + im * c];
                }
                let miss = (found[place].re[l].wide() - sum[0]).hypot(found[place].im[l].wide() - sum[1]);
                assert!(miss < tolerance * largest, "{n}, wavenumber {k}: off by {miss:e}");
            }
        }
        dft.inverse(&mut found);
        for (f, b) in found[..n].iter().zip(&before) {
            for l in 0..LANES {
                let miss = (f.re[l].wide() / n as f64 - b.re[l].wide()).hypot(f.im[l].wide() / n as f64 - b.im[l].wide());
                assert!(miss < tolerance, "{n}: back, off by {miss:e}");
            }
        }
    }

    #[test]
    fn any_length_equals_the_defining_sum() {
        // All radices, in front and behind, the tiles of long lines, primes without a butterfly of their own and their multiples.
        for n in (1..=66).chain([91, 143, 320, 512, 768, 1024, 17 * 12, 211, 23 * 23]) {
            // The sums themselves lose digits in long lines.
            check::<f64>(n, 1e-16 * (40 + n) as f64);
            check::<f32>(n, 3e-6);
        }
    }

    #[test]
    fn there_and_back_is_the_same_in_one_go() {
        for n in [1, 2, 4, 12, 15, 17, 64, 256, 512, 1024, 1536] {
            let dft = Dft::<f32>::new(n);
            let factors: Vec<f32> = (0..n).map(|i| (i as f32 * 0.7).fract() - 0.4).collect();
            let mut whole = lines(&dft);
            let mut steps = whole.clone();
            dft.turned(&factors, &mut whole);
            dft.forward(&mut steps);
            for (x, &k) in steps.iter_mut().zip(&factors) {
                *x = x.turned(k);
            }
            dft.inverse(&mut steps);
            assert!(whole[..n].iter().zip(&steps).all(|(a, b)| (a.re, a.im) == (b.re, b.im)), "{n}");
        }
    }

    /// What the kernels chosen at run time make is what they make without wider vectors.
    #[test]
    fn the_width_of_vectors_changes_no_bit() {
        fn check<T: Real>(n: usize) {
            let dft = Dft::<T>::new(n);
            let mut chosen = lines(&dft);
            let mut plain = chosen.clone();
            forward(&dft.smooth.passes, &mut chosen);
            dft.smooth.passes.iter().for_each(|p| one_pass::<T, false>(p, &mut plain));
            assert!(chosen.iter().zip(&plain).all(|(a, b)| (a.re, a.im) == (b.re, b.im)), "{n}");
            inverse(&dft.smooth.passes, &mut chosen);
            dft.smooth.passes.iter().rev().for_each(|p| one_pass::<T, true>(p, &mut plain));
            assert!(chosen.iter().zip(&plain).all(|(a, b)| (a.re, a.im) == (b.re, b.im)), "{n}, back");
        }
        for n in [2, 12, 60, 77, 128, 256, 720, 1024, 1001] {
            check::<f32>(n);
            check::<f64>(n);
        }
    }

    /// Turns are symmetric to the last bit, and those of eighths are exact.
    #[test]
    fn turns_keep_their_symmetries() {
        for n in [8, 24, 256, 1000] {
            for i in 0..n {
                let [c, s] = turn(i, n);
                assert_eq!(turn(n - i, n), [c, -s], "{i} of {n}");
                assert_eq!(turn(2 * i + n, 2 * n), [-c, -s], "{i} of {n}");
            }
            assert_eq!([turn(0, n), turn(n / 4, n), turn(n / 2, n)], [[1.0, 0.0], [0.0, 1.0], [-1.0, 0.0]]);
        }
    }
}
