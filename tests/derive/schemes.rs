//! Whole derivers: waves along every axis and scheme, the same bits for any blocks and parts of rows, stretched axes, fallbacks.

use ropewalk::base::observe::Silent;
use ropewalk::base::real::Real;
use ropewalk::derive::{Deriver, Scratch, fewest_samples, z_lines, z_lines_bytes};
use ropewalk::math::diff::modified_wavenumber;
use ropewalk::model::request::{Indicator as I, Scheme};
use ropewalk::model::rows::Need;
use ropewalk::model::source::Fields;
use ropewalk::run::stream::{Buffers, block_ranges, blocks};
use ropewalk::space::grid::Grid;

use crate::common::{ALL_ROOM, TAU, Vector, close, each_row, plan, positions, sampled, whole};

const ALL: [Scheme; 6] = [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8, Scheme::Opt, Scheme::Spectral];

/// u = (sin m z, sin m x, sin m y): ω = m (cos m y, cos m z, cos m x), each by the modified wavenumber of its own axis; spacing
/// differs between axes.
fn waves<T: Real>(scheme: Scheme, tolerance: f64) {
    let grid = Grid::periodic([18, 15, 20], [TAU; 3]);
    for m in [1.0, 4.0, 7.0] {
        let flow = |[x, y, z]: Vector| [(m * z).sin(), (m * x).sin(), (m * y).sin()];
        let mut source = sampled::<T, 3>(&grid, Fields::VELOCITY, flow);
        let need = Need { vectors: true, ..Need::default() };
        let made = |a: usize| modified_wavenumber(scheme, m * grid.spacing[a]) / grid.spacing[a];
        let k = [made(0), made(1), made(2)];
        for c in 0..3 {
            let found = whole(&mut source, &plan(scheme, &[]), need, |r| &r.w[c]);
            let along = (c + 1) % 3;
            let wanted: Vec<f64> = positions(&grid).iter().map(|p| k[along] * (m * p[along]).cos()).collect();
            close(&found, &wanted, tolerance, &format!("{scheme:?} m = {m}, component {c}"));
        }
    }
}

#[test]
fn waves_along_every_axis() {
    for scheme in ALL {
        waves::<f64>(scheme, 1e-12);
        waves::<f32>(scheme, 2e-5);
    }
}

/// A product of waves along all axes, exact by calculus.
#[test]
fn transforms_are_exact_for_products_of_waves() {
    let grid = Grid::periodic([16, 18, 21], [TAU, 1.0, 3.0]);
    let (ky, kz) = (TAU * 3.0, TAU * 4.0 / 3.0);
    let flow = |[x, y, z]: Vector| [0.0, 0.0, (5.0 * x).sin() * (ky * y).cos() * (kz * z + 0.3).sin()];
    let mut source = sampled::<f64, 3>(&grid, Fields::VELOCITY, flow);
    let need = Need { divergence: true, ..Need::default() };
    let plan = plan(Scheme::Spectral, &[]);
    let found = [
        whole(&mut source, &plan, need, |r| &r.w[0]),
        whole(&mut source, &plan, need, |r| &r.w[1]),
        whole(&mut source, &plan, need, |r| &r.div_u),
    ];
    for (i, [x, y, z]) in positions(&grid).into_iter().enumerate() {
        let (sx, sy, sz) = ((5.0 * x).sin(), (ky * y).sin(), (kz * z + 0.3).sin());
        let (cx, cy, cz) = ((5.0 * x).cos(), (ky * y).cos(), (kz * z + 0.3).cos());
        let wanted = [-ky * sx * sy * sz, -5.0 * cx * cy * sz, kz * sx * cy * cz];
        for (f, w) in found.iter().zip(wanted) {
            assert!((f[i] - w).abs() < 1e-12, "{} {w}", f[i]);
        }
    }
}

fn rough([x, y, z]: Vector) -> Vector {
    [(3.0 * x + z).sin() * y.exp(), (y * 5.0 + x).cos() + z * z, (x * y).sin() + (4.0 * z).cos()]
}

/// Grids with periodic, open and stretched axes in every place.
fn grids(n: [usize; 3]) -> Vec<Grid> {
    let stretched = |g: Grid, a: usize| {
        let positions = (0..n[a]).map(|i| (i as f64 / n[a] as f64).powi(2) + 0.5 * i as f64 / n[a] as f64).collect();
        g.with_positions(a, positions)
    };
    let periodic = Grid::periodic(n, [1.0, 0.8, 1.2]);
    vec![
        periodic.clone(),
        periodic.clone().with_periodic([true, true, false]),
        periodic.clone().with_periodic([false, false, true]),
        stretched(periodic.clone(), 2),
        stretched(stretched(periodic, 0), 1),
    ]
}

#[test]
fn blocks_change_no_bit() {
    for grid in grids([11, 10, 13]) {
        let mut source = sampled::<f32, 3>(&grid, Fields::VELOCITY, rough);
        for scheme in ALL {
            let need = Need { strain: true, divergence: true, truncation: true, alignment: true, ..Need::default() };
            let mut all = Vec::new();
            for planes in [13, 1, 4] {
                let mut bits: Vec<u32> = Vec::new();
                each_row(&mut source, &plan(scheme, &[I::Lambda2]), need, planes, |_, _, r| {
                    for row in [&r.w2, &r.strain2, &r.div_u, &r.div_u_miss, &r.lamb2, &r.indicators[0]] {
                        bits.extend(row.iter().map(|v| v.to_bits()));
                    }
                });
                all.push(bits);
            }
            assert!(all[0] == all[1] && all[0] == all[2], "{scheme:?} {:?}", grid.periodic);
        }
    }
}

#[test]
fn parts_of_rows_are_the_same_bits() {
    for grid in grids([21, 9, 9]) {
        let mut source = sampled::<f32, 3>(&grid, Fields::VELOCITY, rough);
        for scheme in ALL {
            let need = Need { strain: true, truncation: true, divergence: true, ..Need::default() };
            let deriver = Deriver::<f32>::new(&grid, Fields::VELOCITY, plan(scheme, &[I::Swirling]));
            let lines = deriver.wanted_z_lines().map(|wanted| z_lines(&mut source, &wanted, &ALL_ROOM, &Silent).unwrap().into());
            let deriver = deriver.with_z_lines(lines);
            let ranges = block_ranges(&source, Some(4), |_| true);
            let (mut a, mut b) = (Scratch::default(), Scratch::default());
            let check = |block: &ropewalk::space::slab::Block<'_, f32>| {
                let ready = deriver.prepare(block, need)?;
                for z in block.z.clone() {
                    for y in 0..grid.n[1] {
                        deriver.row(block, &ready, z, y, 0..21, need, &mut a);
                        for part in [0..1, 2..9, 5..16, 20..21, 0..20, 17..21] {
                            deriver.row(block, &ready, z, y, part.clone(), need, &mut b);
                            for (whole, short) in [
                                (&a.rows.w2, &b.rows.w2),
                                (&a.rows.strain2, &b.rows.strain2),
                                (&a.rows.div_u_miss, &b.rows.div_u_miss),
                                (&a.rows.indicators[0], &b.rows.indicators[0]),
                            ] {
                                let bits = |v: &[f32]| v.iter().map(|v| v.to_bits()).collect::<Vec<_>>();
                                assert_eq!(bits(short), bits(&whole[part.clone()]), "{scheme:?} {part:?}");
                            }
                        }
                    }
                }
                Ok(())
            };
            blocks(&mut source, &ranges, deriver.halo(), |z| deriver.reach(z), &Buffers::default(), &Silent, check).unwrap();
        }
    }
}

/// A channel: y stretched towards its walls (hyperbolic tangent), the flow exp(y) sin(x): errors fall with the order.
#[test]
fn stretched_channels_converge_with_the_order() {
    let error = |scheme: Scheme, n: usize| {
        let wall = |i: usize| (1.5 * (2.0 * i as f64 / (n - 1) as f64 - 1.0)).tanh() / 1.5f64.tanh();
        let grid = Grid::periodic([64, n, 9], [TAU; 3]).with_positions(1, (0..n).map(wall).collect());
        let flow = |[x, y, _]: Vector| [(2.0 * y).exp(), x.sin(), 0.0];
        let need = Need { vectors: true, ..Need::default() };
        let found = whole(&mut sampled::<f64, 3>(&grid, Fields::VELOCITY, flow), &plan(scheme, &[]), need, |r| &r.w[2]);
        let wanted = positions(&grid).into_iter().map(|[x, y, _]| x.cos() - 2.0 * (2.0 * y).exp());
        let along_x = TAU / 64.0;
        let x_error = 1.0 - modified_wavenumber(scheme, along_x) / along_x;
        found.iter().zip(wanted).map(|(f, w)| (f - w).abs()).fold(0.0, f64::max) - x_error
    };
    for (scheme, order) in [(Scheme::Fd2, 2.0), (Scheme::Fd4, 4.0), (Scheme::Fd6, 6.0), (Scheme::Fd8, 8.0)] {
        let (a, b) = (error(scheme, 20), error(scheme, 40));
        let found = (a / b).log2();
        assert!((order - 0.7..order + 1.5).contains(&found), "{scheme:?}: {found}, {a:e} -> {b:e}");
    }
}

#[test]
fn where_a_scheme_gives_way_is_said() {
    let of = |scheme, grid: &Grid| Deriver::<f64>::new(grid, Fields::VELOCITY, plan(scheme, &[])).fallbacks().to_vec();
    let all = grids([10; 3]);
    assert!(ALL.iter().all(|&s| of(s, &all[0]).is_empty()));
    let [open] = &of(Scheme::Spectral, &all[1])[..] else { panic!("expected one axis") };
    assert_eq!(
        open,
        "axis z is open, so derivatives along it are differences of order 8 instead of spectral: transforms need a periodic axis"
    );
    assert!(of(Scheme::Opt, &all[1]).is_empty());
    assert!(of(Scheme::Opt, &all[3])[0].starts_with("axis z is stretched"));
    assert_eq!(of(Scheme::Spectral, &all[4]).len(), 2);
    assert!(of(Scheme::Fd6, &all[4]).is_empty());
    let flat = Grid::periodic([9, 9, 1], [1.0; 3]).with_periodic([true, true, false]);
    assert!(of(Scheme::Spectral, &flat).is_empty());
    assert_eq!((fewest_samples(Scheme::Fd4, &flat, 0), fewest_samples(Scheme::Fd4, &flat, 2)), (5, 1));
}

#[test]
fn memory_for_z_lines_is_known_beforehand() {
    let grid = Grid::periodic([1024; 3], [1.0; 3]);
    assert_eq!(z_lines_bytes(&grid, Fields::VELOCITY, 4), 12 << 30);
}
