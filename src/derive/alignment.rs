//! Cosine, squared cross product and product of squares of two vectors along one row.

use crate::base::real::Real;

/// `cosine` = a·b/|a||b|, NaN where a vector is zero; `squares` = (|a×b|², |a|²|b|²) where asked for.
///
/// The cross product is formed component by component: for parallel vectors it is zero to round-off squared, which
/// |a|²|b|² − (a·b)² is not.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn pair<T: Real>(a: &[Vec<T>; 3], b: &[Vec<T>; 3], cosine: &mut Vec<T>, squares: Option<(&mut Vec<T>, &mut Vec<T>)>) {
    let n = a[0].len();
    let [ax, ay, az] = [&a[0][..n], &a[1][..n], &a[2][..n]];
    let [bx, by, bz] = [&b[0][..n], &b[1][..n], &b[2][..n]];
    cosine.resize(n, T::ZERO);
    let cosine = &mut cosine[..n];
    for i in 0..n {
        let aa = ax[i] * ax[i] + ay[i] * ay[i] + az[i] * az[i];
        let bb = bx[i] * bx[i] + by[i] * by[i] + bz[i] * bz[i];
        let ab = ax[i] * bx[i] + ay[i] * by[i] + az[i] * bz[i];
        // 0/0 marks a cell without a direction.
        cosine[i] = ab / (aa.sqrt() * bb.sqrt());
    }
    if let Some((cross2, product)) = squares {
        cross2.resize(n, T::ZERO);
        product.resize(n, T::ZERO);
        let (cross2, product) = (&mut cross2[..n], &mut product[..n]);
        for i in 0..n {
            let cx = ay[i] * bz[i] - az[i] * by[i];
            let cy = az[i] * bx[i] - ax[i] * bz[i];
            let cz = ax[i] * by[i] - ay[i] * bx[i];
            cross2[i] = cx * cx + cy * cy + cz * cz;
            let aa = ax[i] * ax[i] + ay[i] * ay[i] + az[i] * az[i];
            let bb = bx[i] * bx[i] + by[i] * by[i] + bz[i] * bz[i];
            product[i] = aa * bb;
        }
    }
}

/// |a×b| / |a||b|, 0 where a vector is zero.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn sine<T: Real>(a: &[Vec<T>; 3], b: &[Vec<T>; 3], out: &mut Vec<T>) {
    let n = a[0].len();
    let [ax, ay, az] = [&a[0][..n], &a[1][..n], &a[2][..n]];
    let [bx, by, bz] = [&b[0][..n], &b[1][..n], &b[2][..n]];
    let one = T::of(1.0);
    out.resize(n, T::ZERO);
    let out = &mut out[..n];
    for i in 0..n {
        let cx = ay[i] * bz[i] - az[i] * by[i];
        let cy = az[i] * bx[i] - ax[i] * bz[i];
        let cz = ax[i] * by[i] - ay[i] * bx[i];
        let aa = ax[i] * ax[i] + ay[i] * ay[i] + az[i] * az[i];
        let bb = bx[i] * bx[i] + by[i] * by[i] + bz[i] * bz[i];
        let lengths = aa.sqrt() * bb.sqrt();
        let cross = (cx * cx + cy * cy + cz * cz).sqrt();
        // Rounding may leave it above 1.
        out[i] = if lengths > T::ZERO { (cross / lengths).lesser(one) } else { T::ZERO };
    }
}

/// a·b along one row.
pub fn dot<T: Real>(a: &[Vec<T>; 3], b: &[Vec<T>; 3], out: &mut Vec<T>) {
    out.clear();
    out.extend((0..a[0].len()).map(|i| a[0][i] * b[0][i] + a[1][i] * b[1][i] + a[2][i] * b[2][i]));
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn right_angle_parallel_and_undefined() {
        let a = [vec![1.0, 2.0, 0.0], vec![0.0, 0.0, 0.0], vec![0.0, 1.0, 0.0]];
        let b = [vec![0.0, 4.0, 1.0], vec![3.0, 0.0, 0.0], vec![0.0, 2.0, 0.0]];
        let (mut c, mut x, mut p) = (Vec::new(), Vec::new(), Vec::new());
        pair(&a, &b, &mut c, Some((&mut x, &mut p)));
        assert_eq!(c[0], 0.0);
        assert!((c[1] - 1.0f64).abs() < 1e-15);
        assert!(c[2].is_nan());
        assert_eq!((x[0], p[0]), (9.0, 9.0));
        assert_eq!(x[1], 0.0);
        let mut s = Vec::new();
        sine(&a, &b, &mut s);
        assert_eq!(s, [1.0, 0.0, 0.0]);
    }
}
