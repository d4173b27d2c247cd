//! Criteria for vortices made of the velocity gradient A, along one row; each cell is worked out in double precision.

use crate::base::real::Real;
use crate::derive::gradient::Gradient;
use crate::math::eigen::{LANES, middle, middle_single};

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

/// The cube root of a positive number below 1e308, to rounding: a first guess from the exponent, then Halley's steps, which triple the digits.
/// Unlike a library's it has no branch and is the same on every machine.
#[inline(always)]
fn cube_root(x: f64) -> f64 {
    const THIRD_OF_BIAS: u64 = 0x2A9F_7893_0000_0000;
    let mut y = f64::from_bits(x.to_bits() / 3 + THIRD_OF_BIAS);
    for _ in 0..3 {
        let cube = y * y * y;
        y *= (0.5 * cube + x) / (cube + 0.5 * x);
    }
    y
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
        // Where Δ is not positive the root is of no meaning, but exists.
        let k = cube_root((0.5 * r.abs() + delta.max(0.0).sqrt()).max(f64::MIN_POSITIVE));
        let imaginary = 0.75f64.sqrt() * (k + q / (3.0 * k));
        out[i] = T::of(if delta > 0.0 { imaginary.max(0.0) } else { 0.0 });
    }
}

/// λ2, the middle eigenvalue of S² + W², which is the symmetric part of A²; with `remove_trace`, of A without its trace.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn lambda2<T: Real>(g: &Gradient<T>, remove_trace: bool, out: &mut Vec<T>) {
    let n = g.d[0][0].len();
    out.resize(n, T::ZERO);
    let d = slices(g, n);
    for first in (0..n).step_by(LANES) {
        let count = LANES.min(n - first);
        let d: Slices<'_, T> = std::array::from_fn(|c| std::array::from_fn(|a| &d[c][a][first..first + count]));
        let mut m = [[0.0f64; LANES]; 6];
        for l in 0..count {
            let mut a = cell(&d, l);
            if remove_trace {
                a = without_trace(a);
            }
            let [[xx, xy, xz], [yx, yy, yz], [zx, zy, zz]] = a;
            m[0][l] = xx * xx + xy * yx + xz * zx;
            m[1][l] = yx * xy + yy * yy + yz * zy;
            m[2][l] = zx * xz + zy * yz + zz * zz;
            m[3][l] = 0.5 * ((xx * xy + xy * yy + xz * zy) + (yx * xx + yy * yx + yz * zx));
            m[4][l] = 0.5 * ((xx * xz + xy * yz + xz * zz) + (zx * xx + zy * yx + zz * zx));
            m[5][l] = 0.5 * ((yx * xz + yy * yz + yz * zz) + (zx * xy + zy * yy + zz * zy));
        }
        let values = if size_of::<T>() == size_of::<f32>() { middle_single(m) } else { middle(m) };
        for (o, v) in out[first..first + count].iter_mut().zip(values) {
            *o = T::of(v);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::cube_root;

    #[test]
    fn cube_roots_are_right_to_rounding() {
        for i in -900..900 {
            for part in [1.0f64, 1.3, 1.9, 2.7, 3.9, 5.1, 7.9] {
                let y = part * 2f64.powi(i);
                let x = y * y * y;
                if x.is_normal() && x < 1e308 {
                    assert!((cube_root(x) / y - 1.0).abs() < 1e-15, "{y:e}: {:e}", cube_root(x) / y - 1.0);
                }
            }
        }
    }
}
