//! The catalogue as JSON lines: one object a row with the column names as keys, missing values null. Rows read back exactly.

use std::borrow::Cow;
use std::fmt;

use serde::de::{DeserializeSeed, Deserializer, Error as _, MapAccess, Visitor};

use crate::base::error::{Error, Result};
use crate::export::digits::{push_counts, push_integer, push_number};
use crate::model::columns::{Cell, Kind, Row, Value};
use crate::model::schema::{ColumnInfo, Schema};

/// The lines of one schema, to be written and read.
pub struct Lines {
    columns: Vec<ColumnInfo>,
    /// What stands before the value of each column.
    keys: Vec<String>,
}

impl Lines {
    /// Lines of these columns.
    pub fn new(schema: &Schema) -> Lines {
        let columns = schema.columns();
        // Column names need no escapes.
        let key = |(i, c): (usize, &ColumnInfo)| format!("{}\"{}\":", if i == 0 { '{' } else { ',' }, c.name);
        Lines { keys: columns.iter().enumerate().map(key).collect(), columns }
    }

    /// The lines of rows.
    pub fn text(&self, rows: &[Row]) -> String {
        let mut out = String::new();
        rows.iter().for_each(|row| self.push_row(&mut out, row));
        out
    }

    fn push_row(&self, out: &mut String, row: &Row) {
        for (key, value) in self.keys.iter().zip(row.iter()) {
            out.push_str(key);
            match value {
                Cell::Missing => out.push_str("null"),
                Cell::Text(t) => push_text(out, t),
                Cell::Integer(v) => push_integer(out, v),
                Cell::Number(v) => push_number(out, v),
                Cell::Counts(counts) => {
                    out.push('"');
                    push_counts(out, counts);
                    out.push('"');
                }
            }
        }
        out.push_str("}\n");
    }

    /// Reads rows back; the first line is number `first` of its file, counted from 0.
    ///
    /// # Errors
    /// `Input`, without the file, when a line is not a row of these columns.
    pub fn parse(&self, text: &str, first: usize) -> Result<Vec<Row>> {
        let mut scratch = Scratch::default();
        let row = |(k, line): (usize, &str)| {
            if self.as_written(line, &mut scratch).is_some() {
                // A copy takes no more room than it needs.
                return Ok(scratch.row.clone());
            }
            self.any_json(line).map_err(|e| {
                Error::input("cannot read a row of a catalogue")
                    .item(format!("line {}", first + k + 1))
                    .expected("a JSON object with the columns of columns.json in their order")
                    .found(e.to_string())
                    .hint("the file was changed or cut: run that snapshot again")
            })
        };
        text.lines().enumerate().map(row).collect()
    }

    /// Reads a line that is written as [`Lines::push_row`] does, without spaces or escapes.
    fn as_written(&self, line: &str, scratch: &mut Scratch) -> Option<()> {
        let Scratch { row, counts } = scratch;
        row.clear();
        let mut rest = line;
        for (key, column) in self.keys.iter().zip(&self.columns) {
            rest = rest.strip_prefix(key.as_str())?;
            if let Some(behind) = rest.strip_prefix("null") {
                rest = behind;
                row.push(Value::<String>::Missing);
                continue;
            }
            let value;
            (value, rest) = match column.kind {
                Kind::Text | Kind::Counts => plain_text(rest)?,
                Kind::Integer | Kind::Number => rest.split_at(number_length(rest.as_bytes())?),
            };
            match column.kind {
                Kind::Text => row.push(Value::<&str>::Text(value)),
                Kind::Counts => {
                    read_counts(value, counts)?;
                    row.push(Value::<&str, &[u64]>::Counts(counts));
                }
                Kind::Integer => row.push(Value::<String>::Integer(value.parse().ok()?)),
                Kind::Number => row.push(Value::<String>::Number(value.parse().ok().filter(|v: &f64| v.is_finite())?)),
            }
        }
        (rest == "}").then_some(())
    }

    /// Reads a line as JSON, however it is written.
    fn any_json(&self, line: &str) -> serde_json::Result<Row> {
        let mut reader = serde_json::Deserializer::from_str(line);
        let row = RowSeed(&self.columns).deserialize(&mut reader)?;
        reader.end().map(|()| row)
    }
}

#[derive(Default)]
struct Scratch {
    row: Row,
    counts: Vec<u64>,
}

fn push_text(out: &mut String, text: &str) {
    if text.bytes().all(|b| b >= b' ' && b != b'"' && b != b'\\') {
        out.push('"');
        out.push_str(text);
        out.push('"');
    } else {
        out.push_str(&serde_json::Value::from(text).to_string());
    }
}

/// A string without escapes at the beginning of a text, and what follows it.
fn plain_text(text: &str) -> Option<(&str, &str)> {
    let (value, rest) = text.strip_prefix('"')?.split_once('"')?;
    value.bytes().all(|b| b >= b' ' && b != b'\\').then_some((value, rest))
}

/// Length of the JSON number at the beginning of a text.
fn number_length(text: &[u8]) -> Option<usize> {
    let digits = |from: usize| text[from..].iter().take_while(|b| b.is_ascii_digit()).count();
    let mut at = usize::from(text.first() == Some(&b'-'));
    let whole = digits(at);
    if whole == 0 || (whole > 1 && text[at] == b'0') {
        return None;
    }
    at += whole;
    if text.get(at) == Some(&b'.') {
        let fraction = digits(at + 1);
        if fraction == 0 {
            return None;
        }
        at += 1 + fraction;
    }
    if matches!(text.get(at), Some(b'e' | b'E')) {
        at += 1 + usize::from(matches!(text.get(at + 1), Some(b'-' | b'+')));
        let power = digits(at);
        if power == 0 {
            return None;
        }
        at += power;
    }
    Some(at)
}

fn read_counts(text: &str, counts: &mut Vec<u64>) -> Option<()> {
    counts.clear();
    for n in text.split(' ').filter(|n| !n.is_empty()) {
        counts.push(n.parse().ok()?);
    }
    Some(())
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
        let mut row = Row::empty();
        for column in self.0 {
            match map.next_key::<Cow<'de, str>>()? {
                Some(key) if key == column.name => row.push(map.next_value_seed(ValueSeed(column.kind))?),
                Some(key) => return Err(A::Error::custom(format!("{key} in the place of {}", column.name))),
                None => return Err(A::Error::custom(format!("no {}", column.name))),
            }
        }
        match map.next_key::<Cow<'de, str>>()? {
            Some(key) => Err(A::Error::custom(format!("the further key {key}"))),
            None => Ok(row),
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
                let mut counts = Vec::new();
                let read = read_counts(v, &mut counts).map(|()| Value::Counts(counts));
                read.ok_or_else(|| E::invalid_value(serde::de::Unexpected::Str(v), &self))
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
        let line = Lines::new(&schema()).text(&[row([1.5e-7, -0.0, 3.0, 1e300], "say \"3\"\n".into(), 42, vec![1, 0, 2])]);
        let value: serde_json::Value = serde_json::from_str(&line).unwrap();
        assert_eq!(value["snapshot"], "say \"3\"\n");
        assert_eq!((&value["time"], &value["cells"], &value["wraps"]), (&1.5e-7.into(), &42.into(), &"".into()));
        assert_eq!((&value["histogram_u_b"], &value["level"]), (&"1 0 2".into(), &serde_json::Value::Null));
        assert_eq!(line.matches('\n').count(), 1);
    }

    #[test]
    fn foreign_lines_are_refused() {
        let lines = Lines::new(&schema());
        let good = lines.text(&[row([1.0; 4], "a".into(), 1, vec![])]);
        for bad in [
            good.replace("\"time\":", "\"tide\":"),
            good.replace("\"cells\":1", "\"cells\":1.5"),
            good.replace("}", ",\"more\":1}"),
            good[..good.len() / 2].to_string(),
            good.replace("\"a\"", "3"),
            good.replace("q_max", "q_most"),
        ] {
            assert!(bad != good);
            let message = lines.parse(&(good.clone() + &bad), 8).unwrap_err().to_string();
            assert!(message.contains("cannot read a row of a catalogue: line 10"), "{message}");
        }
    }

    /// Spaces, escapes and other ways to write a number are JSON too.
    #[test]
    fn other_writing_of_the_same_is_read_as_well() {
        let lines = Lines::new(&schema());
        let rows = vec![row([0.5, -0.0, 3.0, 1e300], "a".into(), 42, vec![1, 0, 2])];
        let good = lines.text(&rows);
        let other = [("\"a\"", "\"\\u0061\""), (":0.5", ":5.0e-1"), (",\"cells\":", ", \"cells\" : "), (":1e300", ":1.0E+300")];
        for (from, to) in other {
            let changed = good.replacen(from, to, 1);
            assert!(changed != good);
            assert_eq!(lines.parse(&changed, 0).unwrap(), rows, "{changed}");
        }
        for bad in ["01", "1.", ".5", "+1", "1e", "1e999", "inf", "NaN", "-", "0x1"] {
            assert!(lines.parse(&good.replace(":0.5", &format!(":{bad}")), 0).is_err(), "{bad}");
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
            let lines = Lines::new(&schema());
            let text = lines.text(&rows);
            let back = lines.parse(&text, 0).unwrap();
            let bits = |rows: &[Row]| -> Vec<Option<u64>> {
                rows[0].iter().map(|v| if let Cell::Number(v) = v { Some(v.to_bits()) } else { None }).collect()
            };
            prop_assert_eq!(bits(&back), bits(&rows));
            prop_assert_eq!(&back, &rows);
            // The short way of reading and the general one agree.
            let general = vec![lines.any_json(text.trim_end_matches('\n')).unwrap()];
            prop_assert_eq!(bits(&general), bits(&rows));
            prop_assert_eq!(general, rows);
        }
    }
}
