//! A part of the box: settled against the grid, then read as a layer of its own.

use std::ops::Range;

use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::read::layers::Layer;
use crate::read::order::Window;
use crate::read::spec::Stretch;
use crate::space::grid::Grid;

const WHAT: &str = "cannot cut the region";
/// Share of a spacing by which a sample may miss a limit and still count.
const SLACK: f64 = 1e-6;

/// The samples of a region: first (unwrapped) and number along x, y, z.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Cut {
    /// First sample; below 0 or beyond the last one across a periodic face.
    pub first: [i64; 3],
    /// Number of samples.
    pub n: [usize; 3],
}

/// The samples of the region and its grid; none where nothing is cut.
pub(super) fn settle(region: &[Option<Stretch>; 3], grid: &Grid) -> Result<Option<(Cut, Grid)>> {
    let mut cut = Cut { first: [0; 3], n: grid.n };
    let mut out = grid.clone();
    for (a, stretch) in region.iter().enumerate() {
        let Some(stretch) = stretch else { continue };
        if a == 2 && grid.is_flat() {
            return Err(fault(a, stretch).expected("no part of z").found("a plane").hint("cut a plane along x and y only"));
        }
        let (first, count) = samples(a, stretch, grid)?;
        (cut.first[a], cut.n[a]) = (first, count);
        out.n[a] = count;
        match &grid.stretched[a] {
            Some(_) => out = out.with_part(a, first as usize..first as usize + count),
            None => out.origin[a] = grid.position(a, first as f64),
        }
        // The whole of a periodic axis stays periodic, wherever it begins.
        out.periodic[a] = grid.periodic[a] && count == grid.n[a];
    }
    Ok((cut.first != [0; 3] || cut.n != grid.n).then_some((cut, out)))
}

fn fault(axis: usize, stretch: &Stretch) -> Error {
    let axis = ["x", "y", "z"][axis];
    Error::usage(WHAT).item(match stretch {
        Stretch::Indices(a, b) => format!("--region-cells {axis} {a}..{b}"),
        Stretch::Positions(a, b) => format!("--region {axis} {a} to {b}"),
    })
}

fn samples(axis: usize, stretch: &Stretch, grid: &Grid) -> Result<(i64, usize)> {
    let n = grid.n[axis] as i64;
    let (first, end) = match *stretch {
        Stretch::Indices(first, end) => {
            if end <= first {
                return Err(fault(axis, stretch).expected("an end above the first sample").found("no samples").hint(ENDS));
            }
            if !grid.periodic[axis] && (first < 0 || end > n) {
                return Err(fault(axis, stretch).expected(format!("samples inside 0..{n}")).found("an open axis").hint(WRAP));
            }
            (first, end)
        }
        Stretch::Positions(from, to) => positions(axis, stretch, from, to, grid)?,
    };
    let count = end.checked_sub(first).unwrap_or(i64::MAX);
    if count > n {
        let hint = "the first sample of the next period is that of this one: end before it";
        return Err(fault(axis, stretch).expected(format!("at most one period, {n} samples")).found(format!("{count} samples")).hint(hint));
    }
    if count < 2 {
        return Err(fault(axis, stretch).expected("at least 2 samples").found(format!("{}", count.max(0))).hint("widen the region"));
    }
    Ok((first, count as usize))
}

const ENDS: &str = "indices count from 0, the second is one past the last sample";
const ORDER: &str = "the first sample taken comes first, also across a periodic face";
const WRAP: &str = "a region goes across a face only where the axis is periodic";

/// First sample and one past the last of a range of positions.
fn positions(axis: usize, stretch: &Stretch, from: f64, to: f64, grid: &Grid) -> Result<(i64, i64)> {
    if !(from.is_finite() && to.is_finite() && from <= to) {
        return Err(fault(axis, stretch).expected("two finite positions in ascending order").found(format!("{from} and {to}")).hint(ORDER));
    }
    let n = grid.n[axis];
    let (low, high) = (grid.position(axis, 0.0), grid.position(axis, (n - 1) as f64));
    if !grid.periodic[axis] {
        let (below, above) = (low - grid.width(axis, 0), high + grid.width(axis, n - 1));
        if from < below || to > above {
            let found = format!("samples from {low} to {high} on an open axis");
            return Err(fault(axis, stretch).expected("positions inside the box").found(found).hint(WRAP));
        }
    }
    if let Some(s) = &grid.stretched[axis] {
        let slack = |i: usize| SLACK * s.widths[i];
        let first = (0..n).position(|i| s.positions[i] >= from - slack(i)).unwrap_or(n);
        let end = (0..n).rposition(|i| s.positions[i] <= to + slack(i)).map_or(0, |i| i + 1);
        return Ok((first as i64, end as i64));
    }
    let index = |p: f64| (p - grid.origin[axis]) / grid.spacing[axis];
    let (first, end) = ((index(from) - SLACK).ceil(), (index(to) + SLACK).floor() + 1.0);
    if grid.periodic[axis] { Ok((first as i64, end as i64)) } else { Ok((first.max(0.0) as i64, end.min(n as f64) as i64)) }
}

/// The region of another layer.
pub(super) struct Region<T> {
    inner: Box<dyn Layer<T>>,
    cut: Cut,
    /// Components read at a time, at most.
    components: usize,
    scratch: Vec<Vec<T>>,
}

/// A part of a range that does not cross a face: where it stands in the whole, and where it goes.
#[derive(Debug, Clone, PartialEq, Eq)]
struct Part {
    from: Range<usize>,
    to: usize,
}

/// The parts of `count` samples from the unwrapped `first` of an axis of `n`.
fn parts(first: i64, count: usize, n: usize) -> Vec<Part> {
    let mut out = Vec::new();
    let mut done = 0;
    while done < count {
        let start = (first + done as i64).rem_euclid(n as i64) as usize;
        let length = (count - done).min(n - start);
        out.push(Part { from: start..start + length, to: done });
        done += length;
    }
    out
}

impl<T: Real> Region<T> {
    /// The samples `cut` of the `components` of `inner`.
    pub fn new(inner: Box<dyn Layer<T>>, cut: Cut, components: usize) -> Self {
        Region { inner, cut, components, scratch: Vec::new() }
    }
}

impl<T: Real> Layer<T> for Region<T> {
    fn samples(&self) -> [usize; 3] {
        self.cut.n
    }

    fn read(&mut self, at: &Window, out: &mut [Option<&mut [T]>]) -> Result<()> {
        let n = self.inner.samples();
        let [xs, ys, zs] = [0, 1, 2].map(|a| parts(self.cut.first[a] + at.range[a].start as i64, at.range[a].len(), n[a]));
        let [nx, ny, _] = at.size();
        for z in &zs {
            let planes = z.to * ny * nx..(z.to + z.from.len()) * ny * nx;
            if let ([x], [y]) = (&xs[..], &ys[..]) {
                let mut own: Vec<Option<&mut [T]>> = out.iter_mut().map(|o| o.as_mut().map(|o| &mut o[planes.clone()])).collect();
                self.inner.read(&Window { range: [x.from.clone(), y.from.clone(), z.from.clone()] }, &mut own)?;
                continue;
            }
            for (y, x) in ys.iter().flat_map(|y| xs.iter().map(move |x| (y, x))) {
                let window = Window { range: [x.from.clone(), y.from.clone(), z.from.clone()] };
                let values = window.values();
                self.scratch.resize_with(out.len(), Vec::new);
                for (s, _) in self.scratch.iter_mut().zip(out.iter()).filter(|(_, o)| o.is_some()) {
                    s.resize(values, T::ZERO);
                }
                let mut own: Vec<Option<&mut [T]>> =
                    self.scratch.iter_mut().zip(out.iter()).map(|(s, o)| o.is_some().then_some(&mut s[..])).collect();
                self.inner.read(&window, &mut own)?;
                for (s, o) in self.scratch.iter().zip(out.iter_mut()) {
                    let Some(o) = o else { continue };
                    for (i, row) in s.chunks_exact(x.from.len()).enumerate() {
                        let (k, j) = (i / y.from.len(), i % y.from.len());
                        o[((z.to + k) * ny + y.to + j) * nx + x.to..][..row.len()].copy_from_slice(row);
                    }
                }
            }
        }
        Ok(())
    }

    fn natural_planes(&self) -> usize {
        self.inner.natural_planes().min(self.cut.n[2])
    }

    fn is_costly(&self) -> bool {
        self.inner.is_costly()
    }

    fn decoded_planes(&self) -> usize {
        self.inner.decoded_planes().min(self.cut.n[2])
    }

    fn reader_bytes(&self, planes: usize) -> u64 {
        let n = self.inner.samples();
        let apart = |a: usize| parts(self.cut.first[a], self.cut.n[a], n[a]).len() > 1;
        let scratch = if apart(0) || apart(1) { self.components * planes * self.cut.n[0] * self.cut.n[1] * size_of::<T>() } else { 0 };
        self.inner.reader_bytes(planes) + scratch as u64
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn parts_end_at_faces() {
        let part = |from: Range<usize>, to| Part { from, to };
        assert_eq!(parts(2, 3, 8), [part(2..5, 0)]);
        assert_eq!(parts(-3, 8, 8), [part(5..8, 0), part(0..5, 3)]);
        assert_eq!(parts(14, 4, 8), [part(6..8, 0), part(0..2, 2)]);
        assert_eq!(parts(8, 8, 8), [part(0..8, 0)]);
    }
}
