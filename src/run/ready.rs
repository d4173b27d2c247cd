//! A checked source and its survey: what has to be known before levels are settled.

use std::path::PathBuf;
use std::sync::Arc;
use std::time::Instant;

use crate::base::budget::Budget;
use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::base::real::Real;
use crate::derive::{Deriver, Plan, Room, ZLines, fewest_samples, filter, z_lines};
use crate::model::request::{Family, Frame, Request};
use crate::model::source::{Fields, MemorySource, PlaneSource};
use crate::model::statistics::{Alignment, Scan, Survey};
use crate::run::analysis::{Execution, Snapshot};
use crate::run::kept::Kept;
use crate::run::memory::{Arrangement, arrange};
use crate::run::passes::Pass;
use crate::run::stream::Buffers;
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
    arrangement: Arrangement,
    budget: Budget,
    buffers: Buffers<T>,
    plan: Plan,
    scratch: Option<PathBuf>,
    /// Derivatives along z of the whole box, where the scheme takes them line by line.
    z_lines: Option<Arc<ZLines<T>>>,
    /// Digest of what is stored, where something else is surveyed.
    stored_digest: Option<String>,
}

impl<T: Real> Ready<T> {
    /// Checks the request against the source.
    pub fn new(
        source: Box<dyn PlaneSource<T>>,
        snapshot: &Snapshot,
        request: &Request,
        execution: &Execution,
        observe: &dyn Observe,
    ) -> Result<Self> {
        let grid = source.grid().clone();
        let fields = source.fields();
        let families = request.families_for(fields)?;
        check_grid(&grid, &snapshot.name, request)?;
        let plan = derived(&families, request);
        let arrangement = arrange(&*source, &plan, request, &families, execution, &snapshot.name)?;
        let budget = Budget::new(arrangement.objects);
        let buffers = Buffers::default();
        let mut ready = Ready {
            source,
            grid,
            fields,
            families,
            arrangement,
            budget,
            buffers,
            plan,
            scratch: execution.scratch.clone(),
            z_lines: None,
            stored_digest: None,
        };
        if let Some(filter) = &request.filter {
            // Bad cells and the digest are those of what is stored.
            let scan = ready.scan(snapshot, observe)?;
            ready.stored_digest = Some(scan.digest);
            let room = Room { bytes: ready.arrangement.filter_room, scratch: execution.scratch.as_deref() };
            ready.source = filter::filtered(&mut *ready.source, filter, &room, observe)?;
        }
        Ok(ready)
    }

    /// Reads everything once, and keeps the planes where that is arranged.
    fn scan(&mut self, snapshot: &Snapshot, observe: &dyn Observe) -> Result<Scan> {
        let keep = self.arrangement.keep_planes && (self.source.is_costly() || self.is_slow()?);
        let (scan, planes) = self.pass(observe).scan(keep)?;
        reject_bad_cells(&scan, snapshot)?;
        if let Some(planes) = planes {
            self.source = Box::new(MemorySource::new(self.grid.clone(), self.fields, planes));
        }
        Ok(scan)
    }

    /// Whether reading takes longer than memory of our own would: what the system has in its cache is read again for less.
    fn is_slow(&mut self) -> Result<bool> {
        const BYTES_PER_SECOND: f64 = 4e8;
        if self.source.held().is_some() {
            return Ok(false);
        }
        let planes = self.arrangement.ranges.last().map_or(0, ExactSizeIterator::len);
        let cells = planes * self.grid.plane_cells();
        // Memory that was never touched would be what is timed.
        let mut values = vec![vec![T::of(1.0); cells]; self.fields.components()];
        let mut slices: Vec<&mut [T]> = values.iter_mut().map(Vec::as_mut_slice).collect();
        let began = Instant::now();
        self.source.read(self.grid.n[2] - planes, self.grid.n[2], &mut slices)?;
        let bytes = (cells * slices.len() * size_of::<T>()) as f64;
        Ok(began.elapsed().as_secs_f64() * BYTES_PER_SECOND > bytes)
    }

    /// What derives rows from its planes.
    pub fn deriver(&self, frame: [f64; 3], mean_field: Option<[f64; 3]>) -> Deriver<T> {
        Deriver::new(&self.grid, self.fields, Plan { frame, mean_field, ..self.plan.clone() }).with_z_lines(self.z_lines.clone())
    }

    /// A pass over the planes.
    pub fn pass<'a>(&'a mut self, observe: &'a dyn Observe) -> Pass<'a, T> {
        let Ready { source, arrangement, buffers, budget, .. } = self;
        Pass { source: &mut **source, ranges: arrangement.ranges.clone(), buffers, budget, observe }
    }

    /// Gives the memory of the kept indicators, which are gone, to objects.
    pub fn release_kept(&mut self) {
        if self.arrangement.keep_indicators {
            self.budget.grow(self.arrangement.indicators);
        }
    }
}

/// What a snapshot is found to hold before levels are settled.
pub(super) struct Surveyed<T> {
    /// Raw statistics and digest.
    pub scan: Scan,
    /// Derived statistics.
    pub survey: Survey,
    /// Alignment over the box.
    pub alignment: Alignment,
    /// Velocity that is subtracted.
    pub frame: [f64; 3],
    /// Mean magnetic field and its ratio to the fluctuations.
    pub guide: Option<([f64; 3], f64)>,
    /// The mean field, where it is strong enough to be left out in further columns.
    pub mean_field: Option<[f64; 3]>,
    /// Indicators that stay in memory.
    pub kept: Option<Kept<T>>,
}

/// The survey of a source; with `detecting`, all that detection wants to know as well.
pub(super) fn surveyed<T: Real>(
    ready: &mut Ready<T>,
    snapshot: &Snapshot,
    request: &Request,
    detecting: bool,
    observe: &dyn Observe,
) -> Result<Surveyed<T>> {
    let fields = ready.fields;
    let families = ready.families.clone();
    let companions = request.companions.len();
    let weight = weight(&ready.grid);
    let mut scan = ready.scan(snapshot, observe)?;
    if let Some(wanted) = ready.deriver([0.0; 3], None).wanted_z_lines() {
        let room = Room { bytes: ready.arrangement.lines_room, scratch: ready.scratch.as_deref() };
        ready.z_lines = Some(Arc::new(z_lines(&mut *ready.source, &wanted, &room, observe)?));
    }
    let frame = match request.frame {
        Frame::Box => whole::mean_velocity(&scan, weight, fields),
        Frame::Given(velocity) if fields.velocity => velocity,
        _ => [0.0; 3],
    };
    let guide = whole::guide_field(&scan, weight, fields);
    let mean_field = guide.filter(|(_, ratio)| *ratio >= whole::GUIDE_RATIO).map(|(mean, _)| mean);
    let deriver = ready.deriver(frame, mean_field);
    let mut kept = (detecting && ready.arrangement.keep_indicators).then(|| Kept::new(&ready.grid, &families));
    let (survey, alignment) = ready.pass(observe).survey(&deriver, &families, companions, detecting, kept.as_mut())?;
    let mut sums = survey_sums(&survey);
    sums.extend([alignment.lamb2, alignment.u2w2, alignment.lorentz2, alignment.j2b2]);
    reject_overflow::<T>(&sums, snapshot)?;
    if let Some(digest) = &ready.stored_digest {
        scan.digest.clone_from(digest);
    }
    Ok(Surveyed { scan, survey, alignment, frame, guide, mean_field, kept })
}

/// Volume of the box over that of its largest cell.
fn weight(grid: &Grid) -> f64 {
    if !grid.is_stretched() {
        return grid.cells() as f64;
    }
    (0..3).map(|a| (0..grid.n[a]).map(|i| grid.width(a, i)).sum::<f64>() / grid.largest_width(a)).product()
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
fn reject_overflow<T: Real>(sums: &[f64], snapshot: &Snapshot) -> Result<()> {
    if sums.iter().all(|s| s.is_finite()) {
        return Ok(());
    }
    Err(Error::data("cannot use the snapshot")
        .item(&snapshot.name)
        .expected(format!("values whose squares and products fit {}", T::NAME))
        .found("an overflow")
        .hint("choose units in which lengths, velocities and fields are of order 1, or store it in f64"))
}
