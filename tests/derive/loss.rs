//! The share of gradient variance a scheme loses, by sampled lines, against the derivatives themselves; whole analyses by each scheme.

use ropewalk::base::observe::Silent;
use ropewalk::base::par::Pool;
use ropewalk::math::diff::{AxisStencil, Pick, RowScratch};
use ropewalk::model::request::{Family, Request, Scheme, Surfaces};
use ropewalk::model::sink::NoFiles;
use ropewalk::model::source::{AnySource, Fields, MemorySource};
use ropewalk::run::analysis::{Analysis, Execution, Snapshot, analyse};
use ropewalk::space::grid::Grid;
use ropewalk::synth::random::solenoidal;

use crate::common::TAU;

const N: usize = 48;

fn velocity() -> [Vec<f64>; 3] {
    solenoidal([N; 3], [TAU; 3], 7, |k| k * k * (-(k / 7.0).powi(2)).exp(), 0.0)
}

fn analysed(scheme: Scheme, threads: usize, block_planes: usize) -> Analysis {
    let grid = Grid::periodic([N; 3], [TAU; 3]);
    let source = AnySource::F64(Box::new(MemorySource::new(grid, Fields::VELOCITY, velocity().to_vec())));
    let families = ["vorticity: vorticity > 2 rms", "cores: lambda2 < -2 rms"];
    let request = Request {
        families: families.iter().map(|f| Family::parse(f).unwrap()).collect(),
        scheme,
        min_cells: 4,
        surfaces: Surfaces::None,
        ..Request::default()
    };
    let execution = Execution { block_planes: Some(block_planes), ..Execution::default() };
    let snapshot = Snapshot { name: "random".into(), time: None, components: Vec::new() };
    Pool::new(threads).unwrap().run(|| analyse(source, snapshot, &request, &execution, &Silent, &mut NoFiles)).unwrap()
}

/// 1 − ⟨(du/dx)²⟩ by differences over the same by transforms, of all x-lines (Parseval; transforms keep all but the Nyquist wave,
/// which this spectrum does not reach).
#[test]
fn sampled_lines_tell_the_loss_of_all() {
    let u = velocity();
    let variance = |scheme: Scheme| {
        let axis = AxisStencil::<f64>::new(scheme, N, TAU / N as f64, true);
        let mut out = vec![0.0; N];
        let mut sum = 0.0;
        for row in u[0].chunks_exact(N) {
            axis.along(Pick::Scheme, row, std::slice::from_ref(&(0..N)), &mut RowScratch::default(), &mut out);
            sum += out.iter().map(|v| v * v).sum::<f64>();
        }
        sum
    };
    let exact = variance(Scheme::Spectral);
    let mut before = 1.0;
    for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8] {
        let wanted = 1.0 - variance(scheme) / exact;
        let loss = analysed(scheme, 2, 6).gradient_loss;
        let found = loss.components[0][0].unwrap();
        assert!(wanted < before && (found / wanted - 1.0).abs() < 0.1, "{scheme:?}: {found}, all lines {wanted}");
        // The field is isotropic, and velocity has twice as many transverse derivatives, whose spectrum reaches further.
        assert!((found..3.0 * found).contains(&loss.velocity.unwrap()), "{scheme:?}: {loss:?}");
        assert_eq!(loss.magnetic, None);
        before = wanted;
    }
    let spectral = analysed(Scheme::Spectral, 1, 48).gradient_loss;
    assert!(spectral.velocity.unwrap() < 1e-12, "{spectral:?}");
}

#[test]
fn analyses_are_the_same_for_any_blocks_and_threads() {
    for scheme in [Scheme::Spectral, Scheme::Opt, Scheme::Fd2] {
        let (a, b) = (analysed(scheme, 1, 48), analysed(scheme, 3, 5));
        assert_eq!((&a.survey, &a.scan, &a.alignment), (&b.survey, &b.scan, &b.alignment), "{scheme:?}");
        for (f, g) in a.families.iter().zip(&b.families) {
            assert!(!f.rows.is_empty(), "{scheme:?} {}: no rows", f.family.name);
            assert_eq!(format!("{:?}", f.rows), format!("{:?}", g.rows), "{scheme:?} {}", f.family.name);
        }
        assert_eq!(a.gradient_loss, b.gradient_loss);
    }
    let divergence = analysed(Scheme::Spectral, 2, 8).divergence[0];
    assert!(divergence.ratio.unwrap() < 1e-12 && !divergence.is_suspicious(), "{divergence:?}");
}
