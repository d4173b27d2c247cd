//! Offers the objects of a snapshot to who writes them, and streams the planes of the boxes that were asked for.

use std::ops::Range;

use crate::base::error::Result;
use crate::base::par;
use crate::base::real::Real;
use crate::derive::{Deriver, Prepared, Scratch};
use crate::detect::Criterion;
use crate::model::object::Detected;
use crate::model::request::Family;
use crate::model::rows::Need;
use crate::model::sink::{CutPlanes, FamilyObjects, ObjectSink};
use crate::run::passes::Pass;
use crate::space::cut::CutBox;
use crate::space::slab::Block;

/// Bytes of cut-outs that are held at a time, unless one plane takes more.
pub(super) const HELD_BYTES: usize = 64 << 20;
/// Planes of a box that are written together.
const PLANES: usize = 8;

/// A box and the family whose indicator goes with it.
struct Wanted {
    family: usize,
    cut: CutBox,
}

/// Consecutive planes of a box that lie in one block.
struct Piece {
    which: usize,
    /// First plane in the box and in the grid.
    inside: usize,
    z: usize,
    planes: usize,
}

impl<T: Real> Pass<'_, T> {
    /// Hands the objects to the sink, then streams the fields of the boxes it asks for; without any, nothing is read.
    ///
    /// # Errors
    /// Those of the source and of the sink.
    pub fn offer(
        &mut self,
        deriver: &Deriver<T>,
        families: &[Family],
        criteria: &[Criterion],
        found: &[Detected],
        frame: [f64; 3],
        time: Option<f64>,
        sink: &mut (dyn ObjectSink + Send),
    ) -> Result<()> {
        let grid = self.source.grid().clone();
        let fields = self.source.fields();
        let mut wanted = Vec::new();
        for (index, ((family, criterion), detected)) in families.iter().zip(criteria).zip(found).enumerate() {
            let level = criterion.level;
            let offered =
                FamilyObjects { index, family, level, grid: &grid, fields, precision: T::NAME, frame, time, objects: &detected.objects };
            wanted.extend(sink.objects(&offered)?.into_iter().map(|cut| Wanted { family: index, cut }));
        }
        if wanted.is_empty() { Ok(()) } else { self.cut_outs(deriver, &wanted, sink) }
    }

    fn cut_outs(&mut self, deriver: &Deriver<T>, wanted: &[Wanted], sink: &mut (dyn ObjectSink + Send)) -> Result<()> {
        let grid = self.source.grid().clone();
        self.observe.stage("cut-outs", grid.n[2] as u64);
        let values = (self.source.fields().components() + 1) * size_of::<T>();
        self.stream(deriver, |block| {
            let pieces = pieces(wanted, block.z.clone());
            if pieces.is_empty() {
                return Ok(());
            }
            let ready = deriver.prepare(block, Need::default())?;
            let bytes = |p: &Piece| p.planes * wanted[p.which].cut.n[0] * wanted[p.which].cut.n[1] * values;
            let mut rest = pieces.as_slice();
            while let Some(first) = rest.first() {
                let mut held = bytes(first);
                let count = 1 + rest[1..]
                    .iter()
                    .take_while(|p| {
                        held += bytes(p);
                        held <= HELD_BYTES
                    })
                    .count();
                let (now, later) = rest.split_at(count);
                rest = later;
                let copied = par::map(now, |_, p| copy(deriver, block, &ready, &wanted[p.which], p));
                for (p, fields) in now.iter().zip(&copied) {
                    let values = fields.iter().map(|f| bytemuck::cast_slice(f)).collect();
                    sink.cut_planes(p.which, &CutPlanes { z: p.inside, planes: p.planes, values })?;
                }
            }
            Ok(())
        })?;
        self.observe.done();
        Ok(())
    }
}

fn pieces(wanted: &[Wanted], z: Range<usize>) -> Vec<Piece> {
    let mut out: Vec<Piece> = Vec::new();
    for (which, w) in wanted.iter().enumerate() {
        for (inside, z) in w.cut.planes(z.clone()) {
            match out.last_mut() {
                Some(p) if p.which == which && p.planes < PLANES && (p.inside + p.planes, p.z + p.planes) == (inside, z) => p.planes += 1,
                _ => out.push(Piece { which, inside, z, planes: 1 }),
            }
        }
    }
    out
}

/// The components as read and the indicator as derived, one array each, x fastest.
fn copy<T: Real>(deriver: &Deriver<T>, block: &Block<'_, T>, ready: &Prepared<T>, wanted: &Wanted, piece: &Piece) -> Vec<Vec<T>> {
    let cut = &wanted.cut;
    let stretches = cut.row();
    let nx = cut.of(0);
    let mut out: Vec<Vec<T>> = (0..=block.components()).map(|_| Vec::with_capacity(piece.planes * cut.n[1] * cut.n[0])).collect();
    let mut scratch = Scratch::default();
    for z in piece.z..piece.z + piece.planes {
        for y in (0..cut.n[1]).map(|i| cut.wrapped(1, i)) {
            for x in &stretches {
                for (c, values) in out.iter_mut().take(block.components()).enumerate() {
                    values.extend_from_slice(&block.plane(c, z as isize)[y * nx + x.start..y * nx + x.end]);
                }
                deriver.row(block, ready, z, y, x.clone(), Need::default(), &mut scratch);
                out[block.components()].extend_from_slice(&scratch.rows.indicators[wanted.family]);
            }
        }
    }
    out
}
