//! The data dictionary and pretty JSON.

use serde_json::{Value, json};

use crate::model::schema::Schema;

/// The dictionary of catalogue columns.
pub fn dictionary(schema: &Schema) -> Value {
    let columns: Vec<Value> = schema
        .columns()
        .into_iter()
        .map(|c| {
            json!({
                "name": c.name,
                "unit": c.unit,
                "definition": c.definition,
                "source": c.source,
                "stage": c.stage,
            })
        })
        .collect();
    json!({ "columns": columns })
}

/// Indented text with a final newline.
pub fn pretty(value: &Value) -> String {
    format!("{value:#}\n")
}

/// A number, or null where there is none.
pub fn number(v: Option<f64>) -> Value {
    v.filter(|v| v.is_finite()).map_or(Value::Null, |v| json!(v))
}
