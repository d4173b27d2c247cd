//! The columns of one catalogue: those of the registry, and three for every companion that was asked for.

pub use crate::model::columns::Kind;

use crate::model::columns::COLUMNS;
use crate::model::indicator::Indicator;

/// A column as tables and dictionaries need it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ColumnInfo {
    /// Name in the header.
    pub name: String,
    /// Unit as written in the dictionary.
    pub unit: String,
    /// What it is.
    pub definition: String,
    /// Where the formula comes from; may be empty.
    pub source: String,
    /// Which part of the program fills it.
    pub stage: &'static str,
    /// What its values are.
    pub kind: Kind,
}

/// Which companions a catalogue has.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Schema {
    /// In the order of their columns.
    pub companions: Vec<Indicator>,
}

impl Schema {
    /// All columns in catalogue order.
    pub fn columns(&self) -> Vec<ColumnInfo> {
        let fixed = COLUMNS.iter().map(|c| ColumnInfo {
            name: c.name.to_string(),
            unit: c.unit.text().to_string(),
            definition: c.definition.to_string(),
            source: c.source.to_string(),
            stage: c.stage.text(),
            kind: c.kind(),
        });
        fixed.chain(self.companions.iter().flat_map(|i| companion_columns(*i))).collect()
    }
}

/// The three columns of a companion.
pub fn companion_columns(indicator: Indicator) -> [ColumnInfo; 3] {
    let info = indicator.info();
    let of = |end: &str, what: &str| ColumnInfo {
        name: format!("{}_{end}", info.name),
        unit: info.unit.to_string(),
        definition: format!("{what} over the object of: {}", info.definition),
        source: info.source.to_string(),
        stage: "tallies",
        kind: Kind::Number,
    };
    [of("mean", "Volume mean"), of("min", "Smallest value"), of("max", "Largest value")]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::indicator::INDICATORS;

    #[test]
    fn names_are_unique_with_every_companion() {
        let schema = Schema { companions: INDICATORS.iter().map(|i| i.indicator).collect() };
        let columns = schema.columns();
        for (i, c) in columns.iter().enumerate() {
            assert!(columns[..i].iter().all(|d| d.name != c.name), "{}", c.name);
        }
    }
}
