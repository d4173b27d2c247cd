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
const BLOCK_BYTES: usize = 12 << 20;

/// Planes a block holds: what was asked for, else a multiple of the file's natural depth near [`BLOCK_BYTES`].
pub fn block_planes<T: Real>(source: &dyn PlaneSource<T>, wanted: Option<usize>) -> usize {
    let n = source.grid().n[2];
    if let Some(k) = wanted {
        return k.clamp(1, n);
    }
    let plane = source.grid().plane_cells() * source.fields().components() * size_of::<T>();
    let fits = (BLOCK_BYTES / plane.max(1)).clamp(4, 64);
    let natural = source.natural_planes().max(1);
    (fits.max(natural) / natural * natural).clamp(1, n)
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
fn plan(grid: &Grid, thickness: usize, halo: usize) -> Vec<(isize, Range<usize>)> {
    let n = grid.n[2];
    let mut out = Vec::new();
    if grid.periodic[2] {
        out.push((-(halo as isize), n - halo..n));
    }
    for z in (0..n).step_by(thickness) {
        out.push((z as isize, z..(z + thickness).min(n)));
    }
    if grid.periodic[2] {
        out.push((n as isize, 0..halo));
    }
    out
}

/// Streams the snapshot through `each`, block by block in ascending z.
///
/// `reach` gives the first and one-past-last (unwrapped) plane that a range of planes needs; `halo` is what it may ask for
/// beyond a periodic face.
///
/// # Errors
/// Those of the source and of `each`; the pass ends at the first.
pub fn blocks<T: Real>(
    source: &mut dyn PlaneSource<T>,
    thickness: usize,
    halo: usize,
    reach: impl Fn(Range<usize>) -> (isize, isize),
    buffers: &Buffers<T>,
    observe: &dyn Observe,
    mut each: impl FnMut(&Block<'_, T>) -> Result<()>,
) -> Result<()> {
    let grid = *source.grid();
    let plane_cells = grid.plane_cells();
    let components = source.fields().components();
    let n = grid.n[2];
    let mut todo = plan(&grid, thickness, halo).into_iter();
    let next = || -> Option<Result<Batch<T>>> {
        let (first, z) = todo.next()?;
        let mut buffers = buffers.take(components, z.len() * plane_cells);
        let mut slices: Vec<&mut [T]> = buffers.iter_mut().map(Vec::as_mut_slice).collect();
        let read = source.read(z.start, z.end, &mut slices);
        Some(read.map(|()| Batch { first, planes: z.len(), components: buffers }))
    };
    let mut window: Vec<Arc<Batch<T>>> = Vec::new();
    let mut z0 = 0;
    let mut outcome = Ok(());
    par::read_ahead(1, next, |batch| {
        match batch {
            Ok(b) => window.push(Arc::new(b)),
            Err(e) => outcome = Err(e),
        }
        while outcome.is_ok() && z0 < n {
            let z = z0..(z0 + thickness).min(n);
            let (low, high) = reach(z.clone());
            let loaded = window.last().map_or(isize::MIN, |b| b.first + b.planes as isize);
            if loaded < high {
                break;
            }
            while window.first().is_some_and(|b| b.first + b.planes as isize <= low) {
                buffers.give(window.remove(0));
            }
            z0 = z.end;
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
    use crate::math::diff::{AxisStencil, HALF};
    use crate::model::source::{Fields, MemorySource};

    fn source(n: [usize; 3], periodic: bool) -> MemorySource<f64> {
        let grid = Grid::periodic(n, [1.0; 3]).with_periodic([true, true, periodic]);
        let cells = grid.cells() as usize;
        let p = grid.plane_cells();
        let fields = Fields { velocity: true, magnetic: false };
        MemorySource::new(grid, fields, (0..3).map(|c| (0..cells).map(|i| (i / p * 10 + c) as f64).collect()).collect())
    }

    #[test]
    fn every_block_sees_its_planes_and_their_halo() {
        for periodic in [true, false] {
            for thickness in [1, 2, 3, 5, 7, 11, 64] {
                let n = 11;
                let mut s = source([9, 9, n], periodic);
                let stencil = AxisStencil::<f64>::new(n, 1.0, periodic);
                let reach =
                    |z: Range<usize>| z.map(|k| stencil.reach(k)).fold((isize::MAX, isize::MIN), |a, b| (a.0.min(b.0), a.1.max(b.1)));
                let mut seen = Vec::new();
                blocks(&mut s, thickness, HALF, reach, &Buffers::default(), &Silent, |block| {
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
