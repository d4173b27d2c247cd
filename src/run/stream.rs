//! One pass over a snapshot: blocks of planes with their halo, the next planes being read while the present ones are worked on.

use std::ops::Range;
use std::sync::{Arc, Mutex};

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::par;
use crate::base::real::Real;
use crate::model::source::PlaneSource;
use crate::space::grid::Grid;
use crate::space::slab::{Batch, Block};

/// Bytes of all components that a block should hold when nobody sets its thickness: enough to amortise the halo,
/// small beside the snapshot.
const BLOCK_BYTES: usize = 6 << 20;

/// The blocks of a pass: of the thickness asked for, else of a multiple of the file's natural depth near
/// `BLOCK_BYTES`. The first blocks are thinner where the file does not mind, so that work begins before much is read.
pub fn block_ranges<T: Real>(source: &dyn PlaneSource<T>, wanted: Option<usize>) -> Vec<Range<usize>> {
    let n = source.grid().n[2];
    if let Some(k) = wanted {
        return cut(n, k.clamp(1, n), false);
    }
    let plane = source.grid().plane_cells() * source.fields().components() * size_of::<T>();
    let fits = (BLOCK_BYTES / plane.max(1)).clamp(4, 64);
    let natural = source.natural_planes().max(1);
    cut(n, (fits.max(natural) / natural * natural).clamp(1, n), natural == 1)
}

fn cut(n: usize, thickness: usize, thin_start: bool) -> Vec<Range<usize>> {
    let mut next = if thin_start { (thickness / 4).max(1) } else { thickness };
    let mut out: Vec<Range<usize>> = Vec::new();
    while out.last().map_or(0, |r| r.end) < n {
        let z = out.last().map_or(0, |r| r.end);
        out.push(z..(z + next).min(n));
        next = (2 * next).min(thickness);
    }
    out
}

/// Batches of component buffers that go round, within a pass and from one pass to the next: a fresh buffer costs as much
/// in page faults as reading into it.
pub struct Buffers<T>(Mutex<Vec<Vec<Vec<T>>>>);

impl<T> Default for Buffers<T> {
    fn default() -> Self {
        Buffers(Mutex::new(Vec::new()))
    }
}

impl<T: Real> Buffers<T> {
    fn take(&self, components: usize, cells: usize) -> Vec<Vec<T>> {
        let used = self.0.lock().ok().and_then(|mut free| free.pop());
        let mut buffers = used.unwrap_or_else(|| vec![Vec::new(); components]);
        for b in &mut buffers {
            // A new vector of zeros is not touched before it is read into; growing an old one is.
            if b.capacity() < cells {
                *b = vec![T::ZERO; cells];
            }
            b.resize(cells, T::ZERO);
        }
        buffers
    }

    fn give(&self, batch: Arc<Batch<T>>) {
        if let (Ok(batch), Ok(mut free)) = (Arc::try_unwrap(batch), self.0.lock()) {
            free.push(batch.components);
        }
    }
}

/// What to read, in order: unwrapped first plane, and the planes as stored.
fn plan(grid: &Grid, ranges: &[Range<usize>], halo: usize) -> Vec<(isize, Range<usize>)> {
    let n = grid.n[2];
    let mut out = Vec::new();
    if grid.periodic[2] {
        out.push((-(halo as isize), n - halo..n));
    }
    out.extend(ranges.iter().map(|z| (z.start as isize, z.clone())));
    if grid.periodic[2] {
        out.push((n as isize, 0..halo));
    }
    out
}

/// Streams the snapshot through `each`, block by block in ascending z.
///
/// `ranges` cuts the planes into consecutive blocks. `reach` gives the first and one-past-last (unwrapped) plane that a range of planes needs; `halo` is what it may ask for
/// beyond a periodic face.
///
/// # Errors
/// Those of the source and of `each`; the pass ends at the first.
pub fn blocks<T: Real>(
    source: &mut dyn PlaneSource<T>,
    ranges: &[Range<usize>],
    halo: usize,
    reach: impl Fn(Range<usize>) -> (isize, isize),
    buffers: &Buffers<T>,
    observe: &dyn Observe,
    mut each: impl FnMut(&Block<'_, T>) -> Result<()>,
) -> Result<()> {
    let grid = source.grid().clone();
    let plane_cells = grid.plane_cells();
    let components = source.fields().components();
    let mut todo = plan(&grid, ranges, halo).into_iter();
    let next = || -> Option<Result<Batch<T>>> {
        let (first, z) = todo.next()?;
        let mut buffers = buffers.take(components, z.len() * plane_cells);
        let mut slices: Vec<&mut [T]> = buffers.iter_mut().map(Vec::as_mut_slice).collect();
        let read = source.read(z.start, z.end, &mut slices);
        Some(read.map(|()| Batch { first, planes: z.len(), components: buffers }))
    };
    let mut window: Vec<Arc<Batch<T>>> = Vec::new();
    let mut waiting = ranges.iter();
    let mut outcome = Ok(());
    par::read_ahead(1, next, |batch| {
        match batch {
            Ok(b) => window.push(Arc::new(b)),
            Err(e) => outcome = Err(e),
        }
        while outcome.is_ok()
            && let Some(z) = waiting.clone().next()
        {
            let (low, high) = reach(z.clone());
            let loaded = window.last().map_or(isize::MIN, |b| b.first + b.planes as isize);
            if loaded < high {
                break;
            }
            while window.first().is_some_and(|b| b.first + b.planes as isize <= low) {
                buffers.give(window.remove(0));
            }
            waiting.next();
            outcome = each(&Block::new(z.clone(), &window, plane_cells));
            observe.advance(z.len() as u64);
        }
        outcome.is_ok()
    });
    window.into_iter().for_each(|batch| buffers.give(batch));
    outcome
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::observe::Silent;
    use crate::math::diff::{AxisStencil, HALF, Scheme};
    use crate::model::source::{Fields, MemorySource};

    fn source(n: [usize; 3], periodic: bool) -> MemorySource<f64> {
        let grid = Grid::periodic(n, [1.0; 3]).with_periodic([true, true, periodic]);
        let cells = grid.cells() as usize;
        let p = grid.plane_cells();
        let fields = Fields::VELOCITY;
        MemorySource::new(grid, fields, (0..3).map(|c| (0..cells).map(|i| (i / p * 10 + c) as f64).collect()).collect())
    }

    #[test]
    fn every_block_sees_its_planes_and_their_halo() {
        for periodic in [true, false] {
            for thickness in [1, 2, 3, 5, 7, 11, 64] {
                let n = 11;
                let mut s = source([9, 9, n], periodic);
                let stencil = AxisStencil::<f64>::new(Scheme::Fd8, n, 1.0, periodic);
                let reach =
                    |z: Range<usize>| z.map(|k| stencil.reach(k)).fold((isize::MAX, isize::MIN), |a, b| (a.0.min(b.0), a.1.max(b.1)));
                let mut seen = Vec::new();
                blocks(&mut s, &cut(n, thickness.min(n), thickness > 4), HALF, reach, &Buffers::default(), &Silent, |block| {
                    for z in block.z.clone() {
                        let (low, high) = stencil.reach(z);
                        for k in low..high {
                            let want = k.rem_euclid(n as isize) * 10;
                            for c in 0..3 {
                                assert_eq!(block.plane(c, k)[5], want as f64 + c as f64);
                            }
                        }
                        seen.push(z);
                    }
                    Ok(())
                })
                .unwrap();
                assert_eq!(seen, (0..n).collect::<Vec<_>>(), "thickness {thickness}, periodic {periodic}");
            }
        }
    }
}
