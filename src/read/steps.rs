//! Groups of a file that are steps of a run: those that a pattern matches, and the error where there are none.

use std::path::Path;

use ::hdf5::File;

use crate::base::error::{Error, Result};
use crate::read::natural;
use crate::read::shelf::{groups, groups_text};

/// Whether a text is a pattern.
pub(super) fn is_pattern(text: &str) -> bool {
    text.contains(['*', '?', '['])
}

/// The groups that a pattern matches, from the root, in natural order.
///
/// # Errors
/// `Usage` for a malformed pattern.
pub(super) fn matching(file: &File, pattern: &str) -> Result<Vec<String>> {
    let mut found = vec![String::new()];
    for part in pattern.trim_matches('/').split('/') {
        let bad = |e: String| Error::usage("cannot read a pattern").item(format!("\"{pattern}\"")).found(e);
        let part = glob::Pattern::new(part).map_err(|e| bad(e.to_string()))?;
        let mut deeper = Vec::new();
        for above in &found {
            let group = if above.is_empty() { Some((**file).clone()) } else { file.group(above).ok() };
            let names = group.map(|g| groups(&g)).unwrap_or_default();
            deeper.extend(names.into_iter().filter(|n| part.matches(n)).map(|n| format!("{above}/{n}")));
        }
        found = deeper;
    }
    found.sort_by(|a, b| natural::compare(a, b));
    Ok(found)
}

/// The error for a pattern that matches none.
pub(super) fn no_steps(path: &Path, pattern: &str, file: &File) -> Error {
    Error::input("cannot find steps")
        .at(path)
        .item(format!("\"{pattern}\""))
        .expected("a pattern that matches a group")
        .found(format!("only {}", groups_text(file)))
        .hint("the pattern begins at the root group")
}

/// What to try where a file has groups like these, but fields in none of its usual places.
pub(super) fn hint(path: &Path, steps: &[String]) -> Option<String> {
    let first = steps.first()?;
    let (above, last) = first.rsplit_once('/').map_or((String::new(), first.as_str()), |(a, l)| (format!("{a}/"), l));
    let stem = &last[..last.find(|c: char| c.is_ascii_digit())?];
    let file = path.file_name().unwrap_or_default().to_string_lossy();
    Some(format!("--steps \"{above}{stem}*\" reads its groups as steps, {file}:/{first} one of them"))
}
