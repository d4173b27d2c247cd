//! From what was typed to a run configuration.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use ropewalk::base::error::{Error, Result};
use ropewalk::run::catalogue::RunConfig;
use ropewalk::run::config::registry::{Key, TABLES};
use ropewalk::run::config::{Given, settle};

use crate::args::Catalogue;

/// Bytes at the beginning of a file that are looked at for tables of a run file.
const LOOKED_AT: u64 = 8 << 10;

/// Settles a `catalogue` command: a run file or snapshots, and flags over them.
pub fn catalogue(a: &Catalogue) -> Result<RunConfig> {
    let (files, snapshots): (Vec<&String>, Vec<&String>) = a.named.iter().partition(|n| is_run_file(n));
    let mut given = match (files.as_slice(), snapshots.as_slice()) {
        ([], []) => Given::new(),
        ([], _) => {
            snapshots.iter().try_for_each(|name| refuse_run_file(name))?;
            let mut given = Given::new();
            given.flag(Key::Paths, a.named.clone());
            given
        }
        ([file], []) => Given::read(Path::new(file))?,
        ([file, more @ ..], others) => {
            let others: Vec<&str> = more.iter().chain(others).map(|n| n.as_str()).collect();
            return Err(Error::usage("cannot use a run file and more")
                .at(file)
                .expected("the run file alone")
                .found(format!("also {}", others.join(", ")))
                .hint("name the snapshots in the run file, as paths below [snapshots]"));
        }
    };
    for (key, typed) in &a.flags.0 {
        given.flag(*key, typed.clone());
    }
    settle(&given)
}

fn is_run_file(name: &str) -> bool {
    Path::new(name).extension().is_some_and(|e| e.eq_ignore_ascii_case("toml"))
}

/// Refuses what is a run file by another name. One line that opens a table of ours tells.
fn refuse_run_file(name: &str) -> Result<()> {
    let Ok(file) = File::open(name) else { return Ok(()) };
    let mut start = Vec::new();
    if file.take(LOOKED_AT).read_to_end(&mut start).is_err() || start.contains(&0) {
        return Ok(());
    }
    let text = String::from_utf8_lossy(&start);
    let opens = |line: &str, table: &str| line.strip_prefix('[').and_then(|l| l.strip_prefix(table)).is_some_and(|l| l.starts_with(']'));
    match TABLES.iter().find(|(table, _, _)| text.lines().any(|line| opens(line.trim_start(), table))) {
        Some((table, _, _)) => Err(Error::usage("cannot use a snapshot")
            .at(name)
            .expected("a snapshot")
            .found(format!("a text with the table [{table}]"))
            .hint("a run file's name ends in .toml")),
        None => Ok(()),
    }
}
