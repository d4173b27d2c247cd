//! Catalogues of coherent structures (vortex filaments, current sheets) from gridded turbulence snapshots.
//!
//! A snapshot supplies planes of velocity and magnetic field ([`model::source`]); [`run::analysis::analyse`] turns them into rows
//! of a catalogue and surface meshes, and [`run::catalogue::catalogue`] does so for a whole run, into a folder.
//!
//! # Conventions
//!
//! * **Axes** are x, y, z and triples are in that order. Arrays are stored z slowest and x fastest. Sample (i, j, k) sits at
//!   `origin + (i, j, k) * spacing`; the box is `n * spacing` long, at open faces too.
//! * **Periodic axes** wrap everywhere: derivatives, objects, centroids, surfaces. Positions of objects are unwrapped, their centroid
//!   inside the box. An object that closes on itself through the box has no length along that axis, and none is reported.
//! * **Units** are the user's own, one for length, one for time. The magnetic field is in velocity (Alfvén) units: b = B/√(μ₀ρ).
//! * **Velocity** is measured in the frame of the box mean unless the stored frame is asked for.
//! * ω = ∇×u and j = ∇×b are **right-handed** curls. A_ij = ∂u_i/∂x_j, S = ½(A + Aᵀ), S:S = S_ij S_ij without a further 2.
//!   Q = ¼|ω|² − ½ S:S. Viscous dissipation is 2ν S:S, Ohmic η|j|².
//! * **rms** of an indicator is the root of the box mean of its square; for a vector, of its squared magnitude (not of one component).
//! * **Cosines** lie in [-1, 1]. `lamb_sin2` = ⟨|u×ω|²⟩/⟨|u|²|ω|²⟩ and `lorentz_sin2` = ⟨|j×b|²⟩/⟨|j|²|b|²⟩ are 2/3 for independent
//!   isotropic directions.
//! * **Surfaces** are isosurfaces of the indicator, normals pointing out of the object. Mean curvature integral C = ½∮(κ₁+κ₂)dS, 4πR for
//!   a ball. Euler numbers are those of the body, half the surface's.
//! * **Transforms** ([`math::fft`]) state their normalisation there.
//! * **Storage** is f32 or f64 as in the file; every sum and every measured value is f64. Results are the same bytes for any number of
//!   threads and any block thickness.
//! * **Missing** values are missing (empty, null, NaN in binary formats), never 0, and the `flags` column says why.
//!
//! # Heights
//!
//! A module imports its own folder or a lower height, stages on one height never import each other; `tests/layers.rs` holds this.
//! 0 `base`, 1 `space`, 2 `math`, 3 `synth`, 4 `model`, 5 `read derive survey detect measure export`, 6 `run`, 7 the program.

pub mod base;
pub mod derive;
pub mod detect;
pub mod export;
pub mod math;
pub mod measure;
pub mod model;
pub mod read;
pub mod run;
pub mod space;
pub mod survey;
pub mod synth;

/// The README's example is compiled and run with the tests.
#[cfg(doctest)]
#[doc = include_str!("../README.md")]
pub struct Readme;
