//! The catalogue as a Parquet file: typed columns, missing values null, the dictionary of columns in the file's metadata.

use std::io::Write;
use std::sync::Arc;

use ::parquet::basic::{Compression, LogicalType, Repetition, Type as Physical};
use ::parquet::data_type::{ByteArray, ByteArrayType, DoubleType, Int64Type};
use ::parquet::errors::ParquetError;
use ::parquet::file::metadata::KeyValue;
use ::parquet::file::properties::WriterProperties;
use ::parquet::file::writer::SerializedFileWriter;
use ::parquet::schema::types::Type;

use crate::base::error::{Error, Result};
use crate::export::csv::push_counts;
use crate::model::columns::{Row, Value};
use crate::model::schema::{Kind, Schema};

/// Most rows of a row group.
const GROUP_ROWS: usize = 1 << 20;

/// Writes rows as they come; the bytes depend on nothing but the rows, their grouping and the metadata.
pub struct ParquetWriter<W: Write + Send> {
    file: SerializedFileWriter<W>,
    kinds: Vec<Kind>,
}

fn failed(e: ParquetError) -> Error {
    Error::output("cannot write a Parquet file").found(e.to_string())
}

impl<W: Write + Send> ParquetWriter<W> {
    /// Starts a file; `metadata` are its key-value pairs.
    ///
    /// # Errors
    /// `Output`, without the file.
    pub fn new(out: W, schema: &Schema, metadata: Vec<(&str, String)>) -> Result<Self> {
        let columns = schema.columns();
        let fields: std::result::Result<Vec<_>, ParquetError> = columns
            .iter()
            .map(|c| {
                let physical = match c.kind {
                    Kind::Text | Kind::Counts => Physical::BYTE_ARRAY,
                    Kind::Integer => Physical::INT64,
                    Kind::Number => Physical::DOUBLE,
                };
                let text = (physical == Physical::BYTE_ARRAY).then_some(LogicalType::String);
                let field = Type::primitive_type_builder(&c.name, physical).with_repetition(Repetition::OPTIONAL).with_logical_type(text);
                field.build().map(Arc::new)
            })
            .collect();
        let root = Type::group_type_builder("catalogue").with_fields(fields.map_err(failed)?).build().map_err(failed)?;
        let pairs = metadata.into_iter().map(|(key, value)| KeyValue::new(key.to_string(), value)).collect();
        let properties = WriterProperties::builder()
            .set_created_by(format!("ropewalk version {}", env!("CARGO_PKG_VERSION")))
            .set_compression(Compression::SNAPPY)
            .set_key_value_metadata(Some(pairs))
            .build();
        let file = SerializedFileWriter::new(out, Arc::new(root), Arc::new(properties)).map_err(failed)?;
        Ok(ParquetWriter { file, kinds: columns.into_iter().map(|c| c.kind).collect() })
    }

    /// Appends rows as row groups of their own.
    ///
    /// # Errors
    /// `Output`, without the file.
    pub fn add(&mut self, rows: &[Row]) -> Result<()> {
        rows.chunks(GROUP_ROWS).try_for_each(|group| self.group(group).map_err(failed))
    }

    fn group(&mut self, rows: &[Row]) -> std::result::Result<(), ParquetError> {
        let mut group = self.file.next_row_group()?;
        for (k, kind) in self.kinds.iter().enumerate() {
            let column = rows.iter().map(|r| &r.values()[k]);
            let there: Vec<i16> = column.clone().map(|v| i16::from(*v != Value::Missing)).collect();
            let Some(mut writer) = group.next_column()? else { break };
            match kind {
                Kind::Text | Kind::Counts => {
                    let texts: Vec<ByteArray> = column.filter_map(text).collect();
                    writer.typed::<ByteArrayType>().write_batch(&texts, Some(&there), None)?;
                }
                Kind::Integer => {
                    let whole = |v: &Value| if let Value::Integer(v) = v { Some(*v) } else { None };
                    let values: Vec<i64> = column.filter_map(whole).collect();
                    writer.typed::<Int64Type>().write_batch(&values, Some(&there), None)?;
                }
                Kind::Number => {
                    let values: Vec<f64> = column.filter_map(Value::as_f64).collect();
                    writer.typed::<DoubleType>().write_batch(&values, Some(&there), None)?;
                }
            }
            writer.close()?;
        }
        group.close()?;
        Ok(())
    }

    /// Completes the file and hands the output back.
    ///
    /// # Errors
    /// `Output`, without the file.
    pub fn finish(self) -> Result<W> {
        self.file.into_inner().map_err(failed)
    }
}

fn text(value: &Value) -> Option<ByteArray> {
    match value {
        Value::Text(t) => Some(t.as_str().into()),
        Value::Counts(counts) => {
            let mut out = String::new();
            push_counts(&mut out, counts);
            Some(out.as_str().into())
        }
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::columns::Col;
    use ::parquet::file::reader::{FileReader, SerializedFileReader};

    /// The library's own reader; other readers are tried with the whole program.
    #[test]
    fn rows_and_metadata_are_there() {
        let mut row = Row::default();
        row.set(Col::Snapshot, Value::Text("a".into()));
        row.set(Col::Wraps, Value::Text(String::new()));
        row.set(Col::Cells, Value::Integer(42));
        row.number(Col::Level, Some(0.1));
        row.set(Col::HistogramUB, Value::Counts(vec![1, 0, 2]));
        let write = || {
            let mut w = ParquetWriter::new(Vec::new(), &Schema::default(), vec![("note", "ä".into())]).unwrap();
            w.add(&[row.clone(), Row::default()]).unwrap();
            w.add(&[]).unwrap();
            w.add(std::slice::from_ref(&row)).unwrap();
            w.finish().unwrap()
        };
        let bytes = write();
        assert!(bytes == write());
        let path = tempfile::NamedTempFile::new().unwrap();
        std::fs::write(path.path(), &bytes).unwrap();
        let file = SerializedFileReader::new(std::fs::File::open(path.path()).unwrap()).unwrap();
        let meta = file.metadata().file_metadata();
        assert_eq!(meta.key_value_metadata().unwrap()[0].value.as_deref(), Some("ä"));
        assert_eq!((file.metadata().num_row_groups(), meta.num_rows()), (2, 3));
        let first = file.get_row_iter(None).unwrap().next().unwrap().unwrap().to_string();
        for part in ["snapshot: \"a\"", "wraps: \"\"", "time: null", "cells: 42", "level: 0.1", "histogram_u_b: \"1 0 2\""] {
            assert!(first.contains(part), "{part} is not in {first}");
        }
    }
}
