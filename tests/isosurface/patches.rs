//! Fields and their objects for the isosurface tests, by the plainest methods: full arrays and flood fill.

use std::collections::{BTreeMap, VecDeque};

use ropewalk::base::real::Real;
use ropewalk::space::patch::{Interval, PatchShape};

/// A full field, x fastest.
#[derive(Clone)]
pub struct Field {
    pub n: [usize; 3],
    pub values: Vec<f64>,
}

impl Field {
    pub fn of(n: [usize; 3], f: impl Fn([usize; 3]) -> f64) -> Field {
        let mut values = Vec::with_capacity(n.iter().product());
        for z in 0..n[2] {
            for y in 0..n[1] {
                for x in 0..n[0] {
                    values.push(f([x, y, z]));
                }
            }
        }
        Field { n, values }
    }

    pub fn at(&self, c: [usize; 3]) -> f64 {
        self.values[(c[2] * self.n[1] + c[1]) * self.n[0] + c[0]]
    }

    /// Independent values in -1..1.
    pub fn noise(n: [usize; 3], seed: u64) -> Field {
        let mut random = Random(seed);
        Field { n, values: (0..n.iter().product()).map(|_| 2.0 * random.next() - 1.0).collect() }
    }

    /// Mean over each cell and its six neighbours modulo the box, `times` times over.
    pub fn smoothed(mut self, times: usize) -> Field {
        for _ in 0..times {
            let old = self.clone();
            self = Field::of(old.n, |c| {
                let mut sum = old.at(c);
                for axis in 0..3 {
                    for step in [1, old.n[axis] - 1] {
                        let mut d = c;
                        d[axis] = (d[axis] + step) % old.n[axis];
                        sum += old.at(d);
                    }
                }
                sum / 7.0
            });
        }
        self
    }

    /// The value exceeded by the given share of cells.
    pub fn quantile(&self, share: f64) -> f64 {
        let mut sorted = self.values.clone();
        sorted.sort_by(f64::total_cmp);
        sorted[((1.0 - share) * (sorted.len() - 1) as f64) as usize]
    }

    /// Values at the stored cells of a patch, coordinates taken modulo the box.
    pub fn stored<T: Real>(&self, shape: &PatchShape) -> Vec<T> {
        let mut out = Vec::with_capacity(shape.cells);
        for s in &shape.stored {
            for x in s.x..s.x + s.len as i32 {
                let c = [x, s.y, s.z];
                let c = std::array::from_fn(|a| c[a].rem_euclid(self.n[a] as i32) as usize);
                out.push(T::of(self.at(c)));
            }
        }
        out
    }
}

/// A small linear congruential generator; the upper bits of its state.
pub struct Random(pub u64);

impl Random {
    /// Uniform in 0..1.
    pub fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (self.0 >> 11) as f64 / (1u64 << 53) as f64
    }
}

/// Neighbour offsets for 6 or 26 neighbours.
fn offsets(connectivity: usize) -> Vec<[i32; 3]> {
    let mut all = Vec::new();
    for z in -1..=1i32 {
        for y in -1..=1i32 {
            for x in -1..=1i32 {
                let apart = x.abs() + y.abs() + z.abs();
                if apart == 1 || (apart > 1 && connectivity == 26) {
                    all.push([x, y, z]);
                }
            }
        }
    }
    all
}

/// Connected cells above the level as patches with a margin, in order of their first cell.
pub fn objects(field: &Field, level: f64, connectivity: usize, periodic: [bool; 3], margin: usize) -> Vec<PatchShape> {
    let n = field.n.map(|n| n as i32);
    let mut found = Vec::new();
    let mut owner: BTreeMap<[i32; 3], (usize, [i32; 3])> = BTreeMap::new();
    let wrap = |c: [i32; 3]| -> [i32; 3] { std::array::from_fn(|a| c[a].rem_euclid(n[a])) };
    let above = |c: [i32; 3]| field.at(c.map(|c| c as usize)) > level;
    for z in 0..n[2] {
        for y in 0..n[1] {
            for x in 0..n[0] {
                let seed = [x, y, z];
                if !above(seed) || owner.contains_key(&seed) {
                    continue;
                }
                let id = found.len();
                let mut closes = false;
                let mut cells = vec![seed];
                owner.insert(seed, (id, seed));
                let mut waiting = VecDeque::from([seed]);
                while let Some(c) = waiting.pop_front() {
                    for o in offsets(connectivity) {
                        let d: [i32; 3] = std::array::from_fn(|a| c[a] + o[a]);
                        if (0..3).any(|a| !periodic[a] && !(0..n[a]).contains(&d[a])) {
                            continue;
                        }
                        match owner.get(&wrap(d)) {
                            Some((_, known)) => closes |= *known != d,
                            None if above(wrap(d)) => {
                                owner.insert(wrap(d), (id, d));
                                cells.push(d);
                                waiting.push_back(d);
                            }
                            None => {}
                        }
                    }
                }
                let mut period = [None; 3];
                if closes {
                    cells.iter_mut().for_each(|c| *c = wrap(*c));
                    period = std::array::from_fn(|a| periodic[a].then_some(n[a]));
                }
                found.push(PatchShape::around(intervals(cells), margin, field.n, periodic, period));
            }
        }
    }
    found
}

/// Cells x, y, z as sorted intervals.
pub fn intervals(mut cells: Vec<[i32; 3]>) -> Vec<Interval> {
    cells.sort_by_key(|c| [c[2], c[1], c[0]]);
    let mut out: Vec<Interval> = Vec::new();
    for [x, y, z] in cells {
        match out.last_mut() {
            Some(l) if (l.z, l.y, l.x + l.len as i32) == (z, y, x) => l.len += 1,
            _ => out.push(Interval { z, y, x, len: 1 }),
        }
    }
    out
}
