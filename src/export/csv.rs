//! The catalogue as comma-separated values (RFC 4180): a header of column names, one line a row, missing values empty.

use crate::export::digits::{push_counts, push_integer, push_number};
use crate::model::columns::{Cell, Row};
use crate::model::schema::Schema;

/// The header line.
pub fn header(schema: &Schema) -> String {
    let names: Vec<String> = schema.columns().into_iter().map(|c| c.name).collect();
    names.join(",") + "\n"
}

/// Appends one line.
pub fn push_row(out: &mut String, row: &Row) {
    for (i, value) in row.iter().enumerate() {
        if i > 0 {
            out.push(',');
        }
        push_value(out, value);
    }
    out.push('\n');
}

fn push_value(out: &mut String, value: Cell<'_>) {
    match value {
        Cell::Missing => {}
        Cell::Text(t) if t.contains([',', '"', '\n', '\r']) => {
            out.push('"');
            out.push_str(&t.replace('"', "\"\""));
            out.push('"');
        }
        Cell::Text(t) => out.push_str(t),
        Cell::Integer(v) => push_integer(out, v),
        Cell::Number(v) => push_number(out, v),
        Cell::Counts(counts) => push_counts(out, counts),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::columns::{Col, Value};

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
}
