//! A checked source and its survey: what has to be known before levels are settled.

use std::ops::Range;
use std::sync::Arc;

use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::base::real::Real;
use crate::derive::{Deriver, Plan, Room, ZLines, fewest_samples, filter, z_lines};
use crate::model::request::{Family, Frame, Request};
use crate::model::source::{Fields, MemorySource, PlaneSource};
use crate::model::statistics::{Scan, Survey};
use crate::run::analysis::{Execution, Snapshot};
use crate::run::passes::Pass;
use crate::run::stream::{Buffers, block_ranges};
use crate::run::whole;
use crate::space::grid::Grid;

/// Whether a grid has the samples that the scheme reads, and can be filtered where that is asked for.
///
/// # Errors
/// `Input` for an axis with too few samples, `Usage` for a filter that does not fit.
pub(super) fn check_grid(grid: &Grid, name: &str, request: &Request) -> Result<()> {
    for (a, axis) in ["x", "y", "z"].iter().enumerate() {
        let fewest = fewest_samples(request.scheme, grid, a);
        if grid.n[a] < fewest {
            return Err(Error::input("cannot derive along an axis")
                .item(format!("{name} axis {axis}"))
                .expected(format!("at least {fewest} samples"))
                .found(grid.n[a].to_string())
                .hint(format!("--derivative {} and the measure of its error read {fewest} samples", request.scheme.name())));
        }
    }
    request.filter.iter().try_for_each(|f| filter::check(grid).and_then(|()| filter::check_width(grid, f)))
}

/// What is derived for a request, in the frame of what is stored.
pub(super) fn derived(families: &[Family], request: &Request) -> Plan {
    Plan {
        indicators: families.iter().map(|f| f.indicator).collect(),
        extras: request.extras(),
        scheme: request.scheme,
        frame: [0.0; 3],
        mean_field: None,
        viscosity: request.viscosity,
        resistivity: request.resistivity,
        portable: request.portable,
    }
}

/// A checked source with what every pass over it needs.
pub(super) struct Ready<T> {
    source: Box<dyn PlaneSource<T>>,
    /// The grid.
    pub grid: Grid,
    /// The fields.
    pub fields: Fields,
    /// The families.
    pub families: Vec<Family>,
    ranges: Vec<Range<usize>>,
    buffers: Buffers<T>,
    plan: Plan,
    /// Derivatives along z of the whole box, where the scheme takes them line by line.
    z_lines: Option<Arc<ZLines<T>>>,
    /// Digest of what is stored, where something else is surveyed.
    stored_digest: Option<String>,
}

impl<T: Real> Ready<T> {
    /// Checks the request against the source.
    pub fn new(
        mut source: Box<dyn PlaneSource<T>>,
        snapshot: &Snapshot,
        request: &Request,
        execution: &Execution,
        observe: &dyn Observe,
    ) -> Result<Self> {
        let grid = source.grid().clone();
        let fields = source.fields();
        let families = request.families_for(fields)?;
        check_grid(&grid, &snapshot.name, request)?;
        let bytes = grid.cells() * fields.components() as u64 * size_of::<T>() as u64;
        let ranges = block_ranges(&*source, execution.block_planes);
        if source.is_costly() && bytes <= execution.memory {
            source = Box::new(kept(&mut *source, observe)?);
        }
        let plan = derived(&families, request);
        let mut ready =
            Ready { source, grid, fields, families, ranges, buffers: Buffers::default(), plan, z_lines: None, stored_digest: None };
        let room = Room { bytes: execution.memory, scratch: execution.scratch.as_deref() };
        if let Some(filter) = &request.filter {
            // Bad cells and the digest are those of what is stored.
            let (scan, _) = ready.pass(observe).survey(None, true, &[], 0)?;
            reject_bad_cells(&scan, snapshot)?;
            ready.stored_digest = Some(scan.digest);
            ready.source = filter::filtered(&mut *ready.source, filter, &room, observe)?;
        }
        if let Some(wanted) = ready.deriver([0.0; 3], None).wanted_z_lines() {
            ready.z_lines = Some(Arc::new(z_lines(&mut *ready.source, &wanted, &room, observe)?));
        }
        Ok(ready)
    }

    /// What derives rows from its planes.
    pub fn deriver(&self, frame: [f64; 3], mean_field: Option<[f64; 3]>) -> Deriver<T> {
        Deriver::new(&self.grid, self.fields, Plan { frame, mean_field, ..self.plan.clone() }).with_z_lines(self.z_lines.clone())
    }

    /// A pass over the planes.
    pub fn pass<'a>(&'a mut self, observe: &'a dyn Observe) -> Pass<'a, T> {
        Pass { source: &mut *self.source, ranges: self.ranges.clone(), buffers: &self.buffers, observe }
    }
}

/// The survey of a source, and the velocity that is subtracted from now on.
pub(super) fn surveyed<T: Real>(
    ready: &mut Ready<T>,
    snapshot: &Snapshot,
    request: &Request,
    observe: &dyn Observe,
) -> Result<(Scan, Survey, [f64; 3])> {
    let fields = ready.fields;
    let families = ready.families.clone();
    let companions = request.companions.len();
    let weight = weight(&ready.grid);
    let moving =
        request.frame == Frame::Box && families.iter().map(|f| &f.indicator).chain(&request.companions).any(|i| i.depends_on_frame());
    let known = match request.frame {
        Frame::Given(velocity) if fields.velocity => velocity,
        _ => [0.0; 3],
    };
    let still = ready.deriver(known, None);
    let (mut scan, survey, frame) = if moving {
        // The mean must be known before an indicator that depends on it is surveyed.
        let (scan, _) = ready.pass(observe).survey(None, true, &families, companions)?;
        reject_bad_cells(&scan, snapshot)?;
        let frame = whole::mean_velocity(&scan, weight, fields);
        let deriver = ready.deriver(frame, None);
        let (_, survey) = ready.pass(observe).survey(Some(&deriver), false, &families, companions)?;
        (scan, survey, frame)
    } else {
        let (scan, survey) = ready.pass(observe).survey(Some(&still), true, &families, companions)?;
        reject_bad_cells(&scan, snapshot)?;
        let frame = if request.frame == Frame::Box { whole::mean_velocity(&scan, weight, fields) } else { known };
        (scan, survey, frame)
    };
    reject_overflow::<T>(&survey_sums(&survey), snapshot)?;
    if let Some(digest) = &ready.stored_digest {
        scan.digest.clone_from(digest);
    }
    Ok((scan, survey, frame))
}

/// Volume of the box over that of its largest cell.
fn weight(grid: &Grid) -> f64 {
    if !grid.is_stretched() {
        return grid.cells() as f64;
    }
    (0..3).map(|a| (0..grid.n[a]).map(|i| grid.width(a, i)).sum::<f64>() / grid.largest_width(a)).product()
}

fn kept<T: Real>(source: &mut dyn PlaneSource<T>, observe: &dyn Observe) -> Result<MemorySource<T>> {
    let grid = source.grid().clone();
    let fields = source.fields();
    let plane = grid.plane_cells();
    let mut components = vec![vec![T::ZERO; plane * grid.n[2]]; fields.components()];
    observe.stage("read", grid.n[2] as u64);
    let step = source.natural_planes().max(1);
    for z in (0..grid.n[2]).step_by(step) {
        let end = (z + step).min(grid.n[2]);
        let mut slices: Vec<&mut [T]> = components.iter_mut().map(|c| &mut c[z * plane..end * plane]).collect();
        source.read(z, end, &mut slices)?;
        observe.advance((end - z) as u64);
    }
    observe.done();
    Ok(MemorySource::new(grid, fields, components))
}

fn reject_bad_cells(scan: &Scan, snapshot: &Snapshot) -> Result<()> {
    if scan.not_finite == 0 {
        return Ok(());
    }
    let name = |c: usize| snapshot.components.get(c).cloned().unwrap_or_else(|| format!("component {c}"));
    let places: Vec<String> = scan.first_not_finite.iter().map(|(c, [x, y, z])| format!("{} at x={x} y={y} z={z}", name(*c))).collect();
    Err(Error::data("cannot use the snapshot")
        .item(&snapshot.name)
        .expected("finite values")
        .found(format!("{} NaN or infinite, first {}", scan.not_finite, places.join(", ")))
        .hint("indices count from 0; was the file written completely?"))
}

fn survey_sums(survey: &Survey) -> Vec<f64> {
    let fields = [&survey.velocity, &survey.magnetic].into_iter().flat_map(|g| [g.curl2, g.strain2, g.div2]);
    fields.chain(survey.indicators.iter().flat_map(|s| [s.sum, s.square_sum])).collect()
}

/// Squares and products can leave the range of the storage precision where the field itself does not.
pub(super) fn reject_overflow<T: Real>(sums: &[f64], snapshot: &Snapshot) -> Result<()> {
    if sums.iter().all(|s| s.is_finite()) {
        return Ok(());
    }
    Err(Error::data("cannot use the snapshot")
        .item(&snapshot.name)
        .expected(format!("values whose squares and products fit {}", T::NAME))
        .found("an overflow")
        .hint("choose units in which lengths, velocities and fields are of order 1, or store it in f64"))
}
