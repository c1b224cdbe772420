//! A record's readbacks as a Parquet file, for notebooks.
//!
//! The table is that of the CSV export: the same rows, the same columns, units in their names
//! (`journal::COLUMNS`). Numbers that the CSV has as decimals are doubles here, which hold every
//! one of its digits for anything a bench can measure; where a cell is empty the value is null.
//! What each column means, and of which record it is, stands in the file's metadata.
//!
//! Streams: one row group is held in memory, however long the record.
//!
//! What it deliberately does not do: read Parquet, or compute anything.

mod group;

use std::io::Write;
use std::sync::Arc;

use journal::{COLUMNS, Column, JournalError, Kind, Progress, Record, Row, for_each_row};
use parquet::basic::{Compression, LogicalType, Repetition, Type as Physical};
use parquet::errors::ParquetError;
use parquet::file::metadata::KeyValue;
use parquet::file::properties::{WriterProperties, WriterPropertiesPtr};
use parquet::file::writer::SerializedFileWriter;
use parquet::schema::types::{Type, TypePtr};

use crate::group::Group;

/// The media type of a Parquet file (IANA registry).
pub const MEDIA_TYPE: &str = "application/vnd.apache.parquet";

/// Rows of a group: about 13 MB in memory.
const GROUP_ROWS: usize = 1 << 16;

/// Why an export failed.
#[derive(Debug, thiserror::Error)]
pub enum ExportError {
    /// The record cannot be read.
    #[error(transparent)]
    Record(#[from] JournalError),
    /// The target takes no more.
    #[error("the Parquet file cannot be written: {0}")]
    Target(#[from] ParquetError),
}

/// Writes every readback of a record as Parquet. Returns the number of rows. `progress` is called
/// after each segment of the record.
///
/// # Errors
/// [`ExportError`]. A torn end of an unsealed record is no error.
pub fn export_parquet(
    record: &Record,
    target: impl Write + Send,
    progress: impl FnMut(Progress),
) -> Result<u64, ExportError> {
    let mut writer = SerializedFileWriter::new(target, schema()?, properties(record))?;
    let mut group = Group::new();
    let take = |row: &Row<'_>| -> Result<(), ExportError> {
        group.take(row);
        if group.rows() == GROUP_ROWS {
            group.write(&mut writer)?;
        }
        Ok(())
    };
    let rows = for_each_row(record, take, progress)?;
    if group.rows() > 0 {
        group.write(&mut writer)?;
    }
    writer.finish()?;
    Ok(rows)
}

fn schema() -> Result<TypePtr, ParquetError> {
    let fields = COLUMNS
        .iter()
        .map(|column| field(column).map(Arc::new))
        .collect::<Result<Vec<_>, _>>()?;
    Type::group_type_builder("readbacks")
        .with_fields(fields)
        .build()
        .map(Arc::new)
}

fn field(column: &Column) -> Result<Type, ParquetError> {
    let (physical, logical) = match column.kind {
        Kind::Decimal => (Physical::DOUBLE, None),
        Kind::Whole => (Physical::INT64, None),
        Kind::Text => (Physical::BYTE_ARRAY, Some(LogicalType::String)),
    };
    Type::primitive_type_builder(column.name, physical)
        .with_repetition(Repetition::OPTIONAL)
        .with_logical_type(logical)
        .build()
}

fn properties(record: &Record) -> WriterPropertiesPtr {
    let fact = |key: &str, value: &str| KeyValue::new(key.to_owned(), value.to_owned());
    let manifest = record.manifest();
    let mut facts = vec![
        fact("record", &manifest.record),
        fact("sink", &manifest.sink),
        fact("dut", &manifest.plan.dut.label),
    ];
    facts.extend(
        COLUMNS
            .iter()
            .map(|column| fact(&format!("meaning of {}", column.name), column.meaning)),
    );
    let built = WriterProperties::builder()
        .set_compression(Compression::SNAPPY)
        .set_created_by(format!("sinkwarden {}", env!("CARGO_PKG_VERSION")))
        .set_key_value_metadata(Some(facts))
        .build();
    Arc::new(built)
}

#[cfg(test)]
mod tests;
