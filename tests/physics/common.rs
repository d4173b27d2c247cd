//! Runs an analysis on fields given as functions of position, and reads its rows.

use std::fmt::Debug;

use ropewalk::base::error::Result;
use ropewalk::base::observe::Silent;
use ropewalk::base::real::Real;
use ropewalk::model::columns::{COLUMNS, Col, Row, Value};
use ropewalk::model::request::{Family, Frame, Request};
use ropewalk::model::sink::ObjectSink;
use ropewalk::model::source::{AnySource, Fields, MemorySource};
use ropewalk::model::surface::SurfaceMesh;
use ropewalk::run::analysis::{Analysis, Execution, FamilyResult, Snapshot, analyse};
use ropewalk::space::grid::Grid;

pub type Vector = [f64; 3];

pub const VELOCITY: Fields = Fields::VELOCITY;
pub const MAGNETIC: Fields = Fields::MAGNETIC;
pub const BOTH: Fields = Fields::BOTH;

/// A storage precision as a source.
pub trait Precision: Real {
    fn source(s: MemorySource<Self>) -> AnySource;
}

impl Precision for f32 {
    fn source(s: MemorySource<f32>) -> AnySource {
        AnySource::F32(Box::new(s))
    }
}

impl Precision for f64 {
    fn source(s: MemorySource<f64>) -> AnySource {
        AnySource::F64(Box::new(s))
    }
}

/// Whole components as a source, rounded to the precision.
pub fn stored<T: Precision>(grid: Grid, fields: Fields, components: &[Vec<f64>]) -> AnySource {
    T::source(MemorySource::new(grid.clone(), fields, components.iter().map(|c| c.iter().map(|&v| T::of(v)).collect()).collect()))
}

/// Position of every cell, x fastest.
pub fn positions(grid: &Grid) -> impl Iterator<Item = Vector> + '_ {
    (0..grid.cells()).map(|i| {
        let c = grid.coordinates(i);
        std::array::from_fn(|a| grid.position(a, c[a] as f64))
    })
}

/// One vector field as a source.
pub fn sampled<T: Precision>(grid: Grid, fields: Fields, f: impl Fn(Vector) -> Vector) -> AnySource {
    let mut components = vec![Vec::new(); 3];
    for p in positions(&grid) {
        for (c, v) in components.iter_mut().zip(f(p)) {
            c.push(v);
        }
    }
    stored::<T>(grid.clone(), fields, &components)
}

/// Velocity and magnetic field as a source.
pub fn sampled_both<T: Precision>(grid: Grid, u: impl Fn(Vector) -> Vector, b: impl Fn(Vector) -> Vector) -> AnySource {
    let mut components = vec![Vec::new(); 6];
    for p in positions(&grid) {
        for (c, v) in components.iter_mut().zip(u(p).into_iter().chain(b(p))) {
            c.push(v);
        }
    }
    stored::<T>(grid.clone(), BOTH, &components)
}

/// A request in the stored frame that keeps objects of any size.
pub fn request(families: &[&str]) -> Request {
    Request {
        families: families.iter().map(|f| Family::parse(f).unwrap()).collect(),
        min_cells: 1,
        frame: Frame::Stored,
        ..Request::default()
    }
}

/// Keeps the meshes of every family.
#[derive(Default)]
pub struct Kept(pub Vec<Vec<SurfaceMesh>>);

impl ObjectSink for Kept {
    fn put(&mut self, family: usize, meshes: Vec<SurfaceMesh>) -> Result<()> {
        if self.0.len() <= family {
            self.0.resize(family + 1, Vec::new());
        }
        self.0[family].extend(meshes);
        Ok(())
    }
}

/// An analysis and its meshes, one list a family.
pub struct Outcome {
    pub analysis: Analysis,
    pub meshes: Vec<Vec<SurfaceMesh>>,
}

/// Analyses a source, or says why it cannot be done.
pub fn try_run(source: AnySource, request: &Request, execution: &Execution) -> Result<Outcome> {
    let snapshot = Snapshot { name: "test".to_string(), time: Some(0.0), components: Vec::new() };
    let mut kept = Kept::default();
    let analysis = analyse(source, snapshot, request, execution, &Silent, &mut kept)?;
    Ok(Outcome { analysis, meshes: kept.0 })
}

/// Analyses a source.
pub fn run(source: AnySource, request: &Request) -> Outcome {
    try_run(source, request, &Execution::default()).unwrap()
}

impl Outcome {
    pub fn family(&self, k: usize) -> &FamilyResult {
        &self.analysis.families[k]
    }

    pub fn rows(&self, k: usize) -> &[Row] {
        &self.analysis.families[k].rows
    }

    /// The one row of a family.
    pub fn only(&self, k: usize) -> &Row {
        assert_eq!(self.rows(k).len(), 1, "objects of family {k}");
        &self.rows(k)[0]
    }

    /// The mesh of an object.
    pub fn mesh(&self, k: usize, id: u64) -> &SurfaceMesh {
        self.meshes[k].iter().find(|m| m.id == id).expect("a mesh of the object")
    }
}

/// A number of a row.
pub fn number(row: &Row, column: Col) -> f64 {
    row.get(column).as_f64().unwrap_or_else(|| panic!("{}: {:?}", name(column), row.get(column)))
}

/// A text of a row.
pub fn text(row: &Row, column: Col) -> &str {
    match row.get(column) {
        Value::Text(t) => t,
        other => panic!("{}: {other:?}", name(column)),
    }
}

pub fn has_flag(row: &Row, flag: &str) -> bool {
    text(row, Col::Flags).split(' ').any(|f| f == flag)
}

pub fn name(column: Col) -> &'static str {
    COLUMNS[column as usize].name
}

pub fn missing(row: &Row, columns: &[Col]) {
    for &c in columns {
        assert_eq!(row.get(c), &Value::Missing, "{}", name(c));
    }
}

/// Fails unless `got` lies within `relative` of `want`.
#[track_caller]
pub fn near(got: f64, want: f64, relative: f64, what: impl Debug) {
    let error = (got - want).abs() / want.abs();
    assert!(error <= relative, "{what:?}: got {got}, expected {want}, relative error {error:.3e} above {relative:.1e}");
}

/// Order of convergence between two errors on grids whose spacings have the ratio `refinement`.
pub fn order(coarse: f64, fine: f64, refinement: f64) -> f64 {
    (coarse / fine).ln() / refinement.ln()
}

pub fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

/// Standard error of the mean.
pub fn standard_error(values: &[f64]) -> f64 {
    let m = mean(values);
    let n = values.len() as f64;
    (values.iter().map(|v| (v - m).powi(2)).sum::<f64>() / (n * (n - 1.0))).sqrt()
}

pub fn dot(a: Vector, b: Vector) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

pub fn minus(a: Vector, b: Vector) -> Vector {
    std::array::from_fn(|k| a[k] - b[k])
}

pub fn cross(a: Vector, b: Vector) -> Vector {
    [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]]
}

pub fn norm(a: Vector) -> f64 {
    dot(a, a).sqrt()
}
