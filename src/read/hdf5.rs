//! HDF5 files: finding the datasets, reading their headers and blocks of values.

use std::fs;
use std::path::{Path, PathBuf};

use ::hdf5::dataset::Layout;
use ::hdf5::types::{FloatSize, TypeDescriptor};
use ::hdf5::{Dataset, Datatype, File, H5Type, Hyperslab, SliceOrIndex};
use ndarray::IxDyn;

use crate::base::error::{Error, Result};
use crate::read::arrange::arrange;
use crate::read::attribute::number;
use crate::read::chunks::StoredChunks;
use crate::read::coordinates::{self, Coordinates};
use crate::read::header::{Header, Precision, wrong_type};
use crate::read::names::{GUESSES, HINT, PLACE, choose, has_place, has_vector};
use crate::read::order::{Axes, Order};
use crate::read::raw::RawArray;
use crate::read::shelf::{Shelf, condense, find, open_file};
use crate::read::source::{Array, Arrays, Store};
use crate::read::spec::InputSpec;
use crate::read::time::FoundTime;
use crate::read::{contents, guess, steps};

/// Bytes all chunk caches of a snapshot may take together.
const CACHE_LIMIT: usize = 512 << 20;
/// The library's own default, below which nothing is gained.
const CACHE_LEAST: usize = 1 << 20;

/// A dataset read through the library: in chunks that are not decoded here, or not in native byte order.
pub(super) struct ChunkedArray {
    header: Header,
    dataset: Dataset,
    /// Bytes of its chunk cache.
    cache: usize,
    /// An axis that the dataset does not have.
    put_in: Option<usize>,
}

impl ChunkedArray {
    /// Bytes that the library holds of it at most.
    pub fn cache(&self) -> usize {
        self.cache
    }

    /// Reads `count` values from `start` along every axis into `out`, slowest axis first.
    pub fn read_block<T: H5Type + Copy>(&self, start: &[usize], count: &[usize], out: &mut [T]) -> Result<()> {
        let axes = (0..start.len()).filter(|&a| Some(a) != self.put_in);
        let slices: Vec<SliceOrIndex> = axes.map(|a| (start[a]..start[a] + count[a]).into()).collect();
        let values = self
            .dataset
            .read_slice::<T, _, IxDyn>(Hyperslab::from(slices))
            .map_err(|e| self.header.fault("cannot read values").found(condense(&e)).hint("the file is damaged: copy or write it again"))?;
        out.copy_from_slice(values.as_slice().expect("the library fills in standard order"));
        Ok(())
    }
}

/// Opens the file or files, checks their datasets and readies them for reading.
pub(super) fn open(path: &Path, group: Option<&str>, spec: &InputSpec, order: &Order) -> Result<Arrays> {
    let shelf = Shelf::new(path, group)?;
    let choices = choose(spec, |name| shelf.shape(name)).map_err(|e| e.at(path))?;
    if !has_vector(&choices) {
        let error = Error::input("cannot find a velocity or magnetic field").at(path).hint(HINT);
        return Err(if has_place(path) {
            error.expected(format!("files with {GUESSES} in place of {PLACE}")).found("none of them")
        } else {
            let place = group.map_or("the root group".into(), |g| format!("/{}", g.trim_matches('/')));
            // Steps are looked for only where nobody said which to read.
            let steps = if group.is_none() { contents::hdf5(path).map(|i| guess::steps(&i)).unwrap_or_default() } else { Vec::new() };
            let error = error.expected(format!("{GUESSES} in {place}")).found(shelf.listing()?);
            match steps::hint(path, &steps) {
                Some(hint) => error.hint(hint),
                None => error,
            }
        });
    }
    let mut places: Vec<(PathBuf, String)> = Vec::new();
    let mut datasets = Vec::new();
    let mut headers = Vec::new();
    for (field, names) in &choices {
        let single = names.len() > 1 || !field.is_vector();
        for name in names {
            let (file, item) = shelf.place(name, if single { 2..=3 } else { 3..=4 }, field.hint())?;
            let dataset = find(&shelf.file(&file)?, &file, &item, field.hint())?;
            headers.push(header(&file, &item, &dataset)?);
            datasets.push(dataset);
            places.push((file, item));
        }
    }
    let mut arrangement = arrange(&choices, &headers, order, spec.staggering)?;
    let mut notes = Vec::new();
    let fields = &mut arrangement.slots.fields;
    if fields.velocity && !fields.compressible && is_compressible(&shelf, &places[0].0) {
        fields.compressible = true;
        notes.push("the attribute compressible says that the flow is compressible".into());
    }
    let time = times(&shelf, spec, &places[0], &datasets[0]);
    let coordinates = coordinates_of(&shelf, spec)?;
    let mut plans = Vec::new();
    for (((place, dataset), header), axes) in places.iter().zip(&datasets).zip(&headers).zip(&arrangement.axes) {
        plans.push(Plan::new(&place.0, dataset, header, axes));
    }

    // The chunk cache is settled when a file is opened first: let go of everything, then open again. It is of use only where the
    // library reads.
    let chunked = plans.iter().any(|p| p.layer_chunks > 0);
    let cached: Vec<&Plan> = plans.iter().filter(|p| p.layer_chunks > 0 && p.chunks.is_none()).collect();
    let cache = (!cached.is_empty()).then(|| {
        let share = CACHE_LIMIT / cached.len();
        let bytes = cached.iter().map(|p| p.layer_bytes).max().unwrap_or(0).clamp(CACHE_LEAST, share);
        // A prime well above the number of chunks held keeps them from evicting each other.
        let slots = if cached.iter().all(|p| p.layer_chunks < 1242) { 12_421 } else { 1_000_003 };
        (slots, bytes)
    });
    let cache = cache.or(chunked.then_some((0, 0)));
    drop((datasets, shelf));
    let mut files: Vec<(PathBuf, File)> = Vec::new();
    let mut arrays = Vec::new();
    for (((header, axes), plan), (path, item)) in headers.into_iter().zip(arrangement.axes).zip(plans).zip(places) {
        let header = Header { shape: axes.full(&header.shape), ..header };
        let mut library = || -> Result<ChunkedArray> {
            let file = match files.iter().find(|(p, _)| *p == path) {
                Some((_, file)) => file.clone(),
                None => {
                    let file = open_file(&path, cache)?;
                    files.push((path.clone(), file.clone()));
                    file
                }
            };
            let bytes = cache.map_or(CACHE_LEAST, |(slots, bytes)| bytes + slots * size_of::<usize>());
            Ok(ChunkedArray { header: header.clone(), dataset: find(&file, &path, &item, HINT)?, cache: bytes, put_in: axes.put_in })
        };
        let store = match (plan.offset, plan.chunks) {
            (Some(offset), _) => {
                let plain = fs::File::open(&path).map_err(|e| header.fault("cannot open the file").found(e.to_string()))?;
                Store::Raw(RawArray::new(header.clone(), plain, offset, cfg!(target_endian = "big")))
            }
            (None, Some(mut chunks)) => {
                chunks.library = chunks.has_gaps().then(&mut library).transpose()?;
                Store::Chunks(Box::new(chunks))
            }
            (None, None) => Store::Library(library()?),
        };
        arrays.push(Array { header, axes, store, depth: plan.depth, filtered: plan.filtered });
    }
    let arrays = Arrays::new(arrays, arrangement.slots, arrangement.samples);
    Ok(Arrays { time, coordinates, last_face: arrangement.last_face, notes, ..arrays })
}

/// How a dataset is best read.
struct Plan {
    /// Its first byte, when the values stand in this file in one piece and in native form.
    offset: Option<u64>,
    /// Its chunks, where they are decoded without the library.
    chunks: Option<StoredChunks>,
    /// Planes of a chunk.
    depth: usize,
    filtered: bool,
    /// Chunks that hold one plane of every component, and their decoded bytes.
    layer_chunks: usize,
    layer_bytes: usize,
}

impl Plan {
    fn new(path: &Path, dataset: &Dataset, header: &Header, axes: &Axes) -> Plan {
        let shape = axes.full(&dataset.shape());
        let dtype = dataset.dtype().ok();
        let native = dtype.as_ref().is_some_and(|t| t.is::<f32>() || t.is::<f64>());
        // A link may lead into another file, whose bytes are not those of `path`.
        let here = Path::new(&dataset.filename()) == path;
        let contiguous = dataset.layout() == Layout::Contiguous;
        let offset = dataset.offset().filter(|_| native && here && contiguous);
        let chunks = StoredChunks::of(path, dataset, header, axes);
        let mut plan = Plan { offset, chunks, depth: 1, filtered: !dataset.filters().is_empty(), layer_chunks: 0, layer_bytes: 0 };
        if let Some(chunk) = dataset.chunk() {
            let chunk = axes.full(&chunk);
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

/// The times that the places named and the usual ones hold. Attributes are those of the step's group, the root group or the first
/// dataset; behind them come datasets of the step's group and the root group.
fn times(shelf: &Shelf, spec: &InputSpec, first: &(PathBuf, String), dataset: &Dataset) -> FoundTime {
    let Ok(file) = shelf.file(&first.0) else { return FoundTime::default() };
    let group = shelf.group().and_then(|g| file.group(g).ok());
    let attribute = |name: &str| {
        let step = group.as_ref().and_then(|g| number(g, name));
        step.or_else(|| number(&file, name)).or_else(|| number(dataset, name))
    };
    // Of the usual names each place is asked for both before the next place is.
    let usual = |place: &::hdf5::Location| ["time", "t"].into_iter().find_map(|name| number(place, name));
    let one = |path: &str| {
        let dataset = file.dataset(path).ok().filter(|d| d.size() == 1)?;
        if let [time] = dataset.read_raw::<f64>().ok()?[..] { Some(time).filter(|t| t.is_finite()) } else { None }
    };
    let held = |place: &str| ["time", "t"].into_iter().find_map(|name| one(&format!("{place}/{name}")));
    let attributes = group.as_ref().and_then(|g| usual(g)).or_else(|| usual(&file)).or_else(|| usual(dataset));
    FoundTime {
        attribute: spec.time.attribute.as_ref().and_then(|name| attribute(name)),
        dataset: spec.time.dataset.as_ref().and_then(|name| one(&shelf.rooted(name))),
        usual: attributes.or_else(|| held(shelf.group()?)).or_else(|| held("")),
    }
}

/// Whether the group of the step or the root group says in an attribute that the flow is compressible, as cut-outs of such flows do.
fn is_compressible(shelf: &Shelf, path: &Path) -> bool {
    let Ok(file) = shelf.file(path) else { return false };
    let group = shelf.group().and_then(|g| file.group(g).ok()).and_then(|g| number(&g, "compressible"));
    group.or_else(|| number(&file, "compressible")) == Some(1.0)
}

/// The coordinates named: datasets of the file, else files beside it.
fn coordinates_of(shelf: &Shelf, spec: &InputSpec) -> Result<[Option<Coordinates>; 3]> {
    let mut out = [None, None, None];
    for (a, (slot, name)) in out.iter_mut().zip(&spec.coordinates).enumerate() {
        let Some(name) = name else { continue };
        let path = shelf.some_path()?;
        let file = shelf.file(&path)?;
        let item = shelf.rooted(name);
        let folder = path.parent().unwrap_or(Path::new(""));
        if file.dataset(&item).is_err() && folder.join(name).is_file() {
            *slot = Some(coordinates::beside(folder, name)?);
            continue;
        }
        let axis = ["x", "y", "z"][a];
        let hint = format!("--coordinates {axis}=NAME names a dataset of the file, or a file beside it");
        let dataset = find(&file, &path, &item, &hint)?;
        let fault = || Error::input("cannot use the coordinates").at(&path).item(&item);
        if dataset.ndim() != 1 {
            let shape = crate::read::header::shape_text(&dataset.shape());
            return Err(fault().expected("a dataset with one axis").found(shape));
        }
        let values = dataset.read_raw::<f64>().map_err(|e| fault().expected("numbers").found(condense(&e)))?;
        let single = dataset.dtype().is_ok_and(|t| t.size() <= 4);
        *slot = Some(Coordinates { values, single, path, item: Some(item) });
    }
    Ok(out)
}
