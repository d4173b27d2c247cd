//! One row of the catalogue from an object's sums and its surface.

use crate::math::contour::ContourMeasures;
use crate::math::moments::principal_axes;
use crate::math::stats::Cosine;
use crate::math::surface::SurfaceMeasures;
use crate::measure::classify::{Evidence, TANGLED, class};
use crate::measure::surface::Outline;
use crate::model::columns::{Col, Row, Value};
use crate::model::contents::{Scales, Sum};
use crate::model::object::Object;
use crate::model::request::Indicator;
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
    /// On a plane, whether velocity and magnetic field lie in it: their cosines with a curl are then 0 by themselves.
    pub in_plane: [bool; 2],
    /// Whether there is a mean magnetic field to take off.
    pub guide: bool,
    /// Indicators with columns of their own.
    pub companions: Vec<Indicator>,
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

/// An object with more of its boundary in walls to touching ones has no surface of its own.
const MOST_WALL: f64 = 0.05;

/// Builds the row. `outline` is missing for objects over the size limit.
pub fn row(context: &Context, object: &Object, outline: Option<&Outline>) -> Row {
    let mut r = Row::default();
    let mut flags: Vec<&str> = Vec::new();
    identity(context, object, &mut r, &mut flags);
    let extents = moments(context, object, &mut r);
    sums(context, object, &mut r, &mut flags);
    alignment(context, object, &mut r, &mut flags);
    match outline {
        Some(Outline::Contour(c)) => contour(context, object, Some(c), extents, &mut r, &mut flags),
        None if context.grid.is_flat() => contour(context, object, None, extents, &mut r, &mut flags),
        Some(Outline::Surface(s)) => shape(context, object, Some(s), extents, &mut r, &mut flags),
        None => shape(context, object, None, extents, &mut r, &mut flags),
    }
    r.set(Col::Flags, Value::Text(flags.join(" ")));
    let weight = object.tally.weight();
    let held = object.contents();
    for (k, extra) in held.extras.iter().enumerate().take(context.companions.len()) {
        let mean = held.extra_sum(k, &context.scales) / weight;
        r.push_companion([Some(mean), Some(extra.min), Some(extra.max)]);
    }
    r
}

fn identity(c: &Context, object: &Object, r: &mut Row, flags: &mut Vec<&str>) {
    let t = &object.tally;
    r.set(Col::Snapshot, Value::Text(c.snapshot.clone()));
    r.number(Col::Time, c.time);
    r.set(Col::Family, Value::Text(c.family.clone()));
    r.set(Col::Id, Value::Integer(object.id as i64));
    r.number(Col::Level, Some(object.level.unwrap_or(c.level)));
    r.set(Col::Cells, Value::Integer(t.moments.count as i64));
    let size = if c.grid.is_flat() { Col::Area } else { Col::Volume };
    r.number(size, Some(t.weight() * c.grid.largest_cell()));
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
    if c.grid.is_flat() {
        flags.push("plane");
    }
    let absent = [
        (!c.fields.velocity, "no_velocity"),
        (!c.fields.magnetic, "no_magnetic"),
        (c.fields.velocity && c.viscosity.is_none(), "no_viscosity"),
        (c.fields.magnetic && c.resistivity.is_none(), "no_resistivity"),
        (c.fields.magnetic && !c.guide, "no_guide"),
        (c.time.is_none(), "no_time"),
    ];
    flags.extend(absent.into_iter().filter(|(yes, _)| *yes).map(|(_, flag)| flag));
}

/// Sets what comes from the moments; returns the extents over the axes along which the object is finite.
fn moments(c: &Context, object: &Object, r: &mut Row) -> [f64; 3] {
    let g = &c.grid;
    // On a plane nothing has a place or a direction across it.
    let dimensions = if g.is_flat() { 2 } else { 3 };
    // Where cells differ in volume, positions are weighted by it.
    let (centre, mut covariance) = match &object.tally.weighted {
        Some(w) => {
            let at = w.centre();
            let lengths = std::array::from_fn(|a| g.length(a));
            (std::array::from_fn(|a| g.origin[a] + at[a] * g.length(a)), w.covariance(lengths))
        }
        None => {
            let m = &object.tally.moments;
            let at = m.centre();
            let centre: [f64; 3] = std::array::from_fn(|a| g.position(a, at[a]));
            (centre, m.covariance(g.spacing))
        }
    };
    for (a, col) in [Col::CentroidX, Col::CentroidY, Col::CentroidZ].into_iter().enumerate() {
        r.number(col, (!object.spans[a] && a < dimensions).then_some(centre[a]));
    }
    let peak = c.grid.coordinates(object.tally.peak_cell);
    r.number(Col::Peak, Some(object.tally.peak));
    for (a, col) in [Col::PeakX, Col::PeakY, Col::PeakZ].into_iter().enumerate() {
        r.number(col, (a < dimensions).then(|| c.grid.position(a, peak[a] as f64)));
    }
    let closed = object.spans.iter().any(|&s| s);
    // Moments along an axis on which the object closes on itself mean nothing; the others still tell its section.
    for a in (0..3).filter(|&a| object.spans[a] || (a == 2 && g.is_flat())) {
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
    for (k, (extent, in_eta, axis)) in columns.into_iter().enumerate().take(dimensions) {
        r.number(extent, Some(extents[k]));
        r.number(in_eta, c.kolmogorov_length.map(|l| extents[k] / l));
        for (a, col) in axis.into_iter().enumerate().take(dimensions) {
            r.number(col, Some(axes[k][a]));
        }
    }
    extents
}

fn sums(c: &Context, object: &Object, r: &mut Row, flags: &mut Vec<&str>) {
    let t = &object.tally;
    let n = t.weight();
    let volume = c.grid.largest_cell();
    let sum = |s: Sum| object.contents().sum(s, &c.scales);
    r.number(Col::IndicatorMean, Some(sum(Sum::Indicator) / n));
    let ratio = |a: f64, b: f64| (b > 0.0).then(|| a / b);
    if c.fields.velocity {
        let strain2 = sum(Sum::Strain2);
        r.number(Col::DissipationViscous, c.viscosity.map(|nu| 2.0 * nu * strain2 * volume));
        r.number(Col::ViscousShare, ratio(strain2, c.strain2));
        if !c.in_plane[0] {
            r.number(Col::LambSin2, ratio(sum(Sum::Lamb2), sum(Sum::Speed2Vorticity2)));
        }
    }
    if c.fields.magnetic {
        let current2 = sum(Sum::Current2);
        r.number(Col::DissipationOhmic, c.resistivity.map(|eta| eta * current2 * volume));
        r.number(Col::OhmicShare, ratio(current2, c.current2));
        if !c.in_plane[1] {
            r.number(Col::LorentzSin2, ratio(sum(Sum::Lorentz2), sum(Sum::Current2Field2)));
        }
        if c.guide && !c.in_plane[1] {
            r.number(Col::LorentzSin2Fluct, ratio(sum(Sum::Lorentz2Fluct), sum(Sum::Current2Field2Fluct)));
        }
    }
    let undirected = (c.fields.velocity && !c.in_plane[0] && r.get(Col::LambSin2) == Value::Missing)
        || (c.fields.magnetic && !c.in_plane[1] && r.get(Col::LorentzSin2) == Value::Missing);
    if undirected {
        flags.push("undefined_direction");
    }
}

fn alignment(c: &Context, object: &Object, r: &mut Row, flags: &mut Vec<&str>) {
    let present = [c.fields.velocity && !c.in_plane[0], c.fields.magnetic && !c.in_plane[1], c.fields.velocity && c.fields.magnetic];
    let columns = [
        [Col::CosUVorticity, Col::AbsCosUVorticity, Col::AlignedUVorticity, Col::HistogramUVorticity],
        [Col::CosCurrentB, Col::AbsCosCurrentB, Col::AlignedCurrentB, Col::HistogramCurrentB],
        [Col::CosUB, Col::AbsCosUB, Col::AlignedUB, Col::HistogramUB],
    ];
    for k in (0..3).filter(|&k| present[k]) {
        let cosine: &Cosine = &object.contents().cosines[k];
        let [mean, magnitude, aligned, histogram] = columns[k];
        r.number(mean, cosine.mean());
        r.number(magnitude, cosine.abs_mean());
        r.number(aligned, cosine.aligned_share());
        r.set(histogram, Value::Counts(cosine.bins.to_vec()));
        if cosine.defined < object.tally.moments.count && !flags.contains(&"undefined_direction") {
            flags.push("undefined_direction");
        }
    }
    if c.guide {
        let [.., current, flow] = object.contents().all_cosines();
        if !c.in_plane[1] {
            r.number(Col::CosCurrentBFluct, current.mean());
            r.number(Col::AbsCosCurrentBFluct, current.abs_mean());
        }
        r.number(Col::CosUBFluct, flow.mean());
        r.number(Col::AbsCosUBFluct, flow.abs_mean());
    }
}

/// What a plane object's outline tells.
fn contour(c: &Context, object: &Object, contour: Option<&ContourMeasures>, extents: [f64; 3], r: &mut Row, flags: &mut Vec<&str>) {
    // As if the plane went on for ever: compact is a filament, drawn out a sheet.
    let spans = [object.spans[0], object.spans[1], true];
    let mut handles = None;
    match contour {
        None => flags.push("additive_only"),
        Some(_) if has_wall(object, flags) => {}
        Some(m) if m.open_ends > 0 || object.tally.open_faces != 0 => {}
        Some(m) => {
            r.number(Col::Perimeter, Some(m.perimeter));
            let area = object.tally.weight() * c.grid.largest_cell();
            resolution(2.0 * area / m.perimeter, c, object, flags);
            if let Some(euler) = m.euler {
                r.set(Col::Euler, Value::Integer(euler));
                handles = Some(1 - euler);
            }
        }
    }
    let tangled = handles.is_some_and(|h| h >= TANGLED);
    let word = if tangled { "tangle" } else { class(&Evidence { extents, spans, ..Evidence::default() }) };
    r.set(Col::Class, Value::Text(word.to_string()));
}

/// Whether too much of the boundary is a wall to touching objects; sets the flag.
fn has_wall(object: &Object, flags: &mut Vec<&str>) -> bool {
    let wall = object.wall > MOST_WALL;
    if wall {
        flags.push("wall");
    }
    wall
}

/// Flags what is thin against the cells at the peak; returns its thickness in cells.
fn resolution(thickness: f64, c: &Context, object: &Object, flags: &mut Vec<&str>) -> f64 {
    let peak = c.grid.coordinates(object.tally.peak_cell);
    let axes = if c.grid.is_flat() { 2 } else { 3 };
    let cells = thickness / (0..axes).map(|a| c.grid.width(a, peak[a])).fold(0.0f64, f64::max);
    if cells < UNDER_RESOLVED {
        flags.push("under_resolved");
    } else if cells < MARGINAL {
        flags.push("marginal");
    }
    cells
}

fn shape(c: &Context, object: &Object, surface: Option<&SurfaceMeasures>, extents: [f64; 3], r: &mut Row, flags: &mut Vec<&str>) {
    let closed = object.spans.iter().any(|&s| s);
    let mut evidence = Evidence { extents, spans: object.spans, ..Evidence::default() };
    match surface {
        None => flags.push("additive_only"),
        Some(_) if has_wall(object, flags) => {}
        // A surface cut off by an open face bounds no body: nothing of it is the object's own.
        Some(s) if s.open_edges > 0 || object.tally.open_faces != 0 => {}
        Some(s) => {
            let volume = s.volume.unwrap_or(object.tally.weight() * c.grid.largest_cell());
            let thickness = 3.0 * volume / s.area;
            r.number(Col::SurfaceArea, Some(s.area));
            r.number(Col::MeanCurvatureIntegral, Some(s.mean_curvature_integral));
            // An even number for a closed surface, so half of it is whole.
            r.set(Col::Euler, Value::Integer(s.euler_surface / 2));
            r.number(Col::ShapefinderThickness, Some(thickness));
            r.number(Col::ShapefinderThicknessEta, c.kolmogorov_length.map(|l| thickness / l));
            let cells = resolution(thickness, c, object, flags);
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
