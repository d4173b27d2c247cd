//! One snapshot from planes to rows: orders the passes.

use std::path::PathBuf;

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::base::real::Real;
use crate::detect::Criterion;
use crate::measure::row::{Context, row};
use crate::model::columns::Row;
use crate::model::contents::{Contents, Scales, Sum};
use crate::model::object::{Detected, Dropped, Tally};
use crate::model::request::{Extent, Family, Indicator, Request, Side, Surfaces};
use crate::model::sink::ObjectSink;
use crate::model::source::{AnySource, Fields, PlaneSource};
use crate::model::statistics::{Alignment, GradientLoss, Scan, Survey};
use crate::run::criteria::criteria;
use crate::run::ready::{Ready, Surveyed, surveyed};
use crate::run::shape_pass::ShapePlan;
use crate::run::warnings::{round_off, warnings};
use crate::run::whole;
use crate::space::grid::Grid;
use crate::survey::levels::Divergence;
use crate::survey::spectra;

/// How a run is carried out; nothing here changes a result.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Execution {
    /// Planes a block; chosen from the snapshot where not given.
    pub block_planes: Option<usize>,
    /// Bytes that may be used besides what the program and its threads take themselves.
    pub memory: u64,
    /// A folder for what does not fit; files in it are removed as soon as they are open.
    pub scratch: Option<PathBuf>,
}

impl Default for Execution {
    fn default() -> Self {
        Execution { block_planes: None, memory: 4 << 30, scratch: None }
    }
}

/// What is known of a snapshot besides its planes.
#[derive(Debug, Clone, PartialEq)]
pub struct Snapshot {
    /// Its name, the `snapshot` column.
    pub name: String,
    /// Its time, where known.
    pub time: Option<f64>,
    /// What its components are called in messages, in the order u, v, w, bx, by, bz; may be empty.
    pub components: Vec<String>,
}

/// One family in one snapshot.
pub struct FamilyResult {
    /// The family.
    pub family: Family,
    /// Its absolute level; of objects grown from peaks, the weakest one possible.
    pub level: f64,
    /// The absolute level that objects go beyond somewhere, where there are two.
    pub inner_level: Option<f64>,
    /// Fraction of the box beyond the level.
    pub volume_fraction: f64,
    /// Rows of the catalogue, by id.
    pub rows: Vec<Row>,
    /// All listed objects together; coordinates and peak have no meaning.
    pub listed: Tally,
    /// What these hold.
    pub contents: Contents,
    /// Those left out for their size.
    pub dropped: Dropped,
    /// Objects whose shape was not measured for their size.
    pub oversized: u64,
    /// Scales of the sums.
    pub scales: Scales,
    /// Alignment inside listed objects together.
    pub inside: Alignment,
    /// Alignment outside them.
    pub outside: Alignment,
}

/// One snapshot.
pub struct Analysis {
    /// The snapshot.
    pub snapshot: Snapshot,
    /// Storage precision, `f32` or `f64`.
    pub precision: &'static str,
    /// The grid.
    pub grid: Grid,
    /// The fields.
    pub fields: Fields,
    /// Raw statistics and digest.
    pub scan: Scan,
    /// Velocity that was subtracted.
    pub frame: [f64; 3],
    /// Derived statistics.
    pub survey: Survey,
    /// Divergence of the velocity and of the magnetic field.
    pub divergence: [Divergence; 2],
    /// What the derivative scheme leaves out, by the snapshot's own spectra.
    pub gradient_loss: GradientLoss,
    /// Kolmogorov length of the total dissipation, where the coefficients are known.
    pub kolmogorov_length: Option<f64>,
    /// Mean magnetic field and its ratio to the fluctuations, |⟨b⟩|/b′.
    pub guide_field: Option<([f64; 3], f64)>,
    /// Alignment over the box.
    pub alignment: Alignment,
    /// The families.
    pub families: Vec<FamilyResult>,
    /// What the user should know.
    pub warnings: Vec<String>,
}

/// Analyses a snapshot of either precision. Call inside a [`crate::base::par::Pool`] to choose the number of threads.
///
/// # Errors
/// `Usage` when the request does not fit the fields, `Input` and `Data` when the planes cannot be used (too few samples; NaN or
/// infinite values; values whose squares overflow the storage precision), `Output` from the sink.
pub fn analyse(
    source: AnySource,
    snapshot: Snapshot,
    request: &Request,
    execution: &Execution,
    observe: &dyn Observe,
    sink: &mut (dyn ObjectSink + Send),
) -> Result<Analysis> {
    match source {
        AnySource::F32(s) => typed(s, snapshot, request, execution, observe, sink),
        AnySource::F64(s) => typed(s, snapshot, request, execution, observe, sink),
    }
}

/// Box mean of the square of every family's indicator, for levels by the rms of a whole run.
///
/// # Errors
/// Those of [`analyse`].
pub fn mean_squares(
    source: AnySource,
    snapshot: &Snapshot,
    request: &Request,
    execution: &Execution,
    observe: &dyn Observe,
) -> Result<Vec<f64>> {
    fn typed<T: Real>(
        source: Box<dyn PlaneSource<T>>,
        snapshot: &Snapshot,
        request: &Request,
        execution: &Execution,
        observe: &dyn Observe,
    ) -> Result<Vec<f64>> {
        let mut ready = Ready::new(source, snapshot, request, execution, observe)?;
        let Surveyed { survey, .. } = surveyed(&mut ready, snapshot, request, false, observe)?;
        Ok(survey.indicators.iter().map(|s| s.square_sum / survey.weight).collect())
    }
    match source {
        AnySource::F32(s) => typed(s, snapshot, request, execution, observe),
        AnySource::F64(s) => typed(s, snapshot, request, execution, observe),
    }
}

fn typed<T: Real>(
    source: Box<dyn PlaneSource<T>>,
    snapshot: Snapshot,
    request: &Request,
    execution: &Execution,
    observe: &dyn Observe,
    sink: &mut (dyn ObjectSink + Send),
) -> Result<Analysis> {
    let mut ready = Ready::new(source, &snapshot, request, execution, observe)?;
    let Surveyed { scan, survey, alignment, frame, guide, mean_field, kept } = surveyed(&mut ready, &snapshot, request, true, observe)?;
    let (grid, fields, families) = (ready.grid.clone(), ready.fields, ready.families.clone());
    let deriver = ready.deriver(frame, mean_field);
    let common = whole::common_bounds(&scan, &survey, fields, frame, mean_field);
    let criteria = criteria::<T>(&families, &survey, common, request, &snapshot)?;
    // Regions that peaks grow in are kept whatever their size: it is the grown objects that are listed or not.
    let from_peaks = |k: usize| match families[k].extent() {
        Extent::FromPeaks { fraction, .. } => Some(fraction),
        _ => None,
    };
    let least: Vec<u64> = (0..families.len()).map(|k| if from_peaks(k).is_some() { 1 } else { request.min_cells }).collect();
    let mut found = ready.pass(observe).detect(&deriver, &criteria, &least, kept.as_ref())?;
    drop(kept);
    ready.release_kept();
    let mut pass = ready.pass(observe);
    for (k, regions) in found.iter_mut().enumerate() {
        if let Some(fraction) = from_peaks(k) {
            pass.split(&deriver, &criteria[k], fraction, regions, request.min_cells)?;
        }
    }
    pass.offer(&deriver, &families, &criteria, &found, frame, snapshot.time, sink)?;
    let extras = request.extras();
    let plan = ShapePlan {
        max_cells: request.max_object_cells,
        mesh_cells: (request.surfaces != Surfaces::None).then_some(request.surface_min_cells),
        // Speed is among the standard values already.
        mesh_extras: request
            .mesh_values
            .iter()
            .filter(|i| **i != Indicator::Speed)
            .filter_map(|i| extras.iter().position(|e| e == i))
            .collect(),
    };
    let shapes = pass.shapes(&deriver, &criteria, &mut found, &plan, sink)?;

    let divergence = whole::divergences::<T>(&scan, &survey, &grid, fields);
    let gradient_loss = spectra::loss(&scan.lines, &grid, fields, request.scheme);
    let kolmogorov_length = whole::kolmogorov(&survey, fields, request);
    let across = |first: usize| scan.components.get(first + 2).is_some_and(|c| c.min == 0.0 && c.max == 0.0);
    let in_plane = [fields.velocity && grid.is_flat() && across(0), fields.magnetic && grid.is_flat() && across(fields.first_magnetic())];
    let mut results = Vec::new();
    for (((family, criterion), detected), shapes) in families.iter().zip(&criteria).zip(found).zip(shapes) {
        let context = Context {
            snapshot: snapshot.name.clone(),
            time: snapshot.time,
            family: family.name.clone(),
            level: criterion.level,
            grid: grid.clone(),
            fields,
            viscosity: whole::effective_viscosity(&survey, fields, request),
            resistivity: request.resistivity,
            kolmogorov_length,
            in_plane,
            guide: mean_field.is_some(),
            companions: request.companions.clone(),
            strain2: survey.velocity.strain2,
            current2: survey.magnetic.curl2,
            scales: criterion.scales.clone(),
        };
        let rows = detected.objects.iter().zip(&shapes).map(|(o, s)| row(&context, o, s.as_ref().map(|s| &s.outline))).collect();
        let oversized = shapes.iter().filter(|s| s.is_none()).count() as u64;
        results.push(summed(family, criterion, detected, rows, oversized, &survey, &alignment));
    }
    let mut warnings = warnings(&divergence, &results, fields, request);
    warnings.splice(0..0, deriver.fallbacks().iter().cloned());
    warnings.extend(round_off(&results, &survey, T::EPSILON));
    for w in &warnings {
        observe.warning(&format!("{}: {w}", snapshot.name));
    }
    Ok(Analysis {
        snapshot,
        precision: T::NAME,
        grid,
        fields,
        scan,
        frame,
        survey,
        divergence,
        gradient_loss,
        kolmogorov_length,
        guide_field: guide,
        alignment,
        families: results,
        warnings,
    })
}

fn inside_alignment(listed: &Contents, scales: &Scales) -> Alignment {
    Alignment {
        cosines: listed.all_cosines(),
        lamb2: listed.sum(Sum::Lamb2, scales),
        u2w2: listed.sum(Sum::Speed2Vorticity2, scales),
        lorentz2: listed.sum(Sum::Lorentz2, scales),
        j2b2: listed.sum(Sum::Current2Field2, scales),
        lorentz2_fluct: listed.sum(Sum::Lorentz2Fluct, scales),
        j2b2_fluct: listed.sum(Sum::Current2Field2Fluct, scales),
    }
}

fn summed(
    family: &Family,
    criterion: &Criterion,
    detected: Detected,
    rows: Vec<Row>,
    oversized: u64,
    survey: &Survey,
    whole: &Alignment,
) -> FamilyResult {
    let (mut listed, mut contents) = (Tally::empty(), Contents::default());
    for o in &detected.objects {
        listed.merge(&o.tally, [0; 3], [0; 3], Side::Above);
        contents.merge(o.contents());
    }
    let inside = inside_alignment(&contents, &criterion.scales);
    let beyond = listed.weight() + detected.dropped.tally.weight();
    FamilyResult {
        family: family.clone(),
        level: criterion.level,
        inner_level: criterion.inner,
        volume_fraction: beyond / survey.weight,
        rows,
        outside: whole.without(&inside),
        inside,
        listed,
        contents,
        dropped: detected.dropped,
        oversized,
        scales: criterion.scales.clone(),
    }
}
