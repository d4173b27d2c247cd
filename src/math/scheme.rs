//! Derivative schemes: their names, their central weights, and what they make of a wave.

/// Half width of the widest central stencil: order 8 needs four samples on each side.
pub const HALF: usize = 4;

/// How first derivatives are taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scheme {
    /// Central differences of order 2.
    Fd2,
    /// Central differences of order 4.
    Fd4,
    /// Central differences of order 6.
    Fd6,
    /// Central differences of order 8.
    Fd8,
    /// The nine-point stencil whose modified wavenumber is optimised: [`OPTIMISED`]. Of order 8 beside open faces.
    Opt,
    /// Exact on periodic axes (one-dimensional transforms), `Fd8` on open ones.
    Spectral,
}

/// Every scheme with its name.
pub const SCHEMES: [(&str, Scheme); 6] = [
    ("fd2", Scheme::Fd2),
    ("fd4", Scheme::Fd4),
    ("fd6", Scheme::Fd6),
    ("fd8", Scheme::Fd8),
    ("opt", Scheme::Opt),
    ("spectral", Scheme::Spectral),
];

/// Up to which kΔx the optimised stencil is fitted: the largest (to two decimals) for which its modified wavenumber stays within
/// 0.1 % of k all the way. Order 8 keeps to that up to 0.97.
pub const OPTIMISED_UP_TO: f64 = 1.43;

/// Weights of the offsets 1 to 4 of the optimised stencil. Two of them are spent on order 4, the other two minimise
/// ∫ (k*Δx − kΔx)² d(kΔx) from 0 to [`OPTIMISED_UP_TO`]; a test does it again.
pub const OPTIMISED: [f64; HALF] =
    [0.838_225_687_048_126_4, -0.240_987_382_959_080_64, 0.057_633_899_299_811_4, -0.007_288_154_757_349_828];

const ORDER_2: [f64; HALF] = [1.0 / 2.0, 0.0, 0.0, 0.0];
const ORDER_4: [f64; HALF] = [2.0 / 3.0, -1.0 / 12.0, 0.0, 0.0];
const ORDER_6: [f64; HALF] = [3.0 / 4.0, -3.0 / 20.0, 1.0 / 60.0, 0.0];
const ORDER_8: [f64; HALF] = [4.0 / 5.0, -1.0 / 5.0, 4.0 / 105.0, -1.0 / 280.0];

impl Scheme {
    /// Its name.
    pub fn name(self) -> &'static str {
        SCHEMES.iter().find(|(_, s)| *s == self).map_or("", |(n, _)| n)
    }

    /// The scheme of that name; `auto` is `fd8`.
    pub fn named(name: &str) -> Option<Scheme> {
        if name == "auto" { Some(Scheme::Fd8) } else { SCHEMES.iter().find(|(n, _)| *n == name).map(|(_, s)| *s) }
    }

    /// Weights of the offsets 1 to 4 on equally spaced samples one apart, those of −1 to −4 being their negatives; none for
    /// transforms.
    pub fn central(self) -> Option<[f64; HALF]> {
        match self {
            Scheme::Fd2 => Some(ORDER_2),
            Scheme::Fd4 => Some(ORDER_4),
            Scheme::Fd6 => Some(ORDER_6),
            Scheme::Fd8 => Some(ORDER_8),
            Scheme::Opt => Some(OPTIMISED),
            Scheme::Spectral => None,
        }
    }

    /// The central stencil whose difference to this scheme is a measure of the truncation error: of the next lower order, or
    /// higher, where there is no lower one. For transforms, which leave none out, it is order 8: what a flow that was solved with
    /// differences would show.
    pub fn comparison(self) -> [f64; HALF] {
        match self {
            Scheme::Fd4 => ORDER_2,
            Scheme::Fd2 | Scheme::Fd6 => ORDER_4,
            Scheme::Fd8 | Scheme::Opt => ORDER_6,
            Scheme::Spectral => ORDER_8,
        }
    }

    /// Samples that it and its comparison read on each side of a position.
    pub fn half(self) -> usize {
        match self {
            Scheme::Fd2 | Scheme::Fd4 => 2,
            Scheme::Fd6 => 3,
            Scheme::Fd8 | Scheme::Opt | Scheme::Spectral => 4,
        }
    }

    /// Nodes of its one-sided stencils, and of all on stretched axes: enough for its order.
    pub fn nodes(self) -> usize {
        match self {
            Scheme::Fd2 => 3,
            Scheme::Fd4 => 5,
            Scheme::Fd6 => 7,
            Scheme::Fd8 | Scheme::Opt | Scheme::Spectral => 9,
        }
    }

    /// The fewest samples an axis must have.
    pub fn fewest_samples(self) -> usize {
        2 * self.half() + 1
    }
}

/// k*Δx, what a scheme makes of a wave of wavenumber k, for `k_dx` from 0 to π. A transform makes k of it, and 0 of π, the wave
/// whose derivative has no sign.
pub fn modified_wavenumber(scheme: Scheme, k_dx: f64) -> f64 {
    match scheme.central() {
        Some(weights) => of_weights(&weights, k_dx),
        // Wavenumbers are multiples of 2π/n: none but the last comes that near to π.
        None if k_dx > std::f64::consts::PI * (1.0 - 1e-9) => 0.0,
        None => k_dx,
    }
}

fn of_weights(weights: &[f64; HALF], k_dx: f64) -> f64 {
    2.0 * weights.iter().enumerate().map(|(i, w)| w * libm::sin((i + 1) as f64 * k_dx)).sum::<f64>()
}

#[cfg(test)]
mod tests {
    use std::f64::consts::PI;

    use super::*;
    use crate::math::fornberg::fornberg;

    #[test]
    fn names_round_trip() {
        assert_eq!(Scheme::named("auto"), Some(Scheme::Fd8));
        for (name, scheme) in SCHEMES {
            assert_eq!((Scheme::named(name), scheme.name()), (Some(scheme), name));
        }
        assert_eq!(Scheme::named("fd3"), None);
    }

    #[test]
    fn central_weights_follow_from_the_general_rule() {
        for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8] {
            let half = scheme.nodes() / 2;
            let nodes: Vec<f64> = (0..scheme.nodes()).map(|i| i as f64 - half as f64).collect();
            let w = fornberg(0.0, &nodes);
            let central = scheme.central().unwrap();
            for k in 0..half {
                assert!((w[half + 1 + k] - central[k]).abs() < 1e-15 && (w[half - 1 - k] + central[k]).abs() < 1e-15);
            }
            assert!(central[half..].iter().all(|&w| w == 0.0));
        }
    }

    /// ∫ f over [0, OPTIMISED_UP_TO] by Simpson's rule; its error, h⁴, is far below what is asked of it.
    fn integral(f: impl Fn(f64) -> f64) -> f64 {
        const PANELS: usize = 2000;
        let h = OPTIMISED_UP_TO / (2 * PANELS) as f64;
        let weight = |i: usize| if i == 0 || i == 2 * PANELS { 1.0 } else { 2.0 + 2.0 * (i % 2) as f64 };
        (0..=2 * PANELS).map(|i| weight(i) * f(i as f64 * h)).sum::<f64>() * h / 3.0
    }

    /// What two of the weights cost in the other two, order 4 being kept: Σ 2k w_k = 1 and Σ k³ w_k = 0.
    const FREE: [[f64; HALF]; 2] = [[5.0, -4.0, 1.0, 0.0], [16.0, -10.0, 0.0, 1.0]];

    #[test]
    fn the_optimised_stencil_is_of_order_4_and_its_squared_error_has_no_slope() {
        let w = OPTIMISED;
        let moment = |power: i32, w: &[f64; HALF]| -> f64 { w.iter().zip(1..).map(|(w, k)| w * f64::from(k).powi(power)).sum() };
        assert!((2.0 * moment(1, &w) - 1.0).abs() < 1e-15 && moment(3, &w).abs() < 1e-15);
        for free in &FREE {
            assert!(moment(1, free).abs() < 1e-15 && moment(3, free).abs() < 1e-15);
            // Normal equations of least squares: the error is orthogonal to every admissible change. The problem is convex.
            let slope = integral(|t| (t - of_weights(&w, t)) * of_weights(free, t));
            let size = integral(|t| of_weights(free, t).powi(2)).sqrt() * integral(|t| (t - of_weights(&w, t)).powi(2)).sqrt();
            assert!(slope.abs() < 1e-9 * size, "{slope:e} of {size:e}");
            for step in [-1e-4, 1e-4] {
                let moved: [f64; HALF] = std::array::from_fn(|k| w[k] + step * free[k]);
                assert!(integral(|t| (t - of_weights(&moved, t)).powi(2)) > integral(|t| (t - of_weights(&w, t)).powi(2)));
            }
        }
    }

    /// The weights again, by solving the normal equations for another limit.
    fn fitted(up_to: f64) -> [f64; HALF] {
        let scaled = |f: &dyn Fn(f64) -> f64| integral(|t| f(t * up_to / OPTIMISED_UP_TO));
        let dot = |a: &[f64; HALF], b: &[f64; HALF]| scaled(&|t| of_weights(a, t) * of_weights(b, t));
        let rest = |a: &[f64; HALF]| scaled(&|t| of_weights(a, t) * (t - of_weights(&ORDER_4, t)));
        let [p, q] = &FREE;
        let (pp, pq, qq, rp, rq) = (dot(p, p), dot(p, q), dot(q, q), rest(p), rest(q));
        let det = pp * qq - pq * pq;
        let (a, b) = ((rp * qq - rq * pq) / det, (rq * pp - rp * pq) / det);
        std::array::from_fn(|k| ORDER_4[k] + a * p[k] + b * q[k])
    }

    fn largest_relative_error(w: &[f64; HALF], up_to: f64) -> f64 {
        (1..=2000).map(|i| f64::from(i) * up_to / 2000.0).map(|t| (of_weights(w, t) / t - 1.0).abs()).fold(0.0, f64::max)
    }

    #[test]
    fn the_optimised_stencil_is_the_solution_and_its_limit_the_largest_for_a_thousandth() {
        let again = fitted(OPTIMISED_UP_TO);
        assert!(again.iter().zip(OPTIMISED).all(|(a, b)| (a - b).abs() < 1e-8), "{again:?}");
        assert!(largest_relative_error(&OPTIMISED, OPTIMISED_UP_TO) < 1e-3);
        let further = OPTIMISED_UP_TO + 0.01;
        assert!(largest_relative_error(&fitted(further), further) > 1e-3);
    }

    /// Closed forms: k*Δx of order 2 is sin θ, of order 4 (4/3) sin θ − (1/6) sin 2θ; order p starts to err with θ^(p+1), the
    /// first neglected term of the Taylor series.
    #[test]
    fn modified_wavenumbers_match_closed_forms() {
        for t in [0.0f64, 0.3, 1.0, 2.0, 3.0, PI] {
            assert!((modified_wavenumber(Scheme::Fd2, t) - t.sin()).abs() < 1e-15);
            assert!((modified_wavenumber(Scheme::Fd4, t) - (4.0 * t.sin() - 0.5 * (2.0 * t).sin()) / 3.0).abs() < 1e-15);
            let (s, c) = t.sin_cos();
            let six = s * (22.0 - 9.0 * c + 2.0 * c * c) / 15.0;
            assert!((modified_wavenumber(Scheme::Fd6, t) - six).abs() < 1e-14, "{t}: {six}");
        }
        // Leading errors θ³/6, θ⁵/30, θ⁷/140, θ⁹/630.
        for (scheme, order, divisor) in [(Scheme::Fd2, 2, 6.0), (Scheme::Fd4, 4, 30.0), (Scheme::Fd6, 6, 140.0), (Scheme::Fd8, 8, 630.0)] {
            let t = 0.1f64;
            let miss = (t - modified_wavenumber(scheme, t)) * divisor / t.powi(order + 1);
            assert!((miss - 1.0).abs() < 0.01 || order == 8 && (miss - 1.0).abs() < 0.05, "{scheme:?}: {miss}");
        }
        assert_eq!(modified_wavenumber(Scheme::Spectral, 3.1), 3.1);
        assert_eq!(modified_wavenumber(Scheme::Spectral, PI), 0.0);
    }

    /// The judge of divergence takes three times the difference to the comparison for the truncation error, up to 2.09.
    #[test]
    fn three_comparisons_cover_the_error_up_to_two_thirds() {
        for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8, Scheme::Opt] {
            for t in (1..=209).map(|i| f64::from(i) * 0.01) {
                let made = modified_wavenumber(scheme, t);
                let difference = (made - of_weights(&scheme.comparison(), t)).abs();
                // The error of opt is small enough where its comparison crosses it.
                let allowed = if scheme == Scheme::Opt { 1e-3 * t } else { 0.0 };
                assert!((t - made).abs() <= 3.0 * difference + allowed + 1e-15, "{scheme:?} at {t}");
            }
        }
    }
}
