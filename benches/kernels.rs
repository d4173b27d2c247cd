//! Kernels one by one: row derivatives and alignment, labelling, isosurface and its geometry, on a random solenoidal field.

use std::sync::Arc;

use divan::Bencher;
use ropewalk::base::observe::Silent;
use ropewalk::derive::{Deriver, Plan, Scratch};
use ropewalk::math::diff::{AxisStencil, Pick, RowScratch, Scheme, Support, difference};
use ropewalk::math::isosurface::isosurface;
use ropewalk::math::stats::{Cosine, row_sum};
use ropewalk::math::surface::measure;
use ropewalk::model::request::{Family, Indicator, Request, Surfaces};
use ropewalk::model::rows::Need;
use ropewalk::model::sink::NoFiles;
use ropewalk::model::source::{AnySource, Fields, MemorySource};
use ropewalk::run::analysis::{Execution, Snapshot, analyse};
use ropewalk::space::grid::Grid;
use ropewalk::space::patch::{Interval, PatchShape};
use ropewalk::space::slab::{Batch, Block};
use ropewalk::survey::spectra::SpectraSum;
use ropewalk::synth::random::solenoidal;

fn main() {
    divan::main();
}

const N: usize = 256;

fn row() -> Vec<f32> {
    (0..N).map(|i| (i as f32 * 0.37).sin()).collect()
}

const CENTRAL: [Scheme; 4] = [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8];

#[divan::bench(args = CENTRAL)]
fn derivative_across_rows(bencher: Bencher, scheme: Scheme) {
    let r = row();
    let s = AxisStencil::<f32>::new(scheme, N, 0.1, true);
    let Support::Central { weights, terms } = s.support(0, Pick::Scheme) else { panic!("a periodic axis is central") };
    let mut out = vec![0.0; N];
    bencher
        .counter(divan::counter::ItemsCount::new(N))
        .bench_local(|| difference(&mut out, [&r, &r, &r, &r], [&r, &r, &r, &r], weights, terms, std::slice::from_ref(&(0..N))));
}

#[divan::bench(args = [Scheme::Fd8, Scheme::Spectral])]
fn derivative_along_row(bencher: Bencher, scheme: Scheme) {
    let r = row();
    let s = AxisStencil::<f32>::new(scheme, N, 0.1, true);
    let (mut out, mut scratch) = (vec![0.0; N], RowScratch::default());
    bencher
        .counter(divan::counter::ItemsCount::new(N))
        .bench_local(|| s.along(Pick::Scheme, &r, std::slice::from_ref(&(0..N)), &mut scratch, &mut out));
}

#[divan::bench]
fn sum_of_a_row(bencher: Bencher) {
    let r = row();
    bencher.counter(divan::counter::ItemsCount::new(N)).bench_local(|| row_sum(divan::black_box(&r)));
}

#[divan::bench]
fn cosines_of_a_row(bencher: Bencher) {
    let r = row();
    let mut c = Cosine::default();
    bencher.counter(divan::counter::ItemsCount::new(N)).bench_local(|| c.add(divan::black_box(&r)));
}

/// A ball of radius 40 cells.
fn ball() -> (PatchShape, Vec<f32>) {
    const R: i32 = 40;
    let mut object = Vec::new();
    for z in -R..=R {
        for y in -R..=R {
            let rest = R * R - z * z - y * y;
            if rest > 0 {
                let mut half = f64::from(rest).sqrt() as i32;
                while half * half >= rest {
                    half -= 1;
                }
                object.push(Interval { z, y, x: -half, len: (2 * half + 1) as u32 });
            }
        }
    }
    let shape = PatchShape::around(object, 1, [128; 3], [true; 3], [None; 3]);
    let values =
        shape.stored.iter().flat_map(|s| (s.x..s.x + s.len as i32).map(|x| (R * R - x * x - s.y * s.y - s.z * s.z) as f32)).collect();
    (shape, values)
}

#[divan::bench]
fn isosurface_of_a_ball(bencher: Bencher) {
    let (shape, values) = ball();
    bencher.bench_local(|| isosurface(&shape, &values, 0.0));
}

#[divan::bench]
fn geometry_of_a_ball(bencher: Bencher) {
    let (shape, values) = ball();
    let surface = isosurface(&shape, &values, 0.0);
    bencher.bench_local(|| measure(&surface, [1.0; 3]));
}

/// Lines sampled from eight planes of a 256^3 box, among them one of those that x- and y-lines are taken from.
#[divan::bench]
fn spectra_of_eight_planes(bencher: Bencher) {
    let grid = Grid::periodic([N; 3], [1.0; 3]);
    let components: Vec<Vec<f32>> = (0..3).map(|c| (0..8 * N * N).map(|i| ((i + c) as f32 * 0.37).sin()).collect()).collect();
    let batches = [Batch { first: 0, planes: 8, components: Arc::new(components.into_iter().map(Into::into).collect()) }];
    let block = Block::new(0..8, &batches, N * N);
    bencher
        .counter(divan::counter::ItemsCount::new(8 * N * N))
        .with_inputs(|| SpectraSum::<f32>::new(&grid, 3))
        .bench_local_refs(|sum| sum.add(&block));
}

/// The indicators made of the velocity gradient, and the derivatives they take, in eight planes of a 256^2 box.
#[divan::bench(args = ["vorticity", "q", "delta", "lambda2", "swirling"], sample_count = 10)]
fn indicator_of_eight_planes(bencher: Bencher, name: &str) {
    let grid = Grid::periodic([N, N, 24], [1.0; 3]);
    let components: Vec<Vec<f32>> = (0..3).map(|c| (0..24 * N * N).map(|i| ((i * (c + 1)) as f32 * 0.37).sin()).collect()).collect();
    let batches = [Batch { first: 0, planes: 24, components: Arc::new(components.into_iter().map(Into::into).collect()) }];
    let block = Block::new(8..16, &batches, N * N);
    let plan = Plan {
        indicators: vec![Indicator::named(name).unwrap()],
        extras: Vec::new(),
        scheme: Scheme::Fd8,
        frame: [0.0; 3],
        mean_field: None,
        viscosity: None,
        resistivity: None,
    };
    let deriver = Deriver::<f32>::new(&grid, Fields::VELOCITY, plan);
    let mut scratch = Scratch::default();
    bencher.counter(divan::counter::ItemsCount::new(8 * N * N)).bench_local(|| {
        let ready = deriver.prepare(&block, Need::default()).unwrap();
        for z in 8..16 {
            for y in 0..N {
                deriver.row(&block, &ready, z, y, 0..N, Need::default(), &mut scratch);
            }
        }
    });
}

/// The whole analysis of a 96^3 random field in memory, without files.
#[divan::bench(sample_count = 10)]
fn analysis_of_a_random_field(bencher: Bencher) {
    let n = [96; 3];
    let lengths = [std::f64::consts::TAU; 3];
    let u = solenoidal(n, lengths, 1, |k| (-(k / 12.0).powi(2)).exp(), 0.0);
    let single: Vec<Vec<f32>> = u.iter().map(|c| c.iter().map(|&v| v as f32).collect()).collect();
    let request = Request {
        families: vec![Family::parse("vorticity: vorticity > 1.6 rms").unwrap()],
        surfaces: Surfaces::None,
        ..Request::default()
    };
    bencher
        .counter(divan::counter::ItemsCount::new(96usize.pow(3)))
        .with_inputs(|| {
            let fields = Fields::VELOCITY;
            AnySource::F32(Box::new(MemorySource::new(Grid::periodic(n, lengths), fields, single.clone())))
        })
        .bench_local_values(|source| {
            let snapshot = Snapshot { name: "bench".into(), time: None, components: Vec::new() };
            analyse(source, snapshot, &request, &Execution::default(), &Silent, &mut NoFiles).unwrap()
        });
}
