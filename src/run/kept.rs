//! Indicators of the whole box that stay in memory from the survey to the detection.

use std::ops::Range;

use crate::base::pages::Pages;
use crate::base::real::Real;
use crate::model::request::Family;
use crate::space::grid::Grid;

/// A row of every kept array, with the family that it is an indicator of.
pub type KeptRow<'a, T> = Vec<(usize, &'a mut [T])>;

/// One array for every different indicator.
pub struct Kept<T> {
    n: [usize; 3],
    /// The first family of each array.
    families: Vec<usize>,
    /// The array of each family.
    array: Vec<usize>,
    values: Vec<Pages<T>>,
}

/// The first family of every different indicator, and the place of each family among them.
fn distinct(families: &[Family]) -> (Vec<usize>, Vec<usize>) {
    let first: Vec<usize> = (0..families.len()).filter(|&k| families[..k].iter().all(|f| f.indicator != families[k].indicator)).collect();
    let place = |f: &Family| first.iter().position(|&k| families[k].indicator == f.indicator).unwrap_or(0);
    let array = families.iter().map(place).collect();
    (first, array)
}

/// Bytes that keeping the indicators of families takes.
pub fn kept_bytes(grid: &Grid, families: &[Family], value_bytes: usize) -> u64 {
    grid.cells().saturating_mul((distinct(families).0.len() * value_bytes) as u64)
}

impl<T: Real> Kept<T> {
    /// Room for the indicators of families.
    pub fn new(grid: &Grid, families: &[Family]) -> Kept<T> {
        let (first, array) = distinct(families);
        let cells = grid.plane_cells() * grid.n[2];
        Kept { n: grid.n, values: first.iter().map(|_| Pages::new(cells)).collect(), families: first, array }
    }

    /// The rows of the planes `z`, tile by tile, in the order z, y.
    pub fn rows(&mut self, z: Range<usize>, tiles: &[Range<usize>]) -> Vec<Vec<KeptRow<'_, T>>> {
        let [nx, ny, _] = self.n;
        let mut out: Vec<Vec<KeptRow<'_, T>>> =
            tiles.iter().map(|t| (0..t.len() * z.len()).map(|_| Vec::with_capacity(self.families.len())).collect()).collect();
        for (values, &family) in self.values.iter_mut().zip(&self.families) {
            let mut rows = values[z.start * ny * nx..z.end * ny * nx].chunks_exact_mut(nx);
            for k in 0..z.len() {
                for (t, tile) in tiles.iter().enumerate() {
                    for y in 0..tile.len() {
                        if let Some(row) = rows.next() {
                            out[t][k * tile.len() + y].push((family, row));
                        }
                    }
                }
            }
        }
        out
    }

    /// Row (y, z) of a family's indicator.
    pub fn row(&self, family: usize, y: usize, z: usize) -> &[T] {
        let [nx, ny, _] = self.n;
        let at = (z * ny + y) * nx;
        &self.values[self.array[family]][at..at + nx]
    }
}
