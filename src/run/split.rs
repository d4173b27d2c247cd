//! Objects grown from peaks: the regions of the detection pass are split, and their parts summed, in two further passes.

use std::collections::BTreeMap;

use crate::base::error::Result;
use crate::base::par;
use crate::base::real::Real;
use crate::derive::{Deriver, Scratch};
use crate::detect::Criterion;
use crate::detect::peaks::{Grown, PeakRule, grow};
use crate::measure::patches::{Patches, Wanted};
use crate::model::contents::Contents;
use crate::model::object::{Detected, Dropped, LEFT_OUT, Member, Members, Object, Tally};
use crate::model::request::Side;
use crate::model::rows::Need;
use crate::model::source::Fields;
use crate::run::passes::{Pass, joined};

/// A stretch of a row that belongs to a part.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
struct Piece {
    z: u32,
    y: u32,
    x0: u32,
    x1: u32,
    part: u32,
    boxes: [i32; 3],
}

impl<T: Real> Pass<'_, T> {
    /// Replaces the regions of a family by the objects grown from their peaks. `regions` come from a detection at `fraction` times
    /// the inner level, of any size.
    ///
    /// # Errors
    /// Those of the source.
    pub fn split(
        &mut self,
        deriver: &Deriver<T>,
        criterion: &Criterion,
        fraction: f64,
        regions: &mut Detected,
        min_cells: u64,
    ) -> Result<()> {
        let grown = self.grow(deriver, criterion, fraction, regions)?;
        let grid = self.source.grid().clone();
        let pieces = pieces(&grown, grid.n);
        let tallies = self.tally(deriver, criterion, grown.len(), &pieces)?;
        let mut parts: Vec<(u32, Object)> = (0..)
            .zip(grown)
            .zip(tallies)
            .map(|((part, g), tally)| {
                let level = Some(fraction * tally.peak);
                let mut o = Object { id: 0, tally, contents: None, level, wall: g.wall, spans: g.spans, intervals: g.intervals };
                let grid = &grid;
                let boxes = o.tally.bring_home(grid);
                if !o.spans.contains(&true) {
                    let shift: [i32; 3] = std::array::from_fn(|a| boxes[a] * grid.n[a] as i32);
                    for i in &mut o.intervals {
                        (i.x, i.y, i.z) = (i.x + shift[0], i.y + shift[1], i.z + shift[2]);
                    }
                }
                (part, o)
            })
            .collect();
        parts.sort_by_key(|(_, o)| o.tally.first_cell);
        let mut dropped = Dropped { objects: 0, tally: Tally::empty(), contents: Contents::default() };
        let mut objects: Vec<Object> = Vec::new();
        let mut object_of = vec![LEFT_OUT; parts.len()];
        for (part, mut o) in parts {
            if o.tally.moments.count < min_cells {
                dropped.objects += 1;
                dropped.tally.merge(&o.tally, [0; 3], grid.n, Side::Above);
                continue;
            }
            object_of[part as usize] = objects.len() as u32;
            o.id = objects.len() as u64 + 1;
            objects.push(o);
        }
        let mut members = Members::new(grid.n[1], pieces.len());
        let mut rest = pieces.into_iter().peekable();
        for (z, y) in (0..grid.n[2] as u32).flat_map(|z| (0..grid.n[1] as u32).map(move |y| (z, y))) {
            while let Some(p) = rest.next_if(|p| (p.z, p.y) == (z, y)) {
                members.push(Member { x0: p.x0, x1: p.x1, object: object_of[p.part as usize] });
            }
            members.end_row();
        }
        *regions = Detected { objects, dropped, members };
        Ok(())
    }

    /// Splits every region once its planes have passed.
    fn grow(&mut self, deriver: &Deriver<T>, criterion: &Criterion, fraction: f64, regions: &mut Detected) -> Result<Vec<Grown>> {
        let grid = self.source.grid().clone();
        let tiles = self.tiles();
        self.observe.stage("peaks", grid.n[2] as u64);
        let up = if criterion.side == Side::Above { 1.0 } else { -1.0 };
        // Compared with values of storage precision.
        let inner = up * T::of(criterion.inner.unwrap_or(f64::NAN)).wide();
        let rule = PeakRule { fraction, inner, connectivity: criterion.connectivity };
        let all = (0..regions.objects.len()).collect();
        let mut patches: Patches<T> =
            Patches::new(grid.clone(), criterion.family, criterion.side, Fields::default(), Vec::new(), &regions.objects, all);
        let mut out: Vec<(usize, Vec<Grown>)> = Vec::new();
        self.stream(deriver, |block| {
            patches.begin_block(block.z.clone(), &tiles, &mut regions.objects);
            let ready = deriver.prepare(block, Need::default())?;
            par::map_range(tiles.len(), |t| {
                let mut scratch = Scratch::default();
                let mut pieces = Vec::new();
                let mut wanted: Vec<Wanted> = patches.wanted(t).collect();
                wanted.sort_unstable();
                for row in wanted.chunk_by(|a, b| (a.z, a.y) == (b.z, b.y)) {
                    joined(row, grid.n[0], &mut pieces);
                    deriver.pieces(block, &ready, row[0].z, row[0].y, &pieces, Need::default(), &mut scratch);
                    patches.deliver(t, row[0].z, row[0].y, &pieces, &scratch.rows);
                }
            });
            let done = patches.end_block(block.z.end);
            out.extend(par::map_owned(done, |_, p| (p.object, grow(&p.shape, p.field(0), &rule, grid.n))));
            Ok(())
        })?;
        self.observe.done();
        out.sort_by_key(|(region, _)| *region);
        Ok(out.into_iter().flat_map(|(_, grown)| grown).collect())
    }

    /// Sums over the cells of every one of `count` parts, in the frame of its intervals.
    fn tally(&mut self, deriver: &Deriver<T>, criterion: &Criterion, count: usize, pieces: &[Piece]) -> Result<Vec<Tally>> {
        let grid = self.source.grid().clone();
        let tiles = self.tiles();
        let mut tallies = vec![Tally::empty(); count];
        self.observe.stage("sums", grid.n[2] as u64);
        self.stream(deriver, |block| {
            let ready = deriver.prepare(block, Need::default())?;
            let sums = par::map(&tiles, |_, rows_y| {
                let mut scratch = Scratch::default();
                let mut sums: BTreeMap<u32, Tally> = BTreeMap::new();
                for z in block.z.clone() {
                    let from = pieces.partition_point(|p| (p.z, p.y) < (z as u32, rows_y.start as u32));
                    let to = pieces.partition_point(|p| (p.z, p.y) < (z as u32, rows_y.end as u32));
                    for row in pieces[from..to].chunk_by(|a, b| a.y == b.y) {
                        let y = row[0].y as usize;
                        deriver.row(block, &ready, z, y, 0..grid.n[0], Need::default(), &mut scratch);
                        grid.relative_weights(0..grid.n[0], y, z, &mut scratch.rows.weights);
                        let rows = &scratch.rows;
                        for p in row {
                            let mut one = Tally::empty();
                            let x = p.x0 as usize..p.x1 as usize;
                            let weights = rows.weights.get(x.clone()).unwrap_or_default();
                            one.add_run(&grid, &rows.indicators[criterion.family][x.clone()], weights, criterion.side, x.start, y, z);
                            sums.entry(p.part).or_insert_with(Tally::empty).merge(&one, p.boxes, grid.n, criterion.side);
                        }
                    }
                }
                sums
            });
            for (part, tally) in sums.into_iter().flatten() {
                tallies[part as usize].merge(&tally, [0; 3], grid.n, criterion.side);
            }
            Ok(())
        })?;
        self.observe.done();
        Ok(tallies)
    }
}

/// The cells of all parts as they lie in the box, sorted by row.
fn pieces(grown: &[Grown], n: [usize; 3]) -> Vec<Piece> {
    let size = n.map(|v| v as i32);
    let mut out = Vec::new();
    for (k, g) in grown.iter().enumerate() {
        for i in &g.intervals {
            let (mut x, end) = (i.x, i.x + i.len as i32);
            while x < end {
                let place = [x, i.y, i.z];
                let boxes: [i32; 3] = std::array::from_fn(|a| place[a].div_euclid(size[a]));
                let x0 = x - boxes[0] * size[0];
                let x1 = (end - boxes[0] * size[0]).min(size[0]);
                out.push(Piece {
                    z: (i.z - boxes[2] * size[2]) as u32,
                    y: (i.y - boxes[1] * size[1]) as u32,
                    x0: x0 as u32,
                    x1: x1 as u32,
                    part: k as u32,
                    boxes,
                });
                x += x1 - x0;
            }
        }
    }
    out.sort_unstable();
    out
}
