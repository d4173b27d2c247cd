//! The HDF5 files of a snapshot: opened once, names resolved to files and datasets, groups listed.

use std::cell::RefCell;
use std::cmp::Ordering;
use std::ops::RangeInclusive;
use std::path::{Path, PathBuf};

use ::hdf5::{Dataset, File, Group, LocationInfo, LocationType};

use crate::base::error::{Error, Result};
use crate::read::header::shape_text;
use crate::read::names::{has_place, with_name};
use crate::read::steps::{is_pattern, no_steps};

/// Most datasets named in a message, and how deep groups are searched for them.
const LISTED: usize = 12;
const DEEPEST: usize = 8;
/// Most datasets looked at in a file where names alone do not tell.
const MOST: usize = 4096;

/// The files of a snapshot.
pub(super) struct Shelf {
    path: PathBuf,
    group: Option<String>,
    files: RefCell<Vec<(PathBuf, File)>>,
}

impl Shelf {
    /// The file of a snapshot, or the files of a path with a place for the component's name, and the group names begin in.
    pub fn new(path: &Path, group: Option<&str>) -> Result<Shelf> {
        let group = group.map(|g| format!("/{}", g.trim_matches('/'))).filter(|g| g != "/");
        let shelf = Shelf { path: path.into(), group, files: RefCell::default() };
        if !has_place(path) {
            let file = shelf.file(path)?;
            if let Some(group) = &shelf.group
                && !matches!(file.loc_type_by_name(group), Ok(LocationType::Group))
            {
                return Err(no_group(path, group, &file));
            }
        }
        Ok(shelf)
    }

    /// The group names begin in.
    pub fn group(&self) -> Option<&str> {
        self.group.as_deref()
    }

    /// A file, opened once.
    pub fn file(&self, path: &Path) -> Result<File> {
        if let Some((_, file)) = self.files.borrow().iter().find(|(p, _)| p == path) {
            return Ok(file.clone());
        }
        let file = open_file(path, None)?;
        self.files.borrow_mut().push((path.into(), file.clone()));
        Ok(file)
    }

    /// The file, or the first that was opened.
    pub fn some_path(&self) -> Result<PathBuf> {
        let first = self.files.borrow().first().map(|(p, _)| p.clone());
        first.ok_or_else(|| Error::internal("no file was opened").at(&self.path))
    }

    /// The path of a name inside a file: from the root where it begins with `/`, else from the group.
    pub fn rooted(&self, name: &str) -> String {
        match &self.group {
            Some(group) if !name.starts_with('/') => format!("{group}/{}", name.trim_matches('/')),
            _ => format!("/{}", name.trim_matches('/')),
        }
    }

    /// The shape of the dataset of a name, if there is one.
    pub fn shape(&self, name: &str) -> Option<Vec<usize>> {
        let (path, item) = if has_place(&self.path) {
            if !with_name(&self.path, name).is_file() {
                return None;
            }
            // A file that cannot be used counts as present, so that its fault is reported and not its absence.
            self.place(name, 2..=4, "").unwrap_or_else(|_| (with_name(&self.path, name), self.rooted(name)))
        } else {
            (self.path.clone(), self.rooted(name))
        };
        let dataset = self.file(&path).ok().and_then(|f| f.dataset(&item).ok());
        if has_place(&self.path) { Some(dataset.map_or(vec![0; 4], |d| d.shape())) } else { dataset.map(|d| d.shape()) }
    }

    /// The file and dataset of a name. In a file of its own, a component is the dataset of that name or the only one with a rank of
    /// `ranks`. The hint is for one that is not there.
    pub fn place(&self, name: &str, ranks: RangeInclusive<usize>, hint: &str) -> Result<(PathBuf, String)> {
        let item = self.rooted(name);
        if !has_place(&self.path) {
            return Ok((self.path.clone(), item));
        }
        let path = with_name(&self.path, name);
        if !path.is_file() {
            return Err(Error::input("cannot find the file").at(&path).found("nothing").hint(hint));
        }
        let file = self.file(&path)?;
        if file.dataset(&item).is_ok() {
            return Ok((path, item));
        }
        let place = self.group.clone().unwrap_or_default();
        let mut all = Vec::new();
        match self.group.as_deref().map_or_else(|| Ok((*file).clone()), |g| file.group(g)) {
            Ok(group) => datasets(&group, &place, MOST, &mut all),
            Err(_) => {
                return Err(no_group(&path, &place, &file));
            }
        }
        let fitting: Vec<&(String, Dataset)> = all.iter().filter(|(_, d)| ranks.contains(&d.ndim())).collect();
        if let [(only, _)] = fitting[..] {
            return Ok((path, only.clone()));
        }
        Err(Error::input("cannot tell the dataset")
            .at(path)
            .expected(format!("{item}, or a single array"))
            .found(listed(&all))
            .hint("--velocity U,V,W gives names that are both of files and of datasets"))
    }

    /// The datasets of the file with shapes and types, for messages.
    pub fn listing(&self) -> Result<String> {
        Ok(listing(&self.file(&self.path)?))
    }
}

/// The error for a group that is not there, or a pattern that matches none.
fn no_group(path: &Path, group: &str, file: &File) -> Error {
    if is_pattern(group) {
        return no_steps(path, group.trim_matches('/'), file);
    }
    Error::input("cannot find the group").at(path).item(group).found(format!("only {}", groups_text(file)))
}

/// Opens a file that was found to be HDF5, with slots and bytes of the chunk cache where they matter.
pub(super) fn open_file(path: &Path, cache: Option<(usize, usize)>) -> Result<File> {
    super::superblock::check(path)?;
    let opened = match cache {
        None => File::open(path),
        Some((slots, bytes)) => File::with_options().with_fapl(|p| p.chunk_cache(slots, bytes, 1.0)).open(path),
    };
    opened.map_err(|e| {
        let found = condense(&e);
        let locked = found.contains("unable to lock file");
        let error = Error::input("cannot read the HDF5 file").at(path).found(found);
        if locked { error.hint("a program is writing it, or its file system has no locks: see HDF5_USE_FILE_LOCKING") } else { error }
    })
}

/// The dataset of a path inside a file. The hint is for one that is not there.
pub(super) fn find(file: &File, path: &Path, name: &str, hint: &str) -> Result<Dataset> {
    let fault = |what: &str| Error::input(what).at(path).item(name);
    match file.loc_type_by_name(name) {
        Ok(LocationType::Dataset) => {}
        Ok(LocationType::Group) => {
            return Err(fault("cannot use the dataset").expected("a dataset").found("a group").hint(hint));
        }
        Ok(_) => {
            return Err(fault("cannot use the dataset").expected("a dataset").found("another object").hint(hint));
        }
        Err(_) => {
            return Err(fault("cannot find the dataset").found(format!("only {}", listing(file))).hint(hint));
        }
    }
    file.dataset(name).map_err(|e| fault("cannot open the dataset").found(condense(&e)))
}

/// The datasets of a file with shapes, for messages.
fn listing(file: &File) -> String {
    let mut found = Vec::new();
    datasets(file, "", LISTED + 1, &mut found);
    listed(&found)
}

fn listed(datasets: &[(String, Dataset)]) -> String {
    if datasets.is_empty() {
        return "no dataset".into();
    }
    let mut found: Vec<String> = datasets.iter().map(|(name, d)| format!("{name} {}", shape_text(&d.shape()))).collect();
    if found.len() > LISTED {
        found.truncate(LISTED);
        found.push("and more".into());
    }
    found.join(", ")
}

/// Collects up to `most` datasets below a group with their paths.
pub(super) fn datasets(group: &Group, prefix: &str, most: usize, found: &mut Vec<(String, Dataset)>) {
    let mut trail = group.loc_info().into_iter().collect();
    below(group, prefix, most, &mut trail, found);
}

fn below(group: &Group, prefix: &str, most: usize, trail: &mut Vec<LocationInfo>, found: &mut Vec<(String, Dataset)>) {
    for name in group.member_names().unwrap_or_default() {
        if found.len() >= most {
            return;
        }
        let full = format!("{prefix}/{name}");
        let Ok(info) = group.loc_info_by_name(&name) else { continue };
        match info.loc_type {
            LocationType::Dataset => {
                if let Ok(dataset) = group.dataset(&name) {
                    found.push((full, dataset));
                }
            }
            LocationType::Group if trail.len() <= DEEPEST && !is_above(&info, trail) => {
                if let Ok(inner) = group.group(&name) {
                    trail.push(info);
                    below(&inner, &full, most, trail, found);
                    trail.pop();
                }
            }
            _ => {}
        }
    }
}

/// Whether a group is one of those above it: links can form rings.
fn is_above(info: &LocationInfo, trail: &[LocationInfo]) -> bool {
    trail.iter().any(|t| (t.fileno, t.token) == (info.fileno, info.token))
}

/// Collects up to `most` groups below a group, rings left out, with their paths; those of one group in the order of `compare`.
pub(super) fn all_groups(group: &Group, most: usize, compare: fn(&str, &str) -> Ordering) -> Vec<(String, Group)> {
    let mut found = Vec::new();
    let mut trail: Vec<LocationInfo> = group.loc_info().into_iter().collect();
    groups_below(group, "", most, compare, &mut trail, &mut found);
    found
}

fn groups_below(
    group: &Group,
    prefix: &str,
    most: usize,
    compare: fn(&str, &str) -> Ordering,
    trail: &mut Vec<LocationInfo>,
    found: &mut Vec<(String, Group)>,
) {
    let mut names = groups(group);
    names.sort_by(|a, b| compare(a, b));
    for name in names {
        let Ok(info) = group.loc_info_by_name(&name) else { continue };
        if found.len() >= most || trail.len() > DEEPEST || is_above(&info, trail) {
            continue;
        }
        let Ok(inner) = group.group(&name) else { continue };
        let full = format!("{prefix}/{name}");
        found.push((full.clone(), inner.clone()));
        trail.push(info);
        groups_below(&inner, &full, most, compare, trail, found);
        trail.pop();
    }
}

/// Names of the groups directly in a group.
pub(super) fn groups(group: &Group) -> Vec<String> {
    let names = group.member_names().unwrap_or_default();
    names.into_iter().filter(|name| matches!(group.loc_type_by_name(name), Ok(LocationType::Group))).collect()
}

/// The groups of a file, for messages.
pub(super) fn groups_text(file: &File) -> String {
    let mut found: Vec<String> = groups(file).iter().map(|g| format!("/{g}")).collect();
    if found.is_empty() {
        return "no group".into();
    }
    if found.len() > LISTED {
        found.truncate(LISTED);
        found.push("and more".into());
    }
    found.join(", ")
}

/// The innermost, most telling line of the library's stack of messages.
pub(super) fn condense(error: &::hdf5::Error) -> String {
    let text = error.stack().and_then(|s| s.last().map(|f| f.desc().to_owned())).unwrap_or_else(|| error.to_string());
    text.lines().map(str::trim).collect::<Vec<_>>().join(" ")
}
