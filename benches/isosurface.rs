//! Isosurfaces and their geometry alone: many objects, and one that percolates, of a smoothed random field; in vertices a second.

use std::collections::BTreeMap;

use divan::Bencher;
use divan::counter::ItemsCount;
use ropewalk::base::par::{self, Pool};
use ropewalk::math::disjoint::OffsetSets;
use ropewalk::math::isosurface::{Isosurface, isosurface};
use ropewalk::math::surface::measure;
use ropewalk::space::patch::{Interval, PatchShape};

fn main() {
    divan::main();
}

/// Cells along an axis.
const N: usize = 192;

/// Level of many objects, and of one that holds most of the cells above it, in units of the rms.
const LEVELS: [(&str, f32); 2] = [("many", 1.5), ("giant", 0.6)];

/// White noise smoothed by the weights 1/4, 1/2, 1/4 three times along every axis, in units of its rms; low at the faces of the box.
fn field() -> Vec<f32> {
    let mut state = 1u64;
    let mut field: Vec<f32> = (0..N * N * N)
        .map(|_| {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            (state >> 33) as f32 / (1u64 << 31) as f32 - 0.5
        })
        .collect();
    for step in [1, N, N * N].repeat(3) {
        let old = field.clone();
        for (k, v) in field.iter_mut().enumerate() {
            let at = k / step % N;
            let before = if at == 0 { k + step * (N - 1) } else { k - step };
            let after = if at == N - 1 { k - step * (N - 1) } else { k + step };
            *v = 0.25 * old[before] + 0.5 * old[k] + 0.25 * old[after];
        }
    }
    let rms = (field.iter().map(|v| f64::from(v * v)).sum::<f64>() / field.len() as f64).sqrt() as f32;
    for (k, v) in field.iter_mut().enumerate() {
        let outermost = [k % N, k / N % N, k / N / N].iter().any(|&c| c == 0 || c == N - 1);
        *v = if outermost { -9.0 } else { *v / rms };
    }
    field
}

/// The 26-connected objects of at least eight cells above the level, with the values around them.
fn patches(level: f32) -> Vec<(PatchShape, Vec<f32>)> {
    let field = field();
    let (mut runs, mut starts): (Vec<Interval>, Vec<usize>) = (Vec::new(), Vec::new());
    for (r, row) in field.chunks(N).enumerate() {
        starts.push(runs.len());
        let mut x = 0;
        for same in row.chunk_by(|a, b| (*a > level) == (*b > level)) {
            if same[0] > level {
                runs.push(Interval { z: (r / N) as i32, y: (r % N) as i32, x, len: same.len() as u32 });
            }
            x += same.len() as i32;
        }
    }
    starts.push(runs.len());
    // Nothing lies at the faces of the box, so every run has rows before its own.
    let mut pieces = OffsetSets::new(runs.len());
    for (i, a) in runs.iter().enumerate() {
        for (dz, dy) in [(-1, -1), (-1, 0), (-1, 1), (0, -1)] {
            let row = (a.z + dz) as usize * N + (a.y + dy) as usize;
            for j in starts[row]..starts[row + 1] {
                let b = runs[j];
                if b.x <= a.x + a.len as i32 && a.x <= b.x + b.len as i32 {
                    pieces.join(i as u32, j as u32, [0; 3]);
                }
            }
        }
    }
    let mut objects: BTreeMap<u32, Vec<Interval>> = BTreeMap::new();
    for (i, run) in runs.iter().enumerate() {
        objects.entry(pieces.find(i as u32).0).or_default().push(*run);
    }
    objects
        .into_values()
        .filter(|o| o.iter().map(|i| i.len).sum::<u32>() >= 8)
        .map(|object| {
            let shape = PatchShape::around(object, 1, [N; 3], [false; 3], [None; 3]);
            let row = |z: i32, y: i32| (z as usize * N + y as usize) * N;
            let values =
                shape.stored.iter().flat_map(|s| field[row(s.z, s.y) + s.x as usize..][..s.len as usize].iter().copied()).collect();
            (shape, values)
        })
        .collect()
}

fn surfaces(patches: &[(PatchShape, Vec<f32>)], level: f32) -> Vec<Isosurface> {
    par::map(patches, |_, (shape, values)| isosurface(shape, values, f64::from(level)))
}

fn vertices(surfaces: &[Isosurface]) -> usize {
    surfaces.iter().map(|s| s.points.len()).sum()
}

#[divan::bench(args = ["many", "giant"], consts = [1, 2], sample_count = 10)]
fn surfaces_of<const THREADS: usize>(bencher: Bencher, which: &str) {
    let level = LEVELS.iter().find(|l| l.0 == which).expect("one of the levels").1;
    let patches = patches(level);
    let pool = Pool::new(THREADS).expect("worker threads");
    let count = pool.run(|| vertices(&surfaces(&patches, level)));
    bencher.counter(ItemsCount::new(count)).bench_local(|| pool.run(|| surfaces(&patches, level)));
}

#[divan::bench(args = ["many", "giant"], consts = [1, 2], sample_count = 10)]
fn geometry_of<const THREADS: usize>(bencher: Bencher, which: &str) {
    let level = LEVELS.iter().find(|l| l.0 == which).expect("one of the levels").1;
    let pool = Pool::new(THREADS).expect("worker threads");
    let made = pool.run(|| surfaces(&patches(level), level));
    bencher.counter(ItemsCount::new(vertices(&made))).bench_local(|| pool.run(|| par::map(&made, |_, s| measure(s, [1.0; 3]))));
}
