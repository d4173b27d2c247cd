//! The catalogue as comma-separated values (RFC 4180): a header of column names, one line a row, missing values empty.

use std::fmt::Write;

use crate::base::par;
use crate::model::columns::{Row, Value};
use crate::model::schema::Schema;

/// The header line.
pub fn header(schema: &Schema) -> String {
    let names: Vec<String> = schema.columns().into_iter().map(|c| c.name).collect();
    names.join(",") + "\n"
}

/// The lines of many rows, formatted in parallel.
pub fn lines(rows: &[Row]) -> String {
    /// Rows a work item formats.
    const ROWS: usize = 128;
    let parts: Vec<&[Row]> = rows.chunks(ROWS).collect();
    let texts = par::map(&parts, |_, part| {
        let mut out = String::new();
        part.iter().for_each(|row| push_row(&mut out, row));
        out
    });
    texts.concat()
}

/// Appends one line.
pub fn push_row(out: &mut String, row: &Row) {
    for (i, value) in row.values().iter().enumerate() {
        if i > 0 {
            out.push(',');
        }
        push_value(out, value);
    }
    out.push('\n');
}

fn push_value(out: &mut String, value: &Value) {
    match value {
        Value::Missing => {}
        Value::Text(t) if t.contains([',', '"', '\n', '\r']) => {
            out.push('"');
            out.push_str(&t.replace('"', "\"\""));
            out.push('"');
        }
        Value::Text(t) => out.push_str(t),
        Value::Integer(v) => push(out, format_args!("{v}")),
        Value::Number(v) => push_number(out, *v),
        Value::Counts(counts) => push_counts(out, counts),
    }
}

/// Counts separated by spaces.
pub fn push_counts(out: &mut String, counts: &[u64]) {
    for (i, n) in counts.iter().enumerate() {
        if i > 0 {
            out.push(' ');
        }
        push(out, format_args!("{n}"));
    }
}

/// The shortest text that reads back as the same number.
pub fn push_number(out: &mut String, v: f64) {
    let magnitude = v.abs();
    if magnitude == 0.0 || (1e-4..1e15).contains(&magnitude) {
        push(out, format_args!("{v}"));
    } else {
        push(out, format_args!("{v:e}"));
    }
}

fn push(out: &mut String, text: std::fmt::Arguments<'_>) {
    // Writing into a String cannot fail.
    let _ = out.write_fmt(text);
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::columns::Col;

    #[test]
    fn values_are_quoted_counted_and_left_out() {
        let mut row = Row::default();
        row.set(Col::Snapshot, Value::Text("run 3, \"late\"".into()));
        row.number(Col::Time, Some(1.5e-7));
        row.set(Col::Cells, Value::Integer(42));
        row.set(Col::HistogramUB, Value::Counts(vec![1, 0, 2]));
        let mut out = String::new();
        push_row(&mut out, &row);
        assert!(out.starts_with("\"run 3, \"\"late\"\"\",1.5e-7,,,,,42,,"), "{out}");
        assert!(out.contains(",1 0 2,"));
        assert!(out.ends_with('\n'));
        assert_eq!(header(&Schema::default()).matches(',').count() + 1, row.values().len());
    }

    #[test]
    fn numbers_read_back_exactly() {
        for v in [0.1, -0.0, 1.0 / 3.0, 1e-300, 6.02e23, -12345.678, 2.5e-5] {
            let mut s = String::new();
            push_number(&mut s, v);
            assert_eq!(s.parse::<f64>().unwrap(), v, "{s}");
        }
    }
}
