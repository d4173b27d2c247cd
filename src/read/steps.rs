//! Groups of a file that are steps of a run: what is a pattern of them, what to say where none is there or nobody asked for them.

use std::path::Path;

use ::hdf5::File;

use crate::base::error::Error;
use crate::read::shelf::groups_text;

/// Whether a text is a pattern.
pub(super) fn is_pattern(text: &str) -> bool {
    text.contains(['*', '?', '['])
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
