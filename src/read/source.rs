//! The layer over the arrays of a snapshot, whatever they are stored in.

use ::hdf5::H5Type;

use crate::base::error::Result;
use crate::base::real::Real;
use crate::read::arrange::Slots;
use crate::read::chunks::{Decoder, Request, StoredChunks};
use crate::read::coordinates::Coordinates;
use crate::read::hdf5::ChunkedArray;
use crate::read::header::{Header, Precision};
use crate::read::layers::Layer;
use crate::read::order::{Axes, End, Window};
use crate::read::raw::{RawArray, SPAN};
use crate::read::reorder::reorder;
use crate::read::time::FoundTime;

/// How the values of an array are reached.
pub(super) enum Store {
    /// In one piece, by seeking.
    Raw(RawArray),
    /// Through the HDF5 library.
    Library(ChunkedArray),
    /// In chunks that are decoded here.
    Chunks(Box<StoredChunks>),
}

impl Store {
    /// Reads values as they stand in the file; chunks are read all together instead.
    fn read_block<T: Real + H5Type>(&mut self, start: &[usize], count: &[usize], out: &mut [T]) -> Result<()> {
        match self {
            Store::Raw(array) => array.read_block(start, count, out),
            Store::Library(array) => array.read_block(start, count, out),
            Store::Chunks(_) => unreachable!("chunks are read by the decoder"),
        }
    }
}

/// One array of a snapshot: a component, or several along an axis.
pub(super) struct Array {
    /// What its file says.
    pub header: Header,
    /// Where its axes are.
    pub axes: Axes,
    /// Its values.
    pub store: Store,
    /// Planes that are stored together.
    pub depth: usize,
    /// Whether values are decoded when read.
    pub filtered: bool,
}

/// Everything a snapshot consists of, checked.
pub(super) struct Arrays {
    /// In the order of the fields.
    pub arrays: Vec<Array>,
    /// Where their components go.
    pub slots: Slots,
    /// Samples along x, y, z.
    pub samples: [usize; 3],
    /// Per axis, whether its magnetic component has a face behind the last sample.
    pub last_face: [bool; 3],
    /// Time, where it is found inside the files.
    pub time: FoundTime,
    /// Coordinates, where they are named.
    pub coordinates: [Option<Coordinates>; 3],
    /// How the arrays are named to the user.
    pub datasets: Vec<String>,
    /// How every component delivered is named to the user.
    pub components: Vec<String>,
    /// What the user should know of the files.
    pub notes: Vec<String>,
}

impl Arrays {
    /// Arrays whose names are those of their headers.
    pub fn new(arrays: Vec<Array>, slots: Slots, samples: [usize; 3]) -> Arrays {
        let datasets = arrays.iter().map(|a| a.header.label.clone()).collect();
        let mut components = vec![String::new(); slots.components()];
        for (array, places) in arrays.iter().zip(&slots.places) {
            for (c, place) in places.iter().enumerate() {
                if let Some(p) = *place {
                    let label = &array.header.label;
                    components[p] = if places.len() == 1 { label.clone() } else { format!("{label}[{c}]") };
                }
            }
        }
        for &zero in &slots.zeros {
            components[zero] = "no dataset".into();
        }
        components.truncate(slots.fields.components());
        Arrays {
            notes: Vec::new(),
            arrays,
            slots,
            samples,
            last_face: [false; 3],
            time: FoundTime::default(),
            coordinates: [None, None, None],
            datasets,
            components,
        }
    }

    /// Whether values that are read are wider than f32.
    pub fn is_double(&self) -> bool {
        let read = |places: &Vec<Option<usize>>| places.iter().any(Option::is_some);
        self.arrays.iter().zip(&self.slots.places).any(|(a, p)| a.header.precision == Precision::F64 && read(p))
    }
}

/// The arrays as a layer: values of every component as they are stored.
pub(super) struct FileLayer<T> {
    samples: [usize; 3],
    arrays: Vec<(Array, Vec<Option<usize>>)>,
    zeros: Vec<usize>,
    buffer: Vec<T>,
    decoder: Decoder,
    /// Per array the value where no chunk was written, once it is known.
    fills: Vec<Option<T>>,
}

impl<T> FileLayer<T> {
    /// Arrays of which no component is needed are let go.
    pub fn new(arrays: Vec<Array>, slots: &Slots, samples: [usize; 3]) -> Self {
        let read = arrays.into_iter().zip(slots.places.iter().cloned());
        let read: Vec<_> = read.filter(|(_, places)| places.iter().any(Option::is_some)).collect();
        let fills = read.iter().map(|_| None).collect();
        FileLayer { samples, arrays: read, zeros: slots.zeros.clone(), buffer: Vec::new(), decoder: Decoder::default(), fills }
    }
}

impl<T: Real + H5Type> FileLayer<T> {
    /// What stands in an array where no chunk was written.
    fn fill(&mut self, number: usize) -> Result<T> {
        if let Some(fill) = self.fills[number] {
            return Ok(fill);
        }
        let Store::Chunks(chunks) = &self.arrays[number].0.store else { return Ok(T::ZERO) };
        let fill = chunks.fill()?;
        self.fills[number] = Some(fill);
        Ok(fill)
    }

    /// Reads the window of all arrays in chunks, of which `out` has a place.
    fn decode(&mut self, at: &Window, out: &mut [Option<&mut [T]>]) -> Result<()> {
        for number in 0..self.arrays.len() {
            self.fill(number)?;
        }
        let mut requests = Vec::new();
        for (number, (array, places)) in self.arrays.iter().enumerate() {
            let Store::Chunks(chunks) = &array.store else { continue };
            let components = || places.iter().enumerate().filter_map(|(c, p)| p.map(|p| (c, p)));
            let wanted: Vec<(usize, &mut [T])> = components().filter_map(|(c, p)| out[p].take().map(|o| (c, o))).collect();
            if !wanted.is_empty() {
                let needed = components().map(|(c, _)| c).collect();
                requests.push(Request { array: chunks, number, wanted, needed, fill: self.fills[number].unwrap_or(T::ZERO) });
            }
        }
        if requests.is_empty() { Ok(()) } else { self.decoder.read(requests, at) }
    }
}

impl<T: Real + H5Type> Layer<T> for FileLayer<T> {
    fn samples(&self) -> [usize; 3] {
        self.samples
    }

    fn read(&mut self, at: &Window, out: &mut [Option<&mut [T]>]) -> Result<()> {
        let size = at.size();
        for (array, places) in self.arrays.iter_mut().filter(|(a, _)| !matches!(a.store, Store::Chunks(_))) {
            let mut wanted: Vec<(usize, usize)> = places.iter().enumerate().filter_map(|(c, p)| p.map(|p| (c, p))).collect();
            wanted.retain(|&(_, p)| out[p].is_some());
            // With the components last, one block holds them all; else each has its own.
            let together = array.axes.component == Some(End::Last);
            let straight = array.axes.is_zyx(self.samples) && !together;
            let mut loaded = false;
            for (c, p) in wanted {
                let Some(to) = &mut out[p] else { continue };
                let (start, count) = array.axes.block(at, c);
                if straight {
                    array.store.read_block(&start, &count, to)?;
                    continue;
                }
                if !(together && loaded) {
                    self.buffer.resize(count.iter().product(), T::ZERO);
                    array.store.read_block(&start, &count, &mut self.buffer)?;
                    loaded = true;
                }
                let stride = array.axes.space.map(|a| count[a + 1..].iter().product::<usize>());
                reorder(&self.buffer[if together { c } else { 0 }..], stride, size, to);
            }
        }
        for &zero in &self.zeros {
            if let Some(to) = &mut out[zero] {
                to.fill(T::ZERO);
            }
        }
        let mut out: Vec<Option<&mut [T]>> = out.iter_mut().map(|o| o.as_deref_mut()).collect();
        self.decode(at, &mut out)
    }

    fn natural_planes(&self) -> usize {
        self.arrays.iter().map(|(a, _)| a.depth).max().unwrap_or(1)
    }

    fn is_costly(&self) -> bool {
        self.arrays.iter().any(|(a, _)| a.filtered || !a.axes.is_zyx(self.samples))
    }

    fn decoded_planes(&self) -> usize {
        self.arrays.iter().filter(|(a, _)| a.filtered).map(|(a, _)| a.depth).max().unwrap_or(1)
    }

    fn reader_bytes(&self, planes: usize) -> u64 {
        let plane = self.samples[0] * self.samples[1];
        let (mut buffer, mut own, mut chunks) = (0, 0, Vec::new());
        for (array, places) in &self.arrays {
            let together = array.axes.component == Some(End::Last);
            let values = planes * plane * if together { array.axes.components } else { 1 };
            match &array.store {
                Store::Chunks(c) => {
                    chunks.push((&**c, places.iter().flatten().count()));
                    continue;
                }
                // The library hands over blocks of its own, besides what it caches.
                Store::Library(l) => own += l.cache() as u64 + (values * size_of::<T>()) as u64,
                Store::Raw(_) => own += SPAN.min((values * array.header.precision.bytes()) as u64),
            }
            if together || !array.axes.is_zyx(self.samples) {
                buffer = buffer.max(values * size_of::<T>());
            }
        }
        Decoder::bytes(chunks.into_iter(), planes) + own + buffer as u64
    }
}
