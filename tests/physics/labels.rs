//! Labels, periodic joins and objects that close on themselves, against a general graph library and a search of our own.

use std::collections::{HashMap, HashSet, VecDeque};

use crate::common::{BOTH, Vector, number, request, stored, text, try_run};
use petgraph::unionfind::UnionFind;
use proptest::prelude::*;
use ropewalk::detect::{Criterion, Labeller, TileSweep};
use ropewalk::math::stats::Scale;
use ropewalk::model::columns::Col;
use ropewalk::model::contents::{SUMS, Scales};
use ropewalk::model::object::Detected;
use ropewalk::model::request::{Connectivity, Request, Side};
use ropewalk::run::analysis::Execution;
use ropewalk::space::grid::Grid;

const CONNECTIVITIES: [Connectivity; 3] = [Connectivity::Six, Connectivity::Eighteen, Connectivity::TwentySix];

/// Offsets of the neighbours: a cell's faces; with edges; with corners.
fn offsets(connectivity: Connectivity) -> Vec<[i64; 3]> {
    let reach = match connectivity {
        Connectivity::Six => 1,
        Connectivity::Eighteen => 2,
        Connectivity::TwentySix => 3,
    };
    let mut out = Vec::new();
    for z in -1i64..=1 {
        for y in -1i64..=1 {
            for x in -1i64..=1 {
                let steps = x.abs() + y.abs() + z.abs();
                if steps > 0 && steps <= reach {
                    out.push([x, y, z]);
                }
            }
        }
    }
    out
}

/// A cell's neighbour and the boxes crossed on the way, `None` beyond an open face.
fn step(grid: &Grid, cell: usize, offset: [i64; 3]) -> Option<(usize, [i64; 3])> {
    let c = grid.coordinates(cell as u64);
    let mut to = [0usize; 3];
    let mut boxes = [0i64; 3];
    for a in 0..3 {
        let n = grid.n[a] as i64;
        let v = c[a] as i64 + offset[a];
        if !grid.periodic[a] && !(0..n).contains(&v) {
            return None;
        }
        to[a] = v.rem_euclid(n) as usize;
        boxes[a] = v.div_euclid(n);
    }
    Some((grid.index(to[0], to[1], to[2]) as usize, boxes))
}

/// The sets of connected cells, in the order of their smallest cell: petgraph's union-find over every contact.
fn components(grid: &Grid, mask: &[bool], connectivity: Connectivity) -> Vec<Vec<usize>> {
    let mut sets = UnionFind::<usize>::new(mask.len());
    for cell in (0..mask.len()).filter(|&c| mask[c]) {
        for offset in offsets(connectivity) {
            if let Some((to, _)) = step(grid, cell, offset)
                && mask[to]
            {
                sets.union(cell, to);
            }
        }
    }
    let labels = sets.into_labeling();
    let mut seen: HashMap<usize, usize> = HashMap::new();
    let mut out: Vec<Vec<usize>> = Vec::new();
    for cell in (0..mask.len()).filter(|&c| mask[c]) {
        let k = *seen.entry(labels[cell]).or_insert_with(|| {
            out.push(Vec::new());
            out.len() - 1
        });
        out[k].push(cell);
    }
    out
}

/// Axes along which a component closes on itself: some cell is reached in two different images of the box.
fn spans(grid: &Grid, mask: &[bool], connectivity: Connectivity, start: usize) -> [bool; 3] {
    let mut image: HashMap<usize, [i64; 3]> = HashMap::from([(start, [0; 3])]);
    let mut queue = VecDeque::from([start]);
    let mut out = [false; 3];
    while let Some(cell) = queue.pop_front() {
        let here = image[&cell];
        for offset in offsets(connectivity) {
            let Some((to, boxes)) = step(grid, cell, offset) else { continue };
            if !mask[to] {
                continue;
            }
            let there: [i64; 3] = std::array::from_fn(|a| here[a] + boxes[a]);
            match image.get(&to) {
                None => {
                    image.insert(to, there);
                    queue.push_back(to);
                }
                Some(known) => (0..3).for_each(|a| out[a] |= known[a] != there[a]),
            }
        }
    }
    out
}

/// Feeds a mask through tiles of `height` rows and blocks of `thickness` planes, tiles in reverse order.
fn detect(grid: &Grid, mask: &[bool], connectivity: Connectivity, height: usize, thickness: usize, min_cells: u64) -> Detected {
    let scales = Scales { sums: [Scale::for_bound(1.0); SUMS], extras: Vec::new() };
    let criterion = Criterion { family: 0, side: Side::Above, level: 0.5, inner: None, connectivity, scales };
    let mut labeller = Labeller::new(grid.clone(), criterion.clone());
    let [nx, ny, nz] = grid.n;
    let mut tiles = Vec::new();
    for z0 in (0..nz).step_by(thickness) {
        for y0 in (0..ny).step_by(height) {
            let y1 = (y0 + height).min(ny);
            let mut sweep = TileSweep::new(criterion.clone(), (y0, y1), z0);
            for z in z0..(z0 + thickness).min(nz) {
                for y in y0..y1 {
                    let row: Vec<f32> = (0..nx).map(|x| f32::from(u8::from(mask[grid.index(x, y, z) as usize]))).collect();
                    sweep.add_row(grid, &row, &[], y, z);
                }
            }
            tiles.push(sweep.close());
        }
    }
    for tile in tiles.into_iter().rev() {
        labeller.add(tile);
    }
    labeller.finish(min_cells)
}

/// Cells of an object modulo the box, sorted; and whether its unwrapped cells hang together without any wrap.
fn cells_of(grid: &Grid, intervals: &[ropewalk::space::patch::Interval], connectivity: Connectivity) -> (Vec<usize>, bool) {
    let mut unwrapped: HashSet<[i64; 3]> = HashSet::new();
    let mut wrapped = Vec::new();
    for i in intervals {
        for k in 0..i.len {
            let c = [i64::from(i.x) + i64::from(k), i64::from(i.y), i64::from(i.z)];
            unwrapped.insert(c);
            let w: [usize; 3] = std::array::from_fn(|a| c[a].rem_euclid(grid.n[a] as i64) as usize);
            wrapped.push(grid.index(w[0], w[1], w[2]) as usize);
        }
    }
    wrapped.sort_unstable();
    let Some(&start) = unwrapped.iter().next() else { return (wrapped, true) };
    let mut reached = HashSet::from([start]);
    let mut queue = vec![start];
    while let Some(c) = queue.pop() {
        for o in offsets(connectivity) {
            let to = std::array::from_fn(|a| c[a] + o[a]);
            if unwrapped.contains(&to) && reached.insert(to) {
                queue.push(to);
            }
        }
    }
    let whole = reached.len() == unwrapped.len();
    (wrapped, whole)
}

fn compare(grid: &Grid, mask: &[bool], connectivity: Connectivity, cut: (usize, usize), min_cells: u64) {
    let found = detect(grid, mask, connectivity, cut.0, cut.1, min_cells);
    let all = components(grid, mask, connectivity);
    let (kept, small): (Vec<_>, Vec<_>) = all.into_iter().partition(|c| c.len() as u64 >= min_cells);
    assert_eq!(found.dropped.objects, small.len() as u64);
    assert_eq!(found.dropped.tally.moments.count, small.iter().map(|c| c.len() as u64).sum::<u64>());
    assert_eq!(found.objects.len(), kept.len());
    for (k, (object, want)) in found.objects.iter().zip(&kept).enumerate() {
        assert_eq!(object.id, k as u64 + 1);
        assert_eq!(object.tally.first_cell, want[0] as u64);
        assert_eq!(object.tally.moments.count, want.len() as u64);
        assert_eq!(object.spans, spans(grid, mask, connectivity, want[0]), "closed on itself");
        let (cells, whole) = cells_of(grid, &object.intervals, connectivity);
        assert_eq!(&cells, want);
        if object.spans == [false; 3] {
            assert!(whole, "unwrapped cells hang together");
            // The centroid is the mean of the unwrapped cells, and lies inside the box.
            let n = want.len() as f64;
            let mut sum = [0.0; 3];
            for i in &object.intervals {
                for x in 0..i.len {
                    let c = [f64::from(i.x) + f64::from(x), f64::from(i.y), f64::from(i.z)];
                    (0..3).for_each(|a| sum[a] += c[a]);
                }
            }
            let centre = object.tally.moments.centre();
            for a in 0..3 {
                assert!((centre[a] - sum[a] / n).abs() < 1e-12 * grid.n[a] as f64);
                assert!(centre[a] >= 0.0 && centre[a] < grid.n[a] as f64);
            }
        }
    }
}

/// A mask on a small non-cubic grid whose density covers the range from dust to a solid with holes.
fn masks() -> impl Strategy<Value = ([usize; 3], Vec<bool>)> {
    ([3..8usize, 3..8usize, 3..8usize], 0.05..0.8f64).prop_flat_map(|(n, density)| {
        let cells = n[0] * n[1] * n[2];
        (Just(n), prop::collection::vec(prop::bool::weighted(density), cells))
    })
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 48, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn partition_equals_that_of_a_graph_library((n, mask) in masks(), min_cells in 1..6u64, height in 1..8usize, thickness in 1..8usize) {
        for periodic in 0..8u8 {
            let axes = std::array::from_fn(|a| periodic >> a & 1 == 1);
            let grid = Grid::periodic(n, [1.0; 3]).with_periodic(axes);
            for connectivity in CONNECTIVITIES {
                for cut in [(height, thickness), (n[1], n[2])] {
                    compare(&grid, &mask, connectivity, cut, min_cells);
                }
            }
        }
    }
}

/// A cheap reproducible mask (SplitMix64, Steele, Lea & Flood 2014).
fn random_mask(cells: usize, seed: u64, density: f64) -> Vec<bool> {
    let mut state = seed;
    (0..cells)
        .map(|_| {
            state = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
            let z = (state ^ (state >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
            let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
            ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64 <= density
        })
        .collect()
}

/// The same through a whole analysis: |b| carries the mask, and the box is cut into blocks and tiles as a real run would.
#[test]
fn whole_analyses_find_the_same_objects() {
    let mut closed = 0;
    for (seed, density) in [(1, 0.1), (2, 0.25), (3, 0.35)] {
        for periodic in [[true; 3], [true, false, true], [false, true, false], [false; 3]] {
            let grid = Grid::periodic([10, 37, 11], [1.0, 3.7, 1.1]).with_periodic(periodic);
            let mask = random_mask(grid.cells() as usize, seed, density);
            let b: Vec<f64> = mask.iter().map(|&m| f64::from(u8::from(m))).collect();
            let zero = vec![0.0; b.len()];
            for connectivity in CONNECTIVITIES {
                let request = Request { connectivity, min_cells: 3, ..request(&["m: field > 0.5", "holes: field < 0.5"]) };
                let execution = Execution { block_planes: Some(1 + seed as usize * 2), ..Execution::default() };
                let components_of = [zero.clone(), zero.clone(), zero.clone(), b.clone(), zero.clone(), zero.clone()];
                let o = try_run(stored::<f32>(grid.clone(), BOTH, &components_of), &request, &execution).unwrap();
                for (k, side) in [mask.clone(), mask.iter().map(|m| !m).collect()].iter().enumerate() {
                    let all = components(&grid, side, connectivity);
                    let kept: Vec<_> = all.iter().filter(|c| c.len() >= 3).collect();
                    assert_eq!(o.rows(k).len(), kept.len());
                    assert_eq!(o.family(k).dropped.objects, (all.len() - kept.len()) as u64);
                    let beyond = side.iter().filter(|&&m| m).count();
                    assert_eq!(o.family(k).listed.moments.count + o.family(k).dropped.tally.moments.count, beyond as u64);
                    for (row, want) in o.rows(k).iter().zip(&kept) {
                        assert_eq!(number(row, Col::Cells), want.len() as f64);
                        let axes = spans(&grid, side, connectivity, want[0]);
                        let names: Vec<&str> = (0..3).filter(|&a| axes[a]).map(|a| ["x", "y", "z"][a]).collect();
                        assert_eq!(text(row, Col::Wraps), names.join(" "));
                        closed += usize::from(!names.is_empty());
                        let peak: Vector = [Col::PeakX, Col::PeakY, Col::PeakZ].map(|c| number(row, c) / 0.1);
                        let c = peak.map(|v| v.round() as usize);
                        // All values are equal: the peak is the smallest cell.
                        assert_eq!(grid.index(c[0], c[1], c[2]) as usize, want[0]);
                    }
                }
            }
        }
    }
    assert!(closed > 20, "few objects closed on themselves: {closed}");
}
