//! First derivatives by finite differences: order-8 central weights, one-sided weights of the same order, row kernels.
//!
//! Kernels choose the vector width at run time. Width alone changes no bit of a result: lanes are independent and nothing is
//! contracted to fused operations.

use std::ops::Range;

use crate::base::real::Real;

/// Half width of the central stencil: order 8 needs four samples on each side.
pub const HALF: usize = 4;
/// Samples a stencil reads at most: `2 HALF + 1`, which also gives one-sided stencils order 8.
pub const WIDTH: usize = 2 * HALF + 1;

/// Weights of the first derivative at `x0` from values at `nodes`, exact for polynomials of degree `nodes.len() - 1`.
///
/// # References
/// B. Fornberg, Math. Comp. 51 (1988) 699, doi:10.1090/S0025-5718-1988-0935077-0.
pub fn fornberg(x0: f64, nodes: &[f64]) -> Vec<f64> {
    let n = nodes.len();
    // c[j][m]: weight of node j for derivative m (0 or 1), built node by node.
    let mut c = vec![[0.0f64; 2]; n];
    c[0][0] = 1.0;
    let mut c1 = 1.0;
    let mut c4 = nodes[0] - x0;
    for i in 1..n {
        let mut c2 = 1.0;
        let c5 = c4;
        c4 = nodes[i] - x0;
        for j in 0..i {
            let c3 = nodes[i] - nodes[j];
            c2 *= c3;
            if j == i - 1 {
                c[i][1] = c1 * (c[i - 1][0] - c5 * c[i - 1][1]) / c2;
                c[i][0] = -c1 * c5 * c[i - 1][0] / c2;
            }
            c[j][1] = (c4 * c[j][1] - c[j][0]) / c3;
            c[j][0] = c4 * c[j][0] / c3;
        }
        c1 = c2;
    }
    c.into_iter().map(|w| w[1]).collect()
}

/// The order-8 first derivative along one axis of `n` equally spaced samples.
#[derive(Debug, Clone)]
pub struct AxisStencil<T> {
    n: usize,
    periodic: bool,
    /// Antisymmetric weights of the offsets 1..=4.
    pub central: [T; HALF],
    /// The same of order 6, whose difference to order 8 measures the truncation error.
    pub central6: [T; HALF],
    /// Weights over the first `WIDTH` samples for positions `0..HALF` of an open axis.
    low: [[T; WIDTH]; HALF],
    /// Weights over the last `WIDTH` samples for positions `n - HALF..n`.
    high: [[T; WIDTH]; HALF],
}

/// Where a position takes its samples from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Support<'a, T> {
    /// Offsets -4..=4 with the antisymmetric central weights; indices may leave `0..n` on a periodic axis.
    Central,
    /// `WIDTH` samples from `first` on.
    Window {
        /// First sample.
        first: usize,
        /// Weights.
        weights: &'a [T; WIDTH],
    },
}

impl<T: Real> AxisStencil<T> {
    /// # Panics
    /// When `n < 9` or the spacing is not positive.
    pub fn new(n: usize, spacing: f64, periodic: bool) -> Self {
        assert!(n >= WIDTH, "expected at least {WIDTH} samples, got {n}");
        assert!(spacing > 0.0, "expected a positive spacing, got {spacing}");
        let scaled = |w: f64| T::of(w / spacing);
        let nodes: Vec<f64> = (0..WIDTH).map(|i| i as f64).collect();
        let weights = |at: usize| -> [T; WIDTH] {
            let w = fornberg(at as f64, &nodes);
            std::array::from_fn(|i| scaled(w[i]))
        };
        AxisStencil {
            n,
            periodic,
            central: [4.0 / 5.0, -1.0 / 5.0, 4.0 / 105.0, -1.0 / 280.0].map(scaled),
            central6: [3.0 / 4.0, -3.0 / 20.0, 1.0 / 60.0, 0.0].map(scaled),
            low: std::array::from_fn(weights),
            high: std::array::from_fn(|i| weights(WIDTH - HALF + i)),
        }
    }

    /// Which samples the derivative at position `i` reads.
    pub fn support(&self, i: usize) -> Support<'_, T> {
        if self.periodic || (i >= HALF && i + HALF < self.n) {
            Support::Central
        } else if i < HALF {
            Support::Window { first: 0, weights: &self.low[i] }
        } else {
            Support::Window { first: self.n - WIDTH, weights: &self.high[i + HALF - self.n] }
        }
    }

    /// First and one-past-last sample read for position `i`, unwrapped on a periodic axis.
    pub fn reach(&self, i: usize) -> (isize, isize) {
        match self.support(i) {
            Support::Central => (i as isize - HALF as isize, (i + HALF + 1) as isize),
            Support::Window { first, .. } => (first as isize, (first + WIDTH) as isize),
        }
    }

    /// Derivative along a row of `n` values at the positions `x`; `padded` is scratch that is resized as needed.
    ///
    /// # Panics
    /// When `out` is not as long as `x`, or `x` leaves `0..n`.
    pub fn along(&self, row: &[T], x: Range<usize>, padded: &mut Vec<T>, out: &mut [T]) {
        self.along_with(&self.central, row, x, padded, out);
    }

    /// As [`AxisStencil::along`] with other central weights; positions near an open face keep order 8.
    pub fn along_with(&self, central: &[T; HALF], row: &[T], x: Range<usize>, padded: &mut Vec<T>, out: &mut [T]) {
        let n = self.n;
        debug_assert_eq!(row.len(), n);
        assert_eq!(out.len(), x.len(), "positions");
        if x.start >= HALF && x.end + HALF <= n {
            let at = |k: usize| &row[x.start + k - HALF..x.end + k - HALF];
            difference(out, [at(3), at(2), at(1), at(0)], [at(5), at(6), at(7), at(8)], central);
            return;
        }
        padded.clear();
        if self.periodic {
            padded.extend_from_slice(&row[n - HALF..]);
            padded.extend_from_slice(row);
            padded.extend_from_slice(&row[..HALF]);
        } else {
            padded.resize(HALF, T::ZERO);
            padded.extend_from_slice(row);
            padded.resize(n + 2 * HALF, T::ZERO);
        }
        let at = |k: usize| &padded[x.start + k..x.end + k];
        difference(out, [at(3), at(2), at(1), at(0)], [at(5), at(6), at(7), at(8)], central);
        if !self.periodic {
            for i in (0..HALF).chain(n - HALF..n).filter(|i| x.contains(i)) {
                if let Support::Window { first, weights } = self.support(i) {
                    let mut s = T::ZERO;
                    for (k, w) in weights.iter().enumerate() {
                        s += *w * row[first + k];
                    }
                    out[i - x.start] = s;
                }
            }
        }
    }
}

/// `out = sum_k w[k] (plus[k] - minus[k])`, element by element; exactly antisymmetric under exchange of the sides.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn difference<T: Real>(out: &mut [T], minus: [&[T]; HALF], plus: [&[T]; HALF], w: &[T; HALF]) {
    let n = out.len();
    let [m0, m1, m2, m3] = minus.map(|s| &s[..n]);
    let [p0, p1, p2, p3] = plus.map(|s| &s[..n]);
    let [w0, w1, w2, w3] = *w;
    for i in 0..n {
        out[i] = (w0 * (p0[i] - m0[i]) + w1 * (p1[i] - m1[i])) + (w2 * (p2[i] - m2[i]) + w3 * (p3[i] - m3[i]));
    }
}

/// `out = sum_k w[k] rows[k]`, element by element.
pub fn weighted<T: Real>(out: &mut [T], rows: [&[T]; WIDTH], w: &[T; WIDTH]) {
    let n = out.len();
    let rows = rows.map(|s| &s[..n]);
    for i in 0..n {
        let mut s = T::ZERO;
        for k in 0..WIDTH {
            s += w[k] * rows[k][i];
        }
        out[i] = s;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn central_weights_follow_from_the_general_rule() {
        let nodes: Vec<f64> = (-4..=4).map(f64::from).collect();
        let w = fornberg(0.0, &nodes);
        let s = AxisStencil::<f64>::new(16, 1.0, true);
        for k in 0..HALF {
            assert!((w[HALF + 1 + k] - s.central[k]).abs() < 1e-15);
            assert!((w[HALF - 1 - k] + s.central[k]).abs() < 1e-15);
        }
    }

    /// Fornberg (1988), table 3: one-sided first-derivative weights at the end point of two, three and four equally spaced nodes.
    #[test]
    fn one_sided_weights_match_the_published_table() {
        let tables: [&[f64]; 3] = [&[-1.0, 1.0], &[-1.5, 2.0, -0.5], &[-11.0 / 6.0, 3.0, -1.5, 1.0 / 3.0]];
        for expected in tables {
            let nodes: Vec<f64> = (0..expected.len()).map(|i| i as f64).collect();
            for (a, b) in fornberg(0.0, &nodes).iter().zip(expected) {
                assert!((a - b).abs() < 1e-14, "{a} {b}");
            }
        }
    }

    fn largest_error(n: usize, periodic: bool) -> f64 {
        // d/dx of exp(sin x) on [0, 2 pi) or on an open stretch of it.
        let l = if periodic { std::f64::consts::TAU } else { 2.0 };
        let h = l / n as f64;
        let f: Vec<f64> = (0..n).map(|i| (i as f64 * h).sin().exp()).collect();
        let s = AxisStencil::<f64>::new(n, h, periodic);
        let mut out = vec![0.0; n];
        s.along(&f, 0..n, &mut Vec::new(), &mut out);
        (0..n)
            .map(|i| {
                let x = i as f64 * h;
                (out[i] - x.cos() * x.sin().exp()).abs()
            })
            .fold(0.0, f64::max)
    }

    #[test]
    fn part_of_a_row_is_the_same_bits_as_the_whole() {
        let f: Vec<f32> = (0..40).map(|i| (i as f32 * 0.7).sin()).collect();
        for periodic in [true, false] {
            let s = AxisStencil::<f32>::new(40, 0.3, periodic);
            let mut whole = vec![0.0; 40];
            s.along(&f, 0..40, &mut Vec::new(), &mut whole);
            for (a, b) in [(0, 1), (0, 7), (3, 20), (4, 36), (5, 6), (30, 37), (36, 40), (39, 40)] {
                let mut part = vec![0.0; b - a];
                s.along(&f, a..b, &mut Vec::new(), &mut part);
                assert_eq!(part, whole[a..b], "{a}..{b}");
            }
        }
    }

    /// Order of convergence on an exact function (calculus), periodic and with one-sided ends.
    #[test]
    fn error_falls_with_the_eighth_power() {
        for periodic in [true, false] {
            let (a, b) = (largest_error(32, periodic), largest_error(64, periodic));
            let order = (a / b).log2();
            assert!((7.0..10.0).contains(&order), "order {order}, periodic {periodic}: {a:e} -> {b:e}");
        }
    }
}
