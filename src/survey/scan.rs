//! Raw planes: hash, NaN and infinite cells, sums and extremes of every component.

use crate::base::real::Real;
use crate::math::stats::{row_stats, weighted_square_sum, weighted_sum};
use crate::model::statistics::{ComponentStats, Scan};
use crate::space::grid::Grid;

/// How many bad cells are located.
const LOCATED: usize = 5;

/// What one plane holds.
pub struct PlaneScan {
    hash: blake3::Hash,
    components: Vec<ComponentStats>,
    not_finite: u64,
    first: Vec<(usize, [usize; 3])>,
}

impl PlaneScan {
    /// Whether every value is finite.
    pub fn is_finite(&self) -> bool {
        self.not_finite == 0
    }
}

/// Scans plane `z`, one slice a component, x fastest.
pub fn plane<T: Real>(grid: &Grid, z: usize, components: &[&[T]]) -> PlaneScan {
    let mut weights = Vec::new();
    let mut hasher = blake3::Hasher::new();
    let mut out = PlaneScan { hash: hasher.finalize(), components: Vec::new(), not_finite: 0, first: Vec::new() };
    for (c, values) in components.iter().enumerate() {
        hasher.update(bytemuck::cast_slice(values));
        let mut s = ComponentStats { sum: 0.0, square_sum: 0.0, min: f64::INFINITY, max: f64::NEG_INFINITY };
        for (y, row) in values.chunks_exact(grid.n[0]).enumerate() {
            let r = row_stats(row);
            grid.relative_weights(0..row.len(), y, z, &mut weights);
            s.sum += if weights.is_empty() { r.sum } else { weighted_sum(row, &weights) };
            s.square_sum += if weights.is_empty() { r.square_sum } else { weighted_square_sum(row, &weights) };
            // A NaN or infinite value makes the row's sum so; a finite sum can only hide an overflow of f64.
            if !r.sum.is_finite() {
                for x in (0..row.len()).filter(|&x| !row[x].is_finite()) {
                    out.not_finite += 1;
                    if out.first.len() < LOCATED {
                        out.first.push((c, [x, y, z]));
                    }
                }
            }
            s.min = s.min.min(r.min);
            s.max = s.max.max(r.max);
        }
        out.components.push(s);
    }
    out.hash = hasher.finalize();
    out
}

/// Gathers planes in plane order.
pub struct ScanSum {
    hasher: blake3::Hasher,
    scan: Scan,
}

impl ScanSum {
    /// A sum for a grid and precision; both go into the digest, which is thereby the digest of the snapshot as decoded.
    pub fn new<T: Real>(grid: &Grid, components: usize) -> ScanSum {
        let mut hasher = blake3::Hasher::new();
        hasher.update(format!("{} {:?} {components}\n", T::NAME, grid.n).as_bytes());
        let none = ComponentStats { sum: 0.0, square_sum: 0.0, min: f64::INFINITY, max: f64::NEG_INFINITY };
        ScanSum { hasher, scan: Scan { components: vec![none; components], ..Scan::default() } }
    }

    /// Adds the next plane.
    pub fn add(&mut self, plane: &PlaneScan) {
        self.hasher.update(plane.hash.as_bytes());
        self.scan.not_finite += plane.not_finite;
        let room = LOCATED - self.scan.first_not_finite.len();
        self.scan.first_not_finite.extend(plane.first.iter().take(room));
        for (a, b) in self.scan.components.iter_mut().zip(&plane.components) {
            a.sum += b.sum;
            a.square_sum += b.square_sum;
            a.min = a.min.min(b.min);
            a.max = a.max.max(b.max);
        }
    }

    /// The result.
    pub fn finish(mut self) -> Scan {
        self.scan.digest = self.hasher.finalize().to_hex().to_string();
        self.scan
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bad_cells_are_counted_and_located() {
        let grid = Grid::periodic([4, 3, 2], [1.0; 3]);
        let mut bad = vec![1.0f32; 12];
        bad[5] = f32::NAN;
        bad[11] = f32::INFINITY;
        let good = vec![2.0f32; 12];
        let mut sum = ScanSum::new::<f32>(&grid, 2);
        sum.add(&plane(&grid, 0, &[&good, &good]));
        sum.add(&plane(&grid, 1, &[&good, &bad]));
        let scan = sum.finish();
        assert_eq!(scan.not_finite, 2);
        assert_eq!(scan.first_not_finite, vec![(1, [1, 1, 1]), (1, [3, 2, 1])]);
        assert_eq!(scan.components[0].sum, 48.0);
        assert_eq!(scan.components[0].square_sum, 96.0);
    }

    #[test]
    fn the_digest_sees_every_value_and_the_shape() {
        let grid = Grid::periodic([4, 3, 1], [1.0; 3]);
        let digest = |grid: &Grid, v: &[f32]| {
            let mut sum = ScanSum::new::<f32>(grid, 1);
            sum.add(&plane(grid, 0, &[v]));
            sum.finish().digest
        };
        let a = vec![1.0f32; 12];
        let mut b = a.clone();
        b[7] = 1.000_000_1;
        assert_ne!(digest(&grid, &a), digest(&grid, &b));
        assert_ne!(digest(&grid, &a), digest(&Grid::periodic([3, 4, 1], [1.0; 3]), &a));
        assert_eq!(digest(&grid, &a), digest(&grid, &a.clone()));
    }
}
