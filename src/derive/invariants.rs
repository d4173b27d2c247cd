//! Curl, squared curl, S:S and divergence of one row of a gradient.

use crate::base::real::Real;
use crate::derive::gradient::Gradient;

/// S:S with S = ½(A + Aᵀ), A_ij = ∂u_i/∂x_j.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn strain2<T: Real>(g: &Gradient<T>, out: &mut Vec<T>) {
    let n = g.d[0][0].len();
    out.resize(n, T::ZERO);
    let d: [[&[T]; 3]; 3] = std::array::from_fn(|c| std::array::from_fn(|a| &g.d[c][a][..n]));
    let out = &mut out[..n];
    let half = T::of(0.5);
    for i in 0..n {
        let (xx, yy, zz) = (d[0][0][i], d[1][1][i], d[2][2][i]);
        let (xy, xz, yz) = (d[0][1][i] + d[1][0][i], d[0][2][i] + d[2][0][i], d[1][2][i] + d[2][1][i]);
        out[i] = (xx * xx + yy * yy + zz * zz) + half * (xy * xy + xz * xz + yz * yz);
    }
}

/// Sum of the diagonal.
pub fn divergence<T: Real>(g: &Gradient<T>, out: &mut Vec<T>) {
    let n = g.d[0][0].len();
    out.resize(n, T::ZERO);
    let [x, y, z] = [&g.d[0][0][..n], &g.d[1][1][..n], &g.d[2][2][..n]];
    let out = &mut out[..n];
    for i in 0..n {
        out[i] = x[i] + y[i] + z[i];
    }
}

/// Right-handed curl and its square.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn curl<T: Real>(g: &Gradient<T>, out: &mut [Vec<T>; 3], square: &mut Vec<T>) {
    let n = g.d[0][0].len();
    for o in out.iter_mut() {
        o.resize(n, T::ZERO);
    }
    square.resize(n, T::ZERO);
    let d: [[&[T]; 3]; 3] = std::array::from_fn(|c| std::array::from_fn(|a| &g.d[c][a][..n]));
    let [ox, oy, oz] = out;
    let (ox, oy, oz, square) = (&mut ox[..n], &mut oy[..n], &mut oz[..n], &mut square[..n]);
    for i in 0..n {
        let x = d[2][1][i] - d[1][2][i];
        let y = d[0][2][i] - d[2][0][i];
        let z = d[1][0][i] - d[0][1][i];
        ox[i] = x;
        oy[i] = y;
        oz[i] = z;
        square[i] = x * x + y * y + z * z;
    }
}
