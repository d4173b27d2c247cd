//! What a user asks for: families of objects, levels, conventions that change results.

use std::fmt;

use crate::base::error::{Error, Result};
use crate::model::source::Fields;
pub use crate::space::runs::Connectivity;

/// A scalar field that can be thresholded.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Indicator {
    /// |ω|, ω = ∇×u.
    Vorticity,
    /// |ω|².
    Enstrophy,
    /// |j|, j = ∇×b.
    Current,
    /// Q = ¼|ω|² − ½ S:S.
    Q,
    /// |S| = √(S:S).
    Strain,
    /// 2ν S:S.
    DissipationViscous,
    /// η |j|².
    DissipationOhmic,
    /// u·ω.
    Helicity,
    /// cos(u, ω).
    RelativeHelicity,
    /// u·b.
    CrossHelicity,
    /// j·b.
    CurrentHelicity,
    /// |u×ω|.
    Lamb,
    /// |j×b|.
    Lorentz,
    /// |u|.
    Speed,
    /// |b|.
    Field,
}

/// Every indicator with its name in the family grammar.
pub const INDICATORS: [(&str, Indicator); 15] = [
    ("vorticity", Indicator::Vorticity),
    ("enstrophy", Indicator::Enstrophy),
    ("current", Indicator::Current),
    ("q", Indicator::Q),
    ("strain", Indicator::Strain),
    ("dissipation_viscous", Indicator::DissipationViscous),
    ("dissipation_ohmic", Indicator::DissipationOhmic),
    ("helicity", Indicator::Helicity),
    ("relative_helicity", Indicator::RelativeHelicity),
    ("cross_helicity", Indicator::CrossHelicity),
    ("current_helicity", Indicator::CurrentHelicity),
    ("lamb", Indicator::Lamb),
    ("lorentz", Indicator::Lorentz),
    ("speed", Indicator::Speed),
    ("field", Indicator::Field),
];

impl Indicator {
    /// Name in the family grammar.
    pub fn name(self) -> &'static str {
        INDICATORS.iter().find(|(_, i)| *i == self).map_or("", |(n, _)| n)
    }

    /// Which fields it is made of.
    pub fn needs(self) -> Fields {
        use Indicator as I;
        match self {
            I::Vorticity
            | I::Enstrophy
            | I::Q
            | I::Strain
            | I::DissipationViscous
            | I::Helicity
            | I::RelativeHelicity
            | I::Lamb
            | I::Speed => Fields { velocity: true, magnetic: false },
            I::Current | I::DissipationOhmic | I::CurrentHelicity | I::Lorentz | I::Field => Fields { velocity: false, magnetic: true },
            I::CrossHelicity => Fields { velocity: true, magnetic: true },
        }
    }

    /// Whether it is made of S:S.
    pub fn needs_strain(self) -> bool {
        matches!(self, Indicator::Q | Indicator::Strain | Indicator::DissipationViscous)
    }

    /// Whether it depends on the frame in which velocity is measured.
    pub fn depends_on_frame(self) -> bool {
        use Indicator as I;
        matches!(self, I::Helicity | I::RelativeHelicity | I::CrossHelicity | I::Lamb | I::Speed)
    }
}

/// Where a level comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Level {
    /// In the indicator's own unit.
    Absolute(f64),
    /// Times the root of the box mean of the squared indicator.
    Rms(f64),
    /// Times the box mean of the indicator.
    Mean(f64),
    /// The level beyond which this fraction of the box lies.
    Volume(f64),
}

impl fmt::Display for Level {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Level::Absolute(v) => write!(f, "{v}"),
            Level::Rms(v) => write!(f, "{v} rms"),
            Level::Mean(v) => write!(f, "{v} mean"),
            Level::Volume(v) => write!(f, "{v} volume"),
        }
    }
}

/// Which side of the level belongs to the objects.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// Cells above the level.
    Above,
    /// Cells below the level.
    Below,
}

/// A family of objects: an indicator and a level.
#[derive(Debug, Clone, PartialEq)]
pub struct Family {
    /// Name, the `family` column.
    pub name: String,
    /// What is thresholded.
    pub indicator: Indicator,
    /// Which side of the level is inside.
    pub side: Side,
    /// The level.
    pub level: Level,
}

impl fmt::Display for Family {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let sign = if self.side == Side::Above { ">" } else { "<" };
        write!(f, "{}: {} {sign} {}", self.name, self.indicator.name(), self.level)
    }
}

impl Family {
    /// The families of a request that names none: intense vorticity, and intense current where there is a magnetic field.
    pub fn defaults(fields: Fields) -> Vec<Family> {
        let of = |indicator: Indicator| Family { name: indicator.name().to_string(), indicator, side: Side::Above, level: Level::Rms(3.0) };
        let mut out = Vec::new();
        if fields.velocity {
            out.push(of(Indicator::Vorticity));
        }
        if fields.magnetic {
            out.push(of(Indicator::Current));
        }
        out
    }

    /// Reads `NAME: INDICATOR > LEVEL` (or `<`), where LEVEL is a number alone or a number and `rms`, `mean` or `volume`.
    ///
    /// # Errors
    /// `Usage`, naming the part that is wrong.
    pub fn parse(text: &str) -> Result<Family> {
        const FORM: &str = "\"NAME: INDICATOR > LEVEL\"";
        let wrong = |found: &str| {
            Error::usage("cannot read family")
                .item(format!("\"{text}\""))
                .expected(FORM)
                .found(found)
                .hint("for example \"vorticity: vorticity > 3 rms\"")
        };
        let (name, rest) = text.split_once(':').ok_or_else(|| wrong("no colon"))?;
        let name = name.trim();
        let usable = |c: char| c.is_ascii_alphanumeric() || c == '_' || c == '-';
        if name.is_empty() || !name.chars().all(usable) {
            return Err(wrong(&format!("the name \"{name}\"")).hint("letters, digits, _ and - make a family name"));
        }
        let above = rest.find('>');
        let below = rest.find('<');
        let (at, side) = match (above, below) {
            (Some(i), None) => (i, Side::Above),
            (None, Some(i)) => (i, Side::Below),
            (None, None) => return Err(wrong("neither > nor <")),
            (Some(_), Some(_)) => return Err(wrong("both > and <")),
        };
        let indicator_name = rest[..at].trim();
        let Some((_, indicator)) = INDICATORS.iter().find(|(n, _)| *n == indicator_name) else {
            let known: Vec<&str> = INDICATORS.iter().map(|(n, _)| *n).collect();
            return Err(Error::usage("cannot read family")
                .item(format!("\"{text}\""))
                .expected("an indicator of this version")
                .found(format!("\"{indicator_name}\""))
                .hint(format!("one of {}", known.join(", "))));
        };
        let words: Vec<&str> = rest[at + 1..].split_whitespace().collect();
        let level = match words.as_slice() {
            [] => return Err(wrong("no level")),
            [number] | [number, _] => {
                let value: f64 = number.parse().map_err(|_| wrong(&format!("the level \"{number}\"")))?;
                if !value.is_finite() {
                    return Err(wrong(&format!("the level \"{number}\"")).hint("a level is a finite number"));
                }
                match words.get(1) {
                    None => Level::Absolute(value),
                    Some(&"rms") => Level::Rms(value),
                    Some(&"mean") => Level::Mean(value),
                    Some(&"volume") if value > 0.0 && value < 1.0 => Level::Volume(value),
                    Some(&"volume") => {
                        return Err(wrong(&format!("the volume fraction {number}")).hint("a volume fraction lies between 0 and 1"));
                    }
                    Some(word) => return Err(wrong(&format!("the word \"{word}\"")).hint("this version knows rms, mean and volume")),
                }
            }
            _ => {
                return Err(wrong(&format!("the level \"{}\"", words.join(" ")))
                    .hint("this version knows one level: a number, or a number with rms, mean or volume"));
            }
        };
        Ok(Family { name: name.to_string(), indicator: *indicator, side, level })
    }
}

/// In which frame velocity is measured.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Frame {
    /// The frame of the box mean: its mean velocity is subtracted.
    Box,
    /// As stored.
    Stored,
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

/// Everything that changes results.
#[derive(Debug, Clone, PartialEq)]
pub struct Request {
    /// Families; empty means [`Family::defaults`].
    pub families: Vec<Family>,
    /// Neighbourhood of a cell. Default 26.
    pub connectivity: Connectivity,
    /// Smaller objects are counted but not listed. Default 27 cells.
    pub min_cells: u64,
    /// Larger objects get additive columns only. Default 2^22 cells: the surface of an object takes some 200 bytes of memory a cell.
    pub max_object_cells: u64,
    /// Kinematic viscosity ν, where known.
    pub viscosity: Option<f64>,
    /// Magnetic diffusivity η, where known.
    pub resistivity: Option<f64>,
    /// Frame of the velocity. Default the box mean.
    pub frame: Frame,
    /// Meshes. Default together.
    pub surfaces: Surfaces,
    /// Objects of fewer cells get no mesh. Default 0: every listed object.
    pub surface_min_cells: u64,
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
            frame: Frame::Box,
            surfaces: Surfaces::Together,
            surface_min_cells: 0,
        }
    }
}

impl Request {
    /// The families for a snapshot that carries these fields.
    ///
    /// # Errors
    /// `Usage` when a family needs a field or a coefficient that is not there, or two families share a name.
    pub fn families_for(&self, fields: Fields) -> Result<Vec<Family>> {
        let families = if self.families.is_empty() { Family::defaults(fields) } else { self.families.clone() };
        for (i, family) in families.iter().enumerate() {
            let lacks = |what: &str, hint: &str| {
                Err(Error::usage("cannot detect family").item(format!("\"{family}\"")).expected(what).found("none").hint(hint))
            };
            let needs = family.indicator.needs();
            if needs.velocity && !fields.velocity {
                return lacks("a velocity field", "name its datasets with --velocity U,V,W");
            }
            if needs.magnetic && !fields.magnetic {
                return lacks("a magnetic field", "name its datasets with --magnetic BX,BY,BZ");
            }
            if family.indicator == Indicator::DissipationViscous && self.viscosity.is_none() {
                return lacks("the viscosity", "give --viscosity, or threshold strain instead");
            }
            if family.indicator == Indicator::DissipationOhmic && self.resistivity.is_none() {
                return lacks("the resistivity", "give --resistivity, or threshold current instead");
            }
            if families[..i].iter().any(|f| f.name == family.name) {
                return Err(Error::usage("cannot use family")
                    .item(format!("\"{family}\""))
                    .expected("a name of its own")
                    .found(format!("\"{}\" twice", family.name))
                    .hint("give every family another name before the colon"));
            }
        }
        Ok(families)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn grammar_round_trips() {
        for text in ["vorticity: vorticity > 3 rms", "cores: q < -2.5", "worms: vorticity > 0.01 volume", "b: field > 2 mean"] {
            assert_eq!(Family::parse(text).unwrap().to_string(), text);
        }
    }

    #[test]
    fn every_fault_is_named() {
        let cases = [
            ("vorticity > 3 rms", "found no colon"),
            (": vorticity > 3", "found the name \"\""),
            ("a/b: vorticity > 3", "found the name \"a/b\""),
            ("a: vorticity 3", "found neither > nor <"),
            ("a: vorticity > < 3", "found both > and <"),
            ("a: vortex > 3", "expected an indicator of this version, found \"vortex\""),
            ("a: vorticity >", "found no level"),
            ("a: vorticity > x rms", "found the level \"x\""),
            ("a: vorticity > nan", "found the level \"nan\""),
            ("a: vorticity > 3 sigma", "found the word \"sigma\""),
            ("a: vorticity > 2 volume", "found the volume fraction 2"),
            ("a: vorticity > 3 rms down to 2 rms", "found the level \"3 rms down to 2 rms\""),
        ];
        for (text, part) in cases {
            let message = Family::parse(text).unwrap_err().to_string();
            assert!(message.contains(part), "{text}: {message}");
        }
    }

    #[test]
    fn families_are_checked_against_the_fields() {
        let velocity = Fields { velocity: true, magnetic: false };
        let mut r = Request { families: vec![Family::parse("c: current > 3 rms").unwrap()], ..Request::default() };
        assert!(r.families_for(velocity).unwrap_err().to_string().contains("expected a magnetic field, found none"));
        let twice = Family::parse("a: vorticity > 3 rms").unwrap();
        r.families = vec![twice.clone(), twice];
        assert!(r.families_for(velocity).unwrap_err().to_string().contains("\"a\" twice"));
        assert_eq!(Request::default().families_for(velocity).unwrap()[0].to_string(), "vorticity: vorticity > 3 rms");
    }
}
