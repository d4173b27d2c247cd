//! The inspect command: what files hold, in aligned text, and a run file for them.

use std::fmt::Write;
use std::fs::OpenOptions;
use std::io::Write as _;
use std::path::Path;
use std::process::ExitCode;

use ropewalk::base::budget::size;
use ropewalk::base::error::{Error, Result};
use ropewalk::read::inspect::{Contents, inspect};
use ropewalk::run::config::registry::Key;
use ropewalk::run::config::template;

use crate::args::{Inspect, Progress};
use crate::{console, exit};

/// Looks into every file; those that cannot be read are told and the others go on.
pub fn run(a: &Inspect) -> Result<ExitCode> {
    let mut found = Vec::new();
    let mut failed = false;
    for file in &a.files {
        match inspect(file) {
            Ok(contents) => found.push(contents),
            Err(e) if a.files.len() == 1 => return Err(e),
            Err(e) => {
                console::error(&e, Progress::None);
                failed = true;
            }
        }
    }
    if found.is_empty() {
        let n = a.files.len().to_string();
        return Err(Error::input("cannot look into any file").expected("at least one that can be read").found(format!("{n} that cannot")));
    }
    let mut text = found.iter().map(told).collect::<Vec<_>>().join("\n");
    if let Some(out) = &a.run_file {
        write(out, &run_file(&found, out), a.replace)?;
        let _ = writeln!(text, "\nrun file {}: look it through, then ropewalk catalogue {} --dry-run", out.display(), out.display());
    }
    console::result(&text)?;
    Ok(if !failed { ExitCode::SUCCESS } else { ExitCode::from(exit::PARTIAL) })
}

/// The text of a run file for these snapshots, which are taken to be alike.
fn run_file(found: &[Contents], out: &Path) -> String {
    let mut notes = Vec::new();
    if let Some(first) = found.first() {
        notes.push(format!("How {} would be read ({}), and why:", first.path.display(), first.kind));
        notes.extend(first.reasons.iter().map(|r| format!("- {r}")));
    }
    template::text(&template::guessed(found, out), &notes)
}

/// Writes a run file. Work that somebody put into an earlier one is not lost unless asked for.
fn write(out: &Path, text: &str, replace: bool) -> Result<()> {
    let fault = || Error::output("cannot write the run file").at(out);
    let mut options = OpenOptions::new();
    let opened = if replace { options.write(true).create(true).truncate(true) } else { options.write(true).create_new(true) }.open(out);
    let mut file = opened.map_err(|e| {
        if e.kind() == std::io::ErrorKind::AlreadyExists {
            fault().expected("nothing there").found("a file of that name").hint("name another, or pass --replace to overwrite it")
        } else {
            fault().found(e.to_string())
        }
    })?;
    file.write_all(text.as_bytes()).and_then(|()| file.sync_all()).map_err(|e| fault().found(e.to_string()))
}

/// All that is known of one file.
fn told(c: &Contents) -> String {
    let mut out = String::new();
    let _ = writeln!(out, "{}: {}, {}", c.path.display(), c.kind, size(c.bytes));
    if let Some(t) = c.time {
        let _ = writeln!(out, "  time {t}");
    }
    if !c.attributes.is_empty() {
        let _ = writeln!(out, "  attributes");
        pairs(&mut out, "    ", &c.attributes);
    }
    if !c.steps.is_empty() {
        let (first, last) = (&c.steps[0], &c.steps[c.steps.len() - 1]);
        let which = if c.steps.len() == 1 { first.clone() } else { format!("{first} to {last}") };
        let _ = writeln!(out, "  steps: {}, {which}", c.steps.len());
    }
    if !c.items.is_empty() {
        let _ = writeln!(out, "  arrays");
    }
    let rows: Vec<[String; 4]> = c.items.iter().map(|i| [i.name.clone(), shape(&i.shape), i.values.clone(), i.storage.clone()]).collect();
    let width = |k: usize| rows.iter().map(|r| r[k].chars().count()).max().unwrap_or(0);
    let widths = [width(0), width(1), width(2)];
    for (row, item) in rows.iter().zip(&c.items) {
        let line = format!("    {:<a$}  {:<b$}  {:<w$}  {}", row[0], row[1], row[2], row[3], a = widths[0], b = widths[1], w = widths[2]);
        let _ = writeln!(out, "{}", line.trim_end());
        pairs(&mut out, "      ", &item.attributes);
    }
    let _ = writeln!(out, "  would be read with");
    let findings = template::guessed(std::slice::from_ref(c), Path::new("run.toml"));
    let mut known: Vec<(String, String)> = findings
        .known
        .into_iter()
        .filter(|(k, _)| k.setting().table != "snapshots" || k.setting().name == "steps")
        .map(|(k, v)| (k.setting().path(), v))
        .collect();
    if findings.size_is_missing {
        known.push((Key::Lengths.setting().path(), "to be given: nothing tells the size of the box".into()));
    }
    pairs(&mut out, "    ", &known);
    if !c.reasons.is_empty() {
        let _ = writeln!(out, "  because");
    }
    for r in &c.reasons {
        let _ = writeln!(out, "    {r}");
    }
    out
}

fn shape(sizes: &[usize]) -> String {
    if sizes.is_empty() { "single".to_string() } else { sizes.iter().map(usize::to_string).collect::<Vec<_>>().join(" x ") }
}

/// Names and values, aligned.
fn pairs(out: &mut String, indent: &str, pairs: &[(String, String)]) {
    let width = pairs.iter().map(|(n, _)| n.chars().count()).max().unwrap_or(0);
    for (name, value) in pairs {
        let _ = writeln!(out, "{indent}{name:<width$}  {}", value.replace('\n', " "));
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use ropewalk::read::InputSpec;
    use ropewalk::read::inspect::Item;

    #[test]
    fn contents_are_told_in_columns() {
        let item = |name: &str, shape: Vec<usize>, storage: &str| Item {
            name: name.into(),
            shape,
            values: "float32 little-endian".into(),
            storage: storage.into(),
            attributes: Vec::new(),
        };
        let mut u = item("/flow/u", vec![64, 64, 128], "contiguous");
        u.attributes.push(("units".into(), "m/s".into()));
        let contents = Contents {
            path: "run/s1.h5".into(),
            kind: "HDF5".into(),
            bytes: 3 << 20,
            items: vec![u, item("/t", Vec::new(), "compact")],
            attributes: vec![("viscosity".into(), "0.019".into()), ("t".into(), "0.5".into())],
            steps: Vec::new(),
            guess: InputSpec { lengths: Some([std::f64::consts::TAU; 3]), velocity: Some(vec!["flow/u".into()]), ..InputSpec::default() },
            reasons: vec!["velocity: a name that is usual".into()],
            time: Some(0.5),
        };
        let wanted = "run/s1.h5: HDF5, 3.0 MiB
  time 0.5
  attributes
    viscosity  0.019
    t          0.5
  arrays
    /flow/u  64 x 64 x 128  float32 little-endian  contiguous
      units  m/s
    /t       single         float32 little-endian  compact
  would be read with
    input.velocity     \"flow/u\"
    input.order        \"zyx\"
    input.origin       [0.0, 0.0, 0.0]
    input.periodic     \"xyz\"
    physics.viscosity  0.019
    input.lengths      to be given: nothing tells the size of the box
  because
    velocity: a name that is usual
";
        assert_eq!(told(&contents), wanted);
    }
}
