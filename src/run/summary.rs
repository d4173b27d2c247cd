//! `run.json`: what a run was asked, what it read, levels, statistics, shares and warnings. Nothing in it depends on threads or times.

use serde_json::{Value, json};

use crate::export::hdf5::axes;
use crate::export::json::number;
use crate::math::stats::Cosine;
use crate::model::contents::{COSINES, Contents, Scales, Sum};
use crate::model::object::Tally;
use crate::model::request::{Indicator, Request, Surfaces};
use crate::model::statistics::{Alignment, GradientStats};
use crate::read::{InputSpec, Staggering, Stretch};
use crate::run::analysis::{Analysis, FamilyResult};

/// The request and the reading options: everything that a result depends on besides the data.
pub fn request(request: &Request, input: &InputSpec) -> Value {
    let families: Vec<String> = request.families.iter().map(ToString::to_string).collect();
    let names = |list: &[Indicator]| list.iter().map(|i| i.name()).collect::<Vec<_>>();
    let run_rms: serde_json::Map<String, Value> = request.run_rms.iter().map(|(family, rms)| (family.clone(), json!(rms))).collect();
    let mut out = json!({
        "families": families,
        "families_default": request.families.is_empty(),
        "run_rms": run_rms,
        "connectivity": request.connectivity.neighbours(),
        "min_cells": request.min_cells,
        "max_object_cells": request.max_object_cells,
        "viscosity": number(request.viscosity),
        "resistivity": number(request.resistivity),
        "dissipation": number(request.dissipation),
        "kolmogorov_length": number(request.kolmogorov_length),
        "frame": request.frame.to_string(),
        "derivative": request.scheme.name(),
        "filter": request.filter.map(|f| f.to_string()),
        "portable": request.portable,
        "companions": names(&request.companions),
        "mesh_values": names(&request.mesh_values),
        "surfaces": match request.surfaces { Surfaces::None => "none", Surfaces::Together => "together", Surfaces::Each => "each" },
        "surface_min_cells": request.surface_min_cells,
    });
    if let (Some(out), Value::Object(reading)) = (out.as_object_mut(), reading(input)) {
        out.extend(reading);
    }
    out
}

fn reading(input: &InputSpec) -> Value {
    let stretch = |s: &Option<Stretch>| match s {
        None => Value::Null,
        Some(Stretch::Indices(first, end)) => json!({ "first": first, "end": end }),
        Some(Stretch::Positions(from, to)) => json!({ "from": from, "to": to }),
    };
    let raw = input.raw.as_ref().map(|r| {
        json!({
            "precision": if r.double { "f64" } else { "f32" },
            "byte_order": if r.big_endian { "big" } else { "little" },
            "shape": r.shape,
            "offset": r.offset,
            "record_markers": r.record_markers,
        })
    });
    json!({
        "velocity": input.velocity,
        "magnetic": input.magnetic,
        "buoyancy": input.buoyancy,
        "density": input.density,
        "magnetic_at": match input.staggering {
            Staggering::Centres => "centres",
            Staggering::LowerFaces => "lower faces",
            Staggering::UpperFaces => "upper faces",
        },
        "order": input.order,
        "lengths": input.lengths,
        "spacing": input.spacing,
        "coordinates": input.coordinates,
        "origin": input.origin,
        "periodic": axes(input.periodic),
        "region": input.region.iter().map(stretch).collect::<Vec<_>>(),
        "raw": raw,
        "time_from": { "attribute": input.time.attribute, "dataset": input.time.dataset, "name": input.time.name },
    })
}

/// Conventions a reader of the numbers needs.
pub fn conventions() -> Value {
    json!({
        "rms": "root of the volume mean of the square; of the magnitude for vectors",
        "mean_field": "over_fluctuations is |<b>| over the root of <|b - <b>|^2>, of the whole vector, not of one component",
        "filter": "sharp: wavenumbers |k| <= pi / width kept; gaussian: exp(-k^2 width^2 / 24); of the fields as derived from, b after division by the root of a density",
        "run_rms": "root of the mean over snapshots of that mean square",
        "volume": "level read from counts in bins a relative 2^-12 wide: at most one bin off",
        "peak": "cells in descending order belong to the slope of their highest neighbour; a lower peak joins a higher one across a saddle \
                 beyond the fraction of the higher; each slope beyond the fraction of its peak is an object",
        "gradient_variance_lost": "sum (k^2 - k'^2) E over sum k^2 E from one-dimensional spectra of sampled lines, k' the scheme's modified wavenumber",
        "curl": "right-handed",
        "q": "(|omega|^2 / 4) - (S:S / 2), S = (A + A^T) / 2, A_ij = du_i/dx_j",
        "dissipation": "viscous 2 nu S:S, Ohmic eta |j|^2, magnetic field in velocity units",
        "mean_curvature_integral": "half the surface integral of the two principal curvatures (sphere 4 pi R)",
        "euler": "of the body, half that of its surface",
        "ids": "by smallest cell index, z slowest",
        "digest": "BLAKE3 over the decoded planes: shape and precision, then one hash a z-plane",
    })
}

/// One snapshot.
pub fn snapshot(a: &Analysis, path: &str, datasets: &[String]) -> Value {
    let n = a.survey.weight;
    let lengths: Vec<f64> = (0..3).map(|k| a.grid.length(k)).collect();
    let names = a.fields.names();
    let components: Vec<Value> = a
        .scan
        .components
        .iter()
        .enumerate()
        .map(|(k, c)| {
            json!({
                "name": names[k],
                "mean": c.sum / n,
                "rms": (c.square_sum / n).sqrt(),
                "min": c.min,
                "max": c.max,
            })
        })
        .collect();
    let families: Vec<Value> = a.families.iter().map(|f| family(a, f)).collect();
    json!({
        "snapshot": a.snapshot.name,
        "path": path,
        "datasets": datasets,
        "time": number(a.snapshot.time),
        "precision": a.precision,
        "digest": a.scan.digest,
        "cells": a.grid.n,
        "spacing": a.grid.spacing,
        "lengths": lengths,
        "origin": a.grid.origin,
        "periodic": axes(a.grid.periodic),
        "coordinates": a.grid.stretched.iter().map(|s| s.as_ref().map(|s| s.positions.clone())).collect::<Vec<_>>(),
        "compressible": a.fields.compressible,
        "components": components,
        "frame_velocity": a.frame,
        "mean_field": a.guide_field.map(|(mean, ratio)| json!({ "mean": mean, "over_fluctuations": number(Some(ratio)) })),
        "velocity": if a.fields.velocity { gradient(&a.survey.velocity, n, a, 0) } else { Value::Null },
        "magnetic": if a.fields.magnetic { gradient(&a.survey.magnetic, n, a, 1) } else { Value::Null },
        "kolmogorov_length": number(a.kolmogorov_length),
        "alignment": alignment(&a.alignment),
        "families": families,
        "warnings": a.warnings,
    })
}

fn gradient(g: &GradientStats, n: f64, a: &Analysis, which: usize) -> Value {
    let d = &a.divergence[which];
    let mut out = json!({
        "curl_rms": (g.curl2 / n).sqrt(),
        "curl_max": g.curl2_max.sqrt(),
        "divergence_over_curl": number(d.ratio),
        "divergence_explained": number(d.explained),
    });
    let (lost, first) = if which == 0 { (a.gradient_loss.velocity, 0) } else { (a.gradient_loss.magnetic, a.fields.first_magnetic()) };
    out["gradient_variance_lost"] = number(lost);
    let components = a.gradient_loss.components.iter().skip(first).take(3);
    out["gradient_variance_lost_by_axis"] = components.map(|c| c.map(number).to_vec()).collect();
    if which == 0 {
        out["strain2_mean"] = json!(g.strain2 / n);
    }
    out
}

fn family(a: &Analysis, f: &FamilyResult) -> Value {
    let n = a.survey.weight;
    let k = a.families.iter().position(|g| g.family.name == f.family.name).unwrap_or(0);
    let s = &a.survey.indicators[k];
    let rms = (s.square_sum / n).sqrt();
    let share = |t: &Tally, c: &Contents| shares(a, t, c, &f.scales);
    let listed = share(&f.listed, &f.contents);
    let mut background = listed.clone();
    let dropped = share(&f.dropped.tally, &f.dropped.contents);
    for key in ["volume", "viscous", "ohmic"] {
        let rest = background[key].as_f64().zip(dropped[key].as_f64()).map(|(p, q)| 1.0 - p - q);
        background[key] = number(rest);
    }
    json!({
        "family": f.family.name,
        "definition": f.family.to_string(),
        "indicator": f.family.indicator.name(),
        "level": f.level,
        "inner_level": number(f.inner_level),
        "level_in_rms": number((rms > 0.0).then(|| f.level / rms)),
        "volume_fraction": f.volume_fraction,
        "indicator_mean": s.sum / n,
        "indicator_rms": rms,
        "indicator_min": s.min,
        "indicator_max": s.max,
        "objects": f.rows.len(),
        "dropped_objects": f.dropped.objects,
        "dropped_cells": f.dropped.tally.moments.count,
        "oversized_objects": f.oversized,
        "shares": { "objects": listed, "dropped": dropped, "background": background },
        "alignment": { "objects": alignment(&f.inside), "outside": alignment(&f.outside) },
    })
}

/// Shares of the box total; objects, dropped ones and background add up to 1.
fn shares(a: &Analysis, t: &Tally, c: &Contents, scales: &Scales) -> Value {
    let of = |part: f64, whole: f64| number((whole > 0.0).then(|| part / whole));
    json!({
        "volume": t.weight() / a.survey.weight,
        "viscous": if a.fields.velocity { of(c.sum(Sum::Strain2, scales), a.survey.velocity.strain2) } else { Value::Null },
        "ohmic": if a.fields.magnetic { of(c.sum(Sum::Current2, scales), a.survey.magnetic.curl2) } else { Value::Null },
    })
}

fn alignment(a: &Alignment) -> Value {
    let ratio = |p: f64, q: f64| number((q > 0.0).then(|| p / q));
    let mut out = json!({
        "lamb_sin2": ratio(a.lamb2, a.u2w2),
        "lorentz_sin2": ratio(a.lorentz2, a.j2b2),
        "sin2_uncorrelated": 2.0 / 3.0,
    });
    if a.j2b2_fluct > 0.0 {
        out["lorentz_sin2_fluct"] = ratio(a.lorentz2_fluct, a.j2b2_fluct);
    }
    for (name, c) in COSINES.iter().zip(&a.cosines) {
        if c.defined > 0 {
            out[*name] = cosine(c);
        }
    }
    out
}

fn cosine(c: &Cosine) -> Value {
    json!({
        "cells": c.defined,
        "mean": number(c.mean()),
        "abs_mean": number(c.abs_mean()),
        "aligned": number(c.aligned_share()),
        "histogram": c.bins,
    })
}
