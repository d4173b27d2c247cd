//! From the text of a run file to settings as found: syntax, tables and keys, each fault with its line.

use std::borrow::Cow;
use std::path::Path;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use crate::base::error::{Error, Result};
use crate::run::config::given::{Given, Node, Raw};
use crate::run::config::nearest::nearest;
use crate::run::config::registry::{Key, SETTINGS, TABLES};

/// Larger files are no run files.
const LARGEST: u64 = 16 << 20;

impl Given {
    /// Reads a run file. Its faults are kept and told when the settings are settled.
    ///
    /// # Errors
    /// `Usage` when there is no text to read.
    pub fn read(path: &Path) -> Result<Given> {
        let wrong = || Error::usage("cannot read the run file").at(path);
        let bytes = std::fs::metadata(path).map_err(|e| {
            if e.kind() == std::io::ErrorKind::NotFound {
                wrong().found("no such file").hint("ropewalk inspect SNAPSHOT --run-file RUN.toml writes one")
            } else {
                wrong().found(e.to_string())
            }
        })?;
        if bytes.len() > LARGEST {
            return Err(wrong().expected("a text of a few lines").found(format!("{} bytes", bytes.len())));
        }
        let text = std::fs::read(path).map_err(|e| wrong().found(e.to_string()))?;
        let text = String::from_utf8(text).map_err(|e| {
            let line = 1 + e.as_bytes()[..e.utf8_error().valid_up_to()].iter().filter(|b| **b == b'\n').count();
            wrong().line(line).expected("text in UTF-8").found("other bytes")
        })?;
        Ok(Given::parse(&text, path))
    }

    /// The settings in the text of a run file that is called `path`.
    pub fn parse(text: &str, path: &Path) -> Given {
        let lines = Lines::of(text);
        let (table, errors) = DeTable::parse_recoverable(text);
        let mut given = Given { file: Some(path.to_path_buf()), torn: !errors.is_empty(), ..Given::default() };
        let mut torn: Vec<usize> = Vec::new();
        for e in errors {
            let line = lines.of_byte(e.span().map_or(text.len(), |s| s.start));
            // One line gives one message: the first is the cause.
            if !torn.contains(&line) {
                torn.push(line);
                given.faults.push(
                    Error::usage("cannot read the run file")
                        .at(path)
                        .line(line)
                        .expected("TOML")
                        .found(e.message())
                        .hint("strings stand in quotes, as in order = \"zyx\"; a key or table stands once"),
                );
            }
        }
        let mut reader = Tables { given: &mut given, lines: &lines, torn: &torn };
        reader.table("", table.get_ref());
        given
    }
}

/// Where lines begin.
struct Lines(Vec<usize>);

impl Lines {
    fn of(text: &str) -> Lines {
        Lines(std::iter::once(0).chain(text.match_indices('\n').map(|(i, _)| i + 1)).collect())
    }

    fn of_byte(&self, at: usize) -> usize {
        self.0.partition_point(|&start| start <= at)
    }
}

struct Tables<'a> {
    given: &'a mut Given,
    lines: &'a Lines,
    /// Lines with a syntax error: what was made of them is not looked at.
    torn: &'a [usize],
}

impl Tables<'_> {
    fn table(&mut self, path: &str, table: &DeTable<'_>) {
        let mut entries: Vec<(&Spanned<Cow<'_, str>>, &Spanned<DeValue<'_>>)> = table.iter().collect();
        entries.sort_by_key(|(k, _)| k.span().start);
        for (key, value) in entries {
            let line = self.lines.of_byte(key.span().start);
            let last = if matches!(value.get_ref(), DeValue::Table(_)) { line } else { self.lines.of_byte(value.span().end) };
            if self.torn.iter().any(|t| (line..=last.max(line)).contains(t)) {
                continue;
            }
            let name: &str = key.get_ref();
            let full = if path.is_empty() { name.to_string() } else { format!("{path}.{name}") };
            if let Some(s) = SETTINGS.iter().find(|s| s.path() == full) {
                let node = Node { line: Some(line), ..self.node(value) };
                self.given.values.insert(s.key, node);
            } else if TABLES.iter().any(|(t, _, _)| *t == full) {
                match value.get_ref() {
                    DeValue::Table(inner) => self.table(&full, inner),
                    _ => {
                        let found = self.node(value).found();
                        self.fault(line, &full, "a table", &found, format!("write [{full}] on a line of its own, its keys below"));
                    }
                }
            } else {
                self.unknown(path, name, &full, line, matches!(value.get_ref(), DeValue::Table(_)));
            }
        }
    }

    fn unknown(&mut self, path: &str, name: &str, full: &str, line: usize, is_table: bool) {
        let tables = || TABLES.iter().map(|(t, _, _)| *t);
        let own = format!("{path}.");
        let keys = || {
            let inner = TABLES.iter().filter_map(|(t, _, _)| t.strip_prefix(own.as_str()));
            SETTINGS.iter().filter(|s| s.table == path).map(|s| s.name).chain(inner)
        };
        let elsewhere = SETTINGS.iter().find(|s| s.name == name && !is_table);
        let (expected, hint) = if path.is_empty() {
            let expected = format!("one of the tables {}", tables().collect::<Vec<_>>().join(", "));
            let hint = match (elsewhere, nearest(full, tables())) {
                (Some(s), _) => format!("{name} stands below [{}]", s.table),
                (None, Some(t)) => format!("did you mean [{t}]?"),
                (None, None) => "ropewalk inspect SNAPSHOT --run-file RUN.toml writes one with every key".to_string(),
            };
            (expected, hint)
        } else {
            let near = nearest(name, keys());
            let hint = match (near, elsewhere) {
                (Some(k), _) => format!("did you mean {k}?"),
                (None, Some(s)) => format!("{name} stands below [{}]", s.table),
                (None, None) => format!("one of {}", keys().collect::<Vec<_>>().join(", ")),
            };
            (format!("a key of [{path}]"), hint)
        };
        let found = format!("{} \"{name}\"", if is_table { "the table" } else { "the key" });
        self.fault(line, full, &expected, &found, hint);
    }

    fn fault(&mut self, line: usize, item: &str, expected: &str, found: &str, hint: String) {
        let e = Error::usage("cannot use a setting").item(item).expected(expected).found(found).hint(hint);
        let e = self.given.placed(e, Some(line));
        self.given.faults.push(e);
    }

    fn node(&self, value: &Spanned<DeValue<'_>>) -> Node {
        let raw = match value.get_ref() {
            DeValue::String(t) => Raw::Text(t.to_string()),
            DeValue::Integer(i) => match i64::from_str_radix(i.as_str(), i.radix()) {
                Ok(v) => Raw::Integer(v),
                Err(_) => Raw::Odd(format!("{i}, beyond the range of whole numbers")),
            },
            DeValue::Float(f) => match f.as_str().parse() {
                Ok(v) => Raw::Float(v),
                Err(_) => Raw::Odd(f.as_str().to_string()),
            },
            DeValue::Boolean(b) => Raw::Bool(*b),
            DeValue::Datetime(d) => Raw::Odd(format!("the date {d}")),
            DeValue::Array(a) => Raw::List(a.iter().map(|v| self.node(v)).collect()),
            DeValue::Table(t) => {
                let mut entries: Vec<_> = t.iter().collect();
                entries.sort_by_key(|(k, _)| k.span().start);
                Raw::Table(entries.into_iter().map(|(k, v)| (k.get_ref().to_string(), self.node(v))).collect())
            }
        };
        Node { raw, line: Some(self.lines.of_byte(value.span().start)) }
    }
}

/// The key of that path, e.g. `input.order`.
pub fn key_of(path: &str) -> Option<Key> {
    SETTINGS.iter().find(|s| s.path() == path).map(|s| s.key)
}
