//! Opening a snapshot: from a path and a description of its arrays to a checked supplier of planes.
//!
//! HDF5 files, `.npy` files, folders of `.npy` files and files without a header are understood, and all but folders also as one file
//! a component, where `{field}` in the path stands for its name. Everything the headers can tell (presence, types, ranks, shapes,
//! sizes, record markers, coordinates) is checked by [`open`], before anything long begins; after that only the storage itself can
//! fail, or densities that are not above 0.
//!
//! What the description asks for is done in this order, plane by plane: magnetic components are brought from faces to samples, divided
//! by the root of the density, and the region is cut out.
//!
//! # Precision
//! When every component is stored as f32 the source is f32, else it is f64 and f32 components are
//! widened exactly. Values are never rounded. Either byte order is read.
//!
//! # Cost of a read
//! Arrays stored without filters, z slowest and x fastest, go from the file straight into the
//! caller's slices. HDF5 chunks behind gzip, shuffling and checksums (or none of them) are fetched by
//! their places in the file and decoded in parallel, those of all arrays together, by the pool of
//! the thread that reads ([`map_owned`](crate::base::par::map_owned)); values go straight into the
//! caller's slices, whatever the order of the axes. Each chunk is decoded once as long as
//! [`decoded_planes`](crate::model::source::PlaneSource::decoded_planes), or a multiple, are read at a time,
//! or planes in ascending order whose chunks do not exceed 64 MiB, in which case they are kept from one read to the next.
//!
//! Anything else passes through one buffer of the size of the planes asked for (three times that for an
//! array with its component axis last). Chunks behind other filters, or in other files, are read by the HDF5 library, one
//! thread at a time; it decodes them once as long as planes are read in ascending order and one layer
//! of chunks of every such dataset fits the chunk cache, which is limited to 512 MiB for the whole snapshot.
//! What is held is told by [`reader_bytes`](crate::model::source::PlaneSource::reader_bytes).

use std::ffi::OsStr;
use std::path::Path;

use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::model::snapshot::SnapshotRef;
use crate::model::source::{AnySource, PlaneSource};
use crate::read::density::Alfvenic;
use crate::read::layers::{Delivered, Layer};
use crate::read::region::Region;
use crate::read::source::{Arrays, FileLayer};
use crate::read::staggered::Centred;
use crate::space::grid::Grid;

mod arrange;
mod attribute;
mod binary;
mod chunks;
mod contents;
mod coordinates;
mod density;
mod geometry;
mod guess;
mod guess_box;
mod guess_raw;
mod hdf5;
mod header;
pub mod inspect;
mod inspect_parts;
mod layers;
mod names;
mod natural;
mod npy;
mod order;
mod raw;
mod records;
mod region;
mod reorder;
pub mod series;
mod shelf;
mod source;
mod spec;
mod staggered;
mod steps;
mod superblock;
mod time;

pub use spec::{InputSpec, RawLayout, Staggering, Stretch, TimeSource};

/// A snapshot whose headers were found good.
pub struct Opened {
    /// The supplier of planes.
    pub source: AnySource,
    /// Time of the snapshot in the user's unit: the one given with the snapshot, else from the places that [`TimeSource`] names, else
    /// the attribute `time` or `t` of the step's group, the root group or the first dataset read, else a dataset of that name with one
    /// number in the step's group or the root group.
    pub time: Option<f64>,
    /// Name of the snapshot: the file name without its extension (unless that is a number) and without `{field}`, or the name of the
    /// folder; a group follows behind `_`.
    pub name: String,
    /// What is read, in the order u, v, w, bx, by, bz, buoyancy, density, e.g. `run.h5:/flow/u` or `run/u.npy`; an array with a
    /// component axis stands once.
    pub datasets: Vec<String>,
    /// How every component delivered is named in messages, e.g. `run.h5:/flow/velocity[0]`.
    pub components: Vec<String>,
    /// What was done that the user should know: one sentence each, without a full stop.
    pub notes: Vec<String>,
}

/// Opens a snapshot and checks everything its headers tell.
///
/// With a raw layout every path is one of a file without a header. Else a folder is read as `.npy` files, a file named `*.npy` as one
/// array with a component axis, any other file as HDF5. A single `.npy` file is the velocity unless only `spec.magnetic` is given.
///
/// # Errors
/// `Usage` when the description itself cannot be honoured (axis order, names, box, layout, region); `Input` when a file or dataset is
/// missing, damaged, of another type than f32 or f64, of a wrong rank or shape, or when coordinates do not fit.
pub fn open(snapshot: &SnapshotRef, spec: &InputSpec) -> Result<Opened> {
    let path = &snapshot.path;
    let order = spec.check()?;
    let kind = Kind::of(path, spec)?;
    let group = snapshot.group.as_deref();
    if group.is_some() && kind != Kind::Hdf5 {
        return Err(Error::usage("cannot look for a group")
            .at(path)
            .item(snapshot.to_string())
            .expected("an HDF5 file")
            .found(kind.word()));
    }
    let mut arrays = match (kind, &spec.raw) {
        (Kind::Raw, Some(layout)) => binary::open(path, spec, layout, &order)?,
        (Kind::Folder, _) => npy::open_folder(path, spec, &order)?,
        (Kind::Npy, _) if names::has_place(path) => npy::open_many(path, spec, &order)?,
        (Kind::Npy, _) => npy::open_file(path, spec, &order)?,
        _ => hdf5::open(path, group, spec, &order)?,
    };
    if kind != Kind::Hdf5 {
        let folder = if kind == Kind::Folder { path } else { path.parent().unwrap_or(Path::new("")) };
        for (slot, name) in arrays.coordinates.iter_mut().zip(&spec.coordinates) {
            *slot = name.as_ref().map(|name| coordinates::beside(folder, name)).transpose()?;
        }
    }
    let mut notes = arrays.slots.notes();
    notes.append(&mut arrays.notes);
    notes.extend(names::fixed(spec, group));
    if spec.density.is_some() && !arrays.slots.density {
        notes.push("the density is not read: only the magnetic field is divided by its root".into());
    }
    let (grid, said) = geometry::grid(spec, arrays.samples, &arrays.coordinates)?;
    notes.extend(said);
    let (time, said) = time::settle(snapshot.time, &spec.time, &arrays.time, path, group);
    notes.extend(said);
    let (datasets, components) = (std::mem::take(&mut arrays.datasets), std::mem::take(&mut arrays.components));
    let source =
        if arrays.is_double() { AnySource::F64(assemble(arrays, grid, spec)?) } else { AnySource::F32(assemble(arrays, grid, spec)?) };
    let mut name = name_of(path, kind == Kind::Folder);
    if let Some(group) = group {
        let safe = |c: char| if c.is_alphanumeric() || "._-".contains(c) { c } else { '_' };
        name = format!("{name}_{}", group.trim_matches('/').chars().map(safe).collect::<String>());
    }
    Ok(Opened { source, time, name, datasets, components, notes })
}

/// How a path is read.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Kind {
    Hdf5,
    Npy,
    Folder,
    Raw,
}

impl Kind {
    fn of(path: &Path, spec: &InputSpec) -> Result<Kind> {
        let by_name = if spec.raw.is_some() {
            Kind::Raw
        } else if path.extension() == Some(OsStr::new("npy")) {
            Kind::Npy
        } else {
            Kind::Hdf5
        };
        if names::has_place(path) {
            return Ok(by_name);
        }
        let there = std::fs::metadata(path).map_err(|e| {
            if e.kind() == std::io::ErrorKind::NotFound {
                Error::input("cannot find the snapshot")
                    .at(path)
                    .expected("an HDF5 file, a .npy file or a folder of .npy files")
                    .found("nothing")
                    .hint("check the path")
            } else {
                Error::input("cannot open the snapshot").at(path).found(e.to_string())
            }
        })?;
        if !there.is_dir() && !there.is_file() {
            return Err(Error::input("cannot open the snapshot").at(path).expected("a file or a folder").found("a device or pipe"));
        }
        if there.is_dir() && by_name == Kind::Raw {
            return Err(Error::input("cannot read the file without a header")
                .at(path)
                .expected("a file")
                .found("a folder")
                .hint("for one file a component write {field} for its name in the path"));
        }
        Ok(if there.is_dir() { Kind::Folder } else { by_name })
    }

    fn word(self) -> &'static str {
        match self {
            Kind::Hdf5 => "an HDF5 file",
            Kind::Npy => "a .npy file",
            Kind::Folder => "a folder of .npy files",
            Kind::Raw => "a file without a header",
        }
    }
}

/// The layers over the arrays, the outermost a source.
fn assemble<T: Real + ::hdf5::H5Type>(arrays: Arrays, grid: Grid, spec: &InputSpec) -> Result<Box<dyn PlaneSource<T>>> {
    let Arrays { arrays, slots, samples, last_face, .. } = arrays;
    let fields = slots.fields;
    let region = region::settle(&spec.region, &grid)?;
    let density = slots.density.then(|| arrays.last().map(|a| a.header.clone())).flatten();
    let mut layer: Box<dyn Layer<T>> = Box::new(FileLayer::new(arrays, &slots, samples));
    if fields.magnetic && spec.staggering != Staggering::Centres {
        layer = Box::new(Centred::new(layer, fields.first_magnetic(), &grid, spec.staggering, last_face));
    }
    if let Some(header) = density {
        layer = Box::new(Alfvenic::new(layer, fields.first_magnetic(), fields.components(), header));
    }
    let grid = match region {
        Some((cut, grid)) => {
            layer = Box::new(Region::new(layer, cut, fields.components()));
            grid
        }
        None => grid,
    };
    Ok(Box::new(Delivered { layer, grid, fields }))
}

fn name_of(snapshot: &Path, folder: bool) -> String {
    // A path such as `..` has no last name of its own.
    let full = snapshot.canonicalize();
    let part = |p: &Path| {
        // The number of a step may stand where others have an extension.
        let counted = p.extension().is_some_and(|e| e.to_string_lossy().bytes().all(|b| b.is_ascii_digit()));
        let name = if folder || counted { p.file_name() } else { p.file_stem() };
        name.map(|n| without_place(&n.to_string_lossy())).filter(|n| !n.is_empty())
    };
    part(snapshot)
        .or_else(|| full.ok().and_then(|p| part(&p)))
        .or_else(|| snapshot.parent().and_then(Path::file_name).map(|n| without_place(&n.to_string_lossy())).filter(|n| !n.is_empty()))
        .unwrap_or_else(|| "snapshot".into())
}

/// A name without the place of the component's name and the separator that goes with it.
fn without_place(name: &str) -> String {
    let separators = ['_', '-', '.'];
    let mut out = String::new();
    for (i, part) in name.split(names::PLACE).enumerate() {
        let part = if i > 0 && (out.is_empty() || out.ends_with(separators)) { part.trim_start_matches(separators) } else { part };
        out.push_str(part);
    }
    if name.contains(names::PLACE) { out.trim_end_matches(separators).into() } else { out }
}
