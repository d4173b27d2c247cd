//! From families and a survey to what every family's cells and sums are made with.

use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::detect::Criterion;
use crate::math::stats::Scale;
use crate::model::contents::{SUMS, Scales, Sum};
use crate::model::request::{Extent, Family, Level, Request, Side};
use crate::model::statistics::Survey;
use crate::run::analysis::Snapshot;
use crate::run::whole;
use crate::survey::levels;

/// One criterion a family; `common` bounds the sums that do not depend on the family.
///
/// # Errors
/// `Data` when a second level is not the weaker one, or peaks do not stand out from 0.
pub fn criteria<T: Real>(
    families: &[Family],
    survey: &Survey,
    common: [f64; SUMS],
    request: &Request,
    snapshot: &Snapshot,
) -> Result<Vec<Criterion>> {
    let extras: Vec<Scale> = survey.extras.iter().map(|s| Scale::for_bound(whole::bound(s))).collect();
    let mut out = Vec::new();
    for (k, f) in families.iter().enumerate() {
        let stats = &survey.indicators[k];
        let mut bounds = common;
        bounds[Sum::Indicator as usize] = whole::bound(stats);
        let run_rms = request.run_rms.iter().find(|(name, _)| *name == f.name).map(|(_, rms)| *rms);
        let settle = |level: Level| levels::absolute::<T>(level, f.side, stats, survey.weight, run_rms);
        let stronger = |inner: f64, outer: f64| match f.side {
            Side::Above => inner > outer,
            Side::Below => inner < outer,
        };
        let refuse = |expected: &str, found: String| {
            Err(Error::data("cannot detect family")
                .item(format!("\"{f}\" in {}", snapshot.name))
                .expected(expected)
                .found(found)
                .hint("look at the indicator's range in run.json of a run with another level"))
        };
        let (level, inner) = match f.extent() {
            Extent::Single(level) => (settle(level), None),
            Extent::Grown { inner, outer } => {
                let (inner, outer) = (settle(inner), settle(outer));
                if !stronger(inner, outer) {
                    return refuse("a second level that takes in more cells than the first", format!("{inner} down to {outer}"));
                }
                (outer, Some(inner))
            }
            Extent::FromPeaks { inner, fraction } => {
                let inner = settle(inner);
                if !stronger(inner, 0.0) {
                    return refuse("peaks on the far side of 0 from their surroundings", format!("the level {inner}"));
                }
                (T::of(fraction * inner).wide(), Some(inner))
            }
        };
        out.push(Criterion {
            family: k,
            side: f.side,
            level,
            inner,
            connectivity: request.connectivity,
            scales: Scales { sums: bounds.map(Scale::for_bound), extras: extras.clone() },
        });
    }
    Ok(out)
}
