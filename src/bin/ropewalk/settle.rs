//! From what was typed to a run configuration.

use std::path::Path;

use ropewalk::base::error::{Error, Result};
use ropewalk::run::catalogue::RunConfig;
use ropewalk::run::config::registry::Key;
use ropewalk::run::config::{Given, settle};

use crate::args::Catalogue;

/// Settles a `catalogue` command: a run file or snapshots, and flags over them.
pub fn catalogue(a: &Catalogue) -> Result<RunConfig> {
    let (files, snapshots): (Vec<&String>, Vec<&String>) = a.named.iter().partition(|n| is_run_file(n));
    let mut given = match (files.as_slice(), snapshots.as_slice()) {
        ([], []) => Given::new(),
        ([], _) => {
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
    Path::new(name).extension().is_some_and(|e| e == "toml")
}
