//! What a file says about one array before any value is read.

use std::path::PathBuf;

use crate::base::error::Error;

/// Stored width of a value.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Precision {
    /// Four bytes.
    F32,
    /// Eight bytes.
    F64,
}

impl Precision {
    /// Bytes of a value.
    pub fn bytes(self) -> usize {
        match self {
            Precision::F32 => 4,
            Precision::F64 => 8,
        }
    }
}

/// Place, shape and width of one array.
#[derive(Debug, Clone)]
pub(super) struct Header {
    /// The file.
    pub path: PathBuf,
    /// The dataset, in a file that can hold several.
    pub item: Option<String>,
    /// How the array is named to the user.
    pub label: String,
    /// Samples along every axis, slowest first.
    pub shape: Vec<usize>,
    /// Stored width.
    pub precision: Precision,
}

impl Header {
    /// An input error about this array.
    pub fn fault(&self, what: &str) -> Error {
        self.place(Error::input(what))
    }

    /// Names the file and the dataset in an error.
    pub fn place(&self, error: Error) -> Error {
        let error = error.at(&self.path);
        match &self.item {
            Some(item) => error.item(item),
            None => error,
        }
    }

    /// The shape as text, slowest axis first.
    pub fn shape_text(&self) -> String {
        shape_text(&self.shape)
    }
}

/// A shape as text: `12x10x9`, or `a single value` for no axis at all.
pub(super) fn shape_text(shape: &[usize]) -> String {
    if shape.is_empty() {
        return "a single value".into();
    }
    shape.iter().map(usize::to_string).collect::<Vec<_>>().join("x")
}

/// The error for values that are neither f32 nor f64.
pub(super) fn wrong_type(error: impl FnOnce(Error) -> Error, found: String) -> Error {
    error(Error::input("cannot use the dataset"))
        .expected("float32 or float64 values")
        .found(found)
        .hint("convert the dataset to float32 or float64")
}
