//! The shape pass: patches open when their first plane arrives, take the fields they carry from derived rows, and close
//! when their last plane has arrived.

use std::ops::Range;
use std::sync::{Mutex, PoisonError};

use crate::base::par;
use crate::base::real::Real;
use crate::model::object::Object;
use crate::model::request::Side;
use crate::model::rows::Rows;
use crate::model::source::Fields;
use crate::space::grid::Grid;
use crate::space::patch::{Interval, PatchShape, Segment};

/// Cells of margin around an object that its surface needs.
const MARGIN: usize = 1;

/// A complete patch: the stored cells of one object with their fields.
pub struct Patch<T> {
    /// Index of the object in its family.
    pub object: usize,
    /// Which cells.
    pub shape: PatchShape,
    /// Which fields follow the indicator.
    pub fields: Fields,
    values: Vec<T>,
}

impl<T> Patch<T> {
    /// Number of fields.
    pub fn carried(&self) -> usize {
        self.values.len() / self.shape.cells.max(1)
    }
}

impl<T> Patch<T> {
    /// A field over the stored cells: 0 the indicator with the inside up; then, where carried, u, ω (three components each), b, j,
    /// and the further indicators.
    pub fn field(&self, k: usize) -> &[T] {
        &self.values[k * self.shape.cells..(k + 1) * self.shape.cells]
    }
}

struct Open<T> {
    object: usize,
    last_plane: usize,
    shape: PatchShape,
    values: Mutex<Vec<T>>,
}

/// One piece of a patch that lies in one row of the box.
#[derive(Debug, Clone, Copy)]
struct Delivery {
    z: u32,
    y: u32,
    x: u32,
    len: u32,
    /// Index among the open patches.
    patch: u32,
    start: usize,
}

/// Cells of one row that a patch wants.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Wanted {
    /// Plane.
    pub z: usize,
    /// Row.
    pub y: usize,
    /// First cell.
    pub x: usize,
    /// Number of cells.
    pub len: usize,
}

/// The patches of one family while planes stream by in ascending z.
pub struct Patches<T> {
    grid: Grid,
    family: usize,
    side: Side,
    /// Fields carried for the vertices; none when no mesh is written.
    fields: Fields,
    /// Further indicators carried behind them: their places among those derived.
    extras: Vec<usize>,
    /// Objects still to open: first plane, last plane, index; ascending from the back.
    waiting: Vec<(usize, usize, usize)>,
    open: Vec<Open<T>>,
    deliveries: Vec<Vec<Delivery>>,
}

impl<T: Real> Patches<T> {
    /// Patches for those objects of a family that are in the list `which`.
    pub fn new(grid: Grid, family: usize, side: Side, fields: Fields, extras: Vec<usize>, objects: &[Object], which: Vec<usize>) -> Self {
        let mut waiting: Vec<(usize, usize, usize)> = which
            .into_iter()
            .map(|k| {
                let (first, last) = planes(&grid, &objects[k]);
                (first, last, k)
            })
            .collect();
        waiting.sort_unstable_by(|a, b| b.cmp(a));
        Patches { grid, family, side, fields, extras, waiting, open: Vec::new(), deliveries: Vec::new() }
    }

    /// Values carried a cell: the indicator, the vectors of `fields`, and further indicators.
    pub fn carried(fields: Fields, extras: usize) -> usize {
        1 + 6 * (usize::from(fields.velocity) + usize::from(fields.magnetic)) + extras
    }

    /// Opens what begins in the planes `z` and finds out which rows are wanted; `tiles` are the row ranges of the workers.
    ///
    /// Takes the intervals of an object when it opens: afterwards they live in the patch.
    pub fn begin_block(&mut self, z: Range<usize>, tiles: &[Range<usize>], objects: &mut [Object]) {
        let mut opening = Vec::new();
        while let Some(&(first, last, object)) = self.waiting.last() {
            if first >= z.end {
                break;
            }
            self.waiting.pop();
            let spans = objects[object].spans;
            opening.push((object, last, std::mem::take(&mut objects[object].intervals), spans));
        }
        let grid = &self.grid;
        let carried = Self::carried(self.fields, self.extras.len());
        let opened = par::map_owned(opening, |_, (object, last_plane, intervals, spans)| {
            let shape = patch_shape(grid, intervals, spans);
            let values = Mutex::new(vec![T::ZERO; shape.cells * carried]);
            Open { object, last_plane, shape, values }
        });
        self.open.extend(opened);
        self.deliveries = self.deliveries_in(&z, tiles);
    }

    /// Everything the open patches want from the planes `z`, tile by tile, in the order of rows.
    fn deliveries_in(&self, z: &Range<usize>, tiles: &[Range<usize>]) -> Vec<Vec<Delivery>> {
        /// Patches a work item goes through.
        const PATCHES: usize = 64;
        let tile_of: Vec<usize> = tiles.iter().enumerate().flat_map(|(t, r)| r.clone().map(move |_| t)).collect();
        let parts = par::map_range(self.open.len().div_ceil(PATCHES), |part| {
            let mut lists = vec![Vec::new(); tiles.len()];
            for k in part * PATCHES..((part + 1) * PATCHES).min(self.open.len()) {
                for segment in segments_in(&self.open[k].shape.stored, z, self.grid.n[2] as i32) {
                    let pieces = self.deliveries_of(segment, k as u32, &tile_of, &self.grid);
                    pieces.into_iter().flatten().for_each(|(t, d)| lists[t].push(d));
                }
            }
            lists
        });
        par::map_range(tiles.len(), |t| {
            let mut list: Vec<Delivery> = parts.iter().flat_map(|lists| lists[t].iter().copied()).collect();
            list.sort_unstable_by_key(|d| (d.z, d.y, d.x, d.patch, d.start));
            list
        })
    }

    /// A segment as it lies in the box: one piece, or two where it crosses the x-face.
    fn deliveries_of(&self, s: &Segment, patch: u32, tile_of: &[usize], grid: &Grid) -> [Option<(usize, Delivery)>; 2] {
        let [nx, ny, nz] = grid.n.map(|v| v as i32);
        let (y, z) = (s.y.rem_euclid(ny), s.z.rem_euclid(nz));
        let x = s.x.rem_euclid(nx);
        let head = s.len.min((nx - x) as u32);
        let piece =
            |x: i32, len: u32, start: usize| (tile_of[y as usize], Delivery { z: z as u32, y: y as u32, x: x as u32, len, patch, start });
        let tail = (head < s.len).then(|| piece(0, s.len - head, s.start + head as usize));
        [Some(piece(x, head, s.start)), tail]
    }

    /// What the patches want of a tile.
    pub fn wanted(&self, tile: usize) -> impl Iterator<Item = Wanted> + '_ {
        self.deliveries[tile].iter().map(|d| Wanted { z: d.z as usize, y: d.y as usize, x: d.x as usize, len: d.len as usize })
    }

    /// Hands derived cells of row (z, y) to every patch that wants some of them. `rows` holds the cells of `pieces`, ascending stretches of the row,
    /// one after the other; they cover all that is wanted.
    pub fn deliver(&self, tile: usize, z: usize, y: usize, pieces: &[Range<usize>], rows: &Rows<T>) {
        let list = &self.deliveries[tile];
        let from = list.partition_point(|d| (d.z as usize, d.y as usize) < (z, y));
        let (mut piece, mut first) = (0, 0);
        for d in list[from..].iter().take_while(|d| (d.z as usize, d.y as usize) == (z, y)) {
            while pieces[piece].end <= d.x as usize {
                first += pieces[piece].len();
                piece += 1;
            }
            let open = &self.open[d.patch as usize];
            let mut values = open.values.lock().unwrap_or_else(PoisonError::into_inner);
            let cells = open.shape.cells;
            let (at, len) = (first + d.x as usize - pieces[piece].start, d.len as usize);
            let mut field = 0;
            let mut put = |row: &[T]| {
                let to = field * cells + d.start;
                values[to..to + len].copy_from_slice(&row[at..at + len]);
                field += 1;
            };
            put(&rows.indicators[self.family]);
            if self.fields.velocity {
                rows.u.iter().chain(&rows.w).for_each(|r| put(r));
            }
            if self.fields.magnetic {
                rows.b.iter().chain(&rows.j).for_each(|r| put(r));
            }
            self.extras.iter().for_each(|&k| put(&rows.extras[k]));
            if self.side == Side::Below {
                for v in &mut values[d.start..d.start + len] {
                    *v = -*v;
                }
            }
        }
    }

    /// Takes out the patches that are complete once all planes before `z_end` have been delivered, in the order of
    /// their last plane and number.
    pub fn end_block(&mut self, z_end: usize) -> Vec<Patch<T>> {
        let (mut done, open): (Vec<Open<T>>, Vec<Open<T>>) = std::mem::take(&mut self.open).into_iter().partition(|p| p.last_plane < z_end);
        self.open = open;
        done.sort_by_key(|p| (p.last_plane, p.object));
        done.into_iter()
            .map(|p| Patch {
                object: p.object,
                shape: p.shape,
                fields: self.fields,
                values: p.values.into_inner().unwrap_or_else(PoisonError::into_inner),
            })
            .collect()
    }
}

/// The cells stored around an object.
pub fn patch_shape(grid: &Grid, intervals: Vec<Interval>, spans: [bool; 3]) -> PatchShape {
    let closed = spans.contains(&true);
    let period = std::array::from_fn(|a| (closed && grid.periodic[a]).then_some(grid.n[a] as i32));
    PatchShape::around(intervals, MARGIN, grid.n, grid.periodic, period)
}

/// First and last plane of the stream that an object's patch needs; the whole box for one that crosses the z-face.
pub fn planes(grid: &Grid, object: &Object) -> (usize, usize) {
    let n = grid.n[2] as i32;
    let margin = MARGIN as i32;
    let low = object.intervals.first().map_or(0, |i| i.z) - margin;
    let high = object.intervals.last().map_or(0, |i| i.z) + margin;
    if grid.periodic[2] && (low < 0 || high >= n) { (0, n as usize - 1) } else { (low.max(0) as usize, high.min(n - 1) as usize) }
}

/// The segments whose plane, wrapped, lies in `z`.
fn segments_in<'a>(stored: &'a [Segment], z: &Range<usize>, n: i32) -> impl Iterator<Item = &'a Segment> {
    let low = stored.first().map_or(0, |s| s.z.div_euclid(n));
    let high = stored.last().map_or(-1, |s| s.z.div_euclid(n));
    let (z0, z1) = (z.start as i32, z.end as i32);
    (low..=high).flat_map(move |image| {
        let from = stored.partition_point(|s| s.z < z0 + image * n);
        let to = stored.partition_point(|s| s.z < z1 + image * n);
        stored[from..to].iter()
    })
}
