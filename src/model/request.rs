//! What a user asks for: everything that changes results, and what is to be written.

use std::fmt;

use crate::base::error::{Error, Result};
pub use crate::math::scheme::{SCHEMES, Scheme};
pub use crate::model::family::{Extent, Family, Level, Side};
pub use crate::model::indicator::{INDICATORS, Indicator};
use crate::model::source::Fields;
pub use crate::space::runs::Connectivity;

/// In which frame velocity is measured.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Frame {
    /// The frame of the box mean: its mean velocity is subtracted.
    Box,
    /// As stored.
    Stored,
    /// A frame that moves with the given velocity, as for a part of a box whose mean is known.
    Given([f64; 3]),
}

impl fmt::Display for Frame {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Frame::Box => write!(f, "box"),
            Frame::Stored => write!(f, "stored"),
            Frame::Given([u, v, w]) => write!(f, "{u},{v},{w}"),
        }
    }
}

/// Shape of a low-pass filter.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum FilterShape {
    /// All wavenumbers beyond π/width removed.
    Sharp,
    /// exp(−k² width² / 24).
    Gaussian,
}

/// A low-pass filter of all fields, before anything is derived.
///
/// # References
/// S. B. Pope, Turbulent Flows (Cambridge 2000), table 13.2.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Filter {
    /// Shape.
    pub shape: FilterShape,
    /// Width, in the user's length unit.
    pub width: f64,
}

impl Filter {
    /// Reads `sharp WIDTH` or `gaussian WIDTH`.
    ///
    /// # Errors
    /// `Usage`, naming what is wrong.
    pub fn parse(text: &str) -> Result<Filter> {
        let wrong = || {
            Error::usage("cannot read filter")
                .item(format!("\"{text}\""))
                .expected("\"sharp WIDTH\" or \"gaussian WIDTH\", the width a length above 0")
                .found(if text.trim().is_empty() { "nothing".to_string() } else { format!("\"{text}\"") })
                .hint("for example \"gaussian 0.2\"")
        };
        let (shape, width) = text.trim().split_once(char::is_whitespace).ok_or_else(wrong)?;
        let shape = match shape {
            "sharp" => FilterShape::Sharp,
            "gaussian" => FilterShape::Gaussian,
            _ => return Err(wrong()),
        };
        let width: f64 = width.trim().parse().map_err(|_| wrong())?;
        if width.is_finite() && width > 0.0 { Ok(Filter { shape, width }) } else { Err(wrong()) }
    }
}

impl fmt::Display for Filter {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let shape = match self.shape {
            FilterShape::Sharp => "sharp",
            FilterShape::Gaussian => "gaussian",
        };
        write!(f, "{shape} {}", self.width)
    }
}

/// Which surface meshes are written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Surfaces {
    /// None.
    None,
    /// One file a snapshot and family, with an object id per vertex.
    Together,
    /// One file an object.
    Each,
}

/// Of which objects all fields around are written.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum CutOuts {
    /// Of none.
    None,
    /// Of the n objects of each family with most cells, smaller ids first among equals.
    Largest(usize),
    /// Of the objects with these ids in every family (or the named one): `ID` or `FAMILY:ID`.
    Named(Vec<(Option<String>, u64)>),
}

/// What is written besides `catalogue.csv`, `run.json` and `columns.json`; changes no number.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Outputs {
    /// `catalogue.parquet`. Default yes, in a build that has it.
    pub parquet: bool,
    /// `catalogue.jsonl`. Default no.
    pub json_lines: bool,
    /// `labels/SNAPSHOT/FAMILY.h5`. Default no.
    pub labels: bool,
    /// `cutouts/SNAPSHOT/FAMILY/ID.h5`. Default none.
    pub cut_outs: CutOuts,
    /// Cells of margin around the object of a cut-out. Default 8.
    pub cut_out_margin: usize,
}

impl Default for Outputs {
    fn default() -> Self {
        Outputs { parquet: cfg!(feature = "parquet"), json_lines: false, labels: false, cut_outs: CutOuts::None, cut_out_margin: 8 }
    }
}

/// Everything that changes results.
#[derive(Debug, Clone, PartialEq)]
pub struct Request {
    /// Families; empty means [`Family::defaults`].
    pub families: Vec<Family>,
    /// Neighbourhood of a cell. Default 26; on a plane the same without z.
    pub connectivity: Connectivity,
    /// Smaller objects are counted but not listed. Default 27 cells.
    pub min_cells: u64,
    /// Larger objects get additive columns only. Default 2^22 cells: the surface of an object takes some 200 bytes of memory a cell.
    pub max_object_cells: u64,
    /// Kinematic viscosity ν, where known.
    pub viscosity: Option<f64>,
    /// Magnetic diffusivity η, where known.
    pub resistivity: Option<f64>,
    /// Mean total dissipation a unit mass, where the run states it (hyperviscosity, implicit dissipation).
    pub dissipation: Option<f64>,
    /// Kolmogorov length, where the run states it.
    pub kolmogorov_length: Option<f64>,
    /// Frame of the velocity. Default the box mean.
    pub frame: Frame,
    /// Derivatives. Default `Fd8`.
    pub scheme: Scheme,
    /// Low-pass filter of all fields. Default none.
    pub filter: Option<Filter>,
    /// Indicators whose mean and extremes over each object become columns. Default none.
    pub companions: Vec<Indicator>,
    /// Indicators put on mesh vertices besides the standard values. Default none.
    pub mesh_values: Vec<Indicator>,
    /// Root of the run's mean square of the indicators whose levels are multiples of it, by family; settled by the run itself.
    pub run_rms: Vec<(String, f64)>,
    /// Meshes. Default together.
    pub surfaces: Surfaces,
    /// Objects of fewer cells get no mesh. Default 0: every listed object.
    pub surface_min_cells: u64,
    /// Whether everything is computed by one path on every machine; so far nothing has to be given up for it, and it is recorded.
    pub portable: bool,
}

impl Default for Request {
    fn default() -> Self {
        Request {
            families: Vec::new(),
            connectivity: Connectivity::TwentySix,
            min_cells: 27,
            max_object_cells: 1 << 22,
            viscosity: None,
            resistivity: None,
            dissipation: None,
            kolmogorov_length: None,
            frame: Frame::Box,
            scheme: Scheme::Fd8,
            filter: None,
            companions: Vec::new(),
            mesh_values: Vec::new(),
            run_rms: Vec::new(),
            surfaces: Surfaces::Together,
            surface_min_cells: 0,
            portable: false,
        }
    }
}

impl Request {
    /// The families for a snapshot that carries these fields.
    ///
    /// # Errors
    /// `Usage` when a family, companion or mesh value needs a field or a coefficient that is not there, or two families share a name.
    pub fn families_for(&self, fields: Fields) -> Result<Vec<Family>> {
        let families = if self.families.is_empty() { Family::defaults(fields) } else { self.families.clone() };
        for (i, family) in families.iter().enumerate() {
            self.check_indicator(family.indicator, fields, "cannot detect family", &format!("\"{family}\""))?;
            if families[..i].iter().any(|f| f.name == family.name) {
                return Err(Error::usage("cannot use family")
                    .item(format!("\"{family}\""))
                    .expected("a name of its own")
                    .found(format!("\"{}\" twice", family.name))
                    .hint("give every family another name before the colon"));
            }
        }
        for (what, list) in [("cannot add companion columns", &self.companions), ("cannot add mesh values", &self.mesh_values)] {
            for i in list {
                self.check_indicator(*i, fields, what, i.name())?;
            }
        }
        if families.is_empty() {
            return Err(Error::usage("cannot choose families")
                .expected("a velocity or a magnetic field, which have default families")
                .found("neither")
                .hint("name one: --family \"NAME: INDICATOR > LEVEL\""));
        }
        Ok(families)
    }

    fn check_indicator(&self, indicator: Indicator, fields: Fields, what: &str, item: &str) -> Result<()> {
        let lacks = |expected: &str, hint: &str| Err(Error::usage(what).item(item).expected(expected).found("none").hint(hint));
        let needs = indicator.needs();
        if needs.velocity && !fields.velocity {
            return lacks("a velocity field", "name its datasets with --velocity U,V,W");
        }
        if needs.magnetic && !fields.magnetic {
            return lacks("a magnetic field", "name its datasets with --magnetic BX,BY,BZ");
        }
        if needs.buoyancy && !fields.buoyancy {
            return lacks("a buoyancy field", "name its dataset with --buoyancy B");
        }
        if indicator == Indicator::DissipationViscous && self.viscosity.is_none() {
            return lacks("the viscosity", "give --viscosity, or use strain instead");
        }
        if indicator == Indicator::DissipationOhmic && self.resistivity.is_none() {
            return lacks("the resistivity", "give --resistivity, or use current instead");
        }
        Ok(())
    }

    /// Companions and mesh values together, each once, companions first: what is derived besides the families' indicators.
    pub fn extras(&self) -> Vec<Indicator> {
        let mut out = self.companions.clone();
        out.extend(self.mesh_values.iter().filter(|i| !self.companions.contains(i)));
        out
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn families_are_checked_against_the_fields() {
        let velocity = Fields::VELOCITY;
        let mut r = Request { families: vec![Family::parse("c: current > 3 rms").unwrap()], ..Request::default() };
        assert!(r.families_for(velocity).unwrap_err().to_string().contains("expected a magnetic field, found none"));
        let twice = Family::parse("a: vorticity > 3 rms").unwrap();
        r.families = vec![twice.clone(), twice];
        assert!(r.families_for(velocity).unwrap_err().to_string().contains("\"a\" twice"));
        assert_eq!(Request::default().families_for(velocity).unwrap()[0].to_string(), "vorticity: vorticity > 3 rms");
        let with = Request { companions: vec![Indicator::Buoyancy], ..Request::default() };
        assert!(with.families_for(velocity).unwrap_err().to_string().contains("cannot add companion columns: buoyancy"));
    }

    #[test]
    fn filters_round_trip_and_faults_are_named() {
        for text in ["sharp 0.25", "gaussian 2"] {
            assert_eq!(Filter::parse(text).unwrap().to_string(), text);
        }
        for text in ["", "sharp", "box 2", "sharp -1", "gaussian x"] {
            let message = Filter::parse(text).unwrap_err().to_string();
            assert!(message.contains("cannot read filter"), "{message}");
        }
    }
}
