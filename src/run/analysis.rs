//! One snapshot from planes to rows: settles levels and orders the passes.

use std::sync::Arc;

use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::base::real::Real;
use crate::derive::{Deriver, Plan, fewest_samples, z_lines};
use crate::detect::Criterion;
use crate::math::stats::Scale;
use crate::measure::row::{Context, row};
use crate::model::columns::Row;
use crate::model::object::{Detected, Object, SUMS, Scales, Sum, Tally};
use crate::model::request::{Family, Frame, Request, Side, Surfaces};
use crate::model::source::{AnySource, Fields, MemorySource, PlaneSource};
use crate::model::statistics::{Alignment, GradientLoss, Scan, Survey};
use crate::model::surface::SurfaceSink;
use crate::run::passes::{Pass, ShapePlan};
use crate::run::stream::{Buffers, block_ranges};
use crate::space::grid::Grid;
use crate::survey::levels::{self, Divergence};
use crate::survey::spectra;

/// How a run is carried out; nothing here changes a result.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Execution {
    /// Planes a block; chosen from the snapshot where not given.
    pub block_planes: Option<usize>,
    /// A source that is costly to read (compressed, transposed) is read once and kept when its fields fit in so many bytes.
    pub keep_bytes: u64,
}

impl Default for Execution {
    fn default() -> Self {
        Execution { block_planes: None, keep_bytes: 2 << 30 }
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
    /// Its absolute level.
    pub level: f64,
    /// Fraction of the box beyond the level.
    pub volume_fraction: f64,
    /// Rows of the catalogue, by id.
    pub rows: Vec<Row>,
    /// Sums over all listed objects; coordinates and peak have no meaning.
    pub listed: Tally,
    /// Number of objects left out for their size, and their sums.
    pub dropped: (u64, Tally),
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
    sink: &mut (dyn SurfaceSink + Send),
) -> Result<Analysis> {
    match source {
        AnySource::F32(s) => typed(s, snapshot, request, execution, observe, sink),
        AnySource::F64(s) => typed(s, snapshot, request, execution, observe, sink),
    }
}

fn typed<T: Real>(
    mut source: Box<dyn PlaneSource<T>>,
    snapshot: Snapshot,
    request: &Request,
    execution: &Execution,
    observe: &dyn Observe,
    sink: &mut (dyn SurfaceSink + Send),
) -> Result<Analysis> {
    let grid = source.grid().clone();
    let fields = source.fields();
    let families = request.families_for(fields)?;
    for (a, axis) in ["x", "y", "z"].iter().enumerate() {
        let fewest = fewest_samples(request.scheme, &grid, a);
        if grid.n[a] < fewest {
            return Err(Error::input("cannot derive along an axis")
                .item(format!("{} axis {axis}", snapshot.name))
                .expected(format!("at least {fewest} samples"))
                .found(grid.n[a].to_string())
                .hint(format!("--derivative {} reads {fewest} samples", request.scheme.name())));
        }
    }
    let bytes = grid.cells() * fields.components() as u64 * size_of::<T>() as u64;
    let ranges = block_ranges(&*source, execution.block_planes);
    if source.is_costly() && bytes <= execution.keep_bytes {
        source = Box::new(kept(&mut *source, observe)?);
    }
    let plan = Plan {
        indicators: families.iter().map(|f| f.indicator).collect(),
        extras: request.extras(),
        scheme: request.scheme,
        frame: [0.0; 3],
        mean_field: None,
        viscosity: request.viscosity,
        resistivity: request.resistivity,
    };
    let wanted_lines = Deriver::<T>::new(&grid, fields, plan.clone()).wanted_z_lines();
    let lines = wanted_lines.map(|wanted| z_lines(&mut *source, &wanted, observe)).transpose()?.map(Arc::new);
    let deriver = |frame| Deriver::<T>::new(&grid, fields, Plan { frame, ..plan.clone() }).with_z_lines(lines.clone());
    let mut pass = Pass { source: &mut *source, ranges, buffers: Buffers::default(), observe };
    let moving = request.frame == Frame::Box && families.iter().any(|f| f.indicator.depends_on_frame());
    let (scan, survey, frame) = if moving {
        // The mean must be known before an indicator that depends on it is surveyed.
        let (scan, _) = pass.survey(None, true, &families)?;
        reject_bad_cells(&scan, &snapshot)?;
        let frame = mean_velocity(&scan, &grid, fields);
        let (_, survey) = pass.survey(Some(&deriver(frame)), false, &families)?;
        (scan, survey, frame)
    } else {
        let (scan, survey) = pass.survey(Some(&deriver([0.0; 3])), true, &families)?;
        reject_bad_cells(&scan, &snapshot)?;
        let frame = if request.frame == Frame::Box { mean_velocity(&scan, &grid, fields) } else { [0.0; 3] };
        (scan, survey, frame)
    };

    reject_overflow::<T>(&survey_sums(&survey), &snapshot)?;
    let deriver = deriver(frame);
    let common = common_bounds(&scan, &survey, fields, frame);
    let criteria: Vec<Criterion> = families
        .iter()
        .enumerate()
        .map(|(k, f)| {
            let stats = &survey.indicators[k];
            let mut bounds = common;
            bounds[Sum::Indicator as usize] = stats.min.abs().max(stats.max.abs());
            Criterion {
                family: k,
                side: f.side,
                level: levels::absolute::<T>(f.level, f.side, stats, survey.cells),
                connectivity: request.connectivity,
                scales: Scales(bounds.map(Scale::for_bound)),
            }
        })
        .collect();
    let (mut found, alignment) = pass.detect(&deriver, &criteria, request.min_cells)?;
    reject_overflow::<T>(&[alignment.lamb2, alignment.u2w2, alignment.lorentz2, alignment.j2b2], &snapshot)?;
    let plan = ShapePlan {
        max_cells: request.max_object_cells,
        mesh_cells: (request.surfaces != Surfaces::None).then_some(request.surface_min_cells),
    };
    let shapes = pass.shapes(&deriver, &criteria, &mut found, &plan, sink)?;

    let divergence = divergences::<T>(&scan, &survey, &grid, fields);
    let gradient_loss = spectra::loss(&scan.lines, &grid, fields, request.scheme);
    let kolmogorov_length = kolmogorov(&survey, fields, request);
    let mut results = Vec::new();
    for (((family, criterion), detected), shapes) in families.iter().zip(&criteria).zip(found).zip(shapes) {
        let context = Context {
            snapshot: snapshot.name.clone(),
            time: snapshot.time,
            family: family.name.clone(),
            level: criterion.level,
            grid: grid.clone(),
            fields,
            viscosity: request.viscosity,
            resistivity: request.resistivity,
            kolmogorov_length,
            strain2: survey.velocity.strain2,
            current2: survey.magnetic.curl2,
            scales: criterion.scales,
        };
        let rows = detected.objects.iter().zip(&shapes).map(|(o, s)| row(&context, o, s.as_ref().map(|s| &s.measures))).collect();
        let oversized = shapes.iter().filter(|s| s.is_none()).count() as u64;
        results.push(summed(family, criterion, detected, rows, oversized, &grid, &alignment));
    }
    let warnings = warnings(&divergence, &results, fields, request);
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
        alignment,
        families: results,
        warnings,
    })
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

fn mean_velocity(scan: &Scan, grid: &Grid, fields: Fields) -> [f64; 3] {
    if !fields.velocity {
        return [0.0; 3];
    }
    std::array::from_fn(|c| scan.components[c].sum / grid.cells() as f64)
}

/// Bounds of the summed quantities that do not depend on the family.
fn common_bounds(scan: &Scan, survey: &Survey, fields: Fields, frame: [f64; 3]) -> [f64; SUMS] {
    let square = |first: usize, shift: [f64; 3]| -> f64 {
        (0..3)
            .map(|c| {
                let s = &scan.components[first + c];
                (s.min - shift[c]).abs().max((s.max - shift[c]).abs()).powi(2)
            })
            .sum()
    };
    let mut b = [0.0; SUMS];
    if fields.velocity {
        let product = square(0, frame) * survey.velocity.curl2_max;
        b[Sum::Strain2 as usize] = survey.velocity.strain2_max;
        b[Sum::Lamb2 as usize] = product;
        b[Sum::Speed2Vorticity2 as usize] = product;
    }
    if fields.magnetic {
        let product = square(fields.first_magnetic(), [0.0; 3]) * survey.magnetic.curl2_max;
        b[Sum::Current2 as usize] = survey.magnetic.curl2_max;
        b[Sum::Lorentz2 as usize] = product;
        b[Sum::Current2Field2 as usize] = product;
    }
    b
}

fn divergences<T: Real>(scan: &Scan, survey: &Survey, grid: &Grid, fields: Fields) -> [Divergence; 2] {
    let cells = grid.cells();
    let spacing = grid.smallest_spacing();
    let rms = |first: usize| (scan.components[first..first + 3].iter().map(|c| c.square_sum).sum::<f64>() / cells as f64).sqrt();
    let none = Divergence { ratio: None, explained: None };
    [
        if fields.velocity { levels::divergence::<T>(&survey.velocity, cells, rms(0), spacing) } else { none },
        if fields.magnetic { levels::divergence::<T>(&survey.magnetic, cells, rms(fields.first_magnetic()), spacing) } else { none },
    ]
}

/// (ν³/ε)^¼ with ε = 2ν⟨S:S⟩ + η⟨|j|²⟩; missing where a coefficient that belongs to the total is unknown.
fn kolmogorov(survey: &Survey, fields: Fields, request: &Request) -> Option<f64> {
    let nu = request.viscosity.filter(|_| fields.velocity)?;
    let n = survey.cells as f64;
    let ohmic = if fields.magnetic { request.resistivity? * survey.magnetic.curl2 / n } else { 0.0 };
    let epsilon = 2.0 * nu * survey.velocity.strain2 / n + ohmic;
    (epsilon > 0.0 && nu > 0.0).then(|| (nu.powi(3) / epsilon).powf(0.25))
}

fn inside_alignment(listed: &Tally, scales: &Scales) -> Alignment {
    Alignment {
        cosines: listed.cosines.clone(),
        lamb2: listed.sum(Sum::Lamb2, scales),
        u2w2: listed.sum(Sum::Speed2Vorticity2, scales),
        lorentz2: listed.sum(Sum::Lorentz2, scales),
        j2b2: listed.sum(Sum::Current2Field2, scales),
    }
}

fn summed(
    family: &Family,
    criterion: &Criterion,
    detected: Detected,
    rows: Vec<Row>,
    oversized: u64,
    grid: &Grid,
    whole: &Alignment,
) -> FamilyResult {
    let mut listed = Tally::empty();
    let add = |sum: &mut Tally, o: &Object| sum.merge(&o.tally, [0; 3], Side::Above);
    for o in &detected.objects {
        add(&mut listed, o);
    }
    let inside = inside_alignment(&listed, &criterion.scales);
    let beyond = listed.moments.count + detected.dropped.tally.moments.count;
    FamilyResult {
        family: family.clone(),
        level: criterion.level,
        volume_fraction: beyond as f64 / grid.cells() as f64,
        rows,
        outside: whole.without(&inside),
        inside,
        listed,
        dropped: (detected.dropped.objects, detected.dropped.tally),
        oversized,
        scales: criterion.scales,
    }
}

/// Six significant digits, plain where that is short.
fn six_digits(v: f64) -> String {
    let rounded: f64 = format!("{v:.5e}").parse().unwrap_or(v);
    if rounded == 0.0 || (1e-4..1e7).contains(&rounded.abs()) { format!("{rounded}") } else { format!("{rounded:e}") }
}

fn warnings(divergence: &[Divergence; 2], families: &[FamilyResult], fields: Fields, request: &Request) -> Vec<String> {
    let mut out = Vec::new();
    for (d, name) in divergence.iter().zip(["velocity", "magnetic field"]) {
        if let (true, Some(r), Some(e)) = (d.is_suspicious(), d.ratio, d.explained) {
            out.push(format!(
                "the {name} is not divergence-free: rms(div)/rms(curl) = {r:.2e}, truncation and round-off of the differences explain {e:.2e}; \
                 a compressible flow, swapped components, a wrong axis order or a wrong box length do this"
            ));
        }
    }
    for f in families {
        if f.rows.is_empty() {
            out.push(format!(
                "family {}: no object of at least {} cells beyond the level {}",
                f.family.name,
                request.min_cells,
                six_digits(f.level)
            ));
        }
        if f.oversized > 0 {
            out.push(format!(
                "family {}: over --max-object-cells, so with additive columns only: {} of {} objects",
                f.family.name,
                f.oversized,
                f.rows.len()
            ));
        }
        let wrapping = f
            .rows
            .iter()
            .filter(|r| matches!(r.get(crate::model::columns::Col::Wraps), crate::model::columns::Value::Text(t) if !t.is_empty()))
            .count();
        if wrapping > 0 {
            out.push(format!(
                "family {}: closed on themselves through the box, so without lengths: {wrapping} of {} objects",
                f.family.name,
                f.rows.len()
            ));
        }
    }
    if fields.velocity && fields.magnetic && request.viscosity.is_some() != request.resistivity.is_some() {
        out.push("only one of viscosity and resistivity is given: columns in Kolmogorov lengths need both".to_string());
    }
    out
}
