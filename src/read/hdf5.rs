//! HDF5 files: finding the datasets, reading their headers and blocks of values, time.

use std::fs;
use std::path::Path;

use ::hdf5::dataset::Layout;
use ::hdf5::types::{FloatSize, TypeDescriptor};
use ::hdf5::{Dataset, Datatype, File, Group, H5Type, Hyperslab, Location, LocationType, SliceOrIndex};
use ndarray::IxDyn;

use crate::base::error::{Error, Result};
use crate::read::arrange::arrange;
use crate::read::header::{Header, Precision, shape_text, wrong_type};
use crate::read::names::{GUESSES, HINT, choose};
use crate::read::order::{Axes, Order};
use crate::read::raw::RawArray;
use crate::read::source::{Array, Arrays, Store, fields_of};
use crate::read::spec::InputSpec;

/// Bytes all chunk caches of a snapshot may take together.
const CACHE_LIMIT: usize = 512 << 20;
/// The library's own default, below which nothing is gained.
const CACHE_LEAST: usize = 1 << 20;
/// Most datasets named in a message, and how deep groups are searched for them.
const LISTED: usize = 12;
const DEEPEST: usize = 8;

/// A dataset read through the library: chunked, filtered, or not in native byte order.
pub(super) struct ChunkedArray {
    header: Header,
    dataset: Dataset,
}

impl ChunkedArray {
    /// Reads `count` values from `start` along every axis into `out`, slowest axis first.
    pub fn read_block<T: H5Type + Copy>(&self, start: &[usize], count: &[usize], out: &mut [T]) -> Result<()> {
        let slices: Vec<SliceOrIndex> = start.iter().zip(count).map(|(&s, &c)| (s..s + c).into()).collect();
        let values = self
            .dataset
            .read_slice::<T, _, IxDyn>(Hyperslab::from(slices))
            .map_err(|e| self.header.fault("cannot read values").found(condense(&e)).hint("the file is damaged: copy or write it again"))?;
        out.copy_from_slice(values.as_slice().expect("the library fills in standard order"));
        Ok(())
    }
}

/// Opens the file, checks its datasets and readies them for reading.
pub(super) fn open(path: &Path, spec: &InputSpec, order: Order) -> Result<Arrays> {
    super::superblock::check(path)?;
    let refused = |e: ::hdf5::Error| {
        let found = condense(&e);
        let locked = found.contains("unable to lock file");
        let error = Error::input("cannot read the HDF5 file").at(path).found(found);
        if locked { error.hint("a program is writing it, or its file system has no locks: see HDF5_USE_FILE_LOCKING") } else { error }
    };
    let file = File::open(path).map_err(refused)?;
    let choices = choose(spec, |name| file.dataset(name).ok().map(|d| d.ndim())).map_err(|e| e.at(path))?;
    if choices.is_empty() {
        return Err(Error::input("cannot find a velocity or magnetic field")
            .at(path)
            .expected(format!("{GUESSES} in the root group"))
            .found(listing(&file))
            .hint(HINT));
    }
    let names: Vec<String> = choices.iter().flat_map(|(_, names)| names).map(|n| rooted(n)).collect();
    let mut datasets = Vec::new();
    let mut headers = Vec::new();
    for name in &names {
        let dataset = find(&file, path, name)?;
        headers.push(header(path, name, &dataset)?);
        datasets.push(dataset);
    }
    let arrangement = arrange(&choices, &headers, &order)?;
    let time = time_of(&file).or_else(|| time_of(&datasets[0]));
    let plans: Vec<Plan> = datasets.iter().zip(&arrangement.axes).map(|(d, axes)| Plan::new(path, d, axes)).collect();

    // The chunk cache is settled when a file is opened first: let go of everything, then open again.
    let cached: Vec<&Plan> = plans.iter().filter(|p| p.layer_chunks > 0).collect();
    let file = if cached.is_empty() {
        file
    } else {
        let share = CACHE_LIMIT / cached.len();
        let bytes = cached.iter().map(|p| p.layer_bytes).max().unwrap_or(0).clamp(CACHE_LEAST, share);
        // A prime well above the number of chunks held keeps them from evicting each other.
        let slots = if cached.iter().all(|p| p.layer_chunks < 1242) { 12_421 } else { 1_000_003 };
        drop((datasets, file));
        File::with_options().with_fapl(|p| p.chunk_cache(slots, bytes, 1.0)).open(path).map_err(refused)?
    };
    let mut arrays = Vec::new();
    for (((header, axes), plan), name) in headers.into_iter().zip(arrangement.axes).zip(plans).zip(&names) {
        let store = match plan.offset {
            Some(offset) => {
                let plain = fs::File::open(path).map_err(|e| header.fault("cannot open the file").found(e.to_string()))?;
                Store::Raw(RawArray::new(header.clone(), plain, offset, cfg!(target_endian = "big")))
            }
            None => Store::Library(ChunkedArray { header: header.clone(), dataset: find(&file, path, name)? }),
        };
        arrays.push(Array { header, axes, store, depth: plan.depth, filtered: plan.filtered });
    }
    Ok(Arrays { arrays, fields: fields_of(choices.iter().map(|c| c.0)), samples: arrangement.samples, time })
}

/// How a dataset is best read.
struct Plan {
    /// Its first byte, when the values stand in this file in one piece and in native form.
    offset: Option<u64>,
    /// Planes of a chunk.
    depth: usize,
    filtered: bool,
    /// Chunks that hold one plane of every component, and their decoded bytes.
    layer_chunks: usize,
    layer_bytes: usize,
}

impl Plan {
    fn new(path: &Path, dataset: &Dataset, axes: &Axes) -> Plan {
        let shape = dataset.shape();
        let dtype = dataset.dtype().ok();
        let native = dtype.as_ref().is_some_and(|t| t.is::<f32>() || t.is::<f64>());
        // A link may lead into another file, whose bytes are not those of `path`.
        let here = Path::new(&dataset.filename()) == path;
        let contiguous = dataset.layout() == Layout::Contiguous;
        let offset = dataset.offset().filter(|_| native && here && contiguous);
        let mut plan = Plan { offset, depth: 1, filtered: !dataset.filters().is_empty(), layer_chunks: 0, layer_bytes: 0 };
        if let Some(chunk) = dataset.chunk() {
            let z = axes.space[2];
            let others = (0..shape.len()).filter(|&a| a != z);
            plan.depth = chunk[z].clamp(1, shape[z]);
            plan.layer_chunks = others.map(|a| shape[a].div_ceil(chunk[a])).product();
            let bytes = dtype.map_or(8, |t| t.size());
            plan.layer_bytes = chunk.iter().fold(bytes * plan.layer_chunks, |all, &c| all.saturating_mul(c));
        }
        plan
    }
}

fn rooted(name: &str) -> String {
    format!("/{}", name.trim_matches('/'))
}

fn find(file: &File, path: &Path, name: &str) -> Result<Dataset> {
    let fault = |what: &str| Error::input(what).at(path).item(name);
    match file.loc_type_by_name(name) {
        Ok(LocationType::Dataset) => {}
        Ok(LocationType::Group) => {
            return Err(fault("cannot use the dataset").expected("a dataset").found("a group").hint(HINT));
        }
        Ok(_) => {
            return Err(fault("cannot use the dataset").expected("a dataset").found("another object").hint(HINT));
        }
        Err(_) => {
            return Err(fault("cannot find the dataset").found(format!("only {}", listing(file))).hint(HINT));
        }
    }
    file.dataset(name).map_err(|e| fault("cannot open the dataset").found(condense(&e)))
}

fn header(path: &Path, name: &str, dataset: &Dataset) -> Result<Header> {
    let refused = |e: ::hdf5::Error| Error::input("cannot open the dataset").at(path).item(name).found(condense(&e));
    let precision = precision(&dataset.dtype().map_err(refused)?).map_err(|found| wrong_type(|e| e.at(path).item(name), found))?;
    if let Some(filter) = dataset.filters().iter().find(|f| !f.is_available()) {
        return Err(Error::input("cannot use the dataset")
            .at(path)
            .item(name)
            .expected("compression this build can undo")
            .found(format!("filter {}", filter.id()))
            .hint("store it again with gzip"));
    }
    let shape = dataset.get_shape().map_err(refused)?;
    let file = path.file_name().unwrap_or_default().to_string_lossy();
    Ok(Header { path: path.into(), item: Some(name.into()), label: format!("{file}:{name}"), shape, precision })
}

/// The width of a type, or its name if it is neither f32 nor f64.
fn precision(dtype: &Datatype) -> std::result::Result<Precision, String> {
    match dtype.to_descriptor() {
        Ok(TypeDescriptor::Float(FloatSize::U4)) => Ok(Precision::F32),
        Ok(TypeDescriptor::Float(FloatSize::U8)) => Ok(Precision::F64),
        Ok(other) => Err(other.to_string().lines().collect::<Vec<_>>().join(" ")),
        Err(e) if e.to_string().contains("float") => Err(format!("float{}", 8 * dtype.size())),
        Err(_) => Err(format!("another type of {} bytes", dtype.size())),
    }
}

/// The attribute `time` or `t`, if it is one finite number.
fn time_of(place: &Location) -> Option<f64> {
    ["time", "t"].into_iter().find_map(|name| {
        let attribute = place.attr(name).ok()?;
        match attribute.read_raw::<f64>().ok()?.as_slice() {
            [time] if time.is_finite() => Some(*time),
            _ => None,
        }
    })
}

/// The datasets of a file with shapes and types, for messages.
fn listing(file: &File) -> String {
    let mut found = Vec::new();
    list(file, "", 0, &mut found);
    if found.is_empty() {
        return "no dataset".into();
    }
    if found.len() > LISTED {
        found.truncate(LISTED);
        found.push("and more".into());
    }
    found.join(", ")
}

fn list(group: &Group, prefix: &str, depth: usize, found: &mut Vec<String>) {
    for name in group.member_names().unwrap_or_default() {
        // Links can form rings: both the depth and the number are limited.
        if found.len() > LISTED {
            return;
        }
        let full = format!("{prefix}/{name}");
        match group.loc_type_by_name(&name) {
            Ok(LocationType::Dataset) => {
                if let Ok(dataset) = group.dataset(&name) {
                    found.push(format!("{full} {}", shape_text(&dataset.shape())));
                }
            }
            Ok(LocationType::Group) if depth < DEEPEST => {
                if let Ok(inner) = group.group(&name) {
                    list(&inner, &full, depth + 1, found);
                }
            }
            _ => {}
        }
    }
}

/// The innermost, most telling line of the library's stack of messages.
fn condense(error: &::hdf5::Error) -> String {
    let text = error.stack().and_then(|s| s.last().map(|f| f.desc().to_owned())).unwrap_or_else(|| error.to_string());
    text.lines().map(str::trim).collect::<Vec<_>>().join(" ")
}
