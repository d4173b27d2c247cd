//! Power of sampled lines along each periodic axis, and what part of the gradients a derivative scheme leaves out.

use std::f64::consts::TAU;

use crate::base::par;
use crate::base::real::Real;
use crate::math::lines::{LinePower, LineScratch};
use crate::math::scheme::{Scheme, modified_wavenumber};
use crate::model::source::Fields;
use crate::model::statistics::{GradientLoss, LineSpectra};
use crate::space::grid::Grid;
use crate::space::slab::Block;

/// Every how many lines, along both axes across them, one is sampled, where that gives neither too many nor too few.
const STRIDE: usize = 8;
/// Lines of a component and axis at most.
const MOST_LINES: usize = 1024;
/// Fewer are not left, where there are as many: small boxes are sampled more densely.
const FEWEST_LINES: usize = 512;
/// Values of a component that are kept for its z-lines at most.
const MOST_VALUES: usize = 1 << 20;
/// Power of the changes along lines, over that of their mean, that transforms in double precision make of constants.
const ROUNDING: f64 = 1e-28;
/// z-lines transformed by one worker in a row; their power is added group by group.
const GROUP: usize = 16;

/// Adds up the power of lines, block by block.
///
/// Lines are chosen by their indices alone, and their power is added in the order of planes: the result is the same for any blocks
/// and threads.
pub struct SpectraSum<T> {
    n: [usize; 3],
    components: usize,
    /// Where the axis is periodic: its transform, and the strides of its lines along the other two axes in the order x, y, z.
    axes: [Option<(LinePower, [usize; 2])>; 3],
    power: Vec<[Vec<f64>; 3]>,
    lines: [u64; 3],
    /// z-lines so far, plane by plane; one array a component.
    columns: Vec<Vec<T>>,
}

/// Strides that sample lines across axes of `a` and `b` samples.
fn strides(a: usize, b: usize, most: usize) -> [usize; 2] {
    let count = |s: usize| a.div_ceil(s) * b.div_ceil(s);
    let mut s = STRIDE;
    while count(s) > most.max(1) {
        s += 1;
    }
    while s > 1 && count(s) < FEWEST_LINES && count(s - 1) <= most.max(1) {
        s -= 1;
    }
    [s, s]
}

/// First line of a plane: shifted from plane to plane, so that lines do not stand behind each other.
fn shift(z: usize, strides: [usize; 2]) -> usize {
    z / strides[1] * 3 % strides[0]
}

impl<T: Real> SpectraSum<T> {
    /// A sum for a grid with so many components.
    pub fn new(grid: &Grid, components: usize) -> Self {
        let n = grid.n;
        let axes: [_; 3] = std::array::from_fn(|a| {
            let across = [[1, 2], [0, 2], [0, 1]][a];
            let most = if a == 2 { MOST_LINES.min(MOST_VALUES / n[2]) } else { MOST_LINES };
            let lines = || (LinePower::new(n[a]), strides(n[across[0]], n[across[1]], most));
            (grid.periodic[a] && n[a] > 1).then(lines)
        });
        let length = |a: usize| if axes[a].is_some() { n[a] / 2 + 1 } else { 0 };
        let power = vec![std::array::from_fn(|a| vec![0.0; length(a)]); components];
        SpectraSum { n, components, axes, power, lines: [0; 3], columns: vec![Vec::new(); components] }
    }

    /// Adds the planes of the next block.
    pub fn add(&mut self, block: &Block<'_, T>) {
        let [nx, ny, _] = self.n;
        for (a, across) in [(0, ny), (1, nx)] {
            let Some((power, strides)) = &self.axes[a] else { continue };
            let planes: Vec<usize> = block.z.clone().filter(|z| z % strides[1] == 0).collect();
            let length = self.n[a] / 2 + 1;
            let parts = par::map_range(planes.len() * self.components, |i| {
                let z = planes[i / self.components];
                let plane = block.plane(i % self.components, z as isize);
                let mut sum = vec![0.0; length];
                let mut lines = Vec::new();
                for at in (shift(z, *strides)..across).step_by(strides[0]) {
                    if a == 0 {
                        lines.extend(plane[at * nx..(at + 1) * nx].iter().map(|v| v.wide()));
                    } else {
                        lines.extend(plane[at..].iter().step_by(nx).map(|v| v.wide()));
                    }
                }
                power.add(&lines, &mut sum, &mut LineScratch::default());
                sum
            });
            for (i, part) in parts.iter().enumerate() {
                add(&mut self.power[i % self.components][a], part);
            }
            self.lines[a] += planes.iter().map(|&z| (across - shift(z, *strides)).div_ceil(strides[0]) as u64).sum::<u64>();
        }
        if let Some((_, strides)) = &self.axes[2] {
            for z in block.z.clone() {
                for (c, columns) in self.columns.iter_mut().enumerate() {
                    for row in block.plane(c, z as isize).chunks_exact(nx).step_by(strides[1]) {
                        columns.extend(row.iter().step_by(strides[0]));
                    }
                }
            }
        }
    }

    /// Means over the lines.
    pub fn finish(mut self) -> LineSpectra {
        if let Some((power, strides)) = &self.axes[2] {
            let nz = self.n[2];
            let lines = self.n[0].div_ceil(strides[0]) * self.n[1].div_ceil(strides[1]);
            let groups = lines.div_ceil(GROUP);
            let columns = &self.columns;
            // Without a whole box there is no line; the pass stopped at a bad cell.
            if columns.iter().all(|c| c.len() == lines * nz) {
                let parts = par::map_range(groups * self.components, |i| {
                    let (component, group) = (&columns[i / groups], i % groups);
                    let mut sum = vec![0.0; nz / 2 + 1];
                    let mut together = Vec::new();
                    for at in group * GROUP..((group + 1) * GROUP).min(lines) {
                        together.extend(component[at..].iter().step_by(lines).map(|v| v.wide()));
                    }
                    power.add(&together, &mut sum, &mut LineScratch::default());
                    sum
                });
                for (i, part) in parts.iter().enumerate() {
                    add(&mut self.power[i / groups][2], part);
                }
                self.lines[2] = lines as u64;
            }
        }
        let (lines, axes) = (self.lines, &self.axes);
        let mean = |a: usize, sum: Vec<f64>| {
            let there = axes[a].is_some() && lines[a] > 0;
            there.then(|| sum.into_iter().map(|p| p / lines[a] as f64).collect())
        };
        LineSpectra { power: self.power.into_iter().map(|[x, y, z]| [mean(0, x), mean(1, y), mean(2, z)]).collect() }
    }
}

fn add(into: &mut [f64], part: &[f64]) {
    for (a, b) in into.iter_mut().zip(part) {
        *a += b;
    }
}

/// What part of the variance of every derivative `scheme` leaves out.
pub fn loss(spectra: &LineSpectra, grid: &Grid, fields: Fields, scheme: Scheme) -> GradientLoss {
    // Lost and whole variance of a derivative; none where all that changes along an axis is rounding.
    let variances = |a: usize, power: &[f64]| -> [f64; 2] {
        if power[1..].iter().sum::<f64>() <= ROUNDING * power[0] {
            return [0.0; 2];
        }
        let unit = TAU / grid.n[a] as f64;
        let mut sums = [0.0; 2];
        for (m, e) in power.iter().enumerate().skip(1) {
            let k = m as f64 * unit;
            let made = modified_wavenumber(scheme, k);
            sums[0] += (k * k - made * made) * e;
            sums[1] += k * k * e;
        }
        sums.map(|s| s / grid.spacing[a].powi(2))
    };
    let share = |[lost, whole]: [f64; 2]| (whole > 0.0).then(|| lost / whole);
    let all: Vec<[Option<[f64; 2]>; 3]> =
        spectra.power.iter().map(|axes| std::array::from_fn(|a| axes[a].as_deref().map(|power| variances(a, power)))).collect();
    let together = |components: &[[Option<[f64; 2]>; 3]]| {
        let sums = components.iter().flatten().flatten();
        share(sums.fold([0.0; 2], |s, v| [s[0] + v[0], s[1] + v[1]]))
    };
    let set = |there: bool, first: usize| all.get(first..first + 3).filter(|_| there).and_then(together);
    GradientLoss {
        velocity: set(fields.velocity, 0),
        magnetic: set(fields.magnetic, fields.first_magnetic()),
        components: all.iter().map(|axes| axes.map(|v| v.and_then(share))).collect(),
    }
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::*;
    use crate::space::slab::Batch;

    const N: [usize; 3] = [24, 40, 33];

    /// Waves with `m` periods along one axis in all components, each with another amplitude.
    fn spectra(axis: usize, m: usize, thickness: usize, periodic: [bool; 3]) -> LineSpectra {
        let grid = Grid::periodic(N, [1.0, 2.0, 3.0]).with_periodic(periodic);
        let wave = |at: usize| 0.5 + (TAU * (m * at) as f64 / N[axis] as f64 + 0.3).cos();
        let mut sum = SpectraSum::new(&grid, 3);
        for z in (0..N[2]).step_by(thickness) {
            let planes = z..(z + thickness).min(N[2]);
            let cells = planes.len() * grid.plane_cells();
            let value = |i: usize| {
                let at = [i % N[0], i / N[0] % N[1], z + i / grid.plane_cells()];
                wave(at[axis])
            };
            let wave = |c| (0..cells).map(|i| f64::from(c + 1) * value(i)).collect::<Vec<f64>>();
            let components = (0..3).map(|c| wave(c).into()).collect();
            let batches = [Batch { first: z as isize, planes: planes.len(), components: Arc::new(components) }];
            sum.add(&Block::new(planes, &batches, grid.plane_cells()));
        }
        sum.finish()
    }

    /// A wave of one wavenumber loses 1 − (k*/k)² of the variance of its derivative, by the definition of k*.
    #[test]
    fn a_wave_loses_what_its_modified_wavenumber_says() {
        let grid = Grid::periodic(N, [1.0, 2.0, 3.0]);
        for axis in 0..3 {
            for m in [1, 5, 9] {
                let s = spectra(axis, m, 7, [true; 3]);
                for (c, power) in s.power.iter().enumerate() {
                    let power = power[axis].as_ref().unwrap();
                    let size = ((c + 1) * (c + 1)) as f64;
                    assert!((power[m] / size - 0.5).abs() < 1e-13 && (power[0] / size - 0.25).abs() < 1e-13);
                }
                for scheme in [Scheme::Fd2, Scheme::Fd8, Scheme::Opt, Scheme::Spectral] {
                    let found = loss(&s, &grid, Fields::VELOCITY, scheme);
                    let k = TAU * m as f64 / N[axis] as f64;
                    let wanted = 1.0 - (modified_wavenumber(scheme, k) / k).powi(2);
                    let there = found.components[2][axis].unwrap();
                    assert!((there - wanted).abs() < 1e-12, "{axis} {m} {scheme:?}: {there}, {wanted}");
                    assert!((found.velocity.unwrap() - wanted).abs() < 1e-12);
                    assert_eq!((found.magnetic, found.components[2][(axis + 1) % 3]), (None, None));
                }
            }
        }
    }

    #[test]
    fn open_axes_tell_nothing_and_blocks_change_no_bit() {
        let whole = spectra(1, 3, 33, [true, false, true]);
        assert!(whole.power.iter().all(|axes| axes[1].is_none() && axes[0].is_some() && axes[2].is_some()));
        for thickness in [1, 2, 5, 16] {
            assert_eq!(spectra(1, 3, thickness, [true, false, true]), whole);
        }
        let grid = Grid::periodic(N, [1.0; 3]).with_periodic([false; 3]);
        let none = loss(&spectra(1, 3, 33, [false; 3]), &grid, Fields::VELOCITY, Scheme::Fd8);
        assert_eq!((none.velocity, none.components[0]), (None, [None; 3]));
    }

    #[test]
    fn lines_are_neither_too_many_nor_too_few() {
        assert_eq!(strides(256, 256, MOST_LINES), [8, 8]);
        for (a, b) in [(9, 9), (64, 64), (4096, 4096), (2048, 1), (100, 3000)] {
            let [s, _] = strides(a, b, MOST_LINES);
            let count = a.div_ceil(s) * b.div_ceil(s);
            assert!(count <= MOST_LINES && (count >= FEWEST_LINES || s == 1), "{a} {b}: {count}");
        }
    }
}
