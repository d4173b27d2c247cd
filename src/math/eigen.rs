//! The middle eigenvalue of symmetric 3×3 matrices, several at once.

/// Matrices worked on together.
pub const LANES: usize = 8;

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
            }
        }
    }

    #[test]
    fn nothing_and_diagonals_are_exact() {
        assert_eq!(one([0.0; 6]), 0.0);
        assert_eq!(one([3.0, -1.0, 2.0, 0.0, 0.0, 0.0]), 2.0);
    }
}
