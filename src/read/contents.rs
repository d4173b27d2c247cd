//! What HDF5 files, `.npy` files and folders hold: arrays, attributes, groups, as text and numbers for inspection.

use std::path::Path;

use ::hdf5::types::{FloatSize, TypeDescriptor};
use ::hdf5::{Attribute, Dataset, Datatype, Location};

use crate::base::error::{Error, Result};
use crate::read::attribute::texts;
use crate::read::coordinates::Coordinates;
use crate::read::inspect::Item;
use crate::read::shelf::{all_groups, datasets, open_file};
use crate::read::{natural, npy};

/// Most datasets and groups looked at, and longest values of an attribute shown.
const MOST: usize = 4096;
const SHOWN: usize = 8;
const LONGEST_TEXT: usize = 200;
/// Longest dataset taken for coordinates.
const LONGEST_LINE: usize = 1 << 20;
/// Attributes by which the HDF5 library links dimension scales (HDF5 Dimension Scale Specification): they tell nothing else.
const SCALES: [&str; 4] = ["CLASS", "NAME", "REFERENCE_LIST", "DIMENSION_LIST"];

/// An attribute: its text, and its values where they are numbers.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Named {
    /// Name.
    pub name: String,
    /// Text of the value.
    pub text: String,
    /// Values.
    pub numbers: Vec<f64>,
}

impl Named {
    /// The value, where it is one finite number, be it written as text.
    pub fn one(&self) -> Option<f64> {
        match self.numbers[..] {
            [one] => Some(one),
            [] => self.text.trim().parse().ok(),
            _ => None,
        }
        .filter(|v: &f64| v.is_finite())
    }
}

/// What stands in a file.
#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Inside {
    /// Arrays.
    pub items: Vec<Item>,
    /// Attributes of the root group.
    pub attributes: Vec<Named>,
    /// Groups and their attributes, with paths.
    pub groups: Vec<(String, Vec<Named>)>,
    /// Attributes of datasets, with the path of the dataset.
    pub of_items: Vec<(String, Vec<Named>)>,
    /// Paths of datasets with one axis that may be coordinates, and their values.
    pub lines: Vec<(String, Coordinates)>,
    /// Values of datasets that hold one number.
    pub scalars: Vec<(String, f64)>,
}

/// What an HDF5 file holds.
pub(super) fn hdf5(path: &Path) -> Result<Inside> {
    let file = open_file(path, None)?;
    let mut found = Vec::new();
    datasets(&file, "", MOST, &mut found);
    found.sort_by(|a, b| natural::compare(&a.0, &b.0));
    let mut inside = Inside { attributes: attributes(&file), ..Inside::default() };
    for (name, dataset) in found {
        let own = attributes(&dataset);
        if dataset.ndim() == 1
            && axis_of(&name).is_some()
            && dataset.size() <= LONGEST_LINE
            && let Ok(values) = dataset.read_raw::<f64>()
        {
            let single = dataset.dtype().is_ok_and(|t| t.size() <= 4);
            inside.lines.push((name.clone(), Coordinates { values, single, path: path.into(), item: Some(name.clone()) }));
        }
        if dataset.size() == 1
            && let Ok(values) = dataset.read_raw::<f64>()
            && let [value] = values[..]
        {
            inside.scalars.push((name.clone(), value));
        }
        inside.items.push(Item {
            name: name.clone(),
            shape: dataset.shape(),
            values: dataset.dtype().map_or("unknown".into(), |t| type_text(&t)),
            storage: storage(&dataset),
            attributes: own.iter().map(|a| (a.name.clone(), a.text.clone())).collect(),
        });
        inside.of_items.push((name, own));
    }
    let groups = all_groups(&file, MOST, natural::compare);
    inside.groups = groups.into_iter().map(|(path, group)| (path, attributes(&group))).collect();
    Ok(inside)
}

/// The axis whose coordinates a name says.
pub(super) fn axis_of(name: &str) -> Option<usize> {
    let last = name.rsplit('/').next().unwrap_or(name).to_lowercase();
    let last = last.strip_suffix(".npy").unwrap_or(&last);
    (0..3).find(|&a| {
        let axis = ["x", "y", "z"][a];
        let forms = ["", "c", "_c", "_centre", "_center", "_coord", "_coordinates", "coord"];
        forms.iter().any(|f| last == format!("{axis}{f}"))
    })
}

fn attributes(place: &Location) -> Vec<Named> {
    let mut names = place.attr_names().unwrap_or_default();
    names.retain(|name| !SCALES.contains(&name.as_str()));
    names.sort_by(|a, b| natural::compare(a, b));
    names.into_iter().filter_map(|name| place.attr(&name).ok().map(|a| named(name, &a))).collect()
}

fn named(name: String, attribute: &Attribute) -> Named {
    let shape = attribute.shape();
    let size: usize = shape.iter().product();
    if size <= 1024
        && let Ok(numbers) = attribute.read_raw::<f64>()
        && !numbers.is_empty()
    {
        let mut shown: Vec<String> = numbers.iter().take(SHOWN).map(f64::to_string).collect();
        if numbers.len() > SHOWN {
            shown.push(format!("and {} more", numbers.len() - SHOWN));
        }
        return Named { name, text: shown.join(", "), numbers };
    }
    if size <= SHOWN
        && let Ok(flags) = attribute.read_raw::<bool>()
    {
        let text = flags.iter().map(bool::to_string).collect::<Vec<_>>().join(", ");
        return Named { name, text, numbers: flags.into_iter().map(|f| f64::from(u8::from(f))).collect() };
    }
    let mut text = texts(attribute)
        .map(|all| all.into_iter().take(SHOWN).collect::<Vec<_>>().join(", "))
        .unwrap_or_else(|| "another type".into())
        .split_whitespace()
        .collect::<Vec<_>>()
        .join(" ");
    if let Some((at, _)) = text.char_indices().nth(LONGEST_TEXT) {
        text.truncate(at);
    }
    Named { name, text, numbers: Vec::new() }
}

fn type_text(dtype: &Datatype) -> String {
    let order = match dtype.byte_order() {
        ::hdf5::datatype::ByteOrder::BigEndian => " big-endian",
        ::hdf5::datatype::ByteOrder::LittleEndian => " little-endian",
        _ => "",
    };
    match dtype.to_descriptor() {
        Ok(TypeDescriptor::Float(FloatSize::U4)) => format!("float32{order}"),
        Ok(TypeDescriptor::Float(FloatSize::U8)) => format!("float64{order}"),
        Ok(other) => other.to_string().lines().collect::<Vec<_>>().join(" "),
        Err(_) => format!("another type of {} bytes", dtype.size()),
    }
}

fn storage(dataset: &Dataset) -> String {
    let Some(chunk) = dataset.chunk() else {
        return if dataset.layout() == ::hdf5::dataset::Layout::Contiguous { "contiguous".into() } else { "compact or virtual".into() };
    };
    let edges: Vec<String> = chunk.iter().map(usize::to_string).collect();
    let mut out = format!("chunks {}", edges.join("x"));
    for filter in dataset.filters() {
        let name = match filter.id() {
            1 => "gzip".into(),
            2 => "shuffle".into(),
            3 => "checksum".into(),
            4 => "szip".into(),
            5 => "nbit".into(),
            6 => "scale-offset".into(),
            other => format!("filter {other}"),
        };
        out = format!("{out}, {name}");
    }
    out
}

/// What a `.npy` file or a folder of them holds.
pub(super) fn npy(path: &Path) -> Result<Inside> {
    let mut inside = Inside::default();
    let folder = path.is_dir();
    let mut files = vec![path.to_path_buf()];
    if folder {
        let io = |e: std::io::Error| Error::input("cannot look into the folder").at(path).found(e.to_string());
        files = std::fs::read_dir(path)
            .map_err(io)?
            .flatten()
            .map(|e| e.path())
            .filter(|p| p.extension().is_some_and(|e| e == "npy"))
            .collect();
        files.sort_by(|a, b| natural::compare(&a.to_string_lossy(), &b.to_string_lossy()));
        files.truncate(MOST);
        if files.is_empty() {
            return Err(Error::input("cannot look into the folder").at(path).expected("npy files").found("none"));
        }
    }
    for file in files {
        let name = file.file_name().unwrap_or_default().to_string_lossy().into_owned();
        match npy::describe(&file) {
            Ok((shape, values)) => {
                if shape.len() == 1
                    && axis_of(&name).is_some()
                    && shape[0] <= LONGEST_LINE
                    && let Ok((values, single)) = npy::line(&file)
                {
                    inside.lines.push((name.clone(), Coordinates { values, single, path: file.clone(), item: None }));
                }
                inside.items.push(Item { name, shape, values, storage: "contiguous".into(), attributes: Vec::new() });
            }
            Err(e) if !folder => return Err(e),
            Err(_) => {
                inside.items.push(Item {
                    name,
                    shape: Vec::new(),
                    values: "not usable".into(),
                    storage: String::new(),
                    attributes: Vec::new(),
                });
            }
        }
    }
    Ok(inside)
}
