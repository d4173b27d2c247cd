//! The first passes over a snapshot: what is stored, then the statistics of what is derived from it.

use std::ops::Range;
use std::sync::Mutex;

use crate::base::error::Result;
use crate::base::pages::Pages;
use crate::base::par;
use crate::base::real::Real;
use crate::derive::{Ahead, Deriver, Scratch};
use crate::math::stats::Quantiles;
use crate::model::request::{Family, Level};
use crate::model::rows::Need;
use crate::model::statistics::{Alignment, Scan, Survey};
use crate::run::kept::Kept;
use crate::run::passes::{Pass, groups};
use crate::run::stream::{self, blocks};
use crate::space::slab::Block;
use crate::survey::scan::{self, ScanSum};
use crate::survey::spectra::SpectraSum;
use crate::survey::{box_alignment, moments};

/// What every row of the survey needs; sampled ones the truncation as well.
const SURVEY: Need = Need { strain: true, divergence: true, truncation: false, alignment: true, extras: false, vectors: false };

impl<T: Real> Pass<'_, T> {
    /// Reads everything once: digest, bad cells, component sums, spectra of lines. With `keep`, the planes stay in memory.
    ///
    /// # Errors
    /// Those of the source. Bad cells are reported in the result.
    pub fn scan(&mut self, keep: bool) -> Result<(Scan, Option<Vec<Pages<T>>>)> {
        let grid = self.source.grid().clone();
        let components = self.source.fields().components();
        self.observe.stage("read", grid.n[2] as u64);
        let mut scans = ScanSum::new::<T>(&grid, components);
        let mut spectra = SpectraSum::<T>::new(&grid, components);
        let mut sound = true;
        let each = |block: &Block<'_, T>| {
            let planes = par::map_range(block.z.len(), |k| {
                let z = block.z.start + k;
                let slices: Vec<&[T]> = (0..components).map(|c| block.plane(c, z as isize)).collect();
                scan::plane(&grid, z, &slices)
            });
            for p in &planes {
                sound &= p.is_finite();
                scans.add(p);
            }
            if sound {
                spectra.add(block);
            }
            Ok(())
        };
        let kept = if keep && self.source.held().is_none() {
            Some(stream::kept(self.source, &self.ranges, self.observe, each)?)
        } else {
            let here = |z: Range<usize>| (z.start as isize, z.end as isize);
            blocks(self.source, &self.ranges, 0, here, self.buffers, self.observe, each)?;
            None
        };
        self.observe.done();
        Ok((Scan { lines: spectra.finish(), ..scans.finish() }, kept))
    }

    /// Surveys what is derived, and the alignment over the box where it is wanted. Indicators go to `kept`, where they are to stay.
    ///
    /// # Errors
    /// Those of the source.
    pub fn survey(
        &mut self,
        deriver: &Deriver<T>,
        families: &[Family],
        companions: usize,
        alignment: bool,
        mut kept: Option<&mut Kept<T>>,
    ) -> Result<(Survey, Alignment)> {
        let grid = self.source.grid().clone();
        let tiles = self.tiles();
        self.observe.stage("survey", grid.n[2] as u64);
        let mut survey = moments::empty(families, companions);
        let mut whole = Alignment::default();
        let wanted: Vec<bool> = families.iter().map(|f| f.levels().iter().any(|l| matches!(l, Level::Volume(_)))).collect();
        let quantiles: Mutex<Vec<Vec<Option<Quantiles>>>> = Mutex::new(Vec::new());
        let every = Need { extras: companions > 0, alignment, ..SURVEY };
        self.stream(deriver, |block| {
            let ready = deriver.prepare(block, Need { truncation: true, ..every })?;
            let places = match &mut kept {
                Some(kept) => kept.rows(block.z.clone(), &tiles),
                None => tiles.iter().map(|_| Vec::new()).collect(),
            };
            let parts = par::map_owned(places, |t, mut places| {
                let mut counts = take(&quantiles).unwrap_or_else(|| wanted.iter().map(|w| w.then(Quantiles::default)).collect());
                let mut scratch = Scratch::default();
                let mut per_plane: Vec<(Survey, Alignment)> =
                    block.z.clone().map(|_| (moments::empty(families, companions), Alignment::default())).collect();
                for planes in groups(&block.z) {
                    scratch.expect(Ahead { rows: tiles[t].clone(), planes: planes.clone() });
                    for (y, z) in tiles[t].clone().flat_map(|y| planes.clone().map(move |z| (y, z))) {
                        let part = &mut per_plane[z - block.z.start];
                        let sampled = y % moments::SAMPLE_ROWS == 0;
                        let need = Need { truncation: sampled, ..every };
                        deriver.row(block, &ready, z, y, 0..grid.n[0], need, &mut scratch);
                        grid.relative_weights(0..grid.n[0], y, z, &mut scratch.rows.weights);
                        let rows = &scratch.rows;
                        moments::add_row(&mut part.0, rows, sampled, deriver.inner(y, z));
                        if alignment {
                            box_alignment::add_row(&mut part.1, rows);
                        }
                        for (q, row) in counts.iter_mut().zip(&rows.indicators) {
                            match (q, rows.weights.as_slice()) {
                                (None, _) => {}
                                (Some(q), []) => q.add(row),
                                (Some(q), weights) => q.add_weighted(row, weights),
                            }
                        }
                        let place = (z - block.z.start) * tiles[t].len() + y - tiles[t].start;
                        if let Some(row) = places.get_mut(place) {
                            row.iter_mut().for_each(|(family, to)| to.copy_from_slice(&rows.indicators[*family]));
                        }
                    }
                }
                give(&quantiles, counts);
                per_plane
            });
            for k in 0..block.z.len() {
                let mut plane = (moments::empty(families, companions), Alignment::default());
                for tile in &parts {
                    moments::merge(&mut plane.0, &tile[k].0);
                    plane.1.merge(&tile[k].1);
                }
                moments::merge(&mut survey, &plane.0);
                whole.merge(&plane.1);
            }
            Ok(())
        })?;
        while let Some(counts) = take(&quantiles) {
            for (s, q) in survey.indicators.iter_mut().zip(counts) {
                match (&mut s.quantiles, q) {
                    (Some(a), Some(b)) => a.merge(&b),
                    (a, b) => *a = b.or(a.take()),
                }
            }
        }
        self.observe.done();
        Ok((survey, whole))
    }
}

fn take<V>(pool: &Mutex<Vec<V>>) -> Option<V> {
    pool.lock().ok().and_then(|mut p| p.pop())
}

fn give<V>(pool: &Mutex<Vec<V>>, value: V) {
    if let Ok(mut p) = pool.lock() {
        p.push(value);
    }
}
