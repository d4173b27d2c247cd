//! First derivatives along one axis: which samples a position reads with which weights, and the row kernels.
//!
//! Kernels choose the vector width at run time. Width alone changes no bit of a result: lanes are independent and nothing is
//! contracted to fused operations.

use std::ops::Range;

use crate::base::real::Real;
use crate::math::fornberg::fornberg;
use crate::math::lines::{LineDerivative, LineScratch};
pub use crate::math::scheme::{HALF, Scheme, modified_wavenumber};

/// Samples a stencil reads at most.
pub const WIDTH: usize = 2 * HALF + 1;

/// First derivatives along one axis of `n` samples.
#[derive(Debug, Clone)]
pub struct AxisStencil<T> {
    n: usize,
    kind: Kind<T>,
    /// Samples read on each side, those of the comparison included.
    half: usize,
    scheme: Central<T>,
    comparison: Central<T>,
    /// Stencils of their own: of the first and last `half` positions of an open axis, of every position of a stretched one.
    windows: Vec<Window<T>>,
    /// Of a stretched axis the weights again, node by node, so that a row of positions is worked on at once.
    by_node: Vec<Vec<T>>,
}

#[derive(Debug, Clone)]
enum Kind<T> {
    /// One sample: nothing changes along it.
    Flat,
    Periodic,
    Open,
    Stretched,
    /// Transforms of whole lines.
    Lines(LineDerivative<T>),
}

/// Antisymmetric weights of the offsets from 1 on, zeros behind the first `terms`.
#[derive(Debug, Clone)]
struct Central<T> {
    weights: [T; HALF],
    terms: usize,
}

#[derive(Debug, Clone)]
struct Window<T> {
    first: usize,
    weights: [T; WIDTH],
    comparison: [T; WIDTH],
}

/// Which of two derivatives is meant.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Pick {
    /// That of the scheme.
    Scheme,
    /// That of [`Scheme::comparison`]: the difference of the two tells of the truncation error.
    Comparison,
}

/// Where a position takes its samples from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Support<'a, T> {
    /// The offsets 1 to `terms` on both sides; indices may leave `0..n` on a periodic axis.
    Central {
        /// Antisymmetric weights.
        weights: &'a [T; HALF],
        /// How many of them count.
        terms: usize,
    },
    /// `span` samples from `first` on.
    Window {
        /// First sample.
        first: usize,
        /// Number of samples.
        span: usize,
        /// Weights, zeros behind `span`.
        weights: &'a [T; WIDTH],
    },
    /// The whole line, transformed.
    Line,
    /// None: the derivative is 0.
    Nothing,
}

/// Buffers of derivatives along a row.
#[derive(Debug, Clone)]
pub struct RowScratch<T> {
    padded: Vec<T>,
    line: LineScratch<T>,
}

impl<T: Real> Default for RowScratch<T> {
    fn default() -> Self {
        RowScratch { padded: Vec::new(), line: LineScratch::default() }
    }
}

impl<T: Real> AxisStencil<T> {
    /// An axis of equal spacing. Transforms give way to differences of order 8 on an open one.
    ///
    /// # Panics
    /// When there are fewer than [`Scheme::fewest_samples`] or the spacing is not positive.
    pub fn new(scheme: Scheme, n: usize, spacing: f64, periodic: bool) -> Self {
        assert!(spacing > 0.0, "expected a positive spacing, got {spacing}");
        let scheme = if scheme == Scheme::Spectral && !periodic { Scheme::Fd8 } else { scheme };
        let mut axis = Self::empty(scheme, n);
        let scaled = |w: [f64; HALF]| Central { terms: terms(&w), weights: w.map(|w| T::of(w / spacing)) };
        axis.comparison = scaled(scheme.comparison());
        match scheme.central() {
            None => axis.kind = Kind::Lines(LineDerivative::new(n, spacing)),
            Some(w) => axis.scheme = scaled(w),
        }
        if !periodic {
            axis.kind = Kind::Open;
            let ends = (0..axis.half).chain(n - axis.half..n);
            axis.windows = ends.map(|i| axis.window(i, scheme.nodes(), |k| k as f64, spacing)).collect();
        }
        axis
    }

    /// An open axis with its samples at these ascending positions; differences of order 8 stand in for transforms and for the
    /// optimised stencil.
    ///
    /// # Panics
    /// When there are fewer than [`Scheme::fewest_samples`].
    pub fn stretched(scheme: Scheme, positions: &[f64]) -> Self {
        let scheme = if matches!(scheme, Scheme::Spectral | Scheme::Opt) { Scheme::Fd8 } else { scheme };
        let mut axis = Self::empty(scheme, positions.len());
        axis.kind = Kind::Stretched;
        let other = 2 * terms(&scheme.comparison()) + 1;
        axis.windows = (0..axis.n)
            .map(|i| {
                let own = axis.window(i, scheme.nodes(), |k| positions[k], 1.0);
                // Beside a face, where a lower order is not a measure of a higher one, the comparison is the scheme itself.
                let central = i >= axis.half && i + axis.half < axis.n;
                let comparison = if central { axis.window(i, other, |k| positions[k], 1.0).weights } else { own.weights };
                Window { comparison, ..own }
            })
            .collect();
        axis.by_node = (0..axis.span()).map(|k| axis.windows.iter().map(|w| w.weights[k]).collect()).collect();
        axis
    }

    /// An axis of one sample, along which every derivative is 0.
    pub fn flat() -> Self {
        let none = Central { weights: [T::ZERO; HALF], terms: 0 };
        AxisStencil { n: 1, kind: Kind::Flat, half: 0, scheme: none.clone(), comparison: none, windows: Vec::new(), by_node: Vec::new() }
    }

    fn empty(scheme: Scheme, n: usize) -> Self {
        let fewest = scheme.fewest_samples();
        assert!(n >= fewest, "expected at least {fewest} samples, got {n}");
        AxisStencil { n, kind: Kind::Periodic, half: scheme.half(), ..Self::flat() }
    }

    fn span(&self) -> usize {
        2 * self.half + 1
    }

    /// The stencil of position `i` over the `nodes` samples nearest to it, in its window of all that may be read.
    fn window(&self, i: usize, nodes: usize, position: impl Fn(usize) -> f64, spacing: f64) -> Window<T> {
        let nearest = |count: usize| i.saturating_sub(count / 2).min(self.n - count);
        let (first, from) = (nearest(self.span()), nearest(nodes));
        let at: Vec<f64> = (from..from + nodes).map(|k| position(k) - position(i)).collect();
        let mut weights = [T::ZERO; WIDTH];
        for (k, w) in fornberg(0.0, &at).into_iter().enumerate() {
            weights[from - first + k] = T::of(w / spacing);
        }
        Window { first, weights, comparison: weights }
    }

    /// Which samples the derivative at position `i` reads.
    pub fn support(&self, i: usize, pick: Pick) -> Support<'_, T> {
        let window = match &self.kind {
            Kind::Flat => return Support::Nothing,
            Kind::Lines(_) if pick == Pick::Scheme => return Support::Line,
            Kind::Stretched => &self.windows[i],
            Kind::Open if i < self.half => &self.windows[i],
            Kind::Open if i + self.half >= self.n => &self.windows[2 * self.half + i - self.n],
            _ => {
                let c = if pick == Pick::Scheme { &self.scheme } else { &self.comparison };
                return Support::Central { weights: &c.weights, terms: c.terms };
            }
        };
        let weights = if pick == Pick::Scheme { &window.weights } else { &window.comparison };
        Support::Window { first: window.first, span: self.span(), weights }
    }

    /// The transform of lines, where it is used.
    pub fn line(&self) -> Option<&LineDerivative<T>> {
        if let Kind::Lines(line) = &self.kind { Some(line) } else { None }
    }

    /// First and one-past-last sample read for position `i`, by the scheme or its comparison; unwrapped on a periodic axis. Whole
    /// lines are not counted.
    pub fn reach(&self, i: usize) -> (isize, isize) {
        match self.support(i, Pick::Scheme) {
            Support::Window { first, span, .. } => (first as isize, (first + span) as isize),
            _ => (i as isize - self.half as isize, (i + self.half + 1) as isize),
        }
    }

    /// Samples needed beyond a periodic face.
    pub fn halo(&self) -> usize {
        self.half
    }

    /// Derivative along a row of `n` values at the positions of `pieces`, one after the other.
    ///
    /// # Panics
    /// When `out` is not as long as all pieces together, or one leaves `0..n`.
    pub fn along(&self, pick: Pick, row: &[T], pieces: &[Range<usize>], scratch: &mut RowScratch<T>, out: &mut [T]) {
        debug_assert_eq!(row.len(), self.n);
        assert_eq!(out.len(), pieces.iter().map(ExactSizeIterator::len).sum::<usize>(), "positions");
        let central = match (&self.kind, pick) {
            (Kind::Flat, _) => return out.fill(T::ZERO),
            (Kind::Stretched, _) => return each(pieces, out, |x, out| self.along_stretched(pick, row, x, out)),
            (Kind::Lines(line), Pick::Scheme) => {
                scratch.padded.resize(self.n, T::ZERO);
                line.row(row, &mut scratch.padded, &mut scratch.line);
                return each(pieces, out, |x, out| out.copy_from_slice(&scratch.padded[x]));
            }
            (_, Pick::Scheme) => &self.scheme,
            (_, Pick::Comparison) => &self.comparison,
        };
        let (n, half) = (self.n, self.half);
        let padded = &mut scratch.padded;
        padded.clear();
        if matches!(self.kind, Kind::Open) {
            padded.resize(half, T::ZERO);
            padded.extend_from_slice(row);
            padded.resize(n + 2 * half, T::ZERO);
        } else {
            padded.extend_from_slice(&row[n - half..]);
            padded.extend_from_slice(row);
            padded.extend_from_slice(&row[..half]);
        }
        // Terms that do not count repeat the last one, so that no sample outside is touched.
        let offset = |k: usize| (k + 1).min(central.terms);
        let minus = std::array::from_fn(|k| &padded[half - offset(k)..][..n]);
        let plus = std::array::from_fn(|k| &padded[half + offset(k)..][..n]);
        difference(out, minus, plus, &central.weights, central.terms, pieces);
        if matches!(self.kind, Kind::Open) {
            each(pieces, out, |x, out| {
                for i in (0..half).chain(n - half..n).filter(|i| x.contains(i)) {
                    out[i - x.start] = self.at_window(pick, row, i);
                }
            });
        }
    }

    fn along_stretched(&self, pick: Pick, row: &[T], x: Range<usize>, out: &mut [T]) {
        let (n, half) = (self.n, self.half);
        let inner = x.start.max(half)..x.end.min(n - half).max(x.start.max(half));
        if pick == Pick::Scheme && !inner.is_empty() {
            let out = &mut out[inner.start - x.start..inner.end - x.start];
            position_weighted(out, &self.by_node, row, inner.start, half);
        }
        for i in x.clone().filter(|i| pick == Pick::Comparison || !inner.contains(i)) {
            out[i - x.start] = self.at_window(pick, row, i);
        }
    }

    fn at_window(&self, pick: Pick, row: &[T], i: usize) -> T {
        let mut sum = T::ZERO;
        if let Support::Window { first, span, weights } = self.support(i, pick) {
            for (w, v) in weights[..span].iter().zip(&row[first..]) {
                sum += *w * *v;
            }
        }
        sum
    }
}

fn terms(weights: &[f64; HALF]) -> usize {
    weights.iter().filter(|&&w| w != 0.0).count()
}

/// Calls `f` with every piece and its part of `out`, in which pieces stand one after the other.
pub fn each<T>(pieces: &[Range<usize>], mut out: &mut [T], mut f: impl FnMut(Range<usize>, &mut [T])) {
    for x in pieces {
        let (here, rest) = out.split_at_mut(x.len());
        f(x.clone(), here);
        out = rest;
    }
}

/// `out = sum_k w[k] (plus[k] - minus[k])` over the first `terms` offsets, element by element, at the positions of `pieces`, which stand one
/// after the other in `out`; exactly antisymmetric under exchange of the sides.
///
/// # Panics
/// When `terms` is 0 or above [`HALF`], or a slice is too short.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn difference<T: Real>(out: &mut [T], minus: [&[T]; HALF], plus: [&[T]; HALF], w: &[T; HALF], terms: usize, pieces: &[Range<usize>]) {
    let mut first = 0;
    for x in pieces {
        let here = &mut out[first..first + x.len()];
        first += x.len();
        let (minus, plus) = (minus.map(|s| &s[x.start..x.end]), plus.map(|s| &s[x.start..x.end]));
        match terms {
            1 => difference_of::<T, 1>(here, minus, plus, w),
            2 => difference_of::<T, 2>(here, minus, plus, w),
            3 => difference_of::<T, 3>(here, minus, plus, w),
            4 => difference_of::<T, 4>(here, minus, plus, w),
            _ => panic!("expected 1 to {HALF} terms, got {terms}"),
        }
    }
}

#[inline(always)]
fn difference_of<T: Real, const TERMS: usize>(out: &mut [T], minus: [&[T]; HALF], plus: [&[T]; HALF], w: &[T; HALF]) {
    let n = out.len();
    let [m0, m1, m2, m3] = minus.map(|s| &s[..n]);
    let [p0, p1, p2, p3] = plus.map(|s| &s[..n]);
    let [w0, w1, w2, w3] = *w;
    for i in 0..n {
        out[i] = match TERMS {
            1 => w0 * (p0[i] - m0[i]),
            2 => w0 * (p0[i] - m0[i]) + w1 * (p1[i] - m1[i]),
            3 => (w0 * (p0[i] - m0[i]) + w1 * (p1[i] - m1[i])) + w2 * (p2[i] - m2[i]),
            _ => (w0 * (p0[i] - m0[i]) + w1 * (p1[i] - m1[i])) + (w2 * (p2[i] - m2[i]) + w3 * (p3[i] - m3[i])),
        };
    }
}

/// Rows that four neighbouring ones read at most.
pub const FOUR: usize = 4 + 2 * HALF;

/// [`difference`] of four neighbouring rows at once, with the same bits: `rows[HALF + k]` stands at the place of the k-th.
///
/// # Panics
/// When `terms` is 0 or above [`HALF`], or a slice is too short.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn four<T: Real>(a: &mut [T], b: &mut [T], c: &mut [T], d: &mut [T], rows: [&[T]; FOUR], w: &[T; HALF], terms: usize) {
    match terms {
        1 => four_of::<T, 1>(a, b, c, d, rows, w),
        2 => four_of::<T, 2>(a, b, c, d, rows, w),
        3 => four_of::<T, 3>(a, b, c, d, rows, w),
        4 => four_of::<T, 4>(a, b, c, d, rows, w),
        _ => panic!("expected 1 to {HALF} terms, got {terms}"),
    }
}

#[inline(always)]
fn four_of<T: Real, const TERMS: usize>(a: &mut [T], b: &mut [T], c: &mut [T], d: &mut [T], rows: [&[T]; FOUR], w: &[T; HALF]) {
    let n = a.len();
    let (b, c, d) = (&mut b[..n], &mut c[..n], &mut d[..n]);
    let rows = rows.map(|s| &s[..n]);
    let [w0, w1, w2, w3] = *w;
    for i in 0..n {
        let v: [T; FOUR] = std::array::from_fn(|k| rows[k][i]);
        let one = |k: usize| {
            let term = |w: T, t: usize| w * (v[HALF + k + t] - v[HALF + k - t]);
            match TERMS {
                1 => term(w0, 1),
                2 => term(w0, 1) + term(w1, 2),
                3 => (term(w0, 1) + term(w1, 2)) + term(w2, 3),
                _ => (term(w0, 1) + term(w1, 2)) + (term(w2, 3) + term(w3, 4)),
            }
        };
        (a[i], b[i], c[i], d[i]) = (one(0), one(1), one(2), one(3));
    }
}

/// `out = sum_k w[k] rows[k]` over the first `span` rows, element by element.
///
/// # Panics
/// When `span` is none of 5, 7, 9.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn weighted<T: Real>(out: &mut [T], rows: [&[T]; WIDTH], w: &[T; WIDTH], span: usize) {
    match span {
        5 => weighted_sum::<T, 5>(out, rows, w),
        7 => weighted_sum::<T, 7>(out, rows, w),
        WIDTH => weighted_sum::<T, WIDTH>(out, rows, w),
        _ => panic!("expected 5, 7 or {WIDTH} rows, got {span}"),
    }
}

#[inline(always)]
fn weighted_sum<T: Real, const SPAN: usize>(out: &mut [T], rows: [&[T]; WIDTH], w: &[T; WIDTH]) {
    let n = out.len();
    let rows = rows.map(|s| &s[..n]);
    for i in 0..n {
        let mut s = T::ZERO;
        for k in 0..SPAN {
            s += w[k] * rows[k][i];
        }
        out[i] = s;
    }
}

/// `out[i] = sum_k w[k][at + i] row[at + i - half + k]`: every position of a row has its own weights.
#[multiversion::multiversion(targets("x86_64+avx2"))]
fn position_weighted<T: Real>(out: &mut [T], w: &[Vec<T>], row: &[T], at: usize, half: usize) {
    let n = out.len();
    out.fill(T::ZERO);
    for (k, w) in w.iter().enumerate() {
        let (w, values) = (&w[at..at + n], &row[at - half + k..at - half + k + n]);
        for i in 0..n {
            out[i] += w[i] * values[i];
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const ALL: [Scheme; 6] = [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8, Scheme::Opt, Scheme::Spectral];

    fn positions(n: usize) -> Vec<f64> {
        (0..n).map(|i| i as f64 / n as f64).map(|s| 2.0 * s + 0.3 * (3.0 * s).sin() / 3.0).collect()
    }

    fn axes(scheme: Scheme, n: usize) -> [(&'static str, AxisStencil<f64>, Vec<f64>); 3] {
        let tau = std::f64::consts::TAU / n as f64;
        let spread = |h: f64| (0..n).map(|i| i as f64 * h).collect();
        [
            ("periodic", AxisStencil::new(scheme, n, tau, true), spread(tau)),
            ("open", AxisStencil::new(scheme, n, 2.0 / n as f64, false), spread(2.0 / n as f64)),
            ("stretched", AxisStencil::stretched(scheme, &positions(n)), positions(n)),
        ]
    }

    fn derivative<T: Real>(axis: &AxisStencil<T>, pick: Pick, f: &[T]) -> Vec<T> {
        let mut out = vec![T::ZERO; f.len()];
        axis.along(pick, f, std::slice::from_ref(&(0..f.len())), &mut RowScratch::default(), &mut out);
        out
    }

    #[test]
    fn part_of_a_row_is_the_same_bits_as_the_whole() {
        let f: Vec<f32> = (0..40).map(|i| (i as f32 * 0.7).sin()).collect();
        for scheme in ALL {
            let stretched = AxisStencil::<f32>::stretched(scheme, &positions(40));
            for s in [AxisStencil::new(scheme, 40, 0.3, true), AxisStencil::new(scheme, 40, 0.3, false), stretched] {
                for pick in [Pick::Scheme, Pick::Comparison] {
                    let whole = derivative(&s, pick, &f);
                    for (a, b) in [(0, 1), (0, 7), (2, 5), (3, 20), (4, 36), (5, 6), (30, 37), (36, 40), (39, 40), (7, 7)] {
                        let mut part = vec![0.0; b - a];
                        s.along(pick, &f, std::slice::from_ref(&(a..b)), &mut RowScratch::default(), &mut part);
                        assert_eq!(part, whole[a..b], "{scheme:?} {pick:?} {a}..{b}");
                    }
                }
            }
        }
    }

    /// Order of convergence on an exact function (calculus): exp(sin x), periodic, with one-sided ends, and stretched.
    #[test]
    fn errors_fall_with_the_order_of_the_scheme() {
        for (scheme, order) in [(Scheme::Fd2, 2.0), (Scheme::Fd4, 4.0), (Scheme::Fd6, 6.0), (Scheme::Fd8, 8.0), (Scheme::Opt, 4.0)] {
            for k in 0..3 {
                let error = |n: usize| {
                    let (name, axis, x) = &axes(scheme, n)[k];
                    let f: Vec<f64> = x.iter().map(|x| x.sin().exp()).collect();
                    let found = derivative(axis, Pick::Scheme, &f);
                    (*name, found.iter().zip(x).map(|(d, x)| (d - x.cos() * x.sin().exp()).abs()).fold(0.0, f64::max))
                };
                // The optimised stencil begins late to fall with its order; on a stretched axis it is order 8.
                let (coarse, fine) = if scheme == Scheme::Opt && k < 2 { (96, 192) } else { (32, 64) };
                let ((name, a), (_, b)) = (error(coarse), error(fine));
                let found = (a / b).log2();
                // The optimised stencil is of order 8 at the faces and on stretched axes.
                let highest = if scheme == Scheme::Opt { 9.5 } else { order + 2.0 };
                assert!((order - 1.0..highest).contains(&found), "{scheme:?} {name}: order {found}, {a:e} -> {b:e}");
            }
        }
    }

    /// A wave comes out with the modified wavenumber of the scheme, for every wavenumber of the axis.
    #[test]
    fn waves_come_out_with_the_modified_wavenumber() {
        let n = 24;
        for scheme in ALL {
            let (_, axis, x) = &axes(scheme, n)[0];
            for m in 0..=n / 2 {
                let f: Vec<f64> = x.iter().map(|x| (m as f64 * x).sin()).collect();
                let h = std::f64::consts::TAU / n as f64;
                let made = modified_wavenumber(scheme, m as f64 * h) / h;
                for (d, x) in derivative(axis, Pick::Scheme, &f).iter().zip(x) {
                    assert!((d - made * (m as f64 * x).cos()).abs() < 1e-12, "{scheme:?} m = {m}");
                }
            }
        }
    }

    /// Polynomials up to the order of the scheme are exact on open and stretched axes, faces included; the comparison of a
    /// stretched axis differs from it by its own order.
    #[test]
    fn polynomials_are_exact_up_to_the_order() {
        for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8] {
            let degree = scheme.nodes() as i32 - 1;
            for (name, axis, x) in &axes(scheme, 14)[1..] {
                let f: Vec<f64> = x.iter().map(|x| (x - 0.7).powi(degree)).collect();
                for (d, x) in derivative(axis, Pick::Scheme, &f).iter().zip(x) {
                    assert!((d - f64::from(degree) * (x - 0.7).powi(degree - 1)).abs() < 1e-10, "{scheme:?} {name}");
                }
                let line = derivative(axis, Pick::Comparison, x);
                assert!(line.iter().all(|d| (d - 1.0).abs() < 1e-11), "{scheme:?} {name}: {line:?}");
            }
        }
    }

    #[test]
    fn equal_positions_give_the_uniform_stencil() {
        let x: Vec<f64> = (0..20).map(|i| 3.0 + 0.25 * f64::from(i)).collect();
        let f: Vec<f64> = (0..20).map(|i| f64::from(i * i % 7)).collect();
        for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8] {
            let (a, b) = (AxisStencil::stretched(scheme, &x), AxisStencil::new(scheme, 20, 0.25, false));
            for pick in [Pick::Scheme, Pick::Comparison] {
                let pairs = derivative(&a, pick, &f).into_iter().zip(derivative(&b, pick, &f));
                assert!(pairs.into_iter().all(|(a, b)| (a - b).abs() < 1e-11), "{scheme:?} {pick:?}");
            }
        }
    }

    #[test]
    #[should_panic(expected = "expected at least 9 samples, got 8")]
    fn short_axes_are_refused() {
        let _ = AxisStencil::<f32>::new(Scheme::Fd8, 8, 1.0, true);
    }
}
