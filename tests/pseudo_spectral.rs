//! The example solver against exact solutions, a published series and its own conservation laws.

#[path = "../examples/pseudo_spectral/snapshot.rs"]
mod snapshot;
#[path = "../examples/pseudo_spectral/solver.rs"]
mod solver;

use std::f64::consts::TAU;

use ropewalk::synth::random;
use solver::{Forcing, Solver, Spectra};

const FREE: Forcing = Forcing { power: [0.0; 2], below: 0.0 };

/// Samples of components given as functions of position, on n³ points.
fn sampled(n: usize, f: impl Fn([f64; 3]) -> Vec<f64>) -> Vec<Vec<f64>> {
    let step = TAU / n as f64;
    let mut fields = Vec::new();
    for i in 0..n * n * n {
        let at = [i % n, i / n % n, i / (n * n)].map(|i| i as f64 * step);
        let values = f(at);
        fields.resize_with(values.len(), || Vec::with_capacity(n * n * n));
        for (field, value) in fields.iter_mut().zip(values) {
            field.push(value);
        }
    }
    fields
}

/// Largest difference of all components, over the largest expected value.
fn error(solver: &Solver, state: &Spectra, expected: &[Vec<f64>]) -> f64 {
    let mut largest: f64 = 0.0;
    let mut difference: f64 = 0.0;
    for (spectrum, expected) in state.iter().zip(expected) {
        for (got, want) in solver.samples(spectrum).iter().zip(expected) {
            largest = largest.max(want.abs());
            difference = difference.max((got - want).abs());
        }
    }
    difference / largest
}

fn advance(solver: &Solver, state: &mut Spectra, time: f64, steps: usize) {
    for _ in 0..steps {
        solver.step(state, time / steps as f64);
    }
}

/// Helical velocity and magnetic field in modes up to |k| = 4, mean squares of order one.
fn turbulent(n: usize) -> Vec<Vec<f64>> {
    let amplitude = |k: f64| 0.2 * k * (-(k / 2.0).powi(2)).exp() * f64::from(u8::from(k <= 4.0));
    let field = |seed| random::solenoidal([n; 3], [TAU; 3], seed, amplitude, 0.3);
    field(21).into_iter().chain(field(22)).collect()
}

/// ABC flow: ∇×u = u, so the nonlinear term is a gradient and the flow decays as exp(-νt)
/// (Beltrami 1889; Dombre et al. 1986, J. Fluid Mech. 167, 353).
#[test]
fn beltrami_flow_decays_exactly() {
    let abc = |[x, y, z]: [f64; 3]| vec![z.sin() + y.cos(), x.sin() + z.cos(), y.sin() + x.cos()];
    let solver = Solver::new(16, 0.3, 0.0, FREE);
    let mut state = solver.state(&sampled(16, abc));
    advance(&solver, &mut state, 1.0, 20);
    let decay = (-0.3f64).exp();
    let expected = sampled(16, |at| abc(at).iter().map(|v| v * decay).collect());
    assert!(error(&solver, &state, &expected) < 1e-13);
}

/// Two-dimensional array of vortices carried by a uniform stream (Taylor 1923, Phil. Mag. 46, 671,
/// seen from a moving frame): exact for the full equations, with advection, pressure and diffusion
/// all at work. The scheme must approach it at fourth order.
#[test]
fn carried_vortices_converge_to_the_exact_flow_at_fourth_order() {
    let (nu, stream, time) = (0.05, [0.7, -0.4, 0.2], 1.0);
    let flow = |[x, y, _]: [f64; 3], t: f64| {
        let decay = (-2.0 * nu * t).exp();
        let (x, y) = (x - stream[0] * t, y - stream[1] * t);
        vec![stream[0] + decay * x.sin() * y.cos(), stream[1] - decay * x.cos() * y.sin(), stream[2]]
    };
    let solver = Solver::new(16, nu, 0.0, FREE);
    let expected = sampled(16, |at| flow(at, time));
    let of = |steps| {
        let mut state = solver.state(&sampled(16, |at| flow(at, 0.0)));
        advance(&solver, &mut state, time, steps);
        error(&solver, &state, &expected)
    };
    let (coarse, fine) = (of(16), of(32));
    assert!(fine < 1e-7, "{fine}");
    let order = (coarse / fine).log2();
    assert!((order - 4.0).abs() < 0.2, "order {order}");
}

/// u = -b' of any shape on a uniform field B0 travels along it unchanged in shape and decays mode
/// by mode when ν = η (Walén 1944, Ark. Mat. Astr. Fys. 30A no. 15; Elsasser 1950, Phys. Rev. 79, 183): the phase
/// of mode k turns as exp(-i k·B0 t).
#[test]
fn alfven_waves_of_any_amplitude_travel_unchanged() {
    let (n, diffusivity, time) = (16, 0.02, 0.8);
    let mean = [0.6, 0.0, -0.8];
    let wave = random::solenoidal([n; 3], [TAU; 3], 4, |k| 0.3 * f64::from(u8::from(k < 4.5)), 0.0);
    let backward = wave.iter().map(|w| w.iter().map(|v| -v).collect::<Vec<f64>>());
    let field = (0..3).map(|a| wave[a].iter().map(|v| v + mean[a]).collect());
    let start: Vec<Vec<f64>> = backward.chain(field).collect();
    let solver = Solver::new(n, diffusivity, diffusivity, FREE);
    let initial = solver.state(&start);
    let fft = ropewalk::math::fft::Fft3::new([n; 3]);
    let expected: Vec<Vec<f64>> = initial
        .iter()
        .map(|s| {
            let mut moved = s.clone();
            fft.fill(&mut moved, |i, m| {
                let k = m.map(|m| m as f64);
                let square: f64 = k.iter().map(|k| k * k).sum();
                let turn: f64 = (0..3).map(|a| k[a] * mean[a]).sum();
                let decay = (-diffusivity * square * time).exp();
                s[i] * ropewalk::math::fft::Complex::from_polar(decay, -turn * time)
            });
            solver.samples(&moved)
        })
        .collect();
    let of = |steps| {
        let mut state = initial.clone();
        advance(&solver, &mut state, time, steps);
        error(&solver, &state, &expected)
    };
    let (coarse, fine) = (of(16), of(32));
    assert!(fine < 1e-5, "{fine}");
    let order = (coarse / fine).log2();
    assert!((order - 4.0).abs() < 0.2, "order {order}");
}

/// u = b is a steady state without diffusion, whatever its shape (Chandrasekhar 1956, Proc. Natl
/// Acad. Sci. 42, 273).
#[test]
fn equipartition_state_is_steady() {
    let n = 16;
    let shape = random::solenoidal([n; 3], [TAU; 3], 8, |k| f64::from(u8::from(k < 4.5)), 0.0);
    let fields: Vec<Vec<f64>> = shape.iter().chain(&shape).cloned().collect();
    let solver = Solver::new(n, 0.0, 0.0, FREE);
    let mut state = solver.state(&fields);
    advance(&solver, &mut state, 0.2, 10);
    assert!(error(&solver, &state, &fields) < 1e-12);
}

/// Taylor–Green vortex: E = 1/8, ½⟨ω²⟩ = 3/8 at the start; then the power series in T of the mean
/// square vorticity, to T⁵, of Taylor and Green 1937, Proc. R. Soc. A 158, 499, for
/// a = b = c = A = 1, R = 1/ν. What is left over must shrink as T⁶.
#[test]
fn taylor_green_vortex_follows_the_published_series() {
    let flow = |[x, y, z]: [f64; 3]| vec![x.sin() * y.cos() * z.cos(), -x.cos() * y.sin() * z.cos(), 0.0];
    for inverse in [0.0, 0.1] {
        let series = |t: f64| {
            let r2 = inverse * inverse;
            1.0 - 6.0 * t * inverse + (5.0 / 48.0 + 18.0 * r2) * t.powi(2) - (5.0 / 3.0 + 36.0 * r2) * t.powi(3) * inverse
                + (50.0 / (99.0 * 64.0) + 1835.0 / 144.0 * r2 + 54.0 * r2 * r2) * t.powi(4)
                - (361.0 / (44.0 * 32.0) + 761.0 / 12.0 * r2 + 64.8 * r2 * r2) * t.powi(5) * inverse
        };
        let solver = Solver::new(24, inverse, 0.0, FREE);
        let start = solver.state(&sampled(24, flow));
        let means = solver.means(&start);
        assert!((means.kinetic - 0.125).abs() < 1e-15);
        assert!((0.5 * means.enstrophy - 0.375).abs() < 1e-15);
        let rest = |t: f64| {
            let mut state = start.clone();
            advance(&solver, &mut state, t, 20);
            solver.means(&state).enstrophy / 0.75 - series(t)
        };
        let (near, far) = (rest(0.2), rest(0.4));
        let order = (far / near).log2();
        assert!((order - 6.0).abs() < 0.5, "1/R = {inverse}: order {order}, {near} and {far}");
    }
}

/// dE/dt = p_u + p_b - ν⟨ω²⟩ - η⟨j²⟩. The integral is taken by Simpson's rule over the steps, so its
/// error and that of the scheme both shrink at fourth order or better.
#[test]
fn energy_balance_closes_at_the_order_of_the_scheme() {
    let (nu, eta, time) = (0.04, 0.03, 0.4);
    let forcing = Forcing { power: [0.3, 0.2], below: 2.5 };
    let solver = Solver::new(24, nu, eta, forcing);
    let start = solver.state(&turbulent(24));
    let imbalance = |steps: usize| {
        let mut state = start.clone();
        let dt = time / steps as f64;
        let energy = |m: &solver::Means| m.kinetic + m.magnetic;
        let loss = |m: &solver::Means| nu * m.enstrophy + eta * m.current;
        let first = solver.means(&state);
        let mut lost = loss(&first);
        let mut last = first;
        for step in 1..=steps {
            solver.step(&mut state, dt);
            last = solver.means(&state);
            let weight = if step == steps {
                1.0
            } else if step % 2 == 1 {
                4.0
            } else {
                2.0
            };
            lost += weight * loss(&last);
        }
        assert!(last.divergence < 1e-14, "divergence {}", last.divergence);
        // Without the nonlinear terms at work this would test the exponentials alone.
        assert!(last.current > 1.05 * first.current);
        energy(&last) - energy(&first) - 0.5 * time + lost * dt / 3.0
    };
    let (coarse, fine) = (imbalance(16), imbalance(32));
    assert!(fine.abs() < 1e-6, "{fine}");
    let order = (coarse / fine).log2();
    assert!(order > 3.8, "order {order}: {coarse}, {fine}");
}

/// Energy and cross helicity are kept by the truncated equations without diffusion (Lee 1952,
/// Quart. Appl. Math. 10, 69; Kraichnan 1973, J. Fluid Mech. 59, 745): what drifts is the scheme's own error, of
/// fourth order or better.
#[test]
fn ideal_invariants_drift_at_the_order_of_the_scheme_only() {
    let solver = Solver::new(24, 0.0, 0.0, FREE);
    let start = solver.state(&turbulent(24));
    let before = solver.means(&start);
    let drift = |steps| {
        let mut state = start.clone();
        advance(&solver, &mut state, 0.5, steps);
        let after = solver.means(&state);
        let energy = after.kinetic + after.magnetic - before.kinetic - before.magnetic;
        // The parts must have traded energy for the sum to mean anything.
        assert!((after.kinetic - before.kinetic).abs() > 1e-3 * before.kinetic);
        [energy, after.cross_helicity - before.cross_helicity]
    };
    let (coarse, fine) = (drift(16), drift(32));
    for i in 0..2 {
        assert!(fine[i].abs() < 1e-6, "{fine:?}");
        let order = (coarse[i] / fine[i]).abs().log2();
        assert!(order > 3.8, "order {order}: {coarse:?}, {fine:?}");
    }
}

/// Written values are within half a unit of the last kept bit, and the file says what it holds.
#[test]
fn snapshots_read_back_within_the_stated_rounding() {
    let n = 16;
    let fields = turbulent(n);
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("mhd.h5");
    let facts = snapshot::Facts {
        time: 1.25,
        viscosity: 0.02,
        resistivity: 0.01,
        seed: 7,
        scenario: "invented",
        options: "mhd",
        mantissa_bits: 12,
    };
    snapshot::write(&path, n, &fields, &facts).unwrap();
    let file = hdf5::File::open(&path).unwrap();
    let mut worst: f64 = 0.0;
    for (name, field) in snapshot::NAMES.iter().zip(&fields) {
        let dataset = file.dataset(name).unwrap();
        assert_eq!(dataset.shape(), [n; 3]);
        for (got, want) in dataset.read_raw::<f32>().unwrap().iter().zip(field) {
            worst = worst.max((f64::from(*got) / want - 1.0).abs());
        }
    }
    // Half a unit of 12 bits, and that of single precision before it.
    assert!(worst < 2f64.powi(-13) + 2f64.powi(-24), "{worst}");
    assert!(worst > 2f64.powi(-14), "more bits kept than stated: {worst}");
    let number = |name| file.attr(name).unwrap().read_scalar::<f64>().unwrap();
    assert_eq!(["time", "viscosity", "resistivity"].map(number), [1.25, 0.02, 0.01]);
    assert_eq!(file.attr("lengths").unwrap().read_raw::<f64>().unwrap(), [TAU; 3]);
}
