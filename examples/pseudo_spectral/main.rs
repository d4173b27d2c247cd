//! A small pseudo-spectral solver: turbulence from random large scales, written as HDF5.
#![allow(clippy::print_stdout, clippy::print_stderr)]

mod snapshot;
mod solver;

use std::f64::consts::TAU;
use std::path::PathBuf;
use std::process::ExitCode;

use ropewalk::base::par::Pool;
use ropewalk::synth::random;
use solver::{Forcing, Means, Solver, Spectra};

const USAGE: &str = "\
Decaying or forced turbulence in a 2*pi-periodic box from random large scales.

pseudo_spectral hydro|mhd [--option value]...

  --n N             samples along each axis (64)
  --viscosity V     kinematic viscosity (0.012)
  --resistivity E   magnetic diffusivity, mhd only (0.012)
  --power P         power per mass fed into large scales of u (0)
  --power-b P       and of b (0)
  --below K         wavenumber below which it is fed (2.5)
  --seed S          seed of the initial fields (1)
  --peak K          wavenumber at the peak of the initial spectrum (2)
  --speed U         initial rms of |u| (1.7320508)
  --field B         initial rms of |b| (1.7320508)
  --dt T            time step (0.01)
  --steps M         number of steps (200)
  --save A,B,...    steps after which to write a snapshot (none)
  --bits B          mantissa bits kept in the files, 1 to 23 (14)
  --out DIR         where the files go (.)
  --threads T       0 = one per core (0)
";

const SCENARIO: &str = "Invented data: no such place, apparatus, fluid or measurement exists. On the \
imaginary island of Tharnmere stands an imaginary stirred vessel, the Brindle Drum, whose middle \
is idealised as a periodic box. Its paddles feed a constant power into the large eddies of an \
imaginary fluid: tharn water, which does not conduct, or tharn brine, which does and carries a \
magnetic field. The numbers come from a direct numerical simulation, lengths in units of the box \
over 2 pi, magnetic field in velocity units.";

/// The command line.
struct Options {
    magnetic: bool,
    n: usize,
    viscosity: f64,
    resistivity: f64,
    power: [f64; 2],
    below: f64,
    seed: u64,
    peak: f64,
    rms: [f64; 2],
    dt: f64,
    steps: usize,
    save: Vec<usize>,
    bits: u32,
    out: PathBuf,
    threads: usize,
    /// As typed, without what cannot change the numbers.
    text: String,
}

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let options = match parse(&arguments) {
        Ok(options) => options,
        Err(message) => {
            eprintln!("{message}\n\n{USAGE}");
            return ExitCode::from(2);
        }
    };
    let outcome =
        Pool::new(options.threads).map_err(|e| e.to_string()).and_then(|pool| pool.run(|| run(&options).map_err(|e| e.to_string())));
    match outcome {
        Ok(()) => ExitCode::SUCCESS,
        Err(message) => {
            eprintln!("{message}");
            ExitCode::FAILURE
        }
    }
}

fn parse(arguments: &[String]) -> Result<Options, String> {
    let magnetic = match arguments.first().map(String::as_str) {
        Some("mhd") => true,
        Some("hydro") => false,
        _ => return Err("expected hydro or mhd first".into()),
    };
    let mut options = Options {
        magnetic,
        n: 64,
        viscosity: 0.012,
        resistivity: 0.012,
        power: [0.0; 2],
        below: 2.5,
        seed: 1,
        peak: 2.0,
        rms: [3f64.sqrt(); 2],
        dt: 0.01,
        steps: 200,
        save: Vec::new(),
        bits: 14,
        out: PathBuf::from("."),
        threads: 0,
        text: arguments[0].clone(),
    };
    for pair in arguments[1..].chunks(2) {
        let [name, value] = pair else {
            return Err(format!("{} needs a value", pair[0]));
        };
        match name.as_str() {
            "--n" => options.n = number(name, value)?,
            "--viscosity" => options.viscosity = number(name, value)?,
            "--resistivity" => options.resistivity = number(name, value)?,
            "--power" => options.power[0] = number(name, value)?,
            "--power-b" => options.power[1] = number(name, value)?,
            "--below" => options.below = number(name, value)?,
            "--seed" => options.seed = number(name, value)?,
            "--peak" => options.peak = number(name, value)?,
            "--field" => options.rms[1] = number(name, value)?,
            "--speed" => options.rms[0] = number(name, value)?,
            "--dt" => options.dt = number(name, value)?,
            "--steps" => options.steps = number(name, value)?,
            "--save" => {
                options.save = value.split(',').map(|v| number(name, v)).collect::<Result<_, _>>()?;
            }
            "--bits" => options.bits = number(name, value)?,
            "--out" => options.out = PathBuf::from(value),
            "--threads" => options.threads = number(name, value)?,
            _ => return Err(format!("unknown option {name}")),
        }
        if name != "--out" && name != "--threads" {
            options.text.push_str(&format!(" {name} {value}"));
        }
    }
    if !(1..=23).contains(&options.bits) {
        return Err(format!("--bits: expected 1 to 23, got {}", options.bits));
    }
    if options.n < 8 {
        return Err(format!("--n: expected at least 8, got {}", options.n));
    }
    Ok(options)
}

fn number<T: std::str::FromStr>(name: &str, value: &str) -> Result<T, String> {
    value.parse().map_err(|_| format!("{name}: expected a number, got {value}"))
}

fn run(options: &Options) -> hdf5::Result<()> {
    let forcing = Forcing { power: options.power, below: options.below };
    let solver = Solver::new(options.n, options.viscosity, options.resistivity, forcing);
    let mut state = initial(options, &solver);
    println!("step time E_u E_b enstrophy current cross_helicity divergence courant Re_lambda kmax_eta");
    let mut written = 0;
    for step in 0..=options.steps {
        let time = step as f64 * options.dt;
        if step > 0 {
            solver.step(&mut state, options.dt);
        }
        let saving = options.save.contains(&step);
        if step % 10 == 0 || saving {
            let fields: Vec<_> = state.iter().map(|s| solver.samples(s)).collect();
            report(options, step, &solver.means(&state), &fields);
            if saving {
                written += 1;
                let kind = if options.magnetic { "mhd" } else { "hydro" };
                let path = options.out.join(format!("{kind}_{written:04}.h5"));
                let facts = snapshot::Facts {
                    time,
                    viscosity: options.viscosity,
                    resistivity: options.resistivity,
                    seed: options.seed,
                    scenario: SCENARIO,
                    options: &options.text,
                    mantissa_bits: options.bits,
                };
                snapshot::write(&path, options.n, &fields, &facts)?;
                println!("wrote {}", path.display());
            }
        }
    }
    Ok(())
}

/// Random large scales with |û_k| ∝ k exp(-k²/p²), a shell spectrum ∝ k⁴ exp(-2k²/p²) that peaks at
/// |k| = p, scaled to the asked rms.
fn initial(options: &Options, solver: &Solver) -> Spectra {
    let amplitude = |k: f64| k * (-(k / options.peak).powi(2)).exp();
    let fields = 1 + usize::from(options.magnetic);
    let mut components = Vec::new();
    for f in 0..fields {
        // Velocity and field take seeds 2S and 2S + 1, so no two runs share one.
        let seed = 2 * options.seed + f as u64;
        let v = random::solenoidal([options.n; 3], [TAU; 3], seed, amplitude, 0.0);
        let square: f64 = v.iter().flatten().map(|v| v * v).sum();
        let scale = options.rms[f] / (square / v[0].len() as f64).sqrt();
        components.extend(v.map(|c| c.iter().map(|v| v * scale).collect::<Vec<f64>>()));
    }
    solver.state(&components)
}

fn report(options: &Options, step: usize, means: &Means, fields: &[Vec<f64>]) {
    let fastest = (0..fields[0].len())
        .map(|i| {
            let size = |v: &[Vec<f64>]| v.iter().map(|c| c[i] * c[i]).sum::<f64>().sqrt();
            size(&fields[..3]) + size(&fields[3..])
        })
        .fold(0.0, f64::max);
    let courant = fastest * options.dt * options.n as f64 / TAU;
    // λ² = 5⟨u²⟩/⟨ω²⟩ and u' of one component.
    let speed = (2.0 * means.kinetic / 3.0).sqrt();
    let taylor = (10.0 * means.kinetic / means.enstrophy).sqrt();
    let dissipation = options.viscosity * means.enstrophy + options.resistivity * means.current;
    let kolmogorov = (options.viscosity.powi(3) / dissipation).powf(0.25);
    println!(
        "{step} {:.4} {:.5} {:.5} {:.4} {:.4} {:.4} {:.1e} {courant:.3} {:.2} {:.3}",
        step as f64 * options.dt,
        means.kinetic,
        means.magnetic,
        means.enstrophy,
        means.current,
        means.cross_helicity,
        means.divergence,
        speed * taylor / options.viscosity,
        options.n as f64 / 3.0 * kolmogorov,
    );
}
