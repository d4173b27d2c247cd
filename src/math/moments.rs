//! Second moments of a set of cells as exact integers, and principal axes of a symmetric 3 x 3 matrix.

/// Sums over cells of 1, x_a and x_a x_b in integer cell coordinates: exact for any order of cells.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct CellMoments {
    /// Number of cells.
    pub count: u64,
    /// Sums of x, y, z.
    pub first: [i128; 3],
    /// Sums of xx, yy, zz, xy, xz, yz.
    pub second: [i128; 6],
}

/// The pairs of axes of `CellMoments::second`.
const PAIRS: [(usize, usize); 6] = [(0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2)];

impl CellMoments {
    /// Adds the cells `x0..x0 + len` of row (y, z).
    pub fn add_run(&mut self, x0: i64, len: u32, y: i64, z: i64) {
        let n = i128::from(len);
        let (x0, y, z) = (i128::from(x0), i128::from(y), i128::from(z));
        // Sum of i and of i^2 for i in 0..n.
        let s1 = n * (n - 1) / 2;
        let s2 = (n - 1) * n * (2 * n - 1) / 6;
        let sx = n * x0 + s1;
        let sxx = n * x0 * x0 + 2 * x0 * s1 + s2;
        self.count += u64::from(len);
        self.first[0] += sx;
        self.first[1] += n * y;
        self.first[2] += n * z;
        let add = [sxx, n * y * y, n * z * z, sx * y, sx * z, n * y * z];
        for (s, a) in self.second.iter_mut().zip(add) {
            *s += a;
        }
    }

    /// The same cells moved by `shift` cells.
    #[must_use]
    pub fn shifted(&self, shift: [i64; 3]) -> CellMoments {
        let n = i128::from(self.count);
        let d = shift.map(i128::from);
        let mut out = *self;
        for (k, (a, b)) in PAIRS.into_iter().enumerate() {
            out.second[k] += d[a] * self.first[b] + d[b] * self.first[a] + n * d[a] * d[b];
        }
        for a in 0..3 {
            out.first[a] += n * d[a];
        }
        out
    }

    /// Adds other cells.
    pub fn merge(&mut self, other: &CellMoments) {
        self.count += other.count;
        for (a, b) in self.first.iter_mut().zip(other.first) {
            *a += b;
        }
        for (a, b) in self.second.iter_mut().zip(other.second) {
            *a += b;
        }
    }

    /// Mean position in cells.
    pub fn centre(&self) -> [f64; 3] {
        // Whole cells first: keeps full precision far from the origin.
        let n = i128::from(self.count);
        self.first.map(|s| s.div_euclid(n) as f64 + s.rem_euclid(n) as f64 / n as f64)
    }

    /// Covariance of positions (unit weight a cell) in physical units, each cell counted as a solid box:
    /// its own second moment, spacing^2 / 12, is included, so a brick of k cells has extent √(12 m) = k spacings.
    pub fn covariance(&self, spacing: [f64; 3]) -> [[f64; 3]; 3] {
        let n = i128::from(self.count);
        let mut c = [[0.0; 3]; 3];
        for (k, (a, b)) in PAIRS.into_iter().enumerate() {
            // n * sum xy - sum x * sum y is an exact integer: no cancellation. Taken about the integer mean so
            // that it also fits for the largest objects.
            let (ca, cb) = (self.first[a].div_euclid(n), self.first[b].div_euclid(n));
            let sab = self.second[k] - ca * self.first[b] - cb * self.first[a] + n * ca * cb;
            let (ra, rb) = (self.first[a] - n * ca, self.first[b] - n * cb);
            let n_f = n as f64;
            let v = (sab as f64 - ra as f64 * (rb as f64 / n_f)) / n_f * spacing[a] * spacing[b];
            c[a][b] = v;
            c[b][a] = v;
        }
        for a in 0..3 {
            c[a][a] += spacing[a] * spacing[a] / 12.0;
        }
        c
    }
}

/// Sums over cells of unequal volume: of the weight w, of w x_a and of w x_a x_b, with positions in box lengths.
///
/// Fixed-point integers of scale 2^60, so that sums are the same for any order of cells; weights and positions inside the box lie
/// between 0 and 1.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct WeightedMoments {
    /// Sum of weights.
    weight: i128,
    first: [i128; 3],
    second: [i128; 6],
}

/// Scale of [`WeightedMoments`].
const ONE: f64 = (1u64 << 60) as f64;

impl WeightedMoments {
    /// Adds a cell: its weight, its position, and its own second moment (width²/12), in box lengths.
    pub fn add_cell(&mut self, weight: f64, x: [f64; 3], own: [f64; 3]) {
        let fixed = |v: f64| i128::from((v * ONE) as i64);
        self.weight += fixed(weight);
        for a in 0..3 {
            self.first[a] += fixed(weight * x[a]);
        }
        for (s, (a, b)) in self.second.iter_mut().zip(PAIRS) {
            let square = x[a] * x[b] + if a == b { own[a] } else { 0.0 };
            *s += fixed(weight * square);
        }
    }

    /// The same cells moved by whole boxes.
    #[must_use]
    pub fn shifted(&self, boxes: [i32; 3]) -> WeightedMoments {
        let d = boxes.map(i128::from);
        let mut out = *self;
        for (k, (a, b)) in PAIRS.into_iter().enumerate() {
            out.second[k] += d[a] * self.first[b] + d[b] * self.first[a] + self.weight * d[a] * d[b];
        }
        for a in 0..3 {
            out.first[a] += self.weight * d[a];
        }
        out
    }

    /// Adds other cells.
    pub fn merge(&mut self, other: &WeightedMoments) {
        self.weight += other.weight;
        for (a, b) in self.first.iter_mut().zip(other.first) {
            *a += b;
        }
        for (a, b) in self.second.iter_mut().zip(other.second) {
            *a += b;
        }
    }

    /// Sum of weights.
    pub fn weight(&self) -> f64 {
        self.weight as f64 / ONE
    }

    /// Mean position in box lengths.
    pub fn centre(&self) -> [f64; 3] {
        self.first.map(|s| s as f64 / self.weight as f64)
    }

    /// Covariance of positions in physical units for the given box lengths, the cells' own moments included.
    pub fn covariance(&self, lengths: [f64; 3]) -> [[f64; 3]; 3] {
        let centre = self.centre();
        let mut c = [[0.0; 3]; 3];
        for (k, (a, b)) in PAIRS.into_iter().enumerate() {
            let v = (self.second[k] as f64 / self.weight as f64 - centre[a] * centre[b]) * lengths[a] * lengths[b];
            c[a][b] = v;
            c[b][a] = v;
        }
        c
    }
}

/// Eigenvalues (largest first) and unit eigenvectors of a symmetric matrix, by Jacobi rotations.
///
/// The sign of an axis is fixed: its component of largest magnitude is positive.
pub fn principal_axes(matrix: [[f64; 3]; 3]) -> ([f64; 3], [[f64; 3]; 3]) {
    let mut a = matrix;
    let mut v = [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]];
    for _ in 0..64 {
        let off = a[0][1] * a[0][1] + a[0][2] * a[0][2] + a[1][2] * a[1][2];
        let diagonal = a[0][0] * a[0][0] + a[1][1] * a[1][1] + a[2][2] * a[2][2];
        if off <= 1e-34 * diagonal || off == 0.0 {
            break;
        }
        for (p, q) in [(0, 1), (0, 2), (1, 2)] {
            if a[p][q] == 0.0 {
                continue;
            }
            let theta = (a[q][q] - a[p][p]) / (2.0 * a[p][q]);
            let t = theta.signum() / (theta.abs() + (theta * theta + 1.0).sqrt());
            let c = 1.0 / (t * t + 1.0).sqrt();
            let s = t * c;
            for k in 0..3 {
                let (kp, kq) = (a[k][p], a[k][q]);
                a[k][p] = c * kp - s * kq;
                a[k][q] = s * kp + c * kq;
            }
            for k in 0..3 {
                let (pk, qk) = (a[p][k], a[q][k]);
                a[p][k] = c * pk - s * qk;
                a[q][k] = s * pk + c * qk;
            }
            for row in &mut v {
                let (p0, q0) = (row[p], row[q]);
                row[p] = c * p0 - s * q0;
                row[q] = s * p0 + c * q0;
            }
        }
    }
    let mut order = [0, 1, 2];
    order.sort_by(|&i, &j| a[j][j].total_cmp(&a[i][i]).then(i.cmp(&j)));
    let axes = order.map(|i| {
        let e = [v[0][i], v[1][i], v[2][i]];
        let lead = (0..3).max_by(|&p, &q| e[p].abs().total_cmp(&e[q].abs()).then(q.cmp(&p))).unwrap_or(0);
        if e[lead] < 0.0 { e.map(|c| -c) } else { e }
    });
    (order.map(|i| a[i][i]), axes)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Equal weights must give what the integer sums give.
    #[test]
    fn weighted_moments_of_equal_cells_are_the_plain_ones() {
        let (mut plain, mut weighted) = (CellMoments::default(), WeightedMoments::default());
        for (x, y, z) in [(1, 2, 3), (2, 2, 3), (2, 3, 3), (3, 3, 4), (3, 4, 5)] {
            plain.add_run(x, 1, y, z);
            let at = [x, y, z].map(|i| i as f64 / 16.0);
            weighted.add_cell(0.25, at, [1.0 / 12.0 / 256.0; 3]);
        }
        let moved = weighted.shifted([1, 0, -2]);
        let (a, b) = (plain.shifted([16, 0, -32]).covariance([0.5; 3]), moved.covariance([8.0; 3]));
        for i in 0..3 {
            assert!((plain.shifted([16, 0, -32]).centre()[i] / 16.0 - moved.centre()[i]).abs() < 1e-14);
            for j in 0..3 {
                assert!((a[i][j] - b[i][j]).abs() < 1e-12, "{i}{j}: {} {}", a[i][j], b[i][j]);
            }
        }
        assert!((moved.weight() - 1.25).abs() < 1e-15);
    }

    #[test]
    fn a_brick_has_its_own_extents_wherever_it_lies() {
        let mut m = CellMoments::default();
        for z in 0..3 {
            for y in 0..5 {
                m.add_run(7, 11, y, z);
            }
        }
        let far = m.shifted([4_000_000, -123, 77]);
        let c = far.covariance([0.1, 0.2, 0.4]);
        let extent: Vec<f64> = (0..3).map(|a| (12.0 * c[a][a]).sqrt()).collect();
        for (got, want) in extent.iter().zip([1.1, 1.0, 1.2]) {
            assert!((got - want).abs() < 1e-12, "{got} {want}");
        }
        assert_eq!(far.centre(), [4_000_012.0, -121.0, 78.0]);
        assert!(c[0][1].abs() < 1e-15);
    }

    #[test]
    fn axes_of_a_tilted_matrix() {
        // diag(9, 4, 1) rotated by 30 degrees about z.
        let (s, c) = (0.5f64, 0.75f64.sqrt());
        let m = [[9.0 * c * c + 4.0 * s * s, 5.0 * c * s, 0.0], [5.0 * c * s, 9.0 * s * s + 4.0 * c * c, 0.0], [0.0, 0.0, 1.0]];
        let (e, axes) = principal_axes(m);
        for (got, want) in e.iter().zip([9.0, 4.0, 1.0]) {
            assert!((got - want).abs() < 1e-14);
        }
        assert!((axes[0][0] - c).abs() < 1e-14 && (axes[0][1] - s).abs() < 1e-14);
        assert!((axes[2][2] - 1.0).abs() < 1e-14);
    }

    #[test]
    fn equal_eigenvalues_and_zero_matrix_are_no_trouble() {
        let (e, axes) = principal_axes([[2.0, 0.0, 0.0], [0.0, 2.0, 0.0], [0.0, 0.0, 2.0]]);
        assert_eq!(e, [2.0; 3]);
        assert_eq!(axes[0], [1.0, 0.0, 0.0]);
        assert_eq!(principal_axes([[0.0; 3]; 3]).0, [0.0; 3]);
    }
}
