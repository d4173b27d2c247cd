//! Settings as found, each with its place: a line of the run file, or a flag.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use crate::base::error::Error;
use crate::run::config::registry::{Key, Setting, Takes};

/// A value before anyone has asked what it should be.
#[derive(Debug, Clone, PartialEq)]
pub enum Raw {
    /// What was typed behind a flag.
    Typed(String),
    /// A string of a run file.
    Text(String),
    /// A whole number of a run file.
    Integer(i64),
    /// Another number of a run file.
    Float(f64),
    /// `true` or `false`.
    Bool(bool),
    /// An array, or what a repeatable flag was given.
    List(Vec<Node>),
    /// A table.
    Table(Vec<(String, Node)>),
    /// Something no setting can be, in words.
    Odd(String),
}

/// A value and where it stands.
#[derive(Debug, Clone, PartialEq)]
pub struct Node {
    /// The value.
    pub raw: Raw,
    /// Line of the run file; none for a flag.
    pub line: Option<usize>,
}

impl Node {
    /// What it is, for messages.
    pub fn found(&self) -> String {
        match &self.raw {
            Raw::Typed(t) | Raw::Text(t) if t.is_empty() => "nothing".to_string(),
            Raw::Typed(t) | Raw::Text(t) => format!("\"{t}\""),
            Raw::Integer(i) => i.to_string(),
            Raw::Float(v) => v.to_string(),
            Raw::Bool(b) => b.to_string(),
            Raw::List(l) if l.is_empty() => "an empty list".to_string(),
            Raw::List(l) => format!("[{}]", l.iter().map(Node::found).collect::<Vec<_>>().join(", ")),
            Raw::Table(_) => "a table".to_string(),
            Raw::Odd(what) => what.clone(),
        }
    }
}

/// Settings as found, and the faults met in finding them.
#[derive(Debug, Clone, Default)]
pub struct Given {
    /// The values.
    pub(super) values: BTreeMap<Key, Node>,
    /// The run file.
    pub(super) file: Option<PathBuf>,
    /// Whether part of the run file could not be read, so that what seems missing may be there.
    pub(super) torn: bool,
    /// Faults so far.
    pub(super) faults: Vec<Error>,
}

impl Given {
    /// Nothing yet.
    pub fn new() -> Given {
        Given::default()
    }

    /// Takes what stood behind a flag, in the order typed: the value of the run file is replaced.
    pub fn flag(&mut self, key: Key, typed: Vec<String>) {
        let setting = key.setting();
        let node = |raw| Node { raw, line: None };
        let raw = match (setting.takes, typed.as_slice()) {
            (Takes::Many, _) => Raw::List(typed.into_iter().map(|t| node(Raw::Typed(t))).collect()),
            (_, [one]) => Raw::Typed(one.clone()),
            (_, several) => {
                let all: Vec<String> = several.iter().map(|t| format!("\"{t}\"")).collect();
                self.faults.push(
                    Error::usage("cannot use a setting").item(format!("--{}", setting.flag)).expected("it once").found(format!(
                        "it {} times: {}",
                        several.len(),
                        all.join(", ")
                    )),
                );
                return;
            }
        };
        // Two ways to say one thing: the flag stands for both.
        match key {
            Key::Lengths => self.drop_of_file(Key::Spacing),
            Key::Spacing => self.drop_of_file(Key::Lengths),
            _ => {}
        }
        self.values.insert(key, node(raw));
    }

    fn drop_of_file(&mut self, key: Key) {
        if self.values.get(&key).is_some_and(|n| n.line.is_some()) {
            self.values.remove(&key);
        }
    }

    /// Whether it was given.
    pub fn has(&self, key: Key) -> bool {
        self.values.contains_key(&key)
    }

    /// The value found.
    pub(super) fn node(&self, key: Key) -> Option<&Node> {
        self.values.get(&key)
    }

    /// The folder that relative paths in the run file start from.
    pub(super) fn folder(&self) -> &Path {
        self.file.as_deref().and_then(Path::parent).unwrap_or(Path::new(""))
    }

    /// What a setting is called where it was found, or would be looked for.
    pub(super) fn label(&self, key: Key) -> String {
        let of_file = self.node(key).map_or(self.file.is_some(), |n| n.line.is_some());
        label(key.setting(), of_file)
    }

    /// An error about settings, placed at the last line among those found.
    pub(super) fn about(&self, what: &str, keys: &[Key]) -> Error {
        let labels: Vec<String> = keys.iter().map(|k| self.label(*k)).collect();
        let line = keys.iter().filter_map(|k| self.node(*k)?.line).max();
        self.placed(Error::usage(what).item(labels.join(", ")), line)
    }

    /// Names file and line of something found in the run file.
    pub(super) fn placed(&self, e: Error, line: Option<usize>) -> Error {
        match (&self.file, line) {
            (Some(f), Some(n)) => e.at(f).line(n),
            _ => e,
        }
    }
}

fn label(setting: &Setting, of_file: bool) -> String {
    match (of_file, setting.flag) {
        (true, _) => setting.path(),
        (false, "") => setting.value.to_string(),
        (false, flag) => format!("--{flag}"),
    }
}
