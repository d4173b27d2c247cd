//! Gaussian random solenoidal fields: what thresholding and alignment give without any structure.

use std::f64::consts::TAU;

use crate::common::{BOTH, MAGNETIC, Outcome, Precision, mean, number, request, run, standard_error, stored};
use ropewalk::model::columns::Col;
use ropewalk::space::grid::Grid;
use ropewalk::synth::random::solenoidal;

const N: [usize; 3] = [40, 44, 48];

fn grid() -> Grid {
    Grid::periodic(N, [TAU; 3])
}

/// A white band well inside the resolved waves keeps samples nearly independent and the field isotropic.
fn band(k: f64) -> f64 {
    f64::from(u8::from(k > 2.5 && k < 13.0))
}

fn velocity(seed: u64, helicity: f64) -> Vec<Vec<f64>> {
    solenoidal(N, [TAU; 3], seed, band, helicity).to_vec()
}

/// Velocity and an independent magnetic field.
fn sample<T: Precision>(seed: u64, families: &[&str]) -> Outcome {
    let components: Vec<Vec<f64>> = velocity(seed, 0.0).into_iter().chain(velocity(seed + 1000, 0.0)).collect();
    run(stored::<T>(grid(), BOTH, &components), &request(families))
}

/// Fails unless the mean over seeds is the expected one within 3.5 standard errors, and those errors are small enough to tell.
#[track_caller]
fn expect(values: &[f64], want: f64, precision: f64, what: &str) {
    let (m, e) = (mean(values), standard_error(values));
    assert!((m - want).abs() < 3.5 * e, "{what}: {m} ± {e}, expected {want}");
    assert!(e < precision * want.abs(), "{what}: too noisy to tell: {e} of {want}");
}

/// Tails of the χ² distribution, in any statistics reference: |ω| > τω′ fills P(χ²₃ > 3τ²) of the volume and holds P(χ²₅ > 3τ²) of the
/// enstrophy, and the same for j. Cosines of independent isotropic vectors are uniform: ⟨|cos|⟩ = 1/2, P(|cos| > 0.9) = 0.1, and |u×ω|² is 2/3.
#[test]
fn thresholds_and_cosines_of_gaussian_noise() {
    let table = [(1.0, 0.3916, 0.7000), (1.5, 0.0803, 0.2399), (2.0, 0.00738, 0.0348)];
    let families = ["a: enstrophy > 1 mean", "b: vorticity > 1.5 rms", "c: enstrophy > 4 mean", "j: current > 1.5 rms"];
    let seeds = 8;
    let (mut volume, mut share) = (vec![Vec::new(); 4], vec![Vec::new(); 4]);
    let mut lamb = vec![Vec::new(); 2];
    let (mut aligned, mut magnitude, mut bins) = (vec![Vec::new(); 3], vec![Vec::new(); 3], vec![vec![Vec::new(); 20]; 3]);
    for seed in 0..seeds {
        let o = sample::<f32>(seed, &families);
        for k in 0..4 {
            let f = o.family(k);
            volume[k].push(f.volume_fraction);
            if k == 0 || k == 2 {
                let held: f64 = f.rows.iter().map(|r| number(r, Col::IndicatorMean) * number(r, Col::Cells)).sum();
                share[k].push(held / o.analysis.survey.indicators[k].sum);
            }
        }
        share[3].push(o.rows(3).iter().map(|r| number(r, Col::OhmicShare)).sum());
        let a = &o.analysis.alignment;
        lamb[0].push(a.lamb2 / a.u2w2);
        lamb[1].push(a.lorentz2 / a.j2b2);
        for k in 0..3 {
            aligned[k].push(a.cosines[k].aligned_share().unwrap());
            magnitude[k].push(a.cosines[k].abs_mean().unwrap());
            for (b, n) in bins[k].iter_mut().zip(a.cosines[k].bins) {
                b.push(n as f64 / a.cosines[k].defined as f64);
            }
        }
    }
    for (k, (tau, v, e)) in table.into_iter().enumerate() {
        expect(&volume[k], v, 0.01 * tau, &format!("volume at {tau}"));
        if k != 1 {
            expect(&share[k], e, 0.01 * tau, &format!("enstrophy at {tau}"));
        }
    }
    expect(&volume[3], 0.0803, 0.01, "volume of currents at 1.5");
    expect(&share[3], 0.2399, 0.01, "Ohmic share at 1.5");
    expect(&lamb[0], 2.0 / 3.0, 0.003, "lamb_sin2");
    expect(&lamb[1], 2.0 / 3.0, 0.003, "lorentz_sin2");
    for k in 0..3 {
        expect(&aligned[k], 0.1, 0.01, "P(|cos| > 0.9)");
        expect(&magnitude[k], 0.5, 0.003, "mean |cos|");
        // Twenty equal bins: a χ² of the bins' deviations in units of their own scatter; 60 would be a 1 in 10^5 event.
        let chi2: f64 = bins[k].iter().map(|b| ((mean(b) - 0.05) / standard_error(b)).powi(2)).sum();
        assert!(chi2 < 60.0 && bins[k].iter().all(|b| standard_error(b) < 0.02 * 0.05), "cosine {k}: χ² {chi2}");
    }
}

/// Jointly Gaussian isotropic u and ω of relative helicity ρ have ⟨|u×ω|²⟩ = ⅔(1 − ρ²)⟨u²⟩⟨ω²⟩: Wick's theorem on ⟨u²ω² − (u·ω)²⟩
/// with ⟨u_i ω_j⟩ = ρ δ_ij (⟨u²⟩⟨ω²⟩)^½/3.
#[test]
fn helicity_depletes_the_lamb_vector() {
    for (helicity, precision) in [(0.5, 0.006), (0.9, 0.03)] {
        let ratio: Vec<f64> = (20..28)
            .map(|seed| {
                let o = run(stored::<f32>(grid(), crate::common::VELOCITY, &velocity(seed, helicity)), &request(&["h: helicity > 1 rms"]));
                let n = o.analysis.survey.cells as f64;
                let u2 = o.analysis.scan.components.iter().map(|c| c.square_sum).sum::<f64>() / n;
                let w2 = o.analysis.survey.velocity.curl2 / n;
                let rho = o.analysis.survey.indicators[0].sum / n / (u2 * w2).sqrt();
                assert!(rho > 0.85 * helicity && rho < 1.05 * helicity, "{rho}");
                o.analysis.alignment.lamb2 / n / (u2 * w2) / (1.0 - rho * rho)
            })
            .collect();
        expect(&ratio, 2.0 / 3.0, precision, "ratio of means");
    }
}

/// A level by volume is the sorted value at that rank, within the stated 2^-12 of it; what lies beyond is counted exactly.
#[test]
fn volume_levels_hit_the_fraction() {
    let b = velocity(77, 0.0);
    let mut sorted: Vec<f32> = (0..b[0].len())
        .map(|i| {
            let [x, y, z] = [0, 1, 2].map(|c| b[c][i] as f32);
            (x * x + y * y + z * z).sqrt()
        })
        .collect();
    sorted.sort_unstable_by(f32::total_cmp);
    let n = sorted.len();
    let fractions = [0.001, 0.01, 0.1, 0.5, 0.9];
    let families: Vec<String> = fractions.iter().enumerate().map(|(k, f)| format!("f{k}: field > {f} volume")).collect();
    let below: Vec<String> = fractions.iter().enumerate().map(|(k, f)| format!("b{k}: field < {f} volume")).collect();
    let names: Vec<&str> = families.iter().chain(&below).map(String::as_str).collect();
    let o = run(stored::<f32>(grid(), MAGNETIC, &b), &request(&names));
    for (k, f) in fractions.iter().enumerate() {
        for (family, exact) in [(k, sorted[((1.0 - f) * n as f64) as usize]), (k + fractions.len(), sorted[(f * n as f64) as usize])] {
            let got = o.family(family);
            assert!((got.level / f64::from(exact) - 1.0).abs() < 2.5e-4, "{}: {} {exact}", got.family, got.level);
            let level = got.level as f32;
            let beyond =
                if family == k { sorted.iter().filter(|&&v| v > level).count() } else { sorted.iter().filter(|&&v| v < level).count() };
            assert_eq!(got.volume_fraction, beyond as f64 / n as f64, "{}", got.family);
        }
    } // Levels of either sign.
    let u = velocity(78, 0.0);
    let mut sorted: Vec<f64> = (0..n).map(|i| u[0][i] * b[0][i] + u[1][i] * b[1][i] + u[2][i] * b[2][i]).collect();
    sorted.sort_unstable_by(f64::total_cmp);
    let both: Vec<Vec<f64>> = u.into_iter().chain(b).collect();
    let families = ["x: cross_helicity < 0.05 volume", "y: cross_helicity > 0.8 volume"];
    let o = run(stored::<f64>(grid(), BOTH, &both), &request(&families));
    for (k, rank) in [0.05, 0.2].into_iter().enumerate() {
        let exact = sorted[(rank * n as f64) as usize];
        assert!(exact < 0.0 && (o.family(k).level / exact - 1.0).abs() < 2.5e-4, "{} {exact}", o.family(k).level);
    }
}
