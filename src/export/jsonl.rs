//! The catalogue as JSON lines: one object a row with the column names as keys, missing values null. Rows read back exactly.

use std::borrow::Cow;
use std::fmt::{self, Write};

use serde::de::{DeserializeSeed, Deserializer, Error as _, MapAccess, Visitor};

use crate::base::error::{Error, Result};
use crate::base::par;
use crate::export::csv::{push_counts, push_number};
use crate::model::columns::{Row, Value};
use crate::model::schema::{ColumnInfo, Kind, Schema};

/// Rows a work item formats or reads.
const ROWS: usize = 128;

/// The lines of many rows, formatted in parallel.
pub fn lines(schema: &Schema, rows: &[Row]) -> String {
    let columns = schema.columns();
    let parts: Vec<&[Row]> = rows.chunks(ROWS).collect();
    let texts = par::map(&parts, |_, part| {
        let mut out = String::new();
        part.iter().for_each(|row| push_row(&mut out, &columns, row));
        out
    });
    texts.concat()
}

fn push_row(out: &mut String, columns: &[ColumnInfo], row: &Row) {
    out.push('{');
    for (i, (column, value)) in columns.iter().zip(row.values()).enumerate() {
        if i > 0 {
            out.push(',');
        }
        // Column names need no escapes; writing into a String cannot fail.
        let _ = write!(out, "\"{}\":", column.name);
        match value {
            Value::Missing => out.push_str("null"),
            Value::Text(t) => push_text(out, t),
            Value::Integer(v) => {
                let _ = write!(out, "{v}");
            }
            Value::Number(v) => push_number(out, *v),
            Value::Counts(counts) => {
                out.push('"');
                push_counts(out, counts);
                out.push('"');
            }
        }
    }
    out.push_str("}\n");
}

fn push_text(out: &mut String, text: &str) {
    out.push_str(&serde_json::Value::from(text).to_string());
}

/// Reads rows back, in parallel.
///
/// # Errors
/// `Input`, without the file, when a line is not a row of these columns.
pub fn parse(schema: &Schema, text: &str) -> Result<Vec<Row>> {
    let columns = schema.columns();
    let lines: Vec<&str> = text.lines().collect();
    let parts: Vec<&[&str]> = lines.chunks(ROWS).collect();
    let read = par::map(&parts, |part, lines| -> Result<Vec<Row>> {
        let row = |(k, line): (usize, &&str)| {
            let mut reader = serde_json::Deserializer::from_str(line);
            let row = RowSeed(&columns).deserialize(&mut reader).and_then(|row| reader.end().map(|()| row));
            row.map_err(|e| {
                Error::input("cannot read a row of a catalogue")
                    .item(format!("line {}", part * ROWS + k + 1))
                    .expected("a JSON object with the columns of columns.json in their order")
                    .found(e.to_string())
                    .hint("the file was changed or cut: run that snapshot again")
            })
        };
        lines.iter().enumerate().map(row).collect()
    });
    let mut rows = Vec::with_capacity(lines.len());
    for part in read {
        rows.extend(part?);
    }
    Ok(rows)
}

struct RowSeed<'a>(&'a [ColumnInfo]);

impl<'de> DeserializeSeed<'de> for RowSeed<'_> {
    type Value = Row;
    fn deserialize<D: Deserializer<'de>>(self, d: D) -> std::result::Result<Row, D::Error> {
        d.deserialize_map(self)
    }
}

impl<'de> Visitor<'de> for RowSeed<'_> {
    type Value = Row;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("an object")
    }

    fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> std::result::Result<Row, A::Error> {
        let mut values = Vec::with_capacity(self.0.len());
        for column in self.0 {
            match map.next_key::<Cow<'de, str>>()? {
                Some(key) if key == column.name => values.push(map.next_value_seed(ValueSeed(column.kind))?),
                Some(key) => return Err(A::Error::custom(format!("{key} in the place of {}", column.name))),
                None => return Err(A::Error::custom(format!("no {}", column.name))),
            }
        }
        match map.next_key::<Cow<'de, str>>()? {
            Some(key) => Err(A::Error::custom(format!("the further key {key}"))),
            None => Ok(Row::from_values(values)),
        }
    }
}

struct ValueSeed(Kind);

impl<'de> DeserializeSeed<'de> for ValueSeed {
    type Value = Value;
    fn deserialize<D: Deserializer<'de>>(self, d: D) -> std::result::Result<Value, D::Error> {
        d.deserialize_any(self)
    }
}

impl Visitor<'_> for ValueSeed {
    type Value = Value;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self.0 {
            Kind::Text => "text or null",
            Kind::Integer => "a whole number or null",
            Kind::Number => "a number or null",
            Kind::Counts => "counts separated by spaces or null",
        })
    }

    fn visit_unit<E: serde::de::Error>(self) -> std::result::Result<Value, E> {
        Ok(Value::Missing)
    }

    fn visit_str<E: serde::de::Error>(self, v: &str) -> std::result::Result<Value, E> {
        match self.0 {
            Kind::Text => Ok(Value::Text(v.to_string())),
            Kind::Counts => {
                let counts: std::result::Result<Vec<u64>, _> = v.split(' ').filter(|n| !n.is_empty()).map(str::parse).collect();
                counts.map(Value::Counts).map_err(|_| E::invalid_value(serde::de::Unexpected::Str(v), &self))
            }
            _ => Err(E::invalid_type(serde::de::Unexpected::Str(v), &self)),
        }
    }

    fn visit_u64<E: serde::de::Error>(self, v: u64) -> std::result::Result<Value, E> {
        match i64::try_from(v) {
            Ok(v) => self.visit_i64(v),
            // A whole number so large was written from a float.
            Err(_) => self.visit_f64(v as f64),
        }
    }

    fn visit_i64<E: serde::de::Error>(self, v: i64) -> std::result::Result<Value, E> {
        match self.0 {
            Kind::Integer => Ok(Value::Integer(v)),
            // Below 1e15 all whole numbers are exact.
            Kind::Number => Ok(Value::Number(v as f64)),
            _ => Err(E::invalid_type(serde::de::Unexpected::Signed(v), &self)),
        }
    }

    fn visit_f64<E: serde::de::Error>(self, v: f64) -> std::result::Result<Value, E> {
        match self.0 {
            Kind::Number => Ok(Value::Number(v)),
            _ => Err(E::invalid_type(serde::de::Unexpected::Float(v), &self)),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::columns::Col;
    use crate::model::indicator::Indicator;
    use proptest::prelude::*;

    fn schema() -> Schema {
        Schema { companions: vec![Indicator::Q] }
    }

    fn row(numbers: [f64; 4], text: String, cells: i64, counts: Vec<u64>) -> Row {
        let mut row = Row::default();
        row.set(Col::Snapshot, Value::Text(text));
        row.number(Col::Time, Some(numbers[0]));
        row.set(Col::Cells, Value::Integer(cells));
        row.set(Col::HistogramUB, Value::Counts(counts));
        row.set(Col::Wraps, Value::Text(String::new()));
        row.push_companion([Some(numbers[1]), Some(numbers[2]), Some(numbers[3])]);
        row
    }

    #[test]
    fn a_line_is_what_json_readers_expect() {
        let line = lines(&schema(), &[row([1.5e-7, -0.0, 3.0, 1e300], "say \"3\"\n".into(), 42, vec![1, 0, 2])]);
        let value: serde_json::Value = serde_json::from_str(&line).unwrap();
        assert_eq!(value["snapshot"], "say \"3\"\n");
        assert_eq!((&value["time"], &value["cells"], &value["wraps"]), (&1.5e-7.into(), &42.into(), &"".into()));
        assert_eq!((&value["histogram_u_b"], &value["level"]), (&"1 0 2".into(), &serde_json::Value::Null));
        assert_eq!(line.matches('\n').count(), 1);
    }

    #[test]
    fn foreign_lines_are_refused() {
        let good = lines(&schema(), &[row([1.0; 4], "a".into(), 1, vec![])]);
        for bad in [
            good.replace("\"time\":", "\"tide\":"),
            good.replace("\"cells\":1", "\"cells\":1.5"),
            good.replace("}", ",\"more\":1}"),
            good[..good.len() / 2].to_string(),
            good.replace("\"a\"", "3"),
            good.replace("q_max", "q_most"),
        ] {
            assert!(bad != good);
            let message = parse(&schema(), &bad).unwrap_err().to_string();
            assert!(message.contains("cannot read a row of a catalogue: line 1"), "{message}");
        }
    }

    proptest! {
        #[test]
        fn rows_read_back_to_the_last_bit(
            bits in any::<[u64; 4]>(),
            text in any::<String>(),
            cells in any::<i64>(),
            counts in proptest::collection::vec(any::<u64>(), 0..4),
        ) {
            let numbers = bits.map(f64::from_bits).map(|v| if v.is_finite() { v } else { 0.1 });
            let rows = vec![row(numbers, text, cells, counts)];
            let back = parse(&schema(), &lines(&schema(), &rows)).unwrap();
            let bits = |rows: &[Row]| -> Vec<Option<u64>> { rows[0].values().iter().map(|v| match v { Value::Number(v) => Some(v.to_bits()), _ => None }).collect() };
            prop_assert_eq!(bits(&back), bits(&rows));
            prop_assert_eq!(back, rows);
        }
    }
}
