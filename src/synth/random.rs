//! Solenoidal Gaussian random vector fields on a periodic box, with a chosen spectrum and helicity.

use std::f64::consts::TAU;

use crate::math::fft::{Complex, Fft3};

/// A random field u = Σ_k û_k exp(ik·x) with k·û_k = 0, zero mean and nothing on the Nyquist planes.
///
/// `n` and `lengths` are samples and box lengths along x, y, z; the result holds the x, y and z
/// components, each `[z][y][x]` with x fastest, first sample at the origin.
///
/// `amplitude(|k|)` is the root mean square of |û_k| over seeds, with |k| in radians per length
/// unit, so that ⟨|u|²⟩ averages to the sum of amplitude² over all modes (m and -m counted apart).
///
/// `helicity` in [-1, 1] is the mean of û*·(ik×û)/(|k||û|²): at 1 every mode satisfies ∇×u = |k| u, at -1
/// ∇×u = -|k| u. With a, b the amplitudes along the two helical vectors h± = (e1 ± i e2)/√2, where
/// e1, e2, k̂ are right-handed (Waleffe 1992, Phys. Fluids A 4, 350), ⟨|a|²⟩ and ⟨|b|²⟩ are
/// amplitude² (1 ± helicity)/2, and both are independent complex Gaussians.
///
/// The draws of a mode depend on `seed` and its integer wavenumbers alone: not on threads, and not
/// on `n` as long as the mode is resolved.
///
/// # Panics
/// When a size is 0, a length is not positive, or `helicity` is outside [-1, 1].
pub fn solenoidal(
    n: [usize; 3],
    lengths: [f64; 3],
    seed: u64,
    amplitude: impl Fn(f64) -> f64 + Sync + Send,
    helicity: f64,
) -> [Vec<f64>; 3] {
    assert!(lengths.iter().all(|&l| l > 0.0), "expected lengths above 0, got {lengths:?}");
    assert!((-1.0..=1.0).contains(&helicity), "expected helicity in [-1, 1], got {helicity}");
    let fft = Fft3::new(n);
    let mut spectrum = vec![Complex::default(); fft.spectrum_len()];
    // Drawing a mode anew for each component costs less than holding three spectra.
    std::array::from_fn(|component| {
        fft.fill(&mut spectrum, |_, m| {
            if m == [0; 3] || fft.is_nyquist(m) {
                return Complex::default();
            }
            // Of a pair m, -m the one above zero in the order of (x, y, z) is drawn, the other follows.
            if m > [0; 3] {
                draw(m, lengths, seed, &amplitude, helicity)[component]
            } else {
                draw(m.map(|m| -m), lengths, seed, &amplitude, helicity)[component].conj()
            }
        });
        let mut real = vec![0.0; fft.real_len()];
        fft.inverse(&mut spectrum, &mut real);
        real
    })
}

/// Amplitude vector of one mode.
fn draw(m: [i64; 3], lengths: [f64; 3], seed: u64, amplitude: impl Fn(f64) -> f64, helicity: f64) -> [Complex; 3] {
    let k: [f64; 3] = std::array::from_fn(|a| TAU * m[a] as f64 / lengths[a]);
    let norm = (k[0] * k[0] + k[1] * k[1] + k[2] * k[2]).sqrt();
    let rms = amplitude(norm);
    if rms == 0.0 {
        return [Complex::default(); 3];
    }
    let unit = k.map(|k| k / norm);
    let across = (unit[0] * unit[0] + unit[1] * unit[1]).sqrt();
    // Any direction across k serves; k along z needs its own.
    let e1 = if across > 0.0 { [unit[1] / across, -unit[0] / across, 0.0] } else { [1.0, 0.0, 0.0] };
    let e2 = [unit[1] * e1[2] - unit[2] * e1[1], unit[2] * e1[0] - unit[0] * e1[2], unit[0] * e1[1] - unit[1] * e1[0]];
    let plus = gaussian(seed, m, 0) * (rms * (0.5 * (1.0 + helicity)).sqrt());
    let minus = gaussian(seed, m, 1) * (rms * (0.5 * (1.0 - helicity)).sqrt());
    let along_e1 = (plus + minus) / 2f64.sqrt();
    let along_e2 = Complex::new(0.0, 1.0) * (plus - minus) / 2f64.sqrt();
    std::array::from_fn(|a| along_e1 * e1[a] + along_e2 * e2[a])
}

/// A complex Gaussian of unit mean square: exponential |·|², uniform phase (Box and Muller 1958).
fn gaussian(seed: u64, m: [i64; 3], draw: u64) -> Complex {
    let power = -uniform(seed, m, 2 * draw).ln();
    Complex::from_polar(power.sqrt(), TAU * uniform(seed, m, 2 * draw + 1))
}

/// A number in (0, 1]: seed and counters are absorbed one by one into the state of the SplitMix64
/// generator (Steele, Lea and Flood 2014, OOPSLA, 453), each followed by its output function, so
/// that neighbouring seeds share nothing at shifted wavenumbers either.
fn uniform(seed: u64, m: [i64; 3], draw: u64) -> f64 {
    let mut state = 0u64;
    for counter in [seed, m[0] as u64, m[1] as u64, m[2] as u64, draw] {
        state = mix(state.wrapping_add(0x9e37_79b9_7f4a_7c15) ^ counter);
    }
    ((state >> 11) as f64 + 0.5) / (1u64 << 53) as f64
}

/// Output function of SplitMix64.
fn mix(mut z: u64) -> u64 {
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::par::Pool;

    const BOX: [f64; 3] = [TAU, TAU, 2.0 * TAU];

    fn spectra(u: &[Vec<f64>; 3], fft: &Fft3) -> [Vec<Complex>; 3] {
        std::array::from_fn(|a| {
            let mut s = vec![Complex::default(); fft.spectrum_len()];
            fft.forward(&u[a], &mut s);
            s
        })
    }

    fn wave(m: [i64; 3]) -> [f64; 3] {
        std::array::from_fn(|a| TAU * m[a] as f64 / BOX[a])
    }

    fn length(k: [f64; 3]) -> f64 {
        k.iter().map(|k| k * k).sum::<f64>().sqrt()
    }

    #[test]
    fn splitmix_output_is_the_published_one() {
        // First outputs of SplitMix64 from state 0, as in the test vectors of its reference code.
        let gamma = 0x9e37_79b9_7f4a_7c15u64;
        assert_eq!(mix(gamma), 0xe220_a839_7b1d_cdaf);
        assert_eq!(mix(gamma.wrapping_mul(2)), 0x6e78_9e6a_a1b9_65f4);
    }

    #[test]
    fn no_two_draws_of_neighbouring_seeds_and_modes_agree() {
        let mut seen = std::collections::HashSet::new();
        for seed in 0..24 {
            for x in -12..12 {
                for y in -12..12 {
                    for draw in 0..4 {
                        assert!(seen.insert(uniform(seed, [x, y, 3], draw).to_bits()));
                    }
                }
            }
        }
        // 55296 numbers: their mean is ½ within 3.5 standard errors of a uniform variate.
        let mean = seen.iter().map(|&b| f64::from_bits(b)).sum::<f64>() / seen.len() as f64;
        let error = 1.0 / (12.0 * seen.len() as f64).sqrt();
        assert!((mean - 0.5).abs() < 3.5 * error, "{mean} ± {error}");
    }

    #[test]
    fn divergence_mean_and_nyquist_modes_vanish() {
        let n = [16, 12, 18];
        let u = solenoidal(n, BOX, 3, |_| 1.0, 0.3);
        let fft = Fft3::new(n);
        let s = spectra(&u, &fft);
        let divergence = fft.sum(|i, m| {
            let k = wave(m);
            (0..3).map(|a| s[a][i] * k[a]).sum::<Complex>().norm_sqr()
        });
        let gradient = fft.sum(|i, m| {
            let k = length(wave(m));
            (0..3).map(|a| s[a][i].norm_sqr()).sum::<f64>() * k * k
        });
        assert!((divergence / gradient).sqrt() < 1e-14, "{divergence} of {gradient}");
        let outside = fft.sum(|i, m| {
            let out = m == [0; 3] || fft.is_nyquist(m);
            if out { (0..3).map(|a| s[a][i].norm_sqr()).sum() } else { 0.0 }
        });
        assert!(outside.sqrt() < 1e-12);
    }

    #[test]
    fn shells_hold_the_power_asked_for() {
        let n = [40, 40, 80];
        let amplitude = |k: f64| k * (-k / 4.0).exp();
        let u = solenoidal(n, BOX, 11, amplitude, 0.0);
        let fft = Fft3::new(n);
        let s = spectra(&u, &fft);
        for shell in 3..15 {
            let inside = |m: [i64; 3]| (length(wave(m)) - f64::from(shell)).abs() < 0.5;
            let got = fft.sum(|i, m| if inside(m) { (0..3).map(|a| s[a][i].norm_sqr()).sum() } else { 0.0 });
            let of = |p: i32| fft.sum(|_, m| if inside(m) { amplitude(length(wave(m))).powi(2 * p) } else { 0.0 });
            // |û|² is the sum of two exponentials of half the mean, so its variance is half its
            // mean squared; m and -m are one draw, which doubles the variance of the sum.
            let error = of(2).sqrt();
            assert!((got - of(1)).abs() < 3.5 * error, "shell {shell}: {got}, {} ± {error}", of(1));
        }
    }

    #[test]
    fn helicity_one_is_beltrami_and_zero_is_not() {
        let n = [16; 3];
        let fft = Fft3::new(n);
        let of = |helicity: f64| {
            let s = spectra(&solenoidal(n, BOX, 5, |k| 1.0 / k, helicity), &fft);
            let power = fft.sum(|i, m| {
                let k = length(wave(m));
                k * (0..3).map(|a| s[a][i].norm_sqr()).sum::<f64>()
            });
            let helical = fft.sum(|i, m| {
                let k = wave(m);
                let curl: [Complex; 3] = std::array::from_fn(|a| {
                    let (b, c) = ((a + 1) % 3, (a + 2) % 3);
                    Complex::new(0.0, 1.0) * (s[c][i] * k[b] - s[b][i] * k[c])
                });
                (0..3).map(|a| (s[a][i].conj() * curl[a]).re).sum()
            });
            helical / power
        };
        // Equality in the Schwarz inequality holds only for ∇×u = ±|k| u mode by mode.
        assert!((of(1.0) - 1.0).abs() < 1e-14);
        assert!((of(-1.0) + 1.0).abs() < 1e-14);
        // Some 1700 independent modes carry most of the weight: a few hundredths of scatter.
        assert!(of(0.0).abs() < 0.08, "{}", of(0.0));
        assert!((of(0.5) - 0.5).abs() < 0.08, "{}", of(0.5));
    }

    #[test]
    fn volume_above_thresholds_is_that_of_a_gaussian_field() {
        // P(chi-square with 3 degrees of freedom > 3 τ²), tabulated in any statistics reference; a
        // Gaussian field fills this fraction of space with |u| > τ u_rms.
        let expected = [(1.0, 0.3916), (1.5, 0.0803), (2.0, 0.00738)];
        let n = [48; 3];
        let cube = [TAU; 3];
        let seeds = 32;
        let fractions: Vec<[f64; 3]> = (0..seeds)
            .map(|seed| {
                // A white band keeps samples nearly independent.
                let u = solenoidal(n, cube, seed, |k| f64::from(u8::from(k < 23.0)), 0.0);
                let square: Vec<f64> = (0..u[0].len()).map(|i| u[0][i] * u[0][i] + u[1][i] * u[1][i] + u[2][i] * u[2][i]).collect();
                let mean = square.iter().sum::<f64>() / square.len() as f64;
                expected.map(|(tau, _)| {
                    let above = square.iter().filter(|&&s| s > tau * tau * mean).count();
                    above as f64 / square.len() as f64
                })
            })
            .collect();
        for (t, (tau, want)) in expected.into_iter().enumerate() {
            let mean = fractions.iter().map(|f| f[t]).sum::<f64>() / seeds as f64;
            let spread = fractions.iter().map(|f| (f[t] - mean).powi(2)).sum::<f64>();
            let error = (spread / (seeds * (seeds - 1)) as f64).sqrt();
            // 3.5 standard errors and the last printed digit.
            let digit = if tau < 1.8 { 5e-5 } else { 5e-6 };
            assert!((mean - want).abs() < 3.5 * error + digit, "{tau}: {mean} ± {error}");
            assert!(error < 0.01 * want, "too noisy to tell: {error} of {want}");
        }
    }

    #[test]
    fn threads_and_resolution_change_nothing() {
        let make = |n: usize| solenoidal([n; 3], BOX, 9, |k| f64::from(u8::from(k < 3.1)), 0.0);
        let one = Pool::new(1).unwrap().run(|| make(16));
        let three = Pool::new(3).unwrap().run(|| make(16));
        assert_eq!(one, three);
        // The same band-limited field on twice the samples: every second one coincides.
        let fine = make(32);
        for a in 0..3 {
            for (i, &coarse) in one[a].iter().enumerate() {
                let (x, y, z) = (i % 16, i / 16 % 16, i / 256);
                let same = fine[a][(2 * z * 32 + 2 * y) * 32 + 2 * x];
                assert!((coarse - same).abs() < 1e-13);
            }
        }
    }
}
