//! Numbers of the whole box that follow from the survey: mean fields, bounds of sums, divergences, Kolmogorov length.

use crate::base::real::Real;
use crate::model::contents::{SUMS, Sum};
use crate::model::request::Request;
use crate::model::source::Fields;
use crate::model::statistics::{IndicatorStats, Scan, Survey};
use crate::space::grid::Grid;
use crate::survey::levels::{self, Divergence};

/// Below this ratio of mean to fluctuating magnetic field there is no guide field, and removing the mean changes nothing worth a column.
pub const GUIDE_RATIO: f64 = 0.01;

/// Volume mean of the velocity; 0 without one.
pub fn mean_velocity(scan: &Scan, weight: f64, fields: Fields) -> [f64; 3] {
    if !fields.velocity {
        return [0.0; 3];
    }
    std::array::from_fn(|c| scan.components[c].sum / weight)
}

/// The mean magnetic field and |⟨b⟩|/b′, b′ the root of ⟨|b − ⟨b⟩|²⟩; missing without a field that is anywhere different from 0.
pub fn guide_field(scan: &Scan, weight: f64, fields: Fields) -> Option<([f64; 3], f64)> {
    if !fields.magnetic {
        return None;
    }
    let b = &scan.components[fields.first_magnetic()..][..3];
    let mean: [f64; 3] = std::array::from_fn(|c| b[c].sum / weight);
    let mean2: f64 = mean.iter().map(|m| m * m).sum();
    let variance = b.iter().map(|c| c.square_sum).sum::<f64>() / weight - mean2;
    // Without any fluctuation the ratio is infinite.
    (mean2 > 0.0 || variance > 0.0).then(|| (mean, (mean2 / variance.max(0.0)).sqrt()))
}

/// Bounds of the summed quantities that do not depend on the family.
pub fn common_bounds(scan: &Scan, survey: &Survey, fields: Fields, frame: [f64; 3], mean_field: Option<[f64; 3]>) -> [f64; SUMS] {
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
        let first = fields.first_magnetic();
        let product = square(first, [0.0; 3]) * survey.magnetic.curl2_max;
        b[Sum::Current2 as usize] = survey.magnetic.curl2_max;
        b[Sum::Lorentz2 as usize] = product;
        b[Sum::Current2Field2 as usize] = product;
        if let Some(mean) = mean_field {
            let product = square(first, mean) * survey.magnetic.curl2_max;
            b[Sum::Lorentz2Fluct as usize] = product;
            b[Sum::Current2Field2Fluct as usize] = product;
        }
    }
    b
}

/// Largest magnitude of an indicator.
pub fn bound(stats: &IndicatorStats) -> f64 {
    stats.min.abs().max(stats.max.abs())
}

/// Divergence of the velocity and of the magnetic field.
pub fn divergences<T: Real>(scan: &Scan, survey: &Survey, grid: &Grid, fields: Fields) -> [Divergence; 2] {
    let n = survey.weight;
    let spacing = grid.smallest_spacing();
    let rms = |first: usize| (scan.components[first..first + 3].iter().map(|c| c.square_sum).sum::<f64>() / n).sqrt();
    let none = Divergence { ratio: None, explained: None };
    [
        if fields.velocity { levels::divergence::<T>(&survey.velocity, n, rms(0), spacing) } else { none },
        if fields.magnetic { levels::divergence::<T>(&survey.magnetic, n, rms(fields.first_magnetic()), spacing) } else { none },
    ]
}

/// The Kolmogorov length: as given, else (ν³/ε)^¼ with ε as given (and ν effective, where it is not), else with ε = 2ν⟨S:S⟩ + η⟨|j|²⟩; missing where a coefficient
/// that belongs to the total is unknown.
pub fn kolmogorov(survey: &Survey, fields: Fields, request: &Request) -> Option<f64> {
    if request.kolmogorov_length.is_some() {
        return request.kolmogorov_length;
    }
    let nu = effective_viscosity(survey, fields, request).filter(|_| fields.velocity)?;
    let n = survey.weight;
    let from_gradients = || {
        let ohmic = if fields.magnetic { request.resistivity? * survey.magnetic.curl2 / n } else { 0.0 };
        Some(2.0 * nu * survey.velocity.strain2 / n + ohmic)
    };
    let epsilon = request.dissipation.or_else(from_gradients)?;
    (epsilon > 0.0 && nu > 0.0).then(|| (nu.powi(3) / epsilon).sqrt().sqrt())
}

/// The viscosity that integrals of 2ν S:S are made with: as given, else, without a magnetic field, the effective one ε/(2⟨S:S⟩) of the
/// given dissipation.
pub fn effective_viscosity(survey: &Survey, fields: Fields, request: &Request) -> Option<f64> {
    request.viscosity.or_else(|| {
        let strain2 = survey.velocity.strain2 / survey.weight;
        request.dissipation.filter(|_| fields.velocity && !fields.magnetic && strain2 > 0.0).map(|e| e / (2.0 * strain2))
    })
}
