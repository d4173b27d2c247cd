//! One row of the catalogue from an object's sums and its surface.

use crate::math::moments::principal_axes;
use crate::math::stats::Cosine;
use crate::math::surface::SurfaceMeasures;
use crate::measure::classify::{Evidence, class};
use crate::model::columns::{Col, Row, Value};
use crate::model::object::{Object, Scales, Sum};
use crate::model::source::Fields;
use crate::space::grid::Grid;

/// What is the same for all objects of a family in a snapshot.
#[derive(Debug, Clone)]
pub struct Context {
    /// Name of the snapshot.
    pub snapshot: String,
    /// Its time, where known.
    pub time: Option<f64>,
    /// Name of the family.
    pub family: String,
    /// Its absolute level.
    pub level: f64,
    /// The grid.
    pub grid: Grid,
    /// The fields.
    pub fields: Fields,
    /// Kinematic viscosity.
    pub viscosity: Option<f64>,
    /// Magnetic diffusivity.
    pub resistivity: Option<f64>,
    /// Kolmogorov length of the total dissipation.
    pub kolmogorov_length: Option<f64>,
    /// Box sum of S:S over cells.
    pub strain2: f64,
    /// Box sum of |j|² over cells.
    pub current2: f64,
    /// Scales of the exact sums.
    pub scales: Scales,
}

/// Below this many cells of thickness an object is flagged `under_resolved`.
const UNDER_RESOLVED: f64 = 3.0;
/// Below this many, `marginal`.
const MARGINAL: f64 = 5.0;

/// A surface in several pieces is measured by its largest one when the object is at least [`UNDER_RESOLVED`] cells thick and
/// that piece holds at least this share of the volume.
const MAIN_SHARE: f64 = 0.9;

/// Builds the row. `surface` is missing for objects over the size limit.
pub fn row(context: &Context, object: &Object, surface: Option<&SurfaceMeasures>) -> Row {
    let mut r = Row::default();
    let mut flags: Vec<&str> = Vec::new();
    identity(context, object, &mut r, &mut flags);
    let extents = moments(context, object, &mut r);
    sums(context, object, &mut r, &mut flags);
    alignment(context, object, &mut r, &mut flags);
    shape(context, object, surface, extents, &mut r, &mut flags);
    r.set(Col::Flags, Value::Text(flags.join(" ")));
    r
}

fn identity(c: &Context, object: &Object, r: &mut Row, flags: &mut Vec<&str>) {
    let t = &object.tally;
    r.set(Col::Snapshot, Value::Text(c.snapshot.clone()));
    r.number(Col::Time, c.time);
    r.set(Col::Family, Value::Text(c.family.clone()));
    r.set(Col::Id, Value::Integer(object.id as i64));
    r.number(Col::Level, Some(c.level));
    r.set(Col::Cells, Value::Integer(t.moments.count as i64));
    r.number(Col::Volume, Some(t.moments.count as f64 * c.grid.largest_cell()));
    let axes: Vec<&str> = (0..3).filter(|&a| object.spans[a]).map(|a| ["x", "y", "z"][a]).collect();
    let faces: Vec<&str> = (0..6).filter(|&f| t.open_faces >> f & 1 == 1).map(|f| ["x-", "x+", "y-", "y+", "z-", "z+"][f]).collect();
    if !axes.is_empty() {
        flags.push("wraps");
    }
    if !faces.is_empty() {
        flags.push("open");
    }
    r.set(Col::Wraps, Value::Text(axes.join(" ")));
    r.set(Col::OpenFaces, Value::Text(faces.join(" ")));
    let absent = [
        (!c.fields.velocity, "no_velocity"),
        (!c.fields.magnetic, "no_magnetic"),
        (c.fields.velocity && c.viscosity.is_none(), "no_viscosity"),
        (c.fields.magnetic && c.resistivity.is_none(), "no_resistivity"),
        (c.time.is_none(), "no_time"),
    ];
    flags.extend(absent.into_iter().filter(|(yes, _)| *yes).map(|(_, flag)| flag));
}

/// Sets what comes from the moments; returns the extents over the axes along which the object is finite.
fn moments(c: &Context, object: &Object, r: &mut Row) -> [f64; 3] {
    let m = &object.tally.moments;
    let centre = m.centre();
    for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
        r.number(col, (!object.spans[a]).then(|| c.grid.position(a, centre[a])));
    }
    let peak = c.grid.coordinates(object.tally.peak_cell);
    r.number(Col::Peak, Some(object.tally.peak));
    for (a, col) in [Col::PeakX, Col::PeakY, Col::PeakZ].into_iter().enumerate() {
        r.number(col, Some(c.grid.position(a, peak[a] as f64)));
    }
    let mut covariance = m.covariance(c.grid.spacing);
    let closed = object.spans.iter().any(|&s| s);
    // Moments along an axis on which the object closes on itself mean nothing; the others still tell its section.
    for a in (0..3).filter(|&a| object.spans[a]) {
        for b in 0..3 {
            covariance[a][b] = 0.0;
            covariance[b][a] = 0.0;
        }
    }
    let (values, axes) = principal_axes(covariance);
    let extents = values.map(|v| (12.0 * v.max(0.0)).sqrt());
    if closed {
        return extents;
    }
    let columns = [
        (Col::Extent1, Col::Extent1Eta, [Col::Axis1X, Col::Axis1Y, Col::Axis1Z]),
        (Col::Extent2, Col::Extent2Eta, [Col::Axis2X, Col::Axis2Y, Col::Axis2Z]),
        (Col::Extent3, Col::Extent3Eta, [Col::Axis3X, Col::Axis3Y, Col::Axis3Z]),
    ];
    for (k, (extent, in_eta, axis)) in columns.into_iter().enumerate() {
        r.number(extent, Some(extents[k]));
        r.number(in_eta, c.kolmogorov_length.map(|l| extents[k] / l));
        for (a, col) in axis.into_iter().enumerate() {
            r.number(col, Some(axes[k][a]));
        }
    }
    extents
}

fn sums(c: &Context, object: &Object, r: &mut Row, flags: &mut Vec<&str>) {
    let t = &object.tally;
    let n = t.moments.count as f64;
    let volume = c.grid.largest_cell();
    let sum = |s: Sum| t.sum(s, &c.scales);
    r.number(Col::IndicatorMean, Some(sum(Sum::Indicator) / n));
    let ratio = |a: f64, b: f64| (b > 0.0).then(|| a / b);
    if c.fields.velocity {
        let strain2 = sum(Sum::Strain2);
        r.number(Col::DissipationViscous, c.viscosity.map(|nu| 2.0 * nu * strain2 * volume));
        r.number(Col::ViscousShare, ratio(strain2, c.strain2));
        r.number(Col::LambSin2, ratio(sum(Sum::Lamb2), sum(Sum::Speed2Vorticity2)));
    }
    if c.fields.magnetic {
        let current2 = sum(Sum::Current2);
        r.number(Col::DissipationOhmic, c.resistivity.map(|eta| eta * current2 * volume));
        r.number(Col::OhmicShare, ratio(current2, c.current2));
        r.number(Col::LorentzSin2, ratio(sum(Sum::Lorentz2), sum(Sum::Current2Field2)));
    }
    let undirected =
        (c.fields.velocity && r.get(Col::LambSin2) == &Value::Missing) || (c.fields.magnetic && r.get(Col::LorentzSin2) == &Value::Missing);
    if undirected {
        flags.push("undefined_direction");
    }
}

fn alignment(c: &Context, object: &Object, r: &mut Row, flags: &mut Vec<&str>) {
    let present = [c.fields.velocity, c.fields.magnetic, c.fields.velocity && c.fields.magnetic];
    let columns = [
        [Col::CosUVorticity, Col::AbsCosUVorticity, Col::AlignedUVorticity, Col::HistogramUVorticity],
        [Col::CosCurrentB, Col::AbsCosCurrentB, Col::AlignedCurrentB, Col::HistogramCurrentB],
        [Col::CosUB, Col::AbsCosUB, Col::AlignedUB, Col::HistogramUB],
    ];
    for k in (0..3).filter(|&k| present[k]) {
        let cosine: &Cosine = &object.tally.cosines[k];
        let [mean, magnitude, aligned, histogram] = columns[k];
        r.number(mean, cosine.mean());
        r.number(magnitude, cosine.abs_mean());
        r.number(aligned, cosine.aligned_share());
        r.set(histogram, Value::Counts(cosine.bins.to_vec()));
        if cosine.defined < object.tally.moments.count && !flags.contains(&"undefined_direction") {
            flags.push("undefined_direction");
        }
    }
}

fn shape(c: &Context, object: &Object, surface: Option<&SurfaceMeasures>, extents: [f64; 3], r: &mut Row, flags: &mut Vec<&str>) {
    let closed = object.spans.iter().any(|&s| s);
    let mut evidence = Evidence { extents, spans: object.spans, ..Evidence::default() };
    match surface {
        None => flags.push("additive_only"),
        // A surface cut off by an open face bounds no body: nothing of it is the object's own.
        Some(s) if s.open_edges > 0 || object.tally.open_faces != 0 => {}
        Some(s) => {
            let volume = s.volume.unwrap_or(object.tally.moments.count as f64 * c.grid.largest_cell());
            let thickness = 3.0 * volume / s.area;
            r.number(Col::SurfaceArea, Some(s.area));
            r.number(Col::MeanCurvatureIntegral, Some(s.mean_curvature_integral));
            // An even number for a closed surface, so half of it is whole.
            r.set(Col::Euler, Value::Integer(s.euler_surface / 2));
            r.number(Col::ShapefinderThickness, Some(thickness));
            r.number(Col::ShapefinderThicknessEta, c.kolmogorov_length.map(|l| thickness / l));
            let cells = thickness / c.grid.spacing.iter().fold(0.0f64, |a, &b| a.max(b));
            if cells < UNDER_RESOLVED {
                flags.push("under_resolved");
            } else if cells < MARGINAL {
                flags.push("marginal");
            }
            let whole = Body { volume, area: s.area, curvature: s.mean_curvature_integral };
            let body = match s.largest {
                Some(p) if s.bodies > 1 => {
                    flags.push("fragmented");
                    // Crumbs at the corner of a resolved object do no harm; a surface that frays for want of cells has no shape.
                    let main = cells >= UNDER_RESOLVED && p.volume >= MAIN_SHARE * volume;
                    main.then_some(Body { volume: p.volume, area: p.area, curvature: p.mean_curvature_integral })
                }
                _ => Some(whole),
            };
            if let Some(body) = body {
                evidence = Evidence { handles: Some(s.handles), ..shapefinders(c, &body, closed, evidence, r, flags) };
            }
        }
    }
    r.set(Col::Class, Value::Text(class(&evidence).to_string()));
}

/// What shapefinders are made of.
struct Body {
    volume: f64,
    area: f64,
    curvature: f64,
}

/// Sets width, length, planarity and filamentarity; returns the evidence with them.
fn shapefinders(c: &Context, body: &Body, closed: bool, evidence: Evidence, r: &mut Row, flags: &mut Vec<&str>) -> Evidence {
    let thickness = 3.0 * body.volume / body.area;
    let width = (body.curvature > 0.0).then(|| body.area / body.curvature);
    let length = (!closed && body.curvature > 0.0).then(|| body.curvature / (4.0 * std::f64::consts::PI));
    let step = |a: f64, b: Option<f64>| b.map(|b| (b - a) / (b + a));
    let planarity = step(thickness, width);
    let filamentarity = width.and_then(|w| step(w, length));
    let lengths = [(Col::ShapefinderWidth, Col::ShapefinderWidthEta, width), (Col::ShapefinderLength, Col::ShapefinderLengthEta, length)];
    for (col, in_eta, value) in lengths {
        r.number(col, value);
        r.number(in_eta, value.zip(c.kolmogorov_length).map(|(v, l)| v / l));
    }
    r.number(Col::Planarity, planarity);
    r.number(Col::Filamentarity, filamentarity);
    if body.curvature <= 0.0 {
        flags.push("curvature_not_positive");
    }
    Evidence { curvature: Some(body.curvature), planarity, filamentarity, ..evidence }
}
