//! Derivatives and power spectra of periodic lines against the defining sums and exact waves.

use std::f64::consts::TAU;

use ropewalk::base::real::Real;
use ropewalk::math::fft::{Complex, wavenumber};
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
