//! Coordinates of the samples of an axis: read from a file beside the snapshot, checked, recognised where spacing is equal.

use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::npy;

const WHAT: &str = "cannot use the coordinates";
/// Most that coordinates of equal spacing may be off, as a share of the length of the axis.
const EQUAL: f64 = 1e-6;
/// Longest text file taken for coordinates.
const TEXT_LIMIT: u64 = 64 << 20;

/// Coordinates as they are stored.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Coordinates {
    /// In the order stored.
    pub values: Vec<f64>,
    /// Whether they are stored in single precision.
    pub single: bool,
    /// The file.
    pub path: PathBuf,
    /// The dataset in it.
    pub item: Option<String>,
}

/// Checked coordinates.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Spaced {
    /// First sample and distance.
    Equal(f64, f64),
    /// All of them.
    Unequal(Vec<f64>),
}

impl Coordinates {
    /// Where they stand, for messages.
    pub fn place(&self) -> String {
        self.item.clone().unwrap_or_else(|| self.path.file_name().unwrap_or_default().to_string_lossy().into_owned())
    }

    fn fault(&self, axis: usize) -> Error {
        let axis = ["x", "y", "z"][axis];
        let item = self.item.as_ref().map_or_else(|| format!("{axis} axis"), |item| format!("{item} ({axis} axis)"));
        Error::input(WHAT).at(&self.path).item(item)
    }

    /// Checks that they are those of `n` samples of an axis.
    pub fn check(&self, axis: usize, n: usize) -> Result<Spaced> {
        let v = &self.values;
        if v.len() != n {
            let hint =
                if v.len() == n + 1 { "coordinates of faces are one more: give those of the samples" } else { "one number a sample" };
            return Err(self.fault(axis).expected(format!("{n} numbers, as many as samples")).found(v.len().to_string()).hint(hint));
        }
        if let Some(i) = v.iter().position(|x| !x.is_finite()) {
            return Err(self.fault(axis).expected("finite numbers").found(format!("{} at index {i}", v[i])));
        }
        if let Some(i) = v.windows(2).position(|p| p[0] >= p[1]) {
            let falling = v.windows(2).all(|p| p[0] > p[1]);
            let found = if falling { "descending ones".into() } else { format!("{} behind {} at index {}", v[i + 1], v[i], i + 1) };
            let hint =
                if falling { "reverse the axis in the arrays and in the coordinates" } else { "every sample needs a place of its own" };
            return Err(self.fault(axis).expected("strictly ascending coordinates").found(found).hint(hint));
        }
        if n < 2 {
            return Ok(Spaced::Equal(v[0], 1.0));
        }
        let (first, last) = (v[0], v[n - 1]);
        let spacing = (last - first) / (n - 1) as f64;
        // Rounding to single precision moves a coordinate by up to half a unit in its last place.
        let rounding = if self.single { f64::from(f32::EPSILON) * first.abs().max(last.abs()) } else { 0.0 };
        let tolerance = EQUAL * (last - first) + rounding;
        let equal = v.iter().enumerate().all(|(i, x)| (x - (first + i as f64 * spacing)).abs() <= tolerance);
        Ok(if equal { Spaced::Equal(first, spacing) } else { Spaced::Unequal(v.clone()) })
    }
}

/// Reads a `.npy` file with one axis, or a text file with one number a line (`#` begins a comment).
pub(super) fn beside(folder: &Path, name: &str) -> Result<Coordinates> {
    let path = folder.join(name);
    if !path.is_file() {
        return Err(Error::input("cannot find the coordinates")
            .at(&path)
            .expected("a .npy file, or a text file with one number a line")
            .found("nothing")
            .hint("names are those of files in the folder of the snapshot"));
    }
    if path.extension().is_some_and(|e| e == "npy") {
        let (values, single) = npy::line(&path)?;
        return Ok(Coordinates { values, single, path, item: None });
    }
    let io = |e: std::io::Error| Error::input(WHAT).at(&path).found(e.to_string());
    if std::fs::metadata(&path).map_err(io)?.len() > TEXT_LIMIT {
        return Err(Error::input(WHAT).at(&path).expected("a text file with one number a line").found("a file over 64 MiB"));
    }
    let bytes = std::fs::read(&path).map_err(io)?;
    let text = String::from_utf8_lossy(&bytes);
    let mut values = Vec::new();
    for (i, line) in text.lines().enumerate() {
        let said = line.split('#').next().unwrap_or_default().trim();
        if said.is_empty() {
            continue;
        }
        let Ok(value) = said.parse::<f64>() else {
            let shown: String = said.chars().take(40).collect();
            return Err(Error::input(WHAT)
                .at(&path)
                .item(format!("line {}", i + 1))
                .expected("one number a line")
                .found(format!("{shown:?}")));
        };
        values.push(value);
    }
    Ok(Coordinates { values, single: false, path, item: None })
}
