//! The scalar that a family thresholds, along one row.

use crate::base::real::Real;
use crate::derive::alignment::{dot, pair};
use crate::model::request::Indicator;
use crate::model::rows::Rows;

/// Fills `out` with the indicator. A cosine is 0 where it is undefined, so that every indicator is finite.
pub fn row<T: Real>(indicator: Indicator, rows: &Rows<T>, viscosity: T, resistivity: T, out: &mut Vec<T>) {
    out.clear();
    let two = T::of(2.0);
    match indicator {
        Indicator::Vorticity => out.extend(rows.w2.iter().map(|v| v.sqrt())),
        Indicator::Enstrophy => out.extend_from_slice(&rows.w2),
        Indicator::Current => out.extend(rows.j2.iter().map(|v| v.sqrt())),
        Indicator::Q => out.extend(rows.w2.iter().zip(&rows.strain2).map(|(&w, &s)| T::of(0.25) * w - T::of(0.5) * s)),
        Indicator::Strain => out.extend(rows.strain2.iter().map(|v| v.sqrt())),
        Indicator::DissipationViscous => out.extend(rows.strain2.iter().map(|&s| two * viscosity * s)),
        Indicator::DissipationOhmic => out.extend(rows.j2.iter().map(|&j| resistivity * j)),
        Indicator::Helicity => dot(&rows.u, &rows.w, out),
        Indicator::CrossHelicity => dot(&rows.u, &rows.b, out),
        Indicator::CurrentHelicity => dot(&rows.j, &rows.b, out),
        Indicator::RelativeHelicity => {
            pair(&rows.u, &rows.w, out, None);
            for v in out.iter_mut().filter(|v| !v.is_finite()) {
                *v = T::ZERO;
            }
        }
        Indicator::Lamb => cross_magnitude(&rows.u, &rows.w, out),
        Indicator::Lorentz => cross_magnitude(&rows.j, &rows.b, out),
        Indicator::Speed => magnitude(&rows.u, out),
        Indicator::Field => magnitude(&rows.b, out),
        _ => unimplemented!("{}", indicator.name()),
    }
}

fn magnitude<T: Real>(a: &[Vec<T>; 3], out: &mut Vec<T>) {
    dot(a, a, out);
    for v in out.iter_mut() {
        *v = v.sqrt();
    }
}

fn cross_magnitude<T: Real>(a: &[Vec<T>; 3], b: &[Vec<T>; 3], out: &mut Vec<T>) {
    let (mut cosine, mut product) = (Vec::new(), Vec::new());
    pair(a, b, &mut cosine, Some((out, &mut product)));
    for v in out.iter_mut() {
        *v = v.sqrt();
    }
}
