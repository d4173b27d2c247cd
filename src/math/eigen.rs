//! The middle eigenvalue of symmetric 3×3 matrices, several at once.

/// Matrices worked on together.
pub const LANES: usize = 32;

/// Sweeps over the three off-diagonal elements. Convergence is quadratic: four reach the precision of f64 for any matrix a test
/// could find, the fifth is to spare.
const SWEEPS: usize = 5;

/// The middle eigenvalues of the matrices with the elements `[xx, yy, zz, xy, xz, yz]`, element by lane.
///
/// Jacobi's rotations, whose error is that of rounding the matrix itself, near double eigenvalues too, where a root of the
/// characteristic polynomial keeps half of the digits. There is no branch, so that lanes share their instructions.
///
/// # References
/// G. H. Golub & C. F. Van Loan, Matrix Computations, 4th ed. (2013), §8.5.
#[inline(always)]
pub fn middle([mut xx, mut yy, mut zz, mut xy, mut xz, mut yz]: [[f64; LANES]; 6]) -> [f64; LANES] {
    for _ in 0..SWEEPS {
        rotate(&mut xx, &mut yy, &mut xy, &mut xz, &mut yz);
        rotate(&mut xx, &mut zz, &mut xz, &mut xy, &mut yz);
        rotate(&mut yy, &mut zz, &mut yz, &mut xy, &mut xz);
    }
    std::array::from_fn(|l| {
        let (low, high) = (xx[l].min(yy[l]), xx[l].max(yy[l]));
        low.max(high.min(zz[l]))
    })
}

/// h(t) = 2 sin(π/6 − ⅔ asin t) for 0 ≤ t ≤ √½ as a polynomial in 2√2 t − 1: interpolated at Chebyshev nodes, to 3e-10.
const SINE: [f64; 15] = [
    5.578_746_983e-1,
    -4.839_504_009e-1,
    -5.227_819_452e-2,
    -1.386_969_954e-2,
    -4.689_541_724e-3,
    -1.786_300_271e-3,
    -7.303_807_830e-4,
    -3.093_655_986e-4,
    -1.370_499_698e-4,
    -7.168_292_672e-5,
    -3.360_247_861e-5,
    -3.712_635_000e-6,
    -1.550_061_861e-6,
    -8.837_907_808e-6,
    -4.378_700_366e-6,
];

/// As [`middle`] at an eighth of its cost, to 5e-8 of the largest eigenvalue: enough for elements known in single precision.
///
/// With the mean m of the eigenvalues and their spread p, the middle one is m − 2p sin(⅓ asin r), r = det((M − m)/p)/2. By
/// t = √((1 − |r|)/2) the sine becomes h(t), smooth where r is ±1, two eigenvalues being equal.
#[inline(always)]
pub fn middle_single([xx, yy, zz, xy, xz, yz]: [[f64; LANES]; 6]) -> [f64; LANES] {
    let (mut mean, mut spread, mut sign, mut s) = ([0.0; LANES], [0.0; LANES], [0.0f64; LANES], [0.0; LANES]);
    for l in 0..LANES {
        let m = (xx[l] + yy[l] + zz[l]) / 3.0;
        let (a, b, c) = (xx[l] - m, yy[l] - m, zz[l] - m);
        let off = xy[l] * xy[l] + xz[l] * xz[l] + yz[l] * yz[l];
        let p = ((a * a + b * b + c * c + 2.0 * off) / 6.0).sqrt();
        let inverse = 1.0 / p.max(f64::MIN_POSITIVE);
        let (a, b, c, f, g, h) = (a * inverse, b * inverse, c * inverse, xy[l] * inverse, xz[l] * inverse, yz[l] * inverse);
        let r = 0.5 * (a * (b * c - h * h) - f * (f * c - h * g) + g * (f * h - b * g));
        let t = (0.5 * (1.0 - r.abs()).max(0.0)).sqrt();
        mean[l] = m;
        spread[l] = p;
        sign[l] = r;
        s[l] = 8f64.sqrt() * t - 1.0;
    }
    let mut out = [0.0; LANES];
    for l in 0..LANES {
        let mut value = SINE[SINE.len() - 1];
        for k in (0..SINE.len() - 1).rev() {
            value = value * s[l] + SINE[k];
        }
        out[l] = mean[l] - spread[l] * value.copysign(sign[l]);
    }
    out
}

/// Makes the element `pq` zero; `rp` and `rq` are those that p and q share with the third axis.
#[inline(always)]
fn rotate(pp: &mut [f64; LANES], qq: &mut [f64; LANES], pq: &mut [f64; LANES], rp: &mut [f64; LANES], rq: &mut [f64; LANES]) {
    for l in 0..LANES {
        let (difference, twice) = (qq[l] - pp[l], 2.0 * pq[l]);
        let root = (difference * difference + twice * twice).sqrt();
        let tangent = twice.copysign(twice * difference) / (difference.abs() + root).max(f64::MIN_POSITIVE);
        let cosine = 1.0 / (1.0 + tangent * tangent).sqrt();
        let sine = tangent * cosine;
        pp[l] -= tangent * pq[l];
        qq[l] += tangent * pq[l];
        pq[l] = 0.0;
        (rp[l], rq[l]) = (cosine * rp[l] - sine * rq[l], sine * rp[l] + cosine * rq[l]);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Rᵀ diag(e) R for the rotation by `angle` about `axis` (Rodrigues' formula).
    fn turned(e: [f64; 3], axis: [f64; 3], angle: f64) -> [f64; 6] {
        let length = axis.iter().map(|a| a * a).sum::<f64>().sqrt();
        let [x, y, z] = axis.map(|a| a / length);
        let (s, c) = angle.sin_cos();
        let v = 1.0 - c;
        let r = [
            [c + x * x * v, x * y * v - z * s, x * z * v + y * s],
            [y * x * v + z * s, c + y * y * v, y * z * v - x * s],
            [z * x * v - y * s, z * y * v + x * s, c + z * z * v],
        ];
        let at = |i: usize, j: usize| (0..3).map(|k| r[k][i] * e[k] * r[k][j]).sum::<f64>();
        [at(0, 0), at(1, 1), at(2, 2), at(0, 1), at(0, 2), at(1, 2)]
    }

    fn one(m: [f64; 6]) -> f64 {
        let out = middle(m.map(|v| [v; LANES]));
        assert!(out.iter().all(|&v| v.to_bits() == out[0].to_bits()));
        out[0]
    }

    fn one_single(m: [f64; 6]) -> f64 {
        middle_single(m.map(|v| [v; LANES]))[LANES - 1]
    }

    /// Matrices made of known eigenvalues, double and nearly double ones among them.
    #[test]
    fn known_eigenvalues_come_back_to_rounding() {
        let near = 1e-9;
        let sets = [
            [1.0, 2.0, 3.0],
            [-1.0, -1.0, 2.0],
            [1.0, 1.0, -2.0],
            [0.0, 0.0, 1.0],
            [1.0, 1.0 + near, -2.0],
            [-1.0, -1.0 + near, 1e-4],
            [0.0, 1e-12, 1.0],
            [5.0, 5.0, 5.0],
            [-3.0, 0.0, 3.0],
            [1e-30, 2e-30, -3e-30],
            [1e20, -3e20, 2e20],
        ];
        for set in sets {
            for k in 0..200 {
                let t = f64::from(k);
                let m = turned(set, [t.sin(), (1.7 * t).cos(), (0.3 * t).sin() + 0.1], 0.37 * t);
                let mut sorted = set;
                sorted.sort_by(f64::total_cmp);
                let size = set.iter().fold(0.0f64, |a, v| a.max(v.abs()));
                assert!((one(m) - sorted[1]).abs() < 4e-15 * size, "{set:?}, turn {k}: {:e}", one(m) - sorted[1]);
                assert!((one_single(m) - sorted[1]).abs() < 5e-8 * size, "{set:?}, turn {k}: {:e}", one_single(m) - sorted[1]);
            }
        }
    }

    /// The polynomial against the function it stands for (definition).
    #[test]
    fn the_sine_is_interpolated_to_3e_10() {
        for i in 0..=4000 {
            let t = f64::from(i) / 4000.0 * 0.5f64.sqrt();
            let found = SINE.iter().rev().fold(0.0, |v, c| v * (8f64.sqrt() * t - 1.0) + c);
            let wanted = 2.0 * (std::f64::consts::FRAC_PI_6 - 2.0 / 3.0 * t.asin()).sin();
            assert!((found - wanted).abs() < 3e-10, "{t}: {found}, {wanted}");
        }
    }

    #[test]
    fn nothing_and_diagonals_are_exact() {
        assert_eq!((one([0.0; 6]), one_single([0.0; 6])), (0.0, 0.0));
        assert_eq!(one([3.0, -1.0, 2.0, 0.0, 0.0, 0.0]), 2.0);
    }
}
