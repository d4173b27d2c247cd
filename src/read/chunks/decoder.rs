//! Reads windows of chunked arrays: all chunks of all arrays are decoded as one batch, and those that a thin block leaves behind
//! half delivered are kept for the next.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::{Mutex, PoisonError};

use crate::base::error::Result;
use crate::base::par;
use crate::base::real::Real;
use crate::read::chunks::StoredChunks;
use crate::read::chunks::filters::{STATE_BYTES, Scratch};
use crate::read::chunks::item::{Held, Item};
use crate::read::order::Window;

/// Most bytes of decoded chunks that are kept between reads.
const KEPT_MOST: usize = 64 << 20;

/// What is wanted of one array.
pub(in crate::read) struct Request<'a, 'o, T> {
    /// The array, and its number among those of the snapshot.
    pub array: &'a StoredChunks,
    /// Its number.
    pub number: usize,
    /// Components with their places.
    pub wanted: Vec<(usize, &'o mut [T])>,
    /// Components that are read at one time or another.
    pub needed: Vec<usize>,
    /// Values where no chunk was written.
    pub fill: T,
}

/// Buffers that last from one read to the next.
#[derive(Default)]
pub(in crate::read) struct Decoder {
    scratch: Mutex<Vec<Scratch>>,
    /// By array and chunk, with the number of the read that left it.
    kept: BTreeMap<(usize, usize), (u64, Held)>,
    reads: u64,
}

impl Decoder {
    /// Fills the places of all requests with the values of the window.
    pub fn read<T: Real>(&mut self, requests: Vec<Request<T>>, at: &Window) -> Result<()> {
        let mut keys = Vec::new();
        let mut items = Vec::new();
        let mut planned = 0;
        self.reads += 1;
        for request in requests {
            let (number, plain) = (request.number, request.array.plain());
            for mut item in split(request, at) {
                let key = (number, item.place);
                item.held = self.kept.remove(&key).map(|(_, held)| held);
                // Chunks are kept for later planes, or for components read one by one.
                item.keep = item.is_decoded() && (item.ends_inside() || item.parts.len() < item.needed) && planned + plain <= KEPT_MOST;
                planned += if item.keep { plain } else { 0 };
                keys.push(key);
                items.push(item);
            }
        }
        self.make_room(KEPT_MOST - planned);
        let scratch = &self.scratch;
        let free = || scratch.lock().unwrap_or_else(PoisonError::into_inner);
        let done = par::map_owned(items, |_, item| {
            let mut own = free().pop().unwrap_or_else(Scratch::new);
            let outcome = item.deliver(&mut own);
            free().push(own);
            outcome
        });
        for (key, outcome) in keys.into_iter().zip(done) {
            if let Some(held) = outcome? {
                self.kept.insert(key, (self.reads, held));
            }
        }
        Ok(())
    }

    /// Lets go of what was left longest ago until at most `most` bytes are kept.
    fn make_room(&mut self, most: usize) {
        let mut bytes: usize = self.kept.values().map(|(_, held)| held.bytes.len()).sum();
        while bytes > most {
            let Some(oldest) = self.kept.iter().min_by_key(|(_, (read, _))| *read).map(|(key, _)| *key) else { return };
            bytes -= self.kept.remove(&oldest).map_or(0, |(_, held)| held.bytes.len());
        }
    }

    /// Bytes held at most when `planes` of such arrays are read at a time, with the number of components read of each.
    pub fn bytes<'a>(arrays: impl Iterator<Item = (&'a StoredChunks, usize)>, planes: usize) -> u64 {
        let (mut largest, mut kept, mut out) = (0, 0, 0);
        for (array, components) in arrays {
            let [x, y, z] = array.axes.space;
            largest = largest.max(array.index.largest.max(array.plain() + 8));
            let decoded = !array.pipeline.is_plain(0);
            if decoded && (array.chunk[z] > 1 || array.components() > 1) {
                kept += array.layer() * array.plain();
            }
            let chunks = array.layer() * (planes.div_ceil(array.chunk[z]) + 1);
            let apart = if array.across(x) > 1 { array.header.shape[y] * array.across(x) } else { array.across(y) };
            out += array.index.bytes() + chunks * (size_of::<Item<f64>>() + 256) + components * planes * apart * size_of::<&[f64]>();
        }
        if largest == 0 {
            return 0;
        }
        (out + kept.min(KEPT_MOST) + par::threads() * (2 * largest + STATE_BYTES)) as u64
    }
}

/// The parts of a range that fall into chunks of `edge`: number of the chunk, and what is wanted of it.
fn segments(range: &Range<usize>, edge: usize) -> Vec<(usize, Range<usize>)> {
    let first = range.start / edge;
    (first..range.end.div_ceil(edge)).map(|k| (k, range.start.max(k * edge)..range.end.min((k + 1) * edge))).collect()
}

/// The chunks that a request touches, each with its places.
fn split<'a, 'o, T: Real>(request: Request<'a, 'o, T>, at: &Window) -> Vec<Item<'a, 'o, T>> {
    let array = request.array;
    let space = array.axes.space;
    let [xs, ys, zs] = [0, 1, 2].map(|a| segments(&at.range[a], array.chunk[space[a]]));
    let edge = array.components();
    let mut groups: Vec<usize> = request.wanted.iter().map(|(c, _)| c / edge).collect();
    groups.sort_unstable();
    groups.dedup();
    let mut items = Vec::with_capacity(groups.len() * zs.len() * ys.len() * xs.len());
    for group in &groups {
        for z in &zs {
            for y in &ys {
                for x in &xs {
                    let mut along = vec![0; array.chunk.len()];
                    (along[space[0]], along[space[1]], along[space[2]]) = (x.0, y.0, z.0);
                    if let Some(end) = array.axes.component {
                        along[array.component_axis(end)] = *group;
                    }
                    items.push(Item {
                        array,
                        place: array.place(&along),
                        first: along.iter().zip(&array.chunk).map(|(k, c)| k * c).collect(),
                        range: [x.1.clone(), y.1.clone(), z.1.clone()],
                        parts: Vec::new(),
                        needed: request.needed.iter().filter(|c| *c / edge == *group).count(),
                        fill: request.fill,
                        held: None,
                        keep: false,
                    });
                }
            }
        }
    }
    let nx = at.range[0].len();
    // Whole rows go into one chunk without being cut, whole planes too.
    let (rows, planes) = (xs.len() == 1, xs.len() == 1 && ys.len() == 1);
    for (c, mut rest) in request.wanted {
        let group = groups.iter().position(|g| *g == c / edge).unwrap_or(0) * zs.len() * ys.len() * xs.len();
        let mut take = |count: usize| {
            let (now, later) = std::mem::take(&mut rest).split_at_mut(count);
            rest = later;
            now
        };
        for (k, z) in zs.iter().enumerate() {
            let layer = &mut items[group + k * ys.len() * xs.len()..][..ys.len() * xs.len()];
            for (j, y) in ys.iter().enumerate() {
                let pieces = if planes { 1 } else { z.1.len() * if rows { 1 } else { y.1.len() } };
                layer[j * xs.len()..][..xs.len()].iter_mut().for_each(|i| i.parts.push((c % edge, Vec::with_capacity(pieces))));
            }
            let mut put = |place: usize, piece| {
                if let Some((_, pieces)) = layer[place].parts.last_mut() {
                    pieces.push(piece);
                }
            };
            if planes {
                put(0, take(z.1.len() * ys[0].1.len() * nx));
                continue;
            }
            for _ in z.1.clone() {
                for (j, y) in ys.iter().enumerate() {
                    if rows {
                        put(j, take(y.1.len() * nx));
                        continue;
                    }
                    for _ in y.1.clone() {
                        for (i, x) in xs.iter().enumerate() {
                            put(j * xs.len() + i, take(x.1.len()));
                        }
                    }
                }
            }
        }
    }
    items
}
