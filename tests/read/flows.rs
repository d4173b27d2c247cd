//! Fields with known values written in any layout, and sources read back whole, for the tests of everything beyond plain files.

use std::path::{Path, PathBuf};

use ::hdf5::{File, H5Type};
use ropewalk::base::error::Kind;
use ropewalk::base::real::Real;
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::model::source::{AnySource, PlaneSource};
use ropewalk::read::{InputSpec, open};

/// All components of a source, read a few planes at a time as the stages do.
pub fn read_typed<T: Real>(source: &mut dyn PlaneSource<T>, step: usize) -> Vec<Vec<T>> {
    let (grid, count) = (source.grid().clone(), source.fields().components());
    let plane = grid.plane_cells();
    let mut all = vec![vec![T::of(f64::NAN); plane * grid.n[2]]; count];
    for z in (0..grid.n[2]).step_by(step) {
        let end = (z + step).min(grid.n[2]);
        let mut out: Vec<&mut [T]> = all.iter_mut().map(|c| &mut c[z * plane..end * plane]).collect();
        source.read(z, end, &mut out).unwrap_or_else(|e| panic!("{e}"));
    }
    all
}

/// All components of a snapshot as f64; every step must give the same.
pub fn values(path: &Path, spec: &InputSpec) -> Vec<Vec<f64>> {
    values_of(&path.to_path_buf().into(), spec)
}

pub fn values_of(snapshot: &SnapshotRef, spec: &InputSpec) -> Vec<Vec<f64>> {
    let read = |step: usize| -> Vec<Vec<f64>> {
        match open(snapshot, spec).unwrap_or_else(|e| panic!("{e}")).source {
            AnySource::F32(mut s) => read_typed(s.as_mut(), step).into_iter().map(|c| c.into_iter().map(f64::from).collect()).collect(),
            AnySource::F64(mut s) => read_typed(s.as_mut(), step),
        }
    };
    let all = read(3);
    for step in [1, 7, 1000] {
        assert!(read(step) == all, "reading {step} planes at a time gives other values");
    }
    assert!(all.iter().flatten().all(|v| v.is_finite()));
    all
}

/// Kind and message of the error, with the folder of the test written as `DIR`.
pub fn fault(dir: &Path, snapshot: &SnapshotRef, spec: &InputSpec) -> (Kind, String) {
    let e = open(snapshot, spec).err().unwrap_or_else(|| panic!("{snapshot} was accepted"));
    (e.kind(), plain(dir, &e))
}

/// The message of an error, with the folder of the test written as `DIR`.
pub fn plain(dir: &Path, e: &ropewalk::base::error::Error) -> String {
    e.to_string().replace(&dir.display().to_string(), "DIR")
}

/// Values of `f(x, y, z)` at the indices of a box, x fastest.
pub fn filled(n: [usize; 3], f: impl Fn(usize, usize, usize) -> f64) -> Vec<f64> {
    let mut out = Vec::new();
    for z in 0..n[2] {
        for y in 0..n[1] {
            for x in 0..n[0] {
                out.push(f(x, y, z));
            }
        }
    }
    out
}

/// A value that tells its component and place, exact in f32.
pub fn code(c: usize, x: usize, y: usize, z: usize) -> f64 {
    (((c * 32 + z) * 32 + y) * 32 + x) as f64 + 0.5
}

/// Component `c` of a box of codes.
pub fn coded(n: [usize; 3], c: usize) -> Vec<f64> {
    filled(n, |x, y, z| code(c, x, y, z))
}

/// Writes a dataset of the shape given.
pub fn put<T: H5Type + Real>(file: &::hdf5::Group, name: &str, shape: &[usize], values: &[f64]) {
    let values: Vec<T> = values.iter().map(|&v| T::of(v)).collect();
    file.new_dataset::<T>().shape(shape).create(name).unwrap().write_raw(&values).unwrap();
}

/// An HDF5 file of f64 datasets of one shape.
pub fn hdf5(path: &Path, shape: &[usize], datasets: &[(&str, Vec<f64>)]) {
    let file = File::create(path).unwrap();
    for (name, values) in datasets {
        put::<f64>(&file, name, shape, values);
    }
    file.close().unwrap();
}

/// Bytes of f32 values.
pub fn singles(values: &[f64], big: bool) -> Vec<u8> {
    values.iter().flat_map(|&v| if big { (v as f32).to_be_bytes() } else { (v as f32).to_le_bytes() }).collect()
}

/// Bytes of f64 values.
pub fn doubles(values: &[f64], big: bool) -> Vec<u8> {
    values.iter().flat_map(|&v| if big { v.to_be_bytes() } else { v.to_le_bytes() }).collect()
}

/// A file in a folder.
pub fn write(dir: &Path, name: &str, bytes: &[u8]) -> PathBuf {
    let path = dir.join(name);
    std::fs::write(&path, bytes).unwrap();
    path
}
