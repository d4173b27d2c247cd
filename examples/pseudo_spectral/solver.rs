//! Incompressible hydrodynamics and magnetohydrodynamics in a 2π-periodic box, pseudo-spectral.
//!
//! ∂u/∂t = P[u×ω + j×b] + ν∇²u + f,  ∂b/∂t = ∇×(u×b) + η∇²b + g,  ∇·u = ∇·b = 0, with ω = ∇×u, j = ∇×b, b
//! in velocity units and P the projection on divergence-free fields. The forcing feeds constant
//! power into large scales: f = p u_L/⟨|u_L|²⟩, where u_L holds the driven modes and p is the
//! power per mass; g likewise from b. All modes with |k| < n/3 are
//! kept, which leaves the quadratic products free of aliasing (Orszag 1971, J. Atmos. Sci. 28,
//! 1074). Time: fourth-order Runge-Kutta on exp(νk²t) û, so diffusion is exact.

use ropewalk::base::par;
use ropewalk::math::fft::{Complex, Fft3};

/// A set of spectra: u, v, w and, in magnetohydrodynamics, b_x, b_y, b_z.
pub type Spectra = Vec<Vec<Complex>>;

/// Samples of three components.
type Vector = [Vec<f64>; 3];

/// The equations on one grid.
pub struct Solver {
    fft: Fft3,
    viscosity: f64,
    resistivity: f64,
    forcing: Forcing,
}

/// Constant power fed into large scales.
#[derive(Debug, Clone, Copy)]
pub struct Forcing {
    /// Power per mass going into u and into b.
    pub power: [f64; 2],
    /// Modes with 0 < |k| < `below` are driven; the mean flow and mean field are left alone.
    pub below: f64,
}

/// Volume means of one state.
#[derive(Debug, Clone, Copy)]
pub struct Means {
    /// ½⟨|u|²⟩.
    pub kinetic: f64,
    /// ½⟨|b|²⟩.
    pub magnetic: f64,
    /// ⟨|ω|²⟩.
    pub enstrophy: f64,
    /// ⟨|j|²⟩.
    pub current: f64,
    /// ⟨u·b⟩.
    pub cross_helicity: f64,
    /// Root mean square of all divergences over that of all curls.
    pub divergence: f64,
}

impl Forcing {
    fn drives(&self, k: [f64; 3]) -> bool {
        let square = k[0] * k[0] + k[1] * k[1] + k[2] * k[2];
        square > 0.0 && square < self.below * self.below
    }
}

impl Solver {
    /// `n` samples along each axis.
    pub fn new(n: usize, viscosity: f64, resistivity: f64, forcing: Forcing) -> Solver {
        Solver { fft: Fft3::new([n; 3]), viscosity, resistivity, forcing }
    }

    /// Spectra of 3 or 6 sampled components `[z][y][x]`, truncated and made divergence-free.
    pub fn state(&self, fields: &[Vec<f64>]) -> Spectra {
        let raw: Spectra = fields.iter().map(|f| self.spectrum(f)).collect();
        raw.chunks(3).flat_map(|v| (0..3).map(|a| self.truncated(|i, k| solenoidal(v, i, k, a)))).collect()
    }

    /// Samples of one component.
    pub fn samples(&self, spectrum: &[Complex]) -> Vec<f64> {
        self.take_samples(spectrum.to_vec())
    }

    /// Advances by `dt`.
    pub fn step(&self, state: &mut Spectra, dt: f64) {
        let half = 0.5 * dt;
        let k1 = self.tendency(state);
        let k2 = self.tendency(&self.combine(&[(state, 1.0, half), (&k1, half, half)]));
        let k3 = self.tendency(&self.combine(&[(state, 1.0, half), (&k2, half, 0.0)]));
        let k4 = self.tendency(&self.combine(&[(state, 1.0, dt), (&k3, dt, half)]));
        *state = self.combine(&[(state, 1.0, dt), (&k1, dt / 6.0, dt), (&k2, dt / 3.0, half), (&k3, dt / 3.0, half), (&k4, dt / 6.0, 0.0)]);
    }

    /// Volume means of a state.
    pub fn means(&self, state: &Spectra) -> Means {
        let sum = |f: &(dyn Fn(usize, [f64; 3]) -> f64 + Sync)| self.fft.sum(|i, m| f(i, m.map(|m| m as f64)));
        let square = |v: &[Vec<Complex>]| sum(&|i, _| (0..3).map(|a| v[a][i].norm_sqr()).sum());
        let curl_square = |v: &[Vec<Complex>]| sum(&|i, k| (0..3).map(|a| curl(v, i, k, a).norm_sqr()).sum());
        let divergence_square = |v: &[Vec<Complex>]| sum(&|i, k| (0..3).map(|a| v[a][i] * k[a]).sum::<Complex>().norm_sqr());
        let (u, b) = state.split_at(3);
        let enstrophy = curl_square(u);
        let mut means = Means {
            kinetic: 0.5 * square(u),
            magnetic: 0.0,
            enstrophy,
            current: 0.0,
            cross_helicity: 0.0,
            divergence: divergence_square(u),
        };
        if !b.is_empty() {
            means.magnetic = 0.5 * square(b);
            means.current = curl_square(b);
            means.cross_helicity = sum(&|i, _| (0..3).map(|a| (u[a][i].conj() * b[a][i]).re).sum());
            means.divergence += divergence_square(b);
        }
        means.divergence = (means.divergence / (enstrophy + means.current)).sqrt();
        means
    }

    /// Everything but diffusion.
    fn tendency(&self, state: &Spectra) -> Spectra {
        let (u, b) = state.split_at(3);
        let velocity = self.vector(u);
        let vorticity = self.curl_samples(u);
        let drive_u = self.drive(u, self.forcing.power[0]);
        if b.is_empty() {
            let force = self.cross(&[(&velocity, &vorticity)]);
            return (0..3).map(|a| self.momentum(&force, u, drive_u, a)).collect();
        }
        let field = self.vector(b);
        let current = self.curl_samples(b);
        let drive_b = self.drive(b, self.forcing.power[1]);
        let force = self.cross(&[(&velocity, &vorticity), (&current, &field)]);
        let electromotive = self.cross(&[(&velocity, &field)]);
        let momentum = (0..3).map(|a| self.momentum(&force, u, drive_u, a));
        let induction = (0..3).map(|a| {
            self.truncated(|i, k| {
                let drive = if self.forcing.drives(k) { drive_b } else { 0.0 };
                curl(&electromotive, i, k, a) + b[a][i] * drive
            })
        });
        momentum.chain(induction).collect()
    }

    /// Growth rate of the forced modes of a field that takes up `power`.
    fn drive(&self, v: &[Vec<Complex>], power: f64) -> f64 {
        if power == 0.0 {
            return 0.0;
        }
        let square =
            self.fft.sum(|i, m| if self.forcing.drives(m.map(|m| m as f64)) { (0..3).map(|a| v[a][i].norm_sqr()).sum() } else { 0.0 });
        power / square
    }

    /// Component `a` of the divergence-free part of a force, and the driving.
    fn momentum(&self, force: &[Vec<Complex>], u: &[Vec<Complex>], drive: f64, a: usize) -> Vec<Complex> {
        self.truncated(|i, k| {
            let drive = if self.forcing.drives(k) { drive } else { 0.0 };
            solenoidal(force, i, k, a) + u[a][i] * drive
        })
    }

    /// Sum of terms `factor * exp(-diffusivity k² span) * spectra`.
    fn combine(&self, terms: &[(&Spectra, f64, f64)]) -> Spectra {
        let components = terms[0].0.len();
        (0..components)
            .map(|c| {
                let diffusivity = if c < 3 { self.viscosity } else { self.resistivity };
                self.truncated(|i, k| {
                    let rate = -diffusivity * (k[0] * k[0] + k[1] * k[1] + k[2] * k[2]);
                    terms.iter().map(|(s, factor, span)| s[c][i] * (factor * (rate * span).exp())).sum()
                })
            })
            .collect()
    }

    /// A spectrum given by `f(index, wavevector)` on the kept modes.
    fn truncated(&self, f: impl Fn(usize, [f64; 3]) -> Complex + Sync + Send) -> Vec<Complex> {
        let n = self.fft.n()[0] as i64;
        let mut out = vec![Complex::default(); self.fft.spectrum_len()];
        self.fft.fill(&mut out, |i, m| {
            let square = m[0] * m[0] + m[1] * m[1] + m[2] * m[2];
            if 9 * square < n * n { f(i, m.map(|m| m as f64)) } else { Complex::default() }
        });
        out
    }

    fn vector(&self, v: &[Vec<Complex>]) -> Vector {
        std::array::from_fn(|a| self.samples(&v[a]))
    }

    fn curl_samples(&self, v: &[Vec<Complex>]) -> Vector {
        std::array::from_fn(|a| self.take_samples(self.truncated(|i, k| curl(v, i, k, a))))
    }

    /// Spectra of the sum of the vector products of all pairs.
    fn cross(&self, pairs: &[(&Vector, &Vector)]) -> Spectra {
        let mut product = vec![0.0; self.fft.real_len()];
        let plane = self.fft.n()[0] * self.fft.n()[1];
        let component = |c: usize| {
            let (d, e) = ((c + 1) % 3, (c + 2) % 3);
            par::for_chunks(&mut product, plane, |z, out| {
                for (i, p) in out.iter_mut().enumerate() {
                    let at = z * plane + i;
                    let products = pairs.iter().map(|(a, b)| a[d][at] * b[e][at] - a[e][at] * b[d][at]);
                    *p = products.sum();
                }
            });
            self.spectrum(&product)
        };
        (0..3).map(component).collect()
    }

    fn spectrum(&self, samples: &[f64]) -> Vec<Complex> {
        let mut out = vec![Complex::default(); self.fft.spectrum_len()];
        self.fft.forward(samples, &mut out);
        out
    }

    fn take_samples(&self, mut spectrum: Vec<Complex>) -> Vec<f64> {
        let mut out = vec![0.0; self.fft.real_len()];
        self.fft.inverse(&mut spectrum, &mut out);
        out
    }
}

/// Component `a` of ik×v at one mode.
fn curl(v: &[Vec<Complex>], i: usize, k: [f64; 3], a: usize) -> Complex {
    let (b, c) = ((a + 1) % 3, (a + 2) % 3);
    Complex::new(0.0, 1.0) * (v[c][i] * k[b] - v[b][i] * k[c])
}

/// Component `a` of the part of v across k at one mode.
fn solenoidal(v: &[Vec<Complex>], i: usize, k: [f64; 3], a: usize) -> Complex {
    let square = k[0] * k[0] + k[1] * k[1] + k[2] * k[2];
    if square == 0.0 {
        return v[a][i];
    }
    let along = v[0][i] * k[0] + v[1][i] * k[1] + v[2][i] * k[2];
    v[a][i] - along * (k[a] / square)
}
