//! What the user should know about one snapshot, in words.

use crate::model::columns::{Col, Value};
use crate::model::request::Request;
use crate::model::source::Fields;
use crate::run::analysis::FamilyResult;
use crate::survey::levels::Divergence;

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
