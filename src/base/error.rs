//! One error type, grouped by who must act; every message names file, dataset, expectation, finding and a hint.

use std::fmt;
use std::path::{Path, PathBuf};

/// Shorthand used throughout the crate.
pub type Result<T> = std::result::Result<T, Error>;

/// Who has to act to get rid of the error.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// The command line or the run configuration is wrong: the user edits the request.
    Usage,
    /// A file is missing, unreadable or not what the request says: the user looks at the file.
    Input,
    /// The file is readable but its values cannot be used (NaN, infinite).
    Data,
    /// The request needs more memory than it may use.
    Limit,
    /// Results could not be written.
    Output,
    /// A broken promise inside ropewalk: a bug.
    Internal,
}

/// An error with the numbers that matter and one hint.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Error(Box<Body>);

#[derive(Debug, Clone, PartialEq, Eq)]
struct Body {
    kind: Kind,
    what: String,
    path: Option<PathBuf>,
    line: Option<usize>,
    item: Option<String>,
    expected: Option<String>,
    found: Option<String>,
    hint: Option<String>,
    /// Several faults found together; the other parts then say nothing.
    parts: Vec<Error>,
}

impl Error {
    fn new(kind: Kind, what: impl Into<String>) -> Self {
        let what = what.into();
        Error(Box::new(Body { kind, what, path: None, line: None, item: None, expected: None, found: None, hint: None, parts: Vec::new() }))
    }

    /// All faults of a request as one error: no error where there are none, the fault itself where there is one.
    ///
    /// # Errors
    /// `Usage` where there are faults.
    pub fn usage_all(mut faults: Vec<Error>) -> Result<()> {
        match faults.len() {
            0 => Ok(()),
            1 => Err(faults.remove(0)),
            n => {
                let mut all = Self::new(Kind::Usage, format!("{n} faults"));
                all.0.parts = faults;
                Err(all)
            }
        }
    }

    /// The faults it is made of; itself where it is one.
    pub fn parts(&self) -> &[Error] {
        if self.0.parts.is_empty() { std::slice::from_ref(self) } else { &self.0.parts }
    }

    /// A request that cannot be honoured; `what` says what could not be done.
    pub fn usage(what: impl Into<String>) -> Self {
        Self::new(Kind::Usage, what)
    }

    /// An unusable input file.
    pub fn input(what: impl Into<String>) -> Self {
        Self::new(Kind::Input, what)
    }

    /// Unusable values inside a readable file.
    pub fn data(what: impl Into<String>) -> Self {
        Self::new(Kind::Data, what)
    }

    /// A refusal for want of memory.
    pub fn limit(what: impl Into<String>) -> Self {
        Self::new(Kind::Limit, what)
    }

    /// A result that could not be written.
    pub fn output(what: impl Into<String>) -> Self {
        Self::new(Kind::Output, what)
    }

    /// A bug in ropewalk itself.
    pub fn internal(what: impl Into<String>) -> Self {
        Self::new(Kind::Internal, what)
    }

    /// Names the file.
    #[must_use]
    pub fn at(mut self, path: impl AsRef<Path>) -> Self {
        self.0.path = Some(path.as_ref().to_path_buf());
        self
    }

    /// Names the line of the file, the first being 1.
    #[must_use]
    pub fn line(mut self, line: usize) -> Self {
        self.0.line = Some(line);
        self
    }

    /// Names the dataset, option or other part inside the file or request.
    #[must_use]
    pub fn item(mut self, item: impl Into<String>) -> Self {
        self.0.item = Some(item.into());
        self
    }

    /// What would have been right.
    #[must_use]
    pub fn expected(mut self, expected: impl Into<String>) -> Self {
        self.0.expected = Some(expected.into());
        self
    }

    /// What was there instead.
    #[must_use]
    pub fn found(mut self, found: impl Into<String>) -> Self {
        self.0.found = Some(found.into());
        self
    }

    /// One thing to try.
    #[must_use]
    pub fn hint(mut self, hint: impl Into<String>) -> Self {
        self.0.hint = Some(hint.into());
        self
    }

    /// Who must act.
    pub fn kind(&self) -> Kind {
        self.0.kind
    }

    /// The line of the file, where one is named.
    pub fn at_line(&self) -> Option<usize> {
        self.0.line
    }
}

impl fmt::Display for Error {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let b = &*self.0;
        if !b.parts.is_empty() {
            let lines: Vec<String> = b.parts.iter().map(ToString::to_string).collect();
            return write!(f, "{}", lines.join("\n"));
        }
        write!(f, "{}", b.what)?;
        match (&b.path, b.line) {
            (Some(p), Some(n)) => write!(f, ": {}:{n}", p.display())?,
            (Some(p), None) => write!(f, ": {}", p.display())?,
            (None, Some(n)) => write!(f, ": line {n}")?,
            (None, None) => {}
        }
        if let Some(i) = &b.item {
            write!(f, ": {i}")?;
        }
        match (&b.expected, &b.found) {
            (Some(e), Some(x)) => write!(f, ": expected {e}, found {x}")?,
            (Some(e), None) => write!(f, ": expected {e}")?,
            (None, Some(x)) => write!(f, ": found {x}")?,
            (None, None) => {}
        }
        if let Some(h) = &b.hint {
            write!(f, "; hint: {h}")?;
        }
        Ok(())
    }
}

impl std::error::Error for Error {}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn message_has_all_parts_in_order() {
        let e = Error::input("cannot use velocity component")
            .at("run/s1.h5")
            .item("/flow/w")
            .expected("shape 64x64x64")
            .found("64x64x32")
            .hint("all components of a snapshot share one grid");
        assert_eq!(
            e.to_string(),
            "cannot use velocity component: run/s1.h5: /flow/w: expected shape 64x64x64, found 64x64x32; hint: all components of a snapshot share one grid"
        );
        assert_eq!(e.kind(), Kind::Input);
    }

    #[test]
    fn faults_found_together_are_told_one_a_line() {
        let first = Error::usage("cannot use a").at("run.toml").line(3).item("x.a");
        let second = Error::usage("cannot use b").line(4);
        assert_eq!(Error::usage_all(Vec::new()), Ok(()));
        assert_eq!(Error::usage_all(vec![first.clone()]), Err(first.clone()));
        let all = Error::usage_all(vec![first.clone(), second.clone()]).unwrap_err();
        assert_eq!(all.to_string(), "cannot use a: run.toml:3: x.a\ncannot use b: line 4");
        assert_eq!((all.parts(), all.kind()), (&[first, second][..], Kind::Usage));
    }
}
