//! The same bytes for any number of threads and any thickness of blocks: rows, statistics, meshes and mesh files.

use std::f64::consts::TAU;
use std::fmt::Write;
use std::io::Cursor;
use std::path::{Path, PathBuf};

use crate::common::{BOTH, Outcome, Precision, stored, text, try_run};
use ropewalk::base::error::{Kind, Result};
use ropewalk::base::par::Pool;
use ropewalk::base::real::Real;
use ropewalk::export::csv;
use ropewalk::export::ply::{Joins, PlyWriter};
use ropewalk::model::columns::Col;
use ropewalk::model::contents::Sum;
use ropewalk::model::request::{Family, Filter, FilterShape, Indicator, Request, Scheme};
use ropewalk::model::source::{AnySource, Fields, PlaneSource};
use ropewalk::read::{InputSpec, open};
use ropewalk::run::analysis::Execution;
use ropewalk::space::grid::Grid;
use ropewalk::synth::random::solenoidal;

const SUMMED: [Sum; 9] = [
    Sum::Indicator,
    Sum::Strain2,
    Sum::Current2,
    Sum::Lamb2,
    Sum::Speed2Vorticity2,
    Sum::Lorentz2,
    Sum::Current2Field2,
    Sum::Lorentz2Fluct,
    Sum::Current2Field2Fluct,
];
const THREADS: [usize; 4] = [1, 2, 3, 8];
const BLOCKS: [Option<usize>; 7] = [None, Some(1), Some(2), Some(3), Some(5), Some(7), Some(16)];

/// Everything a run yields, as bytes. Numbers are written so that different ones differ.
fn bytes(o: &Outcome) -> Vec<u8> {
    let a = &o.analysis;
    let s = &a.survey;
    let mut all = format!("{:?} {:?} {} {:?} {:?}\n", a.scan, a.frame, s.cells, s.velocity, s.magnetic);
    writeln!(all, "{:?} {:?} {:?}", a.divergence, a.kolmogorov_length, a.alignment).unwrap();
    for i in &s.indicators {
        // Their counts for levels by volume are compared by the levels read from them.
        writeln!(all, "{:?} {:?} {:?} {:?}", i.sum, i.square_sum, i.min, i.max).unwrap();
    }
    for f in &a.families {
        writeln!(all, "{:?} {:?} {:?} {:?} {:?}", f.level, f.volume_fraction, f.dropped.objects, f.inside, f.outside).unwrap();
        for (tally, contents) in [(&f.listed, &f.contents), (&f.dropped.tally, &f.dropped.contents)] {
            // Its coordinates and peak have no meaning.
            let sums = SUMMED.map(|s| contents.sum(s, &f.scales));
            writeln!(all, "{} {sums:?} {} {:?}", tally.moments.count, tally.open_faces, contents.all_cosines()).unwrap();
        }
        f.rows.iter().for_each(|r| csv::push_row(&mut all, r));
    }
    let mut all = all.into_bytes();
    for meshes in &o.meshes {
        for m in meshes {
            all.extend(m.id.to_le_bytes());
            let floats = m.positions.iter().chain(&m.normals).flatten().chain(m.values.iter().flatten());
            all.extend(floats.flat_map(|v| v.to_bits().to_le_bytes()));
            all.extend(m.triangles.iter().flatten().flat_map(|v| v.to_le_bytes()));
        }
        let Some(first) = meshes.first() else { continue };
        let values = vec!["value"; first.values.len()];
        let mut file = PlyWriter::new(Cursor::new(Vec::new()), Cursor::new(Vec::new()), Joins::Triangles, values, Vec::new()).unwrap();
        // One call a mesh and one call for all must not differ either.
        let (first, rest) = meshes.split_at(meshes.len() / 2);
        first.iter().for_each(|m| file.add(std::slice::from_ref(m)).unwrap());
        file.add(rest).unwrap();
        all.extend(file.finish().unwrap().into_inner());
    }
    all
}

/// A source that has to be read, planes being cheapest in some number: chunked files behave so.
struct Streamed<T>(Box<dyn PlaneSource<T>>, usize);

impl<T: Real> PlaneSource<T> for Streamed<T> {
    fn grid(&self) -> &Grid {
        self.0.grid()
    }

    fn fields(&self) -> Fields {
        self.0.fields()
    }

    fn read(&mut self, z0: usize, z1: usize, out: &mut [&mut [T]]) -> Result<()> {
        self.0.read(z0, z1, out)
    }

    fn natural_planes(&self) -> usize {
        self.1
    }

    fn is_costly(&self) -> bool {
        self.1 > 1
    }
}

fn streamed(source: AnySource, natural: usize) -> AnySource {
    match source {
        AnySource::F32(s) => AnySource::F32(Box::new(Streamed(s, natural))),
        AnySource::F64(s) => AnySource::F64(Box::new(Streamed(s, natural))),
    }
}

/// Any budget that does, kept in memory or streamed, plain or chunked: the same bytes. Budgets that do not are refused.
fn same_in_any_memory(source: impl Fn() -> AnySource + Sync, request: &Request, scratch: &Path) {
    let one = |source: AnySource, memory: u64| {
        let execution = Execution { memory, scratch: Some(scratch.to_path_buf()), ..Execution::default() };
        Pool::new(2).unwrap().run(|| try_run(source, request, &execution).map(|o| bytes(&o)))
    };
    let reference = one(source(), 4 << 30).unwrap();
    let mut done = 0;
    let mut refused = 0;
    for memory in (0..12).map(|k| (2f64.powi(27) * 0.55f64.powi(k)) as u64) {
        for natural in [0, 1, 5] {
            let source = if natural == 0 { source() } else { streamed(source(), natural) };
            match one(source, memory) {
                Ok(got) => {
                    let at = got.iter().zip(&reference).position(|(a, b)| a != b);
                    assert!(at.is_none() && got.len() == reference.len(), "{memory} bytes, natural {natural}: differs at byte {at:?}");
                    done += 1;
                }
                Err(e) => {
                    assert!(e.kind() == Kind::Limit && e.to_string().contains("memory"), "{memory} bytes: {e}");
                    refused += 1;
                }
            }
        }
    }
    assert!(done > 9 && refused > 3, "{done} {refused}");
}

#[test]
fn any_memory_gives_the_same_bytes() {
    let scratch = tempfile::tempdir().unwrap();
    let spectral = Request { scheme: Scheme::Spectral, ..requested() };
    let filtered = Request { filter: Some(Filter { shape: FilterShape::Sharp, width: 0.4 }), ..requested() };
    for request in [requested(), spectral] {
        same_in_any_memory(random::<f32>, &request, scratch.path());
    }
    same_in_any_memory(|| boxed::<f32>([true; 3]), &filtered, scratch.path());
}

/// Runs every combination and compares with one thread and blocks of one plane.
fn same(source: impl Fn() -> AnySource + Sync, request: &Request, combinations: impl Iterator<Item = (usize, Option<usize>)>) {
    let one = |threads: usize, block_planes: Option<usize>| {
        let execution = Execution { block_planes, ..Execution::default() };
        let pool = Pool::new(threads).unwrap();
        pool.run(|| bytes(&try_run(source(), request, &execution).unwrap()))
    };
    let reference = one(1, Some(1));
    assert!(reference.len() > 100_000, "a run with objects and meshes");
    for (threads, blocks) in combinations {
        let got = one(threads, blocks);
        let at = got.iter().zip(&reference).position(|(a, b)| a != b);
        assert!(at.is_none() && got.len() == reference.len(), "{threads} threads, blocks {blocks:?}: differs at byte {at:?}");
    }
}

fn everything() -> impl Iterator<Item = (usize, Option<usize>)> {
    THREADS.into_iter().flat_map(|t| BLOCKS.into_iter().map(move |b| (t, b)))
}

/// Every number of threads and every thickness at least twice, in different pairs.
fn a_selection() -> impl Iterator<Item = (usize, Option<usize>)> {
    (0..14).map(|k| (THREADS[k % 4], BLOCKS[k % 7]))
}

/// Families above and below, by every kind of level; the third one wraps.
fn requested() -> Request {
    let families = [
        "vorticity: vorticity > 1.7 rms",
        "shear: q < -1.3 rms",
        "field: field > 0.9 mean",
        "calm: speed < 0.02 volume",
        "current: current > 0.05 volume",
        "cross: cross_helicity > 0.8",
    ];
    Request {
        families: families.iter().map(|f| Family::parse(f).unwrap()).collect(),
        min_cells: 4,
        viscosity: Some(0.01),
        resistivity: Some(0.02),
        ..Request::default()
    }
}

fn random<T: Precision>() -> AnySource {
    boxed::<T>([true, false, true])
}

fn boxed<T: Precision>(periodic: [bool; 3]) -> AnySource {
    let n = [32, 28, 36];
    let grid = Grid::periodic(n, [TAU, 5.5, 7.1]).with_periodic(periodic);
    let field = |seed| solenoidal(n, [TAU, 5.5, 7.1], seed, |k| k * (-k / 3.0).exp(), 0.2);
    let components: Vec<Vec<f64>> = field(5).into_iter().chain(field(6)).collect();
    stored::<T>(grid.clone(), BOTH, &components)
}

#[test]
fn random_fields_in_single_precision() {
    same(random::<f32>, &requested(), everything());
}

#[test]
fn random_fields_in_double_precision() {
    same(random::<f64>, &requested(), a_selection());
}

/// Every way of deriving, of growing objects and of measuring that is not in the request above.
fn grown(scheme: Scheme, filter: Option<Filter>) -> Request {
    let families = [
        "grown: vorticity > 1.6 rms down to 0.6 peak",
        "both: current > 2 rms down to 1.4 rms",
        "cores: lambda2 < -1.2 rms",
        "spin: swirling > 1.5 rms",
        "waves: elsasser_minus > 0.04 volume",
    ];
    Request {
        families: families.iter().map(|f| Family::parse(f).unwrap()).collect(),
        companions: vec![Indicator::Delta, Indicator::LambSin, Indicator::RelativeHelicity],
        mesh_values: vec![Indicator::Q, Indicator::LorentzSin],
        scheme,
        filter,
        ..requested()
    }
}

fn guided<T: Precision>(grid: Grid) -> AnySource {
    let lengths = std::array::from_fn(|a| grid.length(a));
    let field = |seed| solenoidal(grid.n, lengths, seed, |k| k * (-k / 3.0).exp(), 0.2);
    let mut components: Vec<Vec<f64>> = field(7).into_iter().chain(field(8)).collect();
    components[5].iter_mut().for_each(|b| *b += 0.7);
    stored::<T>(grid, BOTH, &components)
}

#[test]
fn every_scheme_and_the_filter() {
    let grid = Grid::periodic([32, 28, 36], [TAU, 5.5, 7.1]);
    for (scheme, filter) in [
        (Scheme::Spectral, None),
        (Scheme::Fd2, None),
        (Scheme::Opt, None),
        (Scheme::Fd8, Some(Filter { shape: FilterShape::Gaussian, width: 0.5 })),
    ] {
        let request = grown(scheme, filter);
        same(|| guided::<f32>(grid.clone()), &request, [(2, None), (3, Some(5)), (8, Some(16))].into_iter());
    }
}

#[test]
fn stretched_and_partly_open_boxes() {
    let n = [32, 28, 36];
    let y = (0..n[1]).map(|i| (1.4 * (2.0 * i as f64 / 27.0 - 1.0)).tanh()).collect();
    let grid = Grid::periodic(n, [TAU, 2.0, 7.1]).with_positions(1, y);
    for scheme in [Scheme::Fd8, Scheme::Spectral] {
        let request = grown(scheme, None);
        same(|| guided::<f64>(grid.clone()), &request, [(2, None), (3, Some(5)), (8, Some(7))].into_iter());
    }
}

/// The comparison above must have something to tell apart: wrapping objects, cut objects, dropped objects, meshes everywhere.
#[test]
fn the_random_run_has_every_kind_of_object() {
    let o = try_run(random::<f32>(), &requested(), &Execution::default()).unwrap();
    let rows = || o.analysis.families.iter().flat_map(|f| &f.rows);
    assert!(rows().any(|r| text(r, Col::Wraps).contains('x')), "an object that wraps");
    assert!(rows().any(|r| !text(r, Col::OpenFaces).is_empty()), "an object at an open face");
    assert!(o.analysis.families.iter().any(|f| f.dropped.objects > 0), "dropped objects");
    assert!(o.analysis.families.iter().zip(&o.meshes).all(|(f, m)| !f.rows.is_empty() && f.rows.len() == m.len()));
}

/// Shipped turbulence, read from its files in chunks (which are not kept in memory, so that blocks really are read piece by piece).
#[test]
fn shipped_turbulence() {
    let folder = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("demo-data");
    for name in ["mhd_0001.h5", "hydro_0001.h5"] {
        let spec = InputSpec { lengths: Some([TAU; 3]), ..InputSpec::default() };
        let source = || open(&folder.join(name).into(), &spec).unwrap().source;
        let families = ["w: vorticity > 2 rms", "calm: q < -1.5 rms"].map(|f| Family::parse(f).unwrap()).to_vec();
        let request = Request { families, viscosity: Some(0.019), resistivity: Some(0.019), ..Request::default() };
        same(source, &request, [(1, None), (2, Some(5)), (3, Some(16)), (8, Some(7))].into_iter());
    }
}
