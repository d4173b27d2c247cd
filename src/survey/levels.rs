//! From the level a user asked for to a number, and whether a divergence is more than truncation explains.

use crate::base::real::Real;
use crate::model::request::{Level, Side};
use crate::model::statistics::{GradientStats, IndicatorStats};

/// The absolute level of a family, rounded to the storage precision so that later comparisons are exact.
///
/// `rms` is the root of the box mean of the squared indicator (for vectors: of the squared magnitude); `volume` is read from
/// counts whose bins are a relative 2^-12 wide. `n` is the weight of the box, `run_rms` the rms over all snapshots where it is asked for.
pub fn absolute<T: Real>(level: Level, side: Side, stats: &IndicatorStats, n: f64, run_rms: Option<f64>) -> f64 {
    let level = match level {
        Level::Absolute(v) => v,
        Level::Rms(v) => v * (stats.square_sum / n).sqrt(),
        Level::RunRms(v) => v * run_rms.unwrap_or(f64::NAN),
        // A fraction, not a level: each object has its own.
        Level::Peak(_) => f64::NAN,
        Level::Mean(v) => v * stats.sum / n,
        Level::Volume(fraction) => stats.quantiles.as_ref().map_or(f64::NAN, |q| {
            // A bin reaches beyond the values in it.
            let level = q.level_above(match side {
                Side::Above => fraction,
                Side::Below => 1.0 - fraction,
            });
            level.clamp(stats.min, stats.max)
        }),
    };
    T::of(level).wide()
}

/// Divergence of a field against its curl, and what the derivative scheme explains of it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Divergence {
    /// rms(div) / rms(curl); missing where the curl vanishes.
    pub ratio: Option<f64>,
    /// The largest ratio that truncation and round-off explain.
    pub explained: Option<f64>,
}

impl Divergence {
    /// Whether the field's divergence is larger than the scheme explains.
    pub fn is_suspicious(&self) -> bool {
        matches!((self.ratio, self.explained), (Some(r), Some(e)) if r > e)
    }
}

/// How many times the difference between a scheme and its comparison still counts as truncation. The error of every scheme stays
/// below three times that difference up to the two-thirds limit, wavenumber 2.09 / spacing (from the modified wavenumbers; a test of
/// [`crate::math::scheme`]).
const TRUNCATION_FACTOR: f64 = 3.0;

/// Round-off of a derivative in units of `EPSILON * rms / spacing`.
const ROUND_OFF_FACTOR: f64 = 8.0;

/// Judges a field's divergence. `rms` is the field's own rms, `spacing` the smallest one.
pub fn divergence<T: Real>(g: &GradientStats, weight: f64, rms: f64, spacing: f64) -> Divergence {
    let curl = (g.curl2 / weight).sqrt();
    if curl == 0.0 || g.sampled == 0 {
        return Divergence { ratio: None, explained: None };
    }
    let div = (g.div2 / g.div_weight).sqrt();
    let miss = (g.div_miss2 / g.sampled as f64).sqrt();
    let floor = ROUND_OFF_FACTOR * T::EPSILON * rms / spacing;
    Divergence { ratio: Some(div / curl), explained: Some((TRUNCATION_FACTOR * miss + floor) / curl) }
}
