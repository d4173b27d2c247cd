//! Criteria for vortices made of the velocity gradient A, along one row; each cell is worked out in double precision.

use crate::base::real::Real;
use crate::derive::gradient::Gradient;
use crate::math::eigen::{LANES, middle};

/// The nine derivatives of one cell, `[component][axis]`.
type Matrix = [[f64; 3]; 3];

type Slices<'a, T> = [[&'a [T]; 3]; 3];

fn slices<T>(g: &Gradient<T>, n: usize) -> Slices<'_, T> {
    std::array::from_fn(|c| std::array::from_fn(|a| &g.d[c][a][..n]))
}

#[inline(always)]
fn cell<T: Real>(d: &Slices<'_, T>, i: usize) -> Matrix {
    std::array::from_fn(|c| std::array::from_fn(|a| d[c][a][i].wide()))
}

#[inline(always)]
fn without_trace(mut a: Matrix) -> Matrix {
    let third = (a[0][0] + a[1][1] + a[2][2]) / 3.0;
    for k in 0..3 {
        a[k][k] -= third;
    }
    a
}

/// Q = −½ tr A² and R = −det A.
#[inline(always)]
fn second_and_third(a: &Matrix) -> (f64, f64) {
    let diagonal = a[0][0] * a[0][0] + a[1][1] * a[1][1] + a[2][2] * a[2][2];
    let q = -0.5 * diagonal - (a[0][1] * a[1][0] + a[0][2] * a[2][0] + a[1][2] * a[2][1]);
    let r = -(a[0][0] * (a[1][1] * a[2][2] - a[1][2] * a[2][1]) - a[0][1] * (a[1][0] * a[2][2] - a[1][2] * a[2][0])
        + a[0][2] * (a[1][0] * a[2][1] - a[1][1] * a[2][0]));
    (q, r)
}

#[inline(always)]
fn discriminant(q: f64, r: f64) -> f64 {
    (q / 3.0) * (q / 3.0) * (q / 3.0) + (0.5 * r) * (0.5 * r)
}

/// Q of the gradient without its trace θ, Q + θ²/6: from ¼|ω|² − ½ S:S.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn q_without_trace<T: Real>(g: &Gradient<T>, w2: &[T], strain2: &[T], out: &mut Vec<T>) {
    let n = w2.len();
    out.resize(n, T::ZERO);
    let d = slices(g, n);
    let (strain2, out) = (&strain2[..n], &mut out[..n]);
    let (quarter, half, sixth) = (T::of(0.25), T::of(0.5), T::of(1.0 / 6.0));
    for i in 0..n {
        let trace = d[0][0][i] + d[1][1][i] + d[2][2][i];
        out[i] = (quarter * w2[i] - half * strain2[i]) + sixth * (trace * trace);
    }
}

/// Δ = (Q/3)³ + (R/2)², the discriminant of the eigenvalues' equation. It is that of A whatever its trace when the trace is removed
/// first, and that is done in every flow.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn delta<T: Real>(g: &Gradient<T>, out: &mut Vec<T>) {
    let n = g.d[0][0].len();
    out.resize(n, T::ZERO);
    let d = slices(g, n);
    let out = &mut out[..n];
    for i in 0..n {
        let (q, r) = second_and_third(&without_trace(cell(&d, i)));
        out[i] = T::of(discriminant(q, r));
    }
}

/// λ_ci, the imaginary part of the complex eigenvalues of A, which its trace does not change; 0 where all are real.
///
/// With the trace removed they solve λ³ + Qλ + R = 0, and Cardano's K = (|R|/2 + √Δ)^⅓, a sum without cancellation, gives
/// λ_ci = (√3/2) (K + Q/3K).
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn swirling<T: Real>(g: &Gradient<T>, out: &mut Vec<T>) {
    let n = g.d[0][0].len();
    out.resize(n, T::ZERO);
    let d = slices(g, n);
    let out = &mut out[..n];
    for i in 0..n {
        let (q, r) = second_and_third(&without_trace(cell(&d, i)));
        let delta = discriminant(q, r);
        let mut imaginary = 0.0;
        if delta > 0.0 {
            let k = (0.5 * r.abs() + delta.sqrt()).cbrt();
            imaginary = (0.75f64.sqrt() * (k + q / (3.0 * k))).max(0.0);
        }
        out[i] = T::of(imaginary);
    }
}

/// λ2, the middle eigenvalue of S² + W², which is the symmetric part of A²; with `remove_trace`, of A without its trace.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn lambda2<T: Real>(g: &Gradient<T>, remove_trace: bool, out: &mut Vec<T>) {
    let n = g.d[0][0].len();
    out.resize(n, T::ZERO);
    let d = slices(g, n);
    let mut first = 0;
    while first < n {
        let count = LANES.min(n - first);
        let mut m = [[0.0f64; LANES]; 6];
        for l in 0..count {
            let mut a = cell(&d, first + l);
            if remove_trace {
                a = without_trace(a);
            }
            let square = |i: usize, j: usize| a[i][0] * a[0][j] + a[i][1] * a[1][j] + a[i][2] * a[2][j];
            for (k, (i, j)) in [(0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2)].into_iter().enumerate() {
                m[k][l] = if i == j { square(i, i) } else { 0.5 * (square(i, j) + square(j, i)) };
            }
        }
        let values = middle(m);
        for l in 0..count {
            out[first + l] = T::of(values[l]);
        }
        first += count;
    }
}
