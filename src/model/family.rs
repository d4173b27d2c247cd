//! Families of objects: the grammar of indicator and level, `NAME: INDICATOR > LEVEL [down to LEVEL]`.

use std::fmt;

use crate::base::error::{Error, Result};
use crate::model::indicator::{INDICATORS, Indicator};
use crate::model::source::Fields;

/// Where a level comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Level {
    /// In the indicator's own unit.
    Absolute(f64),
    /// Times the root of the box mean of the squared indicator.
    Rms(f64),
    /// Times the root of the mean square over all snapshots of the run, each box counting once.
    RunRms(f64),
    /// Times the box mean of the indicator.
    Mean(f64),
    /// The level beyond which this fraction of the box lies.
    Volume(f64),
    /// This fraction of each object's own peak.
    Peak(f64),
}

impl Level {
    /// The number before the word.
    pub fn number(self) -> f64 {
        match self {
            Level::Absolute(v) | Level::Rms(v) | Level::RunRms(v) | Level::Mean(v) | Level::Volume(v) | Level::Peak(v) => v,
        }
    }

    /// The word behind the number.
    pub fn word(self) -> &'static str {
        match self {
            Level::Absolute(_) => "",
            Level::Rms(_) => "rms",
            Level::RunRms(_) => "run-rms",
            Level::Mean(_) => "mean",
            Level::Volume(_) => "volume",
            Level::Peak(_) => "peak",
        }
    }
}

impl fmt::Display for Level {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{} {}", self.number(), self.word())?;
        Ok(())
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
    /// The level; with `down_to`, the one an object must go beyond somewhere.
    pub level: Level,
    /// The weaker level that such objects are grown to.
    pub down_to: Option<Level>,
}

/// The multiple of the rms that peaks must exceed where a family says only `F peak`.
pub const PEAKS_BEYOND: f64 = 3.0;

/// How the cells of an object follow from levels.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Extent {
    /// Everything connected beyond one level.
    Single(Level),
    /// Everything connected beyond `outer` that goes beyond `inner` somewhere.
    Grown {
        /// The level to exceed.
        inner: Level,
        /// The level to grow to.
        outer: Level,
    },
    /// Grown from every peak beyond `inner` down to a fraction of that peak, touching objects split between their peaks.
    FromPeaks {
        /// The level a peak must exceed.
        inner: Level,
        /// Fraction of the peak.
        fraction: f64,
    },
}

impl fmt::Display for Family {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let sign = if self.side == Side::Above { ">" } else { "<" };
        let level = |l: &Level| l.to_string().trim_end().to_string();
        write!(f, "{}: {} {sign} {}", self.name, self.indicator.name(), level(&self.level))?;
        match &self.down_to {
            Some(outer) => write!(f, " down to {}", level(outer)),
            None => Ok(()),
        }
    }
}

impl Family {
    /// The families of a request that names none: intense vorticity, and intense current where there is a magnetic field.
    pub fn defaults(fields: Fields) -> Vec<Family> {
        let of = |indicator: Indicator| Family {
            name: indicator.name().to_string(),
            indicator,
            side: Side::Above,
            level: Level::Rms(3.0),
            down_to: None,
        };
        let mut out = Vec::new();
        if fields.velocity {
            out.push(of(Indicator::Vorticity));
        }
        if fields.magnetic {
            out.push(of(Indicator::Current));
        }
        out
    }

    /// How objects follow from the levels.
    pub fn extent(&self) -> Extent {
        match (self.level, self.down_to) {
            (Level::Peak(fraction), _) => {
                let sign = if self.side == Side::Above { 1.0 } else { -1.0 };
                Extent::FromPeaks { inner: Level::Rms(sign * PEAKS_BEYOND), fraction }
            }
            (inner, Some(Level::Peak(fraction))) => Extent::FromPeaks { inner, fraction },
            (inner, Some(outer)) => Extent::Grown { inner, outer },
            (level, None) => Extent::Single(level),
        }
    }

    /// Every level whose number must be settled before detection.
    pub fn levels(&self) -> Vec<Level> {
        match self.extent() {
            Extent::Single(level) | Extent::FromPeaks { inner: level, .. } => vec![level],
            Extent::Grown { inner, outer } => vec![inner, outer],
        }
    }

    /// Reads `NAME: INDICATOR > LEVEL [down to LEVEL]` (or `<`), where LEVEL is a number alone or a number and `rms`,
    /// `run-rms`, `mean`, `volume` or `peak`.
    ///
    /// # Errors
    /// `Usage`, naming the part that is wrong.
    pub fn parse(text: &str) -> Result<Family> {
        let wrong = |found: &str| wrong(text, found);
        let (name, rest) = text.split_once(':').ok_or_else(|| wrong("no colon"))?;
        let name = name.trim();
        let usable = |c: char| c.is_ascii_alphanumeric() || c == '_' || c == '-';
        if name.is_empty() || !name.chars().all(usable) {
            return Err(wrong(&format!("the name \"{name}\"")).hint("letters, digits, _ and - make a family name"));
        }
        let (at, side) = match (rest.find('>'), rest.find('<')) {
            (Some(i), None) => (i, Side::Above),
            (None, Some(i)) => (i, Side::Below),
            (None, None) => return Err(wrong("neither > nor <")),
            (Some(_), Some(_)) => return Err(wrong("both > and <")),
        };
        let indicator_name = rest[..at].trim();
        let Some(indicator) = Indicator::named(indicator_name) else {
            let known: Vec<&str> = INDICATORS.iter().map(|i| i.name).collect();
            return Err(Error::usage("cannot read family")
                .item(format!("\"{text}\""))
                .expected("an indicator of this version")
                .found(format!("\"{indicator_name}\""))
                .hint(format!("one of {}", known.join(", "))));
        };
        let words: Vec<&str> = rest[at + 1..].split_whitespace().collect();
        let (inner, outer) = match words.windows(2).position(|w| w == ["down", "to"]) {
            Some(i) => (&words[..i], Some(&words[i + 2..])),
            None => (&words[..], None),
        };
        let family = Family {
            name: name.to_string(),
            indicator,
            side,
            level: level(text, inner)?,
            down_to: outer.map(|w| level(text, w)).transpose()?,
        };
        family.check_order().map_err(|(found, hint)| wrong(&found).hint(hint))?;
        Ok(family)
    }

    /// Whether the second level is weaker than the first, as far as that can be told from the words.
    fn check_order(&self) -> std::result::Result<(), (String, &'static str)> {
        let Some(outer) = self.down_to else { return Ok(()) };
        if matches!(self.level, Level::Peak(_)) {
            return Err((
                format!("{} before \"down to\"", self.level),
                "a peak fraction stands behind \"down to\", for example 3 rms down to 0.5 peak",
            ));
        }
        if self.level.word() != outer.word() {
            return Ok(());
        }
        let (a, b) = (self.level.number(), outer.number());
        let weaker = match (self.level, self.side) {
            // A larger fraction of the box lies beyond a weaker level.
            (Level::Volume(_), _) | (_, Side::Below) => b > a,
            (_, Side::Above) => b < a,
        };
        let text = |l: Level| l.to_string().trim_end().to_string();
        if weaker {
            Ok(())
        } else {
            Err((
                format!("{} down to {}", text(self.level), text(outer)),
                "the level behind \"down to\" must take in more cells than the first",
            ))
        }
    }
}

fn wrong(text: &str, found: &str) -> Error {
    Error::usage("cannot read family")
        .item(format!("\"{text}\""))
        .expected("\"NAME: INDICATOR > LEVEL [down to LEVEL]\"")
        .found(found)
        .hint("for example \"vorticity: vorticity > 3 rms\"")
}

fn level(text: &str, words: &[&str]) -> Result<Level> {
    const WORDS: &str = "a level is a number, alone or with rms, run-rms, mean, volume or peak";
    let (number, word) = match words {
        [] => return Err(wrong(text, "no level")),
        ["percolation"] => {
            return Err(wrong(text, "the level \"percolation\"").hint("this version does not settle percolation levels; give a number"));
        }
        [number] => (number, None),
        [number, word] => (number, Some(*word)),
        _ => return Err(wrong(text, &format!("the level \"{}\"", words.join(" "))).hint(WORDS)),
    };
    let value: f64 = number.parse().map_err(|_| wrong(text, &format!("the level \"{number}\"")).hint(WORDS))?;
    if !value.is_finite() {
        return Err(wrong(text, &format!("the level \"{number}\"")).hint("a level is a finite number"));
    }
    let fraction = |name: &str| {
        if value > 0.0 && value < 1.0 {
            Ok(value)
        } else {
            Err(wrong(text, &format!("the {name} fraction {number}")).hint(format!("a {name} fraction lies between 0 and 1")))
        }
    };
    match word {
        None => Ok(Level::Absolute(value)),
        Some("rms") => Ok(Level::Rms(value)),
        Some("run-rms") => Ok(Level::RunRms(value)),
        Some("mean") => Ok(Level::Mean(value)),
        Some("volume") => fraction("volume").map(Level::Volume),
        Some("peak") => fraction("peak").map(Level::Peak),
        Some(word) => Err(wrong(text, &format!("the word \"{word}\"")).hint(WORDS)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn grammar_round_trips() {
        for text in [
            "vorticity: vorticity > 3 rms",
            "cores: q < -2.5",
            "worms: vorticity > 0.01 volume",
            "b: field > 2 mean",
            "sheets: current > 4 rms down to 2 rms",
            "lows: lambda2 < -3 run-rms down to -1 run-rms",
            "grown: current > 3 rms down to 0.5 peak",
            "tops: current > 0.5 peak",
            "v: vorticity > 0.01 volume down to 0.05 volume",
        ] {
            assert_eq!(Family::parse(text).unwrap().to_string(), text);
        }
    }

    #[test]
    fn extents_follow_the_words() {
        let of = |text: &str| Family::parse(text).unwrap().extent();
        assert_eq!(of("a: q > 0.5 peak"), Extent::FromPeaks { inner: Level::Rms(3.0), fraction: 0.5 });
        assert_eq!(of("a: lambda2 < 0.5 peak"), Extent::FromPeaks { inner: Level::Rms(-3.0), fraction: 0.5 });
        assert_eq!(of("a: q > 2 down to 0.5 peak"), Extent::FromPeaks { inner: Level::Absolute(2.0), fraction: 0.5 });
        assert_eq!(of("a: q > 2 down to 1 rms"), Extent::Grown { inner: Level::Absolute(2.0), outer: Level::Rms(1.0) });
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
            ("a: vorticity > 1.5 peak", "found the peak fraction 1.5"),
            ("a: vorticity > 3 rms and more", "found the level \"3 rms and more\""),
            ("a: vorticity > 3 rms down to", "found no level"),
            ("a: vorticity > 3 rms down to 4 rms", "found 3 rms down to 4 rms"),
            ("a: lambda2 < -3 down to -4", "found -3 down to -4"),
            ("a: vorticity > 0.1 volume down to 0.01 volume", "found 0.1 volume down to 0.01 volume"),
            ("a: vorticity > 0.5 peak down to 1", "found 0.5 peak before \"down to\""),
            ("a: vorticity > percolation", "found the level \"percolation\""),
        ];
        for (text, part) in cases {
            let message = Family::parse(text).unwrap_err().to_string();
            assert!(message.contains(part), "{text}: {message}");
        }
    }
}
