//! One pass over a snapshot: blocks of planes with their halo, the next planes being read while the present ones are worked on.

use std::ops::Range;
use std::sync::{Arc, Mutex};

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::pages::Pages;
use crate::base::par;
use crate::base::real::Real;
use crate::model::source::PlaneSource;
use crate::space::grid::Grid;
use crate::space::slab::{Batch, Block};

/// Bytes of all components that a block should hold when nobody sets its thickness: enough to amortise the halo,
/// small beside the snapshot.
const BLOCK_BYTES: usize = 6 << 20;

/// The blocks of a pass: of the thickness asked for, else of a multiple of the file's natural depth near `BLOCK_BYTES`, or as thin as
/// they must be to `fit`. The first blocks are thinner where the file does not mind, so that work begins before much is read.
pub fn block_ranges<T: Real>(source: &dyn PlaneSource<T>, wanted: Option<usize>, fit: impl Fn(usize) -> bool) -> Vec<Range<usize>> {
    let n = source.grid().n[2];
    if let Some(k) = wanted {
        return cut(n, k.clamp(1, n), false);
    }
    let plane = source.grid().plane_cells() * source.fields().components() * size_of::<T>();
    let fits = (BLOCK_BYTES / plane.max(1)).clamp(4, 64);
    let natural = source.natural_planes().max(1);
    let mut thickness = (fits.max(natural) / natural * natural).clamp(1, n);
    while thickness > 1 && !fit(thickness) {
        thickness = if thickness > natural { thickness - natural } else { thickness / 2 };
    }
    cut(n, thickness, natural == 1)
}

/// Bytes of the planes that are in memory at once in a pass: the block with its halo, the ends that are shared across a periodic face,
/// the batch that is read and the one that waits.
pub fn alive<T: Real>(source: &dyn PlaneSource<T>, thickness: usize, halo: usize) -> u64 {
    if source.held().is_some() {
        return 0;
    }
    let grid = source.grid();
    let plane = (grid.plane_cells() * source.fields().components() * size_of::<T>()) as u64;
    let ends = if shares_ends(source) { 2 * thickness.max(halo) } else { 0 };
    plane * (4 * thickness + 2 * halo + ends) as u64
}

/// Whether planes that a periodic halo repeats are kept instead of read again.
fn shares_ends<T: Real>(source: &dyn PlaneSource<T>) -> bool {
    source.is_costly() && source.grid().periodic[2]
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
pub struct Buffers<T>(Mutex<Vec<Vec<Pages<T>>>>);

impl<T> Default for Buffers<T> {
    fn default() -> Self {
        Buffers(Mutex::new(Vec::new()))
    }
}

impl<T: Real> Buffers<T> {
    fn take(&self, components: usize, cells: usize) -> Vec<Pages<T>> {
        let used = self.0.lock().ok().and_then(|mut free| free.pop());
        used.filter(|b| b.len() == components && b.iter().all(|c| c.len() >= cells))
            .unwrap_or_else(|| (0..components).map(|_| Pages::new(cells)).collect())
    }

    fn give(&self, batch: Batch<T>) {
        if let (Ok(components), Ok(mut free)) = (Arc::try_unwrap(batch.components), self.0.lock()) {
            free.push(components);
        }
    }
}

/// One batch of a pass: where it stands (unwrapped first plane), its planes as stored, and the batch read before that it repeats.
struct Item {
    first: isize,
    z: Range<usize>,
    repeats: Option<usize>,
    /// Whether a later item repeats it.
    again: bool,
}

/// What to read, in order.
fn plan(grid: &Grid, ranges: &[Range<usize>], halo: usize, share: bool) -> Vec<Item> {
    let n = grid.n[2];
    let once = |first: isize, z: Range<usize>| Item { first, z, repeats: None, again: false };
    let inner = || ranges.iter().map(|z| once(z.start as isize, z.clone()));
    if !grid.periodic[2] || halo == 0 {
        return inner().collect();
    }
    if !share {
        let (before, behind) = (once(-(halo as isize), n - halo..n), once(n as isize, 0..halo));
        return [before].into_iter().chain(inner()).chain([behind]).collect();
    }
    // The last blocks first, then all in order, then the first ones: none is read twice.
    let tail = ranges.partition_point(|z| z.end <= n - halo);
    let head = ranges.partition_point(|z| z.start < halo);
    let mut out: Vec<Item> = ranges[tail..].iter().map(|z| once(z.start as isize - n as isize, z.clone())).collect();
    for (k, z) in ranges.iter().enumerate() {
        let repeats = k.checked_sub(tail);
        out.push(Item { repeats, ..once(z.start as isize, z.clone()) });
    }
    let before = ranges.len() - tail;
    for (k, z) in ranges[..head].iter().enumerate() {
        let repeats = Some(k.checked_sub(tail).unwrap_or(before + k));
        out.push(Item { repeats, ..once((z.start + n) as isize, z.clone()) });
    }
    for k in 0..out.len() {
        if let Some(earlier) = out[k].repeats {
            out[earlier].again = true;
        }
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
    if let Some(components) = source.held() {
        for z in ranges {
            each(&Block::of_whole(z.clone(), reach(z.clone()), &components, plane_cells, grid.n[2]))?;
            observe.advance(z.len() as u64);
        }
        return Ok(());
    }
    let components = source.fields().components();
    let mut saved: Vec<Option<Arc<Vec<Pages<T>>>>> = Vec::new();
    let mut todo = plan(&grid, ranges, halo, shares_ends(source)).into_iter();
    let next = || -> Option<Result<Batch<T>>> {
        let Item { first, z, repeats, again } = todo.next()?;
        if let Some(components) = repeats.and_then(|k| saved[k].clone()) {
            saved.push(None);
            return Some(Ok(Batch { first, planes: z.len(), components }));
        }
        let mut values = buffers.take(components, z.len() * plane_cells);
        let mut slices: Vec<&mut [T]> = values.iter_mut().map(|v| &mut v[..z.len() * plane_cells]).collect();
        let read = source.read(z.start, z.end, &mut slices);
        observe.read((components * z.len() * plane_cells * size_of::<T>()) as u64);
        let values = Arc::new(values);
        saved.push(again.then(|| values.clone()));
        Some(read.map(|()| Batch { first, planes: z.len(), components: values }))
    };
    let mut window: Vec<Batch<T>> = Vec::new();
    let mut waiting = ranges.iter();
    let mut outcome = Ok(());
    par::read_ahead(1, next, |batch| {
        match batch {
            Ok(b) => window.push(b),
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

/// Reads the whole snapshot into memory, showing every block (without halo) to `each` while the next one is read.
///
/// # Errors
/// Those of the source and of `each`.
pub fn kept<T: Real>(
    source: &mut dyn PlaneSource<T>,
    ranges: &[Range<usize>],
    observe: &dyn Observe,
    mut each: impl FnMut(&Block<'_, T>) -> Result<()>,
) -> Result<Vec<Pages<T>>> {
    let grid = source.grid().clone();
    let plane = grid.plane_cells();
    let mut whole: Vec<Pages<T>> = (0..source.fields().components()).map(|_| Pages::new(plane * grid.n[2])).collect();
    let mut rest: Vec<&mut [T]> = whole.iter_mut().map(|c| &mut **c).collect();
    let mut todo = ranges.iter().cloned();
    let next = || {
        let z = todo.next()?;
        let mut slices: Vec<&mut [T]> = rest
            .iter_mut()
            .map(|r| {
                let (now, later) = std::mem::take(r).split_at_mut(z.len() * plane);
                *r = later;
                now
            })
            .collect();
        let read = source.read(z.start, z.end, &mut slices);
        observe.read((slices.len() * z.len() * plane * size_of::<T>()) as u64);
        Some(read.map(|()| (z, slices)))
    };
    let mut outcome = Ok(());
    par::read_ahead(1, next, |item| {
        outcome = item.and_then(|(z, slices)| {
            let here: Vec<&[T]> = slices.iter().map(|s| &**s).collect();
            each(&Block::of_planes(z.clone(), &here, plane))?;
            observe.advance(z.len() as u64);
            Ok(())
        });
        outcome.is_ok()
    });
    outcome.map(|()| whole)
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

    /// A source that has to be read, and counts how often each plane is.
    struct Read {
        inner: MemorySource<f64>,
        costly: bool,
        natural: usize,
        counts: Vec<usize>,
    }

    impl PlaneSource<f64> for Read {
        fn grid(&self) -> &Grid {
            self.inner.grid()
        }

        fn fields(&self) -> Fields {
            self.inner.fields()
        }

        fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [f64]]) -> Result<()> {
            self.counts[z0..z1].iter_mut().for_each(|c| *c += 1);
            self.inner.read(z0, z1, out)
        }

        fn natural_planes(&self) -> usize {
            self.natural
        }

        fn is_costly(&self) -> bool {
            self.costly
        }
    }

    fn check(s: &mut dyn PlaneSource<f64>, ranges: &[Range<usize>], periodic: bool) {
        let n = s.grid().n[2];
        let stencil = AxisStencil::<f64>::new(Scheme::Fd8, n, 1.0, periodic);
        let reach = |z: Range<usize>| z.map(|k| stencil.reach(k)).fold((isize::MAX, isize::MIN), |a, b| (a.0.min(b.0), a.1.max(b.1)));
        let mut seen = Vec::new();
        blocks(s, ranges, HALF, reach, &Buffers::default(), &Silent, |block| {
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
        assert_eq!(seen, (0..n).collect::<Vec<_>>(), "{ranges:?}, periodic {periodic}");
    }

    #[test]
    fn every_block_sees_its_planes_and_their_halo() {
        let n = 11;
        for periodic in [true, false] {
            for thickness in [1, 2, 3, 5, 7, 11, 64] {
                let ranges = cut(n, thickness.min(n), thickness > 4);
                check(&mut source([9, 9, n], periodic), &ranges, periodic);
                for costly in [true, false] {
                    let mut s = Read { inner: source([9, 9, n], periodic), costly, natural: 1, counts: vec![0; n] };
                    check(&mut s, &ranges, periodic);
                    let twice = s.counts.iter().filter(|c| **c > 1).count();
                    assert_eq!(twice, if periodic && !costly { 2 * HALF } else { 0 }, "costly {costly}, {ranges:?}");
                }
            }
        }
    }

    /// The planes said to be alive bound what is really held: every batch that is not given back.
    #[test]
    fn blocks_are_as_thin_as_they_must_be() {
        let s = Read { inner: source([64, 64, 40], true), costly: true, natural: 8, counts: vec![0; 40] };
        let ranges = |fit: &dyn Fn(usize) -> bool| block_ranges(&s, None, fit);
        assert_eq!(ranges(&|_| true)[0].len(), 40);
        assert_eq!(ranges(&|k| k <= 20)[0].len(), 16);
        assert_eq!(ranges(&|k| k <= 5)[0].len(), 4);
        assert_eq!(ranges(&|_| false)[0].len(), 1);
        assert_eq!(alive(&s, 8, 4), (4 * 8 + 2 * 4 + 2 * 8) * 64 * 64 * 3 * 8);
    }

    #[test]
    fn what_is_kept_is_what_is_read() {
        let mut s = Read { inner: source([5, 3, 11], true), costly: false, natural: 1, counts: vec![0; 11] };
        let mut seen = 0;
        let kept = kept(&mut s, &cut(11, 4, false), &Silent, |block| {
            assert_eq!(block.plane(1, block.z.start as isize)[7], block.z.start as f64 * 10.0 + 1.0);
            seen += block.z.len();
            Ok(())
        });
        let kept = kept.unwrap();
        let held = s.inner.held().unwrap();
        assert!(seen == 11 && s.counts.iter().all(|c| *c == 1));
        assert!(kept.iter().zip(held).all(|(a, b)| **a == *b));
    }
}
