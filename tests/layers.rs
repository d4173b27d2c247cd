//! Holds the architecture: folder heights, one file for each outside thing, file sizes, first lines.

use std::fs;
use std::path::{Path, PathBuf};

/// Folders of `src` by height. A file imports its own folder or a lower height.
const HEIGHTS: &[(&str, u8)] = &[
    ("base", 0),
    ("space", 1),
    ("math", 2),
    ("synth", 3),
    ("model", 4),
    ("read", 5),
    ("derive", 5),
    ("survey", 5),
    ("detect", 5),
    ("measure", 5),
    ("depletion", 5),
    ("track", 5),
    ("export", 5),
    ("run", 6),
    ("bin", 7),
];

/// Names that only the listed files may use; a home that ends with / is a whole folder.
const CONFINED: &[(&[&str], &[&str])] = &[
    (&["println!", "print!", "eprintln!", "eprint!", "dbg!"], &["bin/ropewalk/console.rs"]),
    (&["rayon"], &["base/par.rs"]),
    (&["memmap2"], &["base/pages.rs"]),
    (&["rustfft", "realfft"], &["math/fft.rs"]),
    (&["glob"], &["read/series.rs"]),
    (&["toml"], &["run/config/file.rs"]),
    // Reading and writing have one home each.
    (&["::hdf5"], &["read/", "export/hdf5.rs"]),
    (&["::parquet", "::bytes"], &["export/parquet.rs"]),
    (&["zmij"], &["export/digits.rs"]),
    (&["ply_rs"], &["export/ply.rs"]),
    (&["flate2"], &["read/chunks/filters.rs"]),
];

const LONGEST: usize = 600;

fn height(folder: &str) -> Option<u8> {
    HEIGHTS.iter().find(|(f, _)| *f == folder).map(|(_, h)| *h)
}

/// Source text without comments, string and character literals, so that words in them count for nothing.
fn code_of(text: &str) -> String {
    let c: Vec<char> = text.chars().collect();
    let mut out = String::with_capacity(text.len());
    let mut i = 0;
    while i < c.len() {
        let next = c.get(i + 1).copied();
        let begins_word = i == 0 || !(c[i - 1].is_alphanumeric() || c[i - 1] == '_');
        if c[i] == '/' && next == Some('/') {
            while i < c.len() && c[i] != '\n' {
                i += 1;
            }
        } else if c[i] == '/' && next == Some('*') {
            let mut depth = 0;
            while i < c.len() {
                match (c[i], c.get(i + 1)) {
                    ('/', Some('*')) => (depth, i) = (depth + 1, i + 2),
                    ('*', Some('/')) => (depth, i) = (depth - 1, i + 2),
                    _ => i += 1,
                }
                if depth == 0 {
                    break;
                }
            }
        } else if begins_word && c[i] == 'r' && matches!(next, Some('"' | '#')) && raw_hashes(&c[i + 1..]).is_some() {
            let hashes = raw_hashes(&c[i + 1..]).unwrap_or(0);
            let end: Vec<char> = std::iter::once('"').chain(std::iter::repeat_n('#', hashes)).collect();
            i += 2 + hashes;
            while i < c.len() && !c[i..].starts_with(&end) {
                i += 1;
            }
            i += end.len();
            out.push('"');
        } else if c[i] == '"' {
            i += 1;
            while i < c.len() && c[i] != '"' {
                i += if c[i] == '\\' { 2 } else { 1 };
            }
            i += 1;
            out.push('"');
        } else if c[i] == '\'' && (next == Some('\\') || c.get(i + 2) == Some(&'\'')) {
            // A character, not a lifetime.
            i += if next == Some('\\') { 3 } else { 2 };
            while i < c.len() && c[i] != '\'' {
                i += 1;
            }
            i += 1;
        } else {
            out.push(c[i]);
            i += 1;
        }
    }
    out
}

/// Number of hashes when the characters after an `r` open a raw string.
fn raw_hashes(c: &[char]) -> Option<usize> {
    let hashes = c.iter().take_while(|&&x| x == '#').count();
    (c.get(hashes) == Some(&'"')).then_some(hashes)
}

fn is_word(c: char) -> bool {
    c.is_alphanumeric() || c == '_'
}

/// Places in `code` where `word` stands by itself.
fn places(code: &str, word: &str) -> Vec<usize> {
    let found = code.match_indices(word);
    found
        .filter(|(i, _)| {
            let before = code[..*i].chars().next_back().is_some_and(is_word);
            let after = word.ends_with(is_word) && code[i + word.len()..].chars().next().is_some_and(is_word);
            !before && !after
        })
        .map(|(i, _)| i)
        .collect()
}

/// First names behind `root::`, brace groups opened: `crate::{a::b, c::{d, e}}` gives a and c.
fn first_names(code: &str, root: &str) -> Vec<String> {
    let mut out = Vec::new();
    for at in places(code, root) {
        let rest = code[at + root.len()..].trim_start();
        let Some(rest) = rest.strip_prefix("::") else { continue };
        let rest = rest.trim_start();
        let Some(group) = rest.strip_prefix('{') else {
            out.push(rest.chars().take_while(|&c| is_word(c) || c == '*').collect());
            continue;
        };
        let (mut depth, mut name, mut reading) = (0, String::new(), true);
        for c in group.chars() {
            match c {
                '{' => depth += 1,
                '}' if depth == 0 => break,
                '}' => depth -= 1,
                ',' if depth == 0 => {
                    out.push(std::mem::take(&mut name));
                    reading = true;
                }
                c if depth == 0 && reading && (is_word(c) || c == '*') => name.push(c),
                c if depth == 0 && !c.is_whitespace() => reading = false,
                _ => {}
            }
        }
        out.push(name);
    }
    out.retain(|n| !n.is_empty());
    out
}

/// Every fault of one source file; `path` is relative to `src`.
fn faults(path: &str, text: &str) -> Vec<String> {
    let mut out = Vec::new();
    let mut fault = |what: String| out.push(format!("src/{path}: {what}"));
    if !text.starts_with("//!") {
        fault("does not begin with //!".into());
    }
    let code = code_of(text);
    for (words, homes) in CONFINED {
        let at_home = homes.iter().any(|h| *h == path || (h.ends_with('/') && path.starts_with(h)));
        for word in words.iter().filter(|w| !at_home && !places(&code, w).is_empty()) {
            fault(format!("uses {word}, which belongs into {}", homes.join(", ")));
        }
    }
    let top = path.split('/').next().unwrap_or_default();
    if top != "bin" {
        for reader in ["env::var", "env::var_os", "env::vars"] {
            if !places(&code, reader).is_empty() {
                fault(format!("reads the environment with {reader}"));
            }
        }
    }
    if path == "lib.rs" {
        return out;
    }
    let Some(own) = height(top) else {
        fault(format!("stands in the unknown folder {top}"));
        return out;
    };
    // The program is a crate of its own: its `crate` is itself, the library is `ropewalk`.
    let names = first_names(&code, if top == "bin" { "ropewalk" } else { "crate" });
    for name in names {
        match height(&name) {
            None => fault(format!("imports {name}, which is no folder of src")),
            Some(h) if h > own => fault(format!("imports {name} (height {h}) from height {own}")),
            Some(h) if h == own && name != top => fault(format!("imports {name}, a stage on its own height {own}")),
            Some(_) => {}
        }
    }
    out
}

fn rust_files(folder: &Path) -> Vec<PathBuf> {
    let mut out = Vec::new();
    let Ok(entries) = fs::read_dir(folder) else { return out };
    for path in entries.map(|e| e.expect("readable folder").path()) {
        if path.is_dir() {
            out.extend(rust_files(&path));
        } else if path.extension().is_some_and(|e| e == "rs") {
            out.push(path);
        }
    }
    out.sort();
    out
}

#[test]
fn source_files_keep_to_their_place() {
    let src = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let files = rust_files(&src);
    assert!(files.len() > 50, "only {} files found", files.len());
    let mut all = Vec::new();
    for file in files {
        let relative = file.strip_prefix(&src).expect("below src").to_string_lossy().replace('\\', "/");
        all.extend(faults(&relative, &fs::read_to_string(&file).expect("readable file")));
    }
    assert!(all.is_empty(), "{}", all.join("\n"));
}

#[test]
fn no_file_is_too_long() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut long = Vec::new();
    for file in ["src", "tests", "examples", "benches"].iter().flat_map(|f| rust_files(&root.join(f))) {
        let lines = fs::read_to_string(&file).expect("readable file").lines().count();
        if lines > LONGEST {
            long.push(format!("{}: {lines} lines", file.display()));
        }
    }
    assert!(long.is_empty(), "over {LONGEST} lines:\n{}", long.join("\n"));
}

/// What the scanner says of a planted file: the faults without their place.
fn planted(path: &str, code: &str) -> Vec<String> {
    let place = format!("src/{path}: ");
    faults(path, &format!("//! A planted file.\n{code}")).into_iter().map(|f| f.replace(&place, "")).collect()
}

#[test]
fn the_scanner_finds_planted_faults() {
    let cases = [
        ("detect/a.rs", "use crate::measure::row;", "imports measure, a stage on its own height 5"),
        ("space/a.rs", "use crate::model::request;", "imports model (height 4) from height 1"),
        ("math/a.rs", "use crate::{base::{error, par}, run::{self}};", "imports run (height 6) from height 2"),
        ("math/a.rs", "use crate :: {\n    base,\n    export::csv,\n};", "imports export (height 5) from height 2"),
        ("run/a.rs", "fn f() { crate::helpers::g(); }", "imports helpers, which is no folder of src"),
        ("run/a.rs", "use crate::*;", "imports *, which is no folder of src"),
        ("run/a.rs", "pub(in crate::bin) fn f() {}", "imports bin (height 7) from height 6"),
        ("bin/ropewalk/a.rs", "use ropewalk::prelude::x;", "imports prelude, which is no folder of src"),
        ("export/a.rs", "fn f() { println!(\"x\"); }", "uses println!, which belongs into bin/ropewalk/console.rs"),
        ("bin/ropewalk/a.rs", "fn f() { eprintln!(\"x\"); }", "uses eprintln!, which belongs into bin/ropewalk/console.rs"),
        ("detect/a.rs", "use rayon::prelude::*;", "uses rayon, which belongs into base/par.rs"),
        ("synth/a.rs", "fn f(p: realfft::RealFftPlanner<f64>) {}", "uses realfft, which belongs into math/fft.rs"),
        ("run/a.rs", "use ::hdf5::File;", "uses ::hdf5, which belongs into read/, export/hdf5.rs"),
        ("export/csv.rs", "fn f(e: ::parquet::errors::ParquetError) {}", "uses ::parquet, which belongs into export/parquet.rs"),
        ("run/a.rs", "fn f() { std::env::var(\"X\"); }", "reads the environment with env::var"),
        ("attic/a.rs", "", "stands in the unknown folder attic"),
        ("run/a.rs", "const C: char = '\"'; use crate::bin::x; const D: char = '\"';", "imports bin (height 7) from height 6"),
        ("run/a.rs", "fn f<'a>(x: &'a str) {} use crate::bin::x;", "imports bin (height 7) from height 6"),
        ("run/a.rs", "const R: &str = r#\"a \" b\"#; use crate::bin::x;", "imports bin (height 7) from height 6"),
        ("run/a.rs", "/* a /* b */ c */ use crate::bin::x;", "imports bin (height 7) from height 6"),
    ];
    for (path, code, want) in cases {
        assert_eq!(planted(path, code), [want], "{path}: {code}");
    }
    assert_eq!(faults("run/a.rs", "use crate::base;"), ["src/run/a.rs: does not begin with //!"]);
}

#[test]
fn the_scanner_leaves_good_files_alone() {
    let cases = [
        ("detect/a.rs", "use crate::{base::par, detect::tile, model::object::{Object, Sum}};"),
        ("run/a.rs", "// use crate::bin::x and println! and rayon\nuse crate::measure::row;"),
        ("run/a.rs", "const HELP: &str = \"crate::bin \\\" println! rayon\";"),
        ("run/a.rs", "const HELP: &str = r#\"crate::bin \" println!\"#;"),
        ("run/a.rs", "/* crate::bin /* nested */ println!(1) */ fn f() {}"),
        ("run/a.rs", "pub(crate) fn f() { let crate_like = 1; let my_rayon = 2; writeln!(x); }"),
        ("run/a.rs", "const V: &str = env!(\"CARGO_PKG_VERSION\"); const A: &str = std::env::consts::ARCH;"),
        ("base/par.rs", "use rayon::prelude::*;"),
        ("read/a.rs", "use ::hdf5::File; use crate::read::hdf5::open;"),
        ("run/a.rs", "use crate::export::hdf5::axes; use crate::export::parquet::ParquetWriter;"),
        ("bin/ropewalk/a.rs", "use crate::args::Args; use ropewalk::run::catalogue; fn f() { std::env::var(\"NO_COLOR\"); }"),
        ("bin/ropewalk/console.rs", "fn f() { eprintln!(\"x\"); }"),
    ];
    for (path, code) in cases {
        assert_eq!(planted(path, code), Vec::<String>::new(), "{path}: {code}");
    }
}
