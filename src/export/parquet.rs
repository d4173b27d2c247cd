//! The catalogue as a Parquet file: typed columns, missing values null, the dictionary of columns in the file's metadata.

use std::io::Write;
use std::sync::Arc;

use ::bytes::Bytes;
use ::parquet::basic::{Compression, LogicalType, Repetition, Type as Physical};
use ::parquet::column::writer::{ColumnCloseResult, get_column_writer, get_typed_column_writer};
use ::parquet::data_type::{ByteArray, ByteArrayType, DataType, DoubleType, Int64Type};
use ::parquet::errors::ParquetError;
use ::parquet::file::metadata::KeyValue;
use ::parquet::file::properties::{EnabledStatistics, WriterProperties, WriterPropertiesPtr};
use ::parquet::file::writer::{SerializedFileWriter, SerializedPageWriter, TrackedWrite};
use ::parquet::schema::types::{ColumnDescPtr, ColumnPath, Type};

use crate::base::error::{Error, Result};
use crate::base::par;
use crate::export::digits::push_counts;
use crate::model::columns::{Cell, Kind, Row};
use crate::model::schema::Schema;

/// Rows of a row group, the last but shorter. A number of rows of the whole table, so that nothing else can shift the bounds.
pub const GROUP_ROWS: usize = 1 << 14;

/// Columns that are encoded at the same time, held until they are written.
const COLUMNS_AT_ONCE: usize = 16;

/// Writes rows as they come; the bytes depend on nothing but the rows and the metadata.
pub struct ParquetWriter<W: Write + Send> {
    file: SerializedFileWriter<W>,
    kinds: Vec<Kind>,
    /// Rows of the group that is not yet full.
    rows: Vec<Row>,
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
        let mut properties = WriterProperties::builder()
            .set_created_by(format!("ropewalk version {}", env!("CARGO_PKG_VERSION")))
            .set_compression(Compression::SNAPPY)
            .set_statistics_enabled(EnabledStatistics::Chunk)
            .set_offset_index_disabled(true)
            .set_key_value_metadata(Some(pairs));
        // Measured values hardly repeat: looking for repetitions takes longer than everything else.
        for c in columns.iter().filter(|c| matches!(c.kind, Kind::Number | Kind::Counts)) {
            properties = properties.set_column_dictionary_enabled(ColumnPath::from(c.name.as_str()), false);
        }
        let file = SerializedFileWriter::new(out, Arc::new(root), Arc::new(properties.build())).map_err(failed)?;
        Ok(ParquetWriter { file, kinds: columns.into_iter().map(|c| c.kind).collect(), rows: Vec::new() })
    }

    /// Appends rows.
    ///
    /// # Errors
    /// `Output`, without the file.
    pub fn add(&mut self, rows: Vec<Row>) -> Result<()> {
        self.rows.extend(rows);
        while self.rows.len() >= GROUP_ROWS {
            let rest = self.rows.split_off(GROUP_ROWS);
            let group = std::mem::replace(&mut self.rows, rest);
            self.group(&group).map_err(failed)?;
        }
        Ok(())
    }

    fn group(&mut self, rows: &[Row]) -> std::result::Result<(), ParquetError> {
        let (schema, properties) = (self.file.schema_descr().clone(), self.file.properties().clone());
        let mut group = self.file.next_row_group()?;
        let columns: Vec<usize> = (0..self.kinds.len()).collect();
        for some in columns.chunks(COLUMNS_AT_ONCE) {
            let encoded = par::map(some, |_, &k| column(rows, k, self.kinds[k], schema.column(k), properties.clone()));
            for done in encoded {
                let (bytes, close) = done?;
                group.append_column(&bytes, close)?;
            }
        }
        group.close()?;
        Ok(())
    }

    /// Completes the file and hands the output back.
    ///
    /// # Errors
    /// `Output`, without the file.
    pub fn finish(mut self) -> Result<W> {
        let rest = std::mem::take(&mut self.rows);
        if !rest.is_empty() {
            self.group(&rest).map_err(failed)?;
        }
        self.file.into_inner().map_err(failed)
    }
}

/// One column of a row group, encoded.
fn column(
    rows: &[Row],
    k: usize,
    kind: Kind,
    what: ColumnDescPtr,
    properties: WriterPropertiesPtr,
) -> std::result::Result<(Bytes, ColumnCloseResult), ParquetError> {
    let cells = rows.iter().map(|r| r.cell(k));
    let there: Vec<i16> = cells.clone().map(|v| i16::from(v != Cell::Missing)).collect();
    match kind {
        Kind::Text | Kind::Counts => encode::<ByteArrayType>(&cells.filter_map(text).collect::<Vec<_>>(), &there, what, properties),
        Kind::Integer => {
            let whole = |v| if let Cell::Integer(v) = v { Some(v) } else { None };
            encode::<Int64Type>(&cells.filter_map(whole).collect::<Vec<_>>(), &there, what, properties)
        }
        Kind::Number => encode::<DoubleType>(&cells.filter_map(|v| v.as_f64()).collect::<Vec<_>>(), &there, what, properties),
    }
}

fn encode<T: DataType>(
    values: &[T::T],
    there: &[i16],
    what: ColumnDescPtr,
    properties: WriterPropertiesPtr,
) -> std::result::Result<(Bytes, ColumnCloseResult), ParquetError> {
    let mut out = TrackedWrite::new(Vec::new());
    let pages = Box::new(SerializedPageWriter::new(&mut out));
    let mut writer = get_typed_column_writer::<T>(get_column_writer(what, properties, pages));
    writer.write_batch(values, Some(there), None)?;
    let close = writer.close()?;
    Ok((Bytes::from(out.into_inner()?), close))
}

fn text(value: Cell<'_>) -> Option<ByteArray> {
    match value {
        Cell::Text(t) => Some(t.into()),
        Cell::Counts(counts) => {
            let mut out = String::new();
            push_counts(&mut out, counts);
            Some(out.into_bytes().into())
        }
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::columns::{Col, Value};
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
            w.add(vec![row.clone(), Row::default()]).unwrap();
            w.add(Vec::new()).unwrap();
            w.add(vec![row.clone()]).unwrap();
            w.finish().unwrap()
        };
        let bytes = write();
        assert!(bytes == write());
        let path = tempfile::NamedTempFile::new().unwrap();
        std::fs::write(path.path(), &bytes).unwrap();
        let file = SerializedFileReader::new(std::fs::File::open(path.path()).unwrap()).unwrap();
        let meta = file.metadata().file_metadata();
        assert_eq!(meta.key_value_metadata().unwrap()[0].value.as_deref(), Some("ä"));
        assert_eq!((file.metadata().num_row_groups(), meta.num_rows()), (1, 3));
        let first = file.get_row_iter(None).unwrap().next().unwrap().unwrap().to_string();
        for part in ["snapshot: \"a\"", "wraps: \"\"", "time: null", "cells: 42", "level: 0.1", "histogram_u_b: \"1 0 2\""] {
            assert!(first.contains(part), "{part} is not in {first}");
        }
    }

    /// Whether rows come one by one or in bulk, and how many threads encode them, makes no byte differ.
    #[test]
    fn bounds_of_groups_do_not_depend_on_how_rows_come() {
        let rows: Vec<Row> = (0..GROUP_ROWS as i64 * 2 + 5)
            .map(|i| {
                let mut row = Row::default();
                row.set(Col::Id, Value::Integer(i));
                row.number(Col::Peak, (i % 7 > 0).then_some((i as f64).sqrt()));
                row.set(Col::Class, Value::Text(["sheet", "blob"][i as usize % 2].into()));
                row
            })
            .collect();
        let write = |at_once: usize, threads: usize| {
            let mut w = ParquetWriter::new(Vec::new(), &Schema::default(), Vec::new()).unwrap();
            par::Pool::new(threads).unwrap().run(|| {
                rows.chunks(at_once).for_each(|some| w.add(some.to_vec()).unwrap());
                w.finish().unwrap()
            })
        };
        let whole = write(rows.len(), 1);
        for (at_once, threads) in [(1000, 3), (GROUP_ROWS, 2), (GROUP_ROWS + 1, 1)] {
            assert!(whole == write(at_once, threads), "{at_once} at once");
        }
        let file = SerializedFileReader::new(Bytes::from(whole)).unwrap();
        let sizes: Vec<i64> = file.metadata().row_groups().iter().map(|g| g.num_rows()).collect();
        assert_eq!(sizes, [GROUP_ROWS as i64, GROUP_ROWS as i64, 5]);
    }
}
