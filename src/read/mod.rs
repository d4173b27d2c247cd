//! Opening a snapshot: from a path and a description of its arrays to a checked supplier of planes.
//!
//! Three kinds of path are understood: an HDF5 file, a single `.npy` file, and a folder of `.npy`
//! files. Everything the headers can tell (presence, types, ranks, shapes, sizes) is checked by
//! [`open`], before anything long begins; after that only the storage itself can fail.
//!
//! # Precision
//! When every component is stored as f32 the source is f32, else it is f64 and f32 components are
//! widened exactly. Values are never rounded. Either byte order is read.
//!
//! # Cost of a read
//! Arrays stored without filters, z slowest and x fastest, go from the file straight into the
//! caller's slices; anything else passes through one buffer of the size of the planes asked for
//! (three times that for an array with its component axis last). HDF5 chunks are decoded once as
//! long as planes are read in ascending order and one layer of chunks of every dataset fits the
//! chunk cache, which is limited to 512 MiB for the whole snapshot; beyond that, read
//! [`natural_planes`](crate::model::source::PlaneSource::natural_planes) at a time.

use std::ffi::OsStr;
use std::path::Path;

use crate::base::error::{Error, Result};
use crate::model::snapshot::SnapshotRef;
use crate::model::source::AnySource;

mod arrange;
mod hdf5;
mod header;
pub mod inspect;
mod names;
mod npy;
mod order;
mod raw;
mod reorder;
pub mod series;
mod source;
mod spec;
mod superblock;

pub use spec::{InputSpec, RawLayout, Staggering, Stretch, TimeSource};

/// A snapshot whose headers were found good.
pub struct Opened {
    /// The supplier of planes.
    pub source: AnySource,
    /// Time of the snapshot in the user's unit, where the file states one: the attribute `time` or
    /// `t` of the root group, else of the first dataset read. `.npy` files state none.
    pub time: Option<f64>,
    /// Name of the snapshot: the file name without its extension, or the name of the folder.
    pub name: String,
    /// What is read, in the order u, v, w, bx, by, bz, e.g. `run.h5:/flow/u` or `run/u.npy`; an
    /// array with a component axis stands once.
    pub datasets: Vec<String>,
}

/// Opens a snapshot and checks everything its headers tell.
///
/// A folder is read as `.npy` files, a file named `*.npy` as one array with a component axis, any
/// other file as HDF5. A single `.npy` file is the velocity unless only `spec.magnetic` is given.
///
/// # Errors
/// `Usage` when the description itself cannot be honoured (axis order, names, box); `Input` when a
/// file or dataset is missing, damaged, of another type than f32 or f64, of a wrong rank or shape, or
/// has fewer than 9 samples along an axis.
pub fn open(snapshot: &SnapshotRef, spec: &InputSpec) -> Result<Opened> {
    let snapshot = &snapshot.path;
    let order = spec.check()?;
    let kind = std::fs::metadata(snapshot).map_err(|e| {
        if e.kind() == std::io::ErrorKind::NotFound {
            Error::input("cannot find the snapshot")
                .at(snapshot)
                .expected("an HDF5 file, a .npy file or a folder of .npy files")
                .found("nothing")
                .hint("check the path")
        } else {
            Error::input("cannot open the snapshot").at(snapshot).found(e.to_string())
        }
    })?;
    if !kind.is_dir() && !kind.is_file() {
        return Err(Error::input("cannot open the snapshot").at(snapshot).expected("a file or a folder").found("a device or pipe"));
    }
    let arrays = if kind.is_dir() {
        npy::open_folder(snapshot, spec, order)?
    } else if snapshot.extension() == Some(OsStr::new("npy")) {
        npy::open_file(snapshot, spec, order)?
    } else {
        hdf5::open(snapshot, spec, order)?
    };
    let grid = spec.grid(arrays.samples);
    let time = arrays.time;
    let datasets = arrays.labels();
    Ok(Opened { source: source::assemble(arrays, grid), time, name: name_of(snapshot, kind.is_dir()), datasets })
}

fn name_of(snapshot: &Path, folder: bool) -> String {
    // A path such as `..` has no last name of its own.
    let full = snapshot.canonicalize();
    let part = |p: &Path| {
        let name = if folder { p.file_name() } else { p.file_stem() };
        name.map(|n| n.to_string_lossy().into_owned())
    };
    part(snapshot).or_else(|| full.ok().and_then(|p| part(&p))).unwrap_or_else(|| "snapshot".into())
}
