//! What the user should know about one snapshot, in words.

use crate::model::columns::{Col, Value};
use crate::model::request::{Extent, Indicator, Level, Request};
use crate::model::source::Fields;
use crate::model::statistics::Survey;
use crate::run::analysis::FamilyResult;
use crate::survey::levels::Divergence;

/// Deviation of a volume fraction from the one asked for that is worth a word.
const FRACTION_MISS: f64 = 0.05;

/// Families whose indicator does not rise above the round-off of the gradients it is made of, or of the storage precision.
pub fn round_off(families: &[FamilyResult], survey: &Survey, epsilon: f64) -> Vec<String> {
    let gradient = ((survey.velocity.curl2 + survey.velocity.strain2) / survey.weight).sqrt();
    let mut out = Vec::new();
    for (f, stats) in families.iter().zip(&survey.indicators) {
        // Round-off of a product of as many gradients; that of a root is the root of it.
        let floor = match f.family.indicator {
            Indicator::Q | Indicator::Lambda2 | Indicator::PressureLaplacian => 1e3 * epsilon * gradient.powi(2),
            Indicator::Delta => 1e3 * epsilon * gradient.powi(6),
            Indicator::Swirling => (1e3 * epsilon).sqrt() * gradient,
            _ => 0.0,
        };
        let largest = stats.min.abs().max(stats.max.abs());
        // Below this, values in single precision have lost digits or are 0.
        let smallest = if epsilon > 1e-10 { 1e-31 } else { 1e-290 };
        if gradient > 0.0 && (largest < floor || (floor > 0.0 && largest < smallest)) {
            out.push(format!(
                "family {}: the largest value of {} is {largest:.1e}, no more than round-off: its objects mean nothing",
                f.family.name,
                f.family.indicator.name()
            ));
        }
    }
    out
}

/// Six significant digits, plain where that is short.
fn six_digits(v: f64) -> String {
    let rounded: f64 = format!("{v:.5e}").parse().unwrap_or(v);
    if rounded == 0.0 || (1e-4..1e7).contains(&rounded.abs()) { format!("{rounded}") } else { format!("{rounded:e}") }
}

/// Everything worth a warning, in a fixed order.
pub fn warnings(divergence: &[Divergence; 2], families: &[FamilyResult], fields: Fields, request: &Request) -> Vec<String> {
    let mut out = Vec::new();
    for (d, name) in divergence.iter().zip(["velocity", "magnetic field"]) {
        // Neither a compressible velocity nor B/√ρ is solenoidal.
        if fields.compressible {
            continue;
        }
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
        if let Extent::Single(Level::Volume(asked)) = f.family.extent()
            && (f.volume_fraction / asked - 1.0).abs() > FRACTION_MISS
        {
            out.push(format!(
                "family {}: {} of the box lies beyond the level, {asked} was asked for: many cells share one value",
                f.family.name,
                six_digits(f.volume_fraction)
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
        let wrapping = f.rows.iter().filter(|r| matches!(r.get(Col::Wraps), Value::Text(t) if !t.is_empty())).count();
        if wrapping > 0 {
            out.push(format!(
                "family {}: closed on themselves through the box, so without lengths: {wrapping} of {} objects",
                f.family.name,
                f.rows.len()
            ));
        }
    }
    let stated = request.dissipation.is_some() || request.kolmogorov_length.is_some();
    if !stated && fields.velocity && fields.magnetic && request.viscosity.is_some() != request.resistivity.is_some() {
        out.push("only one of viscosity and resistivity is given: columns in Kolmogorov lengths need both".to_string());
    }
    out
}
