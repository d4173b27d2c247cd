//! What files hold that have one component each, `{field}` standing for its name in their path.

use std::fs;
use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::contents::{self, Inside};
use crate::read::guess::{View, usual_names};
use crate::read::inspect::{Contents, headerless, told};
use crate::read::names::{PLACE, with_name};
use crate::read::superblock;

/// Looks into every file that the usual names of components give.
pub(super) fn inspect(path: &Path) -> Result<Contents> {
    let named = |name: String| Some((with_name(path, &name), name)).filter(|(file, _)| file.is_file());
    let files: Vec<(PathBuf, String)> = usual_names().into_iter().filter_map(named).collect();
    let Some((first, _)) = files.first() else {
        return Err(Error::input("cannot look into the files")
            .at(path)
            .expected(format!("files with usual names of components, such as u, v, w, in place of {PLACE}"))
            .found("none of them")
            .hint("give the file of one component"));
    };
    let bytes = files.iter().filter_map(|(file, _)| fs::metadata(file).ok()).map(|m| m.len()).sum();
    if first.extension().is_some_and(|e| e == "npy") {
        let all = files.iter().map(|(file, name)| Ok((name, contents::npy(file)?))).collect::<Result<Vec<_>>>()?;
        return Ok(told(path, "npy, one file a component", bytes, joined(all), View::Whole));
    }
    if superblock::check(first).is_ok() {
        let all = files.iter().map(|(file, name)| Ok((name, contents::hdf5(file)?))).collect::<Result<Vec<_>>>()?;
        return Ok(told(path, "HDF5, one file a component", bytes, joined(all), View::Whole));
    }
    // Without headers the first file stands for all.
    let mut out = headerless(first, fs::metadata(first).map_or(0, |m| m.len()))?;
    (out.path, out.bytes) = (path.into(), bytes);
    out.reasons.retain(|r| !r.contains(PLACE));
    out.reasons.insert(0, format!("{} files with names of components, {} the first", files.len(), first.display()));
    Ok(out)
}

/// The array of every file under the name of its component, with all else of the first file.
fn joined(all: Vec<(&String, Inside)>) -> Inside {
    let mut out = Inside::default();
    for (i, (name, inside)) in all.into_iter().enumerate() {
        let mut arrays: Vec<_> = inside.items.into_iter().filter(|item| item.shape.len() > 1).collect();
        let own = arrays.iter().position(|item| item.name.trim_start_matches('/') == name);
        if let Some(own) = own.or((arrays.len() == 1).then_some(0)) {
            let mut item = arrays.swap_remove(own);
            if i == 0 {
                out.of_items.extend(inside.of_items.iter().filter(|(n, _)| *n == item.name).map(|(_, a)| (name.clone(), a.clone())));
            }
            item.name.clone_from(name);
            out.items.push(item);
        }
        if i == 0 {
            (out.attributes, out.groups, out.lines, out.scalars) = (inside.attributes, inside.groups, inside.lines, inside.scalars);
        }
    }
    out
}
