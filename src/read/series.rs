//! From what was typed (paths, patterns, lists, groups of steps) to the snapshots of a run, in order.

use std::path::{Path, PathBuf};

use ::hdf5::File;

use crate::base::error::{Error, Kind, Result};
use crate::model::snapshot::SnapshotRef;
use crate::read::names::{MAGNETIC, PLACE, VELOCITY, has_place, named, with_name};
use crate::read::natural;
use crate::read::shelf::{groups, open_file};
use crate::read::spec::InputSpec;
use crate::read::steps::{is_pattern, no_steps};

/// Longest list read.
const LIST_LIMIT: u64 = 64 << 20;

/// Where the snapshots of a run are named.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Series {
    /// Files, folders or patterns (`*`, `?`, `[..]`); `{field}` stands for a component's name; `FILE:/GROUP` for one step of an
    /// HDF5 file.
    pub paths: Vec<String>,
    /// Text files with one path a line; `#` begins a comment, a number behind the path is its time. Paths are looked for from the
    /// folder of the list, then from the working folder.
    pub lists: Vec<PathBuf>,
    /// Pattern of the groups that are steps of every file, e.g. `step_*`.
    pub steps: Option<String>,
    /// Times in the order of the snapshots, where the user gives them.
    pub times: Vec<f64>,
}

/// A text that a pattern matches as it stands, whatever characters it has.
pub fn literal(text: &str) -> String {
    glob::Pattern::escape(text)
}

/// A snapshot, and why it cannot be read where that is known already.
type Told = (SnapshotRef, Option<Error>);

/// The snapshots: paths in the order named, then lists, those of a pattern sorted with numbers in their names compared as numbers.
///
/// What exists is taken as it is named, even when it looks like a pattern; what does not exist and is no pattern is left to
/// [`open`](crate::read::open) to report. So is a file in which no step is found, whose snapshot then has the pattern as its group.
/// With `{field}` in a path one file of any component is enough. Nothing named gives nothing.
///
/// # Errors
/// `Usage` for a malformed pattern or a number of times that is not that of the snapshots, `Input` when a pattern matches nothing,
/// a list cannot be read or no file at all has a step.
pub fn expand(series: &Series, spec: &InputSpec) -> Result<Vec<SnapshotRef>> {
    let steps = series.steps.as_deref();
    let mut told: Vec<Told> = Vec::new();
    for path in &series.paths {
        told.extend(one(path, steps, spec)?);
    }
    for list in &series.lists {
        told.extend(listed(list, steps, spec)?);
    }
    if told.iter().all(|(_, fault)| fault.is_some())
        && let Some(first) = told.iter().find_map(|(_, fault)| fault.clone())
    {
        return Err(first);
    }
    let mut out: Vec<SnapshotRef> = told.into_iter().map(|(snapshot, _)| snapshot).collect();
    if let Some(bad) = series.times.iter().find(|t| !t.is_finite()) {
        return Err(Error::usage("cannot use the times").expected("finite numbers").found(bad.to_string()));
    }
    if !series.times.is_empty() {
        if series.times.len() != out.len() {
            return Err(Error::usage("cannot use the times")
                .expected(format!("{} numbers, one a snapshot", out.len()))
                .found(series.times.len().to_string())
                .hint("times follow the snapshots, those of a pattern in the order of the numbers in their names"));
        }
        for (snapshot, time) in out.iter_mut().zip(&series.times) {
            snapshot.time = Some(*time);
        }
    }
    Ok(out)
}

/// The snapshots of one path or pattern.
fn one(named: &str, steps: Option<&str>, spec: &InputSpec) -> Result<Vec<Told>> {
    let (path, group) = split_group(named);
    let mut out = Vec::new();
    for path in files(path, spec)? {
        match (group, steps) {
            (Some(group), _) if is_pattern(group) => out.extend(step_groups(&path, group, spec)?),
            (Some(group), _) => out.push((SnapshotRef { path, group: Some(group.trim_matches('/').into()), time: None }, None)),
            (None, Some(steps)) => out.extend(step_groups(&path, steps, spec)?),
            (None, None) => out.push((path.into(), None)),
        }
    }
    Ok(out)
}

/// `FILE:/GROUP` in its parts, unless there is a file of that name.
pub(super) fn split_group(named: &str) -> (&str, Option<&str>) {
    match named.split_once(":/") {
        // One letter before the colon is a drive.
        Some((file, group)) if file.len() > 1 && !group.trim_matches('/').is_empty() && !Path::new(named).exists() => (file, Some(group)),
        _ => (named, None),
    }
}

/// Files as named; a name with * ? or [ that is no file is a pattern.
fn files(named: &str, spec: &InputSpec) -> Result<Vec<PathBuf>> {
    let path = PathBuf::from(named);
    if path.exists() || !is_pattern(named) {
        return Ok(vec![path]);
    }
    if !has_place(&path) {
        return matches(named, named);
    }
    let found_by = |name: &String| -> Result<Vec<String>> {
        let pattern = named.replace(PLACE, &glob::Pattern::escape(name));
        Ok(globbed(&pattern, named)?.iter().filter_map(|f| with_place(named, &f.to_string_lossy(), name)).collect())
    };
    let mut best: Vec<Vec<String>> = Vec::new();
    for sets in names_of(spec) {
        let mut fullest: Option<(usize, Vec<String>)> = None;
        // A lone `b` beside a velocity may be anything.
        for set in sets.into_iter().filter(|set| best.is_empty() || set.len() == 3) {
            let found = set.iter().map(found_by).collect::<Result<Vec<_>>>()?;
            // In sixths, as sets have one to three names or those that the user gives.
            let share = 6 * found.iter().filter(|f| !f.is_empty()).count() / set.len();
            if share > fullest.as_ref().map_or(0, |f| f.0) {
                fullest = Some((share, found.concat()));
            }
        }
        // A guessed field beside another one must be there in full.
        if let Some((share, found)) = fullest
            && (best.is_empty() || share == 6)
        {
            best.push(found);
        }
    }
    let mut again = best.concat();
    again.sort_by(|a, b| natural::compare(a, b));
    again.dedup();
    if again.is_empty() {
        return Err(no_match(named).hint("--velocity U,V,W names the components"));
    }
    Ok(again.into_iter().map(PathBuf::from).collect())
}

/// The matches of a pattern in natural order.
fn matches(pattern: &str, named: &str) -> Result<Vec<PathBuf>> {
    let mut found = globbed(pattern, named)?;
    if found.is_empty() {
        return Err(no_match(named).hint("quote the pattern and check the folder"));
    }
    found.sort_by(|a, b| natural::compare(&a.to_string_lossy(), &b.to_string_lossy()));
    Ok(found)
}

/// The matches of a pattern.
fn globbed(pattern: &str, named: &str) -> Result<Vec<PathBuf>> {
    let bad = |e: String| Error::usage("cannot read a pattern").item(format!("\"{named}\"")).found(e);
    let found = glob::glob(pattern).map_err(|e| bad(e.to_string()))?;
    found.collect::<std::result::Result<Vec<_>, _>>().map_err(|e| bad(e.to_string()))
}

fn no_match(named: &str) -> Error {
    Error::input("cannot find snapshots").item(format!("\"{named}\"")).expected("a pattern that matches a file").found("no match")
}

/// Names that components may have: for every field sets of which one is there. All that the user names are one set.
fn names_of(spec: &InputSpec) -> Vec<Vec<Vec<String>>> {
    if spec.velocity.is_some() || spec.magnetic.is_some() {
        return vec![vec![named(spec).into_iter().flat_map(|(_, names)| names).collect()]];
    }
    let owned = |sets: &[&[&str]]| sets.iter().map(|set| set.iter().map(|n| n.to_string()).collect()).collect();
    vec![owned(&VELOCITY), owned(&MAGNETIC)]
}

/// A match of a pattern with the place of the component's name put back. None when the text does not fit the pattern.
fn with_place(pattern: &str, text: &str, name: &str) -> Option<String> {
    if let Some(rest) = pattern.strip_prefix(PLACE) {
        return Some(format!("{PLACE}{}", with_place(rest, text.strip_prefix(name)?, name)?));
    }
    let Some(p) = pattern.chars().next() else { return text.is_empty().then(String::new) };
    let rest = &pattern[p.len_utf8()..];
    let fixed = |rest: &str| {
        let t = text.chars().next()?;
        Some(format!("{t}{}", with_place(rest, &text[t.len_utf8()..], name)?))
    };
    match p {
        '*' => with_place(rest, text, name).or_else(|| {
            // Two stars cross folders; one does not.
            if text.starts_with('/') && !rest.starts_with('*') && !pattern.starts_with("**") { None } else { fixed(pattern) }
        }),
        '?' => fixed(rest),
        '[' => {
            let end = pattern.get(2..)?.find(']')? + 2;
            let class = glob::Pattern::new(&pattern[..=end]).ok()?;
            text.chars().next().filter(|t| class.matches(&t.to_string()))?;
            fixed(&pattern[end + 1..])
        }
        p => text.starts_with(p).then(|| fixed(rest)).flatten(),
    }
}

/// The groups of a file that are steps; where there are none, the pattern as it is and why.
fn step_groups(path: &Path, pattern: &str, spec: &InputSpec) -> Result<Vec<Told>> {
    let of = |group: &str| SnapshotRef { path: path.into(), group: Some(group.trim_matches('/').into()), time: None };
    match found_steps(path, pattern, spec) {
        Ok(found) => Ok(found.iter().map(|group| (of(group), None)).collect()),
        Err(e) if e.kind() == Kind::Usage => Err(e),
        Err(e) => Ok(vec![(of(pattern), Some(e))]),
    }
}

fn found_steps(path: &Path, pattern: &str, spec: &InputSpec) -> Result<Vec<String>> {
    let file = if has_place(path) {
        let names: Vec<String> = names_of(spec).concat().concat();
        let found = names.iter().map(|name| with_name(path, name)).find(|p| p.is_file());
        found.unwrap_or_else(|| with_name(path, &names[0]))
    } else {
        path.into()
    };
    if !file.is_file() {
        let found = if file.is_dir() { "a folder" } else { "nothing" };
        return Err(Error::input("cannot look for steps").at(&file).expected("an HDF5 file").found(found));
    }
    let opened = open_file(&file, None)?;
    let found = matching(&opened, pattern)?;
    if found.is_empty() { Err(no_steps(path, pattern, &opened)) } else { Ok(found) }
}

/// The groups that a pattern matches, from the root, in natural order.
///
/// # Errors
/// `Usage` for a malformed pattern.
fn matching(file: &File, pattern: &str) -> Result<Vec<String>> {
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

/// The snapshots of a list.
fn listed(list: &Path, steps: Option<&str>, spec: &InputSpec) -> Result<Vec<Told>> {
    let fault = |found: String| Error::input("cannot read the list").at(list).found(found);
    let length = std::fs::metadata(list)
        .map_err(|e| {
            if e.kind() == std::io::ErrorKind::NotFound {
                fault("nothing".into()).expected("a text file with one path a line").hint("check the path of the list")
            } else {
                fault(e.to_string())
            }
        })?
        .len();
    if length > LIST_LIMIT {
        return Err(fault(format!("{length} bytes")).expected("a text file with one path a line"));
    }
    let bytes = std::fs::read(list).map_err(|e| fault(e.to_string()))?;
    let text = String::from_utf8(bytes).map_err(|_| fault("other bytes".into()).expected("a text file with one path a line"))?;
    let mut out = Vec::new();
    for (i, line) in text.lines().enumerate() {
        // A comment begins a line or follows a blank, so that names may have a #.
        let comment = line.char_indices().find(|&(at, c)| c == '#' && (at == 0 || line[..at].ends_with(char::is_whitespace)));
        let said = comment.map_or(line, |(at, _)| &line[..at]).trim();
        if said.is_empty() {
            continue;
        }
        let split = said.rsplit_once(char::is_whitespace);
        let timed = split.and_then(|(path, number)| Some((path.trim_end(), number.parse::<f64>().ok().filter(|t| t.is_finite())?)));
        let (path, time) = timed.map_or((said, None), |(path, time)| (path, Some(time)));
        let folder = list.parent().unwrap_or(Path::new(""));
        let near = |p: &str| folder.join(p).to_string_lossy().into_owned();
        let there = |p: &str| Path::new(split_group(p).0).exists();
        let is_some = |p: &str| there(p) || there(&near(p)) || (is_pattern(p) && files(&near(p), spec).is_ok());
        if let (None, Some((before, behind))) = (time, split)
            && !is_some(path)
            && is_some(before.trim_end())
        {
            return Err(Error::input("cannot use the list")
                .at(list)
                .item(format!("line {}", i + 1))
                .expected(format!("a finite number behind {}, its time", before.trim_end()))
                .found(format!("\"{behind}\""))
                .hint("a # begins a comment"));
        }
        let mut found = if there(path) && !there(&near(path)) { one(path, steps, spec)? } else { one(&near(path), steps, spec)? };
        if let Some(time) = time {
            if let [only] = &mut found[..] {
                only.0.time = Some(time);
            } else {
                return Err(Error::input("cannot use the list")
                    .at(list)
                    .item(format!("line {}", i + 1))
                    .expected("one snapshot before a time")
                    .found(format!("{} snapshots", found.len())));
            }
        }
        out.extend(found);
    }
    if out.is_empty() {
        return Err(fault("none".into()).expected("one path a line"));
    }
    Ok(out)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn places_are_put_back() {
        let cases = [
            ("run/{field}_*.raw", "run/u_0010.raw", "u", Some("run/{field}_0010.raw")),
            ("*/{field}.h5", "u/u.h5", "u", Some("u/{field}.h5")),
            ("*_{field}*", "a_u_b_u", "u", Some("a_{field}_b_u")),
            ("{field}/t[0-9]?.h5", "bx/t42.h5", "bx", Some("{field}/t42.h5")),
            ("{field}*", "v1", "u", None),
            ("*{field}", "a/u", "u", None),
            ("**/{field}", "a/b/u", "u", Some("a/b/{field}")),
        ];
        for (pattern, text, name, again) in cases {
            assert_eq!(with_place(pattern, text, name).as_deref(), again, "{pattern} {text}");
        }
    }

    #[test]
    fn groups_are_told_from_drives() {
        assert_eq!(split_group("run.h5:/step/1"), ("run.h5", Some("step/1")));
        assert_eq!(split_group("C:/run.h5"), ("C:/run.h5", None));
        assert_eq!(split_group("run.h5:/"), ("run.h5:/", None));
        assert_eq!(split_group("run.h5"), ("run.h5", None));
    }
}
