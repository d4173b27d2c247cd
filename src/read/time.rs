//! The time of a snapshot: which of the places it may stand in wins, and times in file names.

use std::path::Path;

use crate::base::error::{Error, Result};
use crate::read::spec::TimeSource;

/// What stands for the time in a pattern.
const PLACE: &str = "{time}";

/// Times that were found inside the files.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub(super) struct FoundTime {
    /// The attribute that the user names.
    pub attribute: Option<f64>,
    /// The dataset that the user names.
    pub dataset: Option<f64>,
    /// A usual attribute or dataset.
    pub usual: Option<f64>,
}

/// The time of a snapshot, and what the user should know if a place that was named holds none.
pub(super) fn settle(
    given: Option<f64>,
    source: &TimeSource,
    found: &FoundTime,
    path: &Path,
    group: Option<&str>,
) -> (Option<f64>, Vec<String>) {
    if given.is_some() {
        return (given, Vec::new());
    }
    let named = source.name.as_ref().and_then(|pattern| of_path(pattern, path).or_else(|| of_name(pattern, group?.trim_matches('/'))));
    let time = found.attribute.or(found.dataset).or(named);
    let mut notes = Vec::new();
    if time.is_none() {
        let places = [("attribute", &source.attribute), ("dataset", &source.dataset), ("name", &source.name)];
        let places: Vec<String> = places.iter().filter_map(|(kind, name)| name.as_ref().map(|n| format!("{kind} {n}"))).collect();
        if !places.is_empty() {
            notes.push(format!("no time found in {}", places.join(", ")));
        }
    }
    (time.or(found.usual), notes)
}

/// Checks a pattern of file names.
pub(super) fn check(pattern: &str) -> Result<()> {
    if pattern.matches(PLACE).count() == 1 {
        return Ok(());
    }
    Err(Error::usage("cannot read a pattern of times")
        .item(format!("\"{pattern}\""))
        .expected("{time} once, where the number stands")
        .found(format!("it {} times", pattern.matches(PLACE).count()))
        .hint("for example out_t{time}.h5"))
}

/// The time in a path: as many of its last parts are compared as the pattern has.
fn of_path(pattern: &str, path: &Path) -> Option<f64> {
    let parts: Vec<String> = path.components().map(|c| c.as_os_str().to_string_lossy().into_owned()).collect();
    let depth = pattern.matches('/').count() + 1;
    of_name(pattern, &parts[parts.len().saturating_sub(depth)..].join("/"))
}

/// The time in a name.
fn of_name(pattern: &str, name: &str) -> Option<f64> {
    let (before, after) = pattern.split_once(PLACE)?;
    // A sign behind `*` is taken for a dash of the name.
    let signed = !before.ends_with('*');
    let longest = |from: usize| {
        let number = |end: usize| {
            let text = &name[from..end];
            let plain = text.bytes().all(|b| b.is_ascii_digit() || b"+-.eE".contains(&b));
            let sign = text.starts_with(['+', '-']);
            let fits = plain && (signed || !sign) && !text.is_empty() && matches(after, &name[end..]);
            fits.then(|| text.parse::<f64>().ok().filter(|t| t.is_finite())).flatten()
        };
        (from + 1..=name.len()).rev().filter(|&end| name.is_char_boundary(end)).find_map(number)
    };
    (0..name.len()).filter(|&from| name.is_char_boundary(from) && matches(before, &name[..from])).find_map(longest)
}

/// Whether a name is that of a pattern with `*` for anything.
fn matches(pattern: &str, name: &str) -> bool {
    let mut parts = pattern.split('*');
    let Some(mut rest) = parts.next().and_then(|first| name.strip_prefix(first)) else { return false };
    let mut last = None;
    for part in parts {
        if let Some(middle) = last.replace(part) {
            let Some(at) = rest.find(middle) else { return false };
            rest = &rest[at + middle.len()..];
        }
    }
    last.map_or(rest.is_empty(), |tail| rest.ends_with(tail))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_in_names() {
        let cases = [
            ("out_t{time}.h5", "out_t0.25.h5", Some(0.25)),
            ("out_t{time}.h5", "out_t1.5e-3.h5", Some(1.5e-3)),
            ("out_t{time}.h5", "out_t-2.h5", Some(-2.0)),
            ("out_t{time}.h5", "out_tx.h5", None),
            ("out_t{time}.h5", "other_t1.h5", None),
            ("*_{time}.h5", "snap_0010.h5", Some(10.0)),
            ("*{time}.h5", "snap-0010.h5", Some(10.0)),
            ("*{time}*", "run3_7.5.h5", Some(3.0)),
            ("*_{time}_*.h5", "a_b_12_c.h5", Some(12.0)),
            ("step{time}", "step12", Some(12.0)),
            ("{time}.h5", "5.h5", Some(5.0)),
            ("t{time}", "tinf", None),
        ];
        for (pattern, name, time) in cases {
            assert_eq!(of_name(pattern, name), time, "{pattern} {name}");
        }
        assert_eq!(of_path("t{time}/flow.h5", Path::new("/run/t0.5/flow.h5")), Some(0.5));
        assert!(check("no place").is_err() && check("{time}{time}").is_err() && check("a{time}").is_ok());
    }
}
