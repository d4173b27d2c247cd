//! Derivatives and power spectra of periodic lines against the defining sums and exact waves.

use std::f64::consts::TAU;

use ropewalk::base::real::Real;
use ropewalk::math::fft::{Complex, Fft3, wavenumber};
use ropewalk::math::lines::{LineDerivative, LinePower, LineScratch};

/// Repeatable numbers in (-1, 1) without a generator: fractional parts of multiples of √2.
fn samples(len: usize) -> Vec<f64> {
    (0..len).map(|i| 2.0 * ((i * i + 3 * i) as f64 * 2f64.sqrt()).fract() - 1.0).collect()
}

/// The derivative by the defining sums, in double precision (independent of the library).
fn direct_derivative(line: &[f64], spacing: f64) -> Vec<f64> {
    let n = line.len();
    let mut out = vec![0.0; n];
    for m in (0..n).filter(|m| 2 * m != n) {
        let k = wavenumber(m, n) as f64;
        let turn = |i: usize| TAU * (m * i % n) as f64 / n as f64;
        let c: Complex = line.iter().enumerate().map(|(i, &f)| Complex::from_polar(f / n as f64, -turn(i))).sum();
        let factor = Complex::new(0.0, TAU * k / (n as f64 * spacing));
        for (i, o) in out.iter_mut().enumerate() {
            *o += (c * factor * Complex::from_polar(1.0, turn(i))).re;
        }
    }
    out
}

fn check_lines<T: Real>(n: usize, width: usize, tolerance: f64) {
    let line = LineDerivative::<T>::new(n, 0.3);
    let values: Vec<T> = samples(n * width).into_iter().map(T::of).collect();
    let rows: Vec<&[T]> = values.chunks(width).collect();
    let mut out = vec![T::ZERO; n * width];
    let mut scratch = LineScratch::default();
    line.columns(&rows, &mut out.chunks_mut(width).collect::<Vec<_>>(), &mut scratch);
    let mut in_place = values.clone();
    line.columns_in_place(&mut in_place.chunks_mut(width).collect::<Vec<_>>(), &mut scratch);
    assert!(out == in_place);
    for x in 0..width {
        let column: Vec<T> = (0..n).map(|i| values[i * width + x]).collect();
        let mut row = vec![T::ZERO; n];
        line.row(&column, &mut row, &mut scratch);
        let wanted = direct_derivative(&column.iter().map(|v| v.wide()).collect::<Vec<_>>(), 0.3);
        for i in 0..n {
            let (a, b) = (out[i * width + x].wide(), row[i].wide());
            assert!((a - wanted[i]).abs() < tolerance && (b - wanted[i]).abs() < tolerance, "{n}: {a} {b} {}", wanted[i]);
        }
    }
}

#[test]
fn line_derivatives_equal_the_defining_sums() {
    for n in [9, 12, 16, 35, 64, 1] {
        for width in [1, 2, 37] {
            check_lines::<f64>(n, width, 1e-12);
            check_lines::<f32>(n, width, 1e-4);
        }
    }
}

#[test]
fn line_power_is_parseval_and_finds_waves() {
    for n in [12, 15] {
        let line: Vec<f64> = (0..n).map(|i| 2.0 + 3.0 * (TAU * 4.0 * i as f64 / n as f64).sin()).collect();
        let mut power = vec![0.0; n / 2 + 1];
        LinePower::new(n).add(&line, &mut power, &mut LineScratch::default());
        for (m, p) in power.iter().enumerate() {
            let wanted = [4.0, 0.0, 0.0, 0.0, 4.5].get(m).copied().unwrap_or(0.0);
            assert!((p - wanted).abs() < 1e-14, "{m}: {p}");
        }
    }
}

/// The general-purpose library in double precision, for lengths that it and we take apart in other ways.
#[test]
fn long_lines_equal_another_transform() {
    for n in [512, 1024, 1000, 2187, 1021, 2 * 499] {
        let spacing = TAU / n as f64;
        let values = samples(n);
        let fft = Fft3::new([n, 1, 1]);
        let mut spectrum = vec![Complex::default(); fft.spectrum_len()];
        fft.forward(&values, &mut spectrum);
        for (m, c) in spectrum.iter_mut().enumerate() {
            *c *= Complex::new(0.0, if 2 * m == n { 0.0 } else { m as f64 });
        }
        let mut wanted = vec![0.0; n];
        fft.inverse(&mut spectrum, &mut wanted);
        let largest = wanted.iter().fold(0.0, |a: f64, b| a.max(b.abs()));
        let mut found = vec![0.0; n];
        LineDerivative::<f64>::new(n, spacing).row(&values, &mut found, &mut LineScratch::default());
        let mut single = vec![0.0; n];
        let narrow: Vec<f32> = values.iter().map(|&v| v as f32).collect();
        LineDerivative::<f32>::new(n, spacing).row(&narrow, &mut single, &mut LineScratch::default());
        for i in 0..n {
            assert!((found[i] - wanted[i]).abs() < 1e-14 * largest, "{n}, {i}: {} {}", found[i], wanted[i]);
            assert!((f64::from(single[i]) - wanted[i]).abs() < 1e-5 * largest, "{n}, {i}: {} {}", single[i], wanted[i]);
        }
    }
}

/// FNV-1a of the bits.
fn digest<T: Real>(values: &[T]) -> u64 {
    let bits = values.iter().flat_map(|v| v.wide().to_bits().to_le_bytes());
    bits.fold(0xcbf2_9ce4_8422_2325, |h, b| (h ^ u64::from(b)).wrapping_mul(0x0100_0000_01b3))
}

/// The same bits on every machine: these were recorded on one of them, there is no other source.
#[test]
fn derivatives_have_the_bits_that_were_recorded() {
    fn of<T: Real>(n: usize) -> u64 {
        let values: Vec<T> = samples(n * 40).into_iter().map(T::of).collect();
        let mut out = vec![T::ZERO; n * 40];
        LineDerivative::new(n, 0.25).rows(&values, &mut out, &mut LineScratch::default());
        digest(&out)
    }
    let found = [256, 96, 35, 17].map(|n| [of::<f32>(n), of::<f64>(n)]);
    assert_eq!(found, RECORDED, "{found:#x?}");
}

/// Of 256, 96, 35 and 17 samples; f32, f64.
const RECORDED: [[u64; 2]; 4] = [
    [0x77e3_1f05_dcef_c5d1, 0xada4_7c2c_0679_9cc5],
    [0x03ce_50c6_82fe_fec7, 0x5fda_8246_8551_ed5c],
    [0x6a15_c627_d153_3941, 0xcac2_8acc_5e34_ae94],
    [0x33b3_04e2_b07f_3a80, 0x0438_1c52_4f1a_ad79],
];
