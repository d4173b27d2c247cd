//! The scalar that a family thresholds, along one row.

use crate::base::real::Real;
use crate::derive::alignment::{dot, pair, sine};
use crate::derive::criteria;
use crate::derive::gradient::Gradient;
use crate::model::request::Indicator;
use crate::model::rows::Rows;

/// What indicators are made from, for one row.
pub struct Sources<'a, T> {
    /// Everything derived so far.
    pub rows: &'a Rows<T>,
    /// The velocity gradient; complete where an indicator needs that.
    pub velocity: &'a Gradient<T>,
    /// The gradient of the buoyancy.
    pub buoyancy: &'a [Vec<T>; 3],
    /// Kinematic viscosity.
    pub viscosity: T,
    /// Magnetic diffusivity.
    pub resistivity: T,
    /// Whether criteria for solenoidal flow take the gradient without its trace.
    pub compressible: bool,
    /// Whether the cosines and cross products of the row are there already.
    pub aligned: bool,
}

/// Which of the quantities behind the indicators have to be derived.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Wants {
    /// Six derivatives of the velocity: the vorticity.
    pub vorticity: bool,
    /// All nine.
    pub full: bool,
    /// S:S.
    pub strain: bool,
    /// The current density.
    pub current: bool,
    /// The velocity itself.
    pub velocity: bool,
    /// The magnetic field itself.
    pub field: bool,
    /// The gradient of the buoyancy.
    pub buoyancy_gradient: bool,
}

impl Wants {
    /// What these indicators take.
    pub fn of<'a>(indicators: impl IntoIterator<Item = &'a Indicator>) -> Wants {
        use Indicator as I;
        let mut w = Wants::default();
        for &i in indicators {
            let needs = i.needs();
            w.vorticity |= needs.velocity && !matches!(i, I::Speed | I::CrossHelicity);
            w.full |= i.needs_full_gradient();
            w.strain |= i.needs_strain();
            w.current |= needs.magnetic && !matches!(i, I::Field | I::CrossHelicity);
            w.velocity |= i.depends_on_frame();
            w.field |= matches!(i, I::CrossHelicity | I::CurrentHelicity | I::Lorentz | I::LorentzSin | I::Field);
            w.buoyancy_gradient |= i == I::BuoyancyGradient;
        }
        w
    }
}

/// Fills `out` with the indicator. A cosine or sine is 0 where it is undefined, so that every indicator is finite.
pub fn row<T: Real>(indicator: Indicator, s: &Sources<'_, T>, out: &mut Vec<T>) {
    let rows = s.rows;
    let two = T::of(2.0);
    out.clear();
    match indicator {
        Indicator::Vorticity => root(&rows.w2, out),
        Indicator::Enstrophy => out.extend_from_slice(&rows.w2),
        Indicator::Current => root(&rows.j2, out),
        Indicator::Q => q(s, out),
        Indicator::PressureLaplacian => {
            q(s, out);
            for v in out.iter_mut() {
                *v = two * *v;
            }
        }
        Indicator::Delta => criteria::delta(s.velocity, out),
        Indicator::Lambda2 => criteria::lambda2(s.velocity, s.compressible, out),
        Indicator::Swirling => criteria::swirling(s.velocity, out),
        Indicator::Strain => root(&rows.strain2, out),
        Indicator::DissipationViscous => out.extend(rows.strain2.iter().map(|&v| two * s.viscosity * v)),
        Indicator::DissipationOhmic => out.extend(rows.j2.iter().map(|&j| s.resistivity * j)),
        Indicator::Helicity => dot(&rows.u, &rows.w, out),
        Indicator::CrossHelicity => dot(&rows.u, &rows.b, out),
        Indicator::CurrentHelicity => dot(&rows.j, &rows.b, out),
        Indicator::RelativeHelicity => {
            if s.aligned {
                out.extend_from_slice(&rows.cos_uw);
            } else {
                pair(&rows.u, &rows.w, out, None);
            }
            for v in out.iter_mut().filter(|v| !v.is_finite()) {
                *v = T::ZERO;
            }
        }
        Indicator::Lamb if s.aligned => root(&rows.lamb2, out),
        Indicator::Lamb => cross_magnitude(&rows.u, &rows.w, out),
        Indicator::LambSin => sine(&rows.u, &rows.w, out),
        Indicator::Lorentz if s.aligned => root(&rows.lorentz2, out),
        Indicator::Lorentz => cross_magnitude(&rows.j, &rows.b, out),
        Indicator::LorentzSin => sine(&rows.j, &rows.b, out),
        Indicator::ElsasserPlus => combined(&rows.w, &rows.j, |w, j| w + j, out),
        Indicator::ElsasserMinus => combined(&rows.w, &rows.j, |w, j| w - j, out),
        Indicator::Speed => magnitude(&rows.u, out),
        Indicator::Field => magnitude(&rows.b, out),
        Indicator::Buoyancy => out.extend_from_slice(&rows.buoyancy),
        Indicator::BuoyancyGradient => magnitude(s.buoyancy, out),
    }
}

fn q<T: Real>(s: &Sources<'_, T>, out: &mut Vec<T>) {
    let rows = s.rows;
    if s.compressible {
        criteria::q_without_trace(s.velocity, &rows.w2, &rows.strain2, out);
    } else {
        out.extend(rows.w2.iter().zip(&rows.strain2).map(|(&w, &s)| T::of(0.25) * w - T::of(0.5) * s));
    }
}

fn root<T: Real>(squares: &[T], out: &mut Vec<T>) {
    out.extend(squares.iter().map(|v| v.sqrt()));
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

/// Magnitude of a vector made component by component of two.
fn combined<T: Real>(a: &[Vec<T>; 3], b: &[Vec<T>; 3], f: impl Fn(T, T) -> T, out: &mut Vec<T>) {
    out.extend((0..a[0].len()).map(|i| {
        let [x, y, z] = [f(a[0][i], b[0][i]), f(a[1][i], b[1][i]), f(a[2][i], b[2][i])];
        (x * x + y * y + z * z).sqrt()
    }));
}
