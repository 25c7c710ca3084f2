//! What all our Parquet files share: types, metadata and writer settings. Bytes depend on every choice here.

use super::arrow;
use crate::error::LedgerError;
use parquet::basic::{Compression, ConvertedType, Encoding, LogicalType, Repetition, Type as PhysicalType, ZstdLevel};
use parquet::file::metadata::{FileMetaData, KeyValue};
use parquet::file::properties::{EnabledStatistics, WriterProperties, WriterPropertiesPtr, WriterVersion};
use parquet::schema::types::{ColumnPath, Type, TypePtr};
use spinledger_terms::Key;
use std::collections::BTreeMap;
use std::path::Path;
use std::sync::Arc;

/// Rows of a row group, and of the longest block.
pub(super) const GROUP_ROWS: usize = 65_536;

const KEY: &str = "spinledger.key";
const UNITS: &str = "spinledger.units";
const ARROW_SCHEMA: &str = "ARROW:schema";

/// What a column holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Kind {
    Integer,
    Number,
    Boolean,
    Text,
}

/// A column's name, unit and type.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct ColumnInfo {
    pub(super) name: String,
    pub(super) unit: String,
    pub(super) kind: Kind,
}

/// How a column's values are laid out before compression.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Layout {
    /// Few different values: numbers into a list of them.
    Dictionary,
    /// Integers: differences.
    Differences,
    /// Doubles: first bytes first, then second bytes ...
    Split,
    /// As they are.
    Plain,
}

/// The Parquet schema of columns; each may hold nulls.
pub(super) fn schema(columns: &[ColumnInfo]) -> Result<TypePtr, LedgerError> {
    if columns.is_empty() {
        return Err(LedgerError::Columns("there are none".into()));
    }
    let mut fields = Vec::with_capacity(columns.len());
    for (place, column) in columns.iter().enumerate() {
        let name = &column.name;
        if name.is_empty() || columns[..place].iter().any(|other| other.name == *name) {
            return Err(LedgerError::Columns(format!("the name `{name}` is empty or stands there twice")));
        }
        let physical = match column.kind {
            Kind::Integer => PhysicalType::INT64,
            Kind::Number => PhysicalType::DOUBLE,
            Kind::Boolean => PhysicalType::BOOLEAN,
            Kind::Text => PhysicalType::BYTE_ARRAY,
        };
        let builder = Type::primitive_type_builder(name, physical).with_repetition(Repetition::OPTIONAL);
        let builder = match column.kind {
            Kind::Text => builder.with_logical_type(Some(LogicalType::String)).with_converted_type(ConvertedType::UTF8),
            _ => builder,
        };
        fields.push(Arc::new(builder.build().map_err(unfit)?));
    }
    Ok(Arc::new(Type::group_type_builder("spinledger").with_fields(fields).build().map_err(unfit)?))
}

/// The writer settings. Pages and dictionaries are not limited: one row group is at most [`GROUP_ROWS`] rows, and a limit
/// counted in allocated bytes could make the layout depend on more than the values.
pub(super) fn properties(columns: &[ColumnInfo], layouts: &[Layout], key: &Key) -> WriterPropertiesPtr {
    const UNLIMITED: usize = 1 << 40;
    let units: BTreeMap<&str, &str> = columns.iter().map(|c| (c.name.as_str(), c.unit.as_str())).collect();
    let (key, units) = (key.to_string(), serde_json::to_string(&units).unwrap_or_default());
    // The units as plain text are for readers that know nothing of Arrow.
    let pairs = [(KEY, key.as_str()), (UNITS, units.as_str())];
    let schema = arrow::schema_text(columns, &pairs);
    let metadata = pairs.into_iter().chain([(ARROW_SCHEMA, schema.as_str())]);
    let metadata = metadata.map(|(key, value)| KeyValue::new(key.to_owned(), value.to_owned())).collect();
    let mut builder = WriterProperties::builder()
        .set_writer_version(WriterVersion::PARQUET_1_0)
        .set_created_by("spinledger 1".to_owned())
        // Level 3 always exists.
        .set_compression(Compression::ZSTD(ZstdLevel::try_new(3).unwrap_or_default()))
        .set_statistics_enabled(EnabledStatistics::Chunk)
        .set_offset_index_disabled(true)
        .set_dictionary_page_size_limit(UNLIMITED)
        .set_data_page_size_limit(UNLIMITED)
        .set_data_page_row_count_limit(GROUP_ROWS)
        .set_max_row_group_row_count(Some(GROUP_ROWS))
        .set_key_value_metadata(Some(metadata));
    for (column, layout) in columns.iter().zip(layouts) {
        let path = ColumnPath::new(vec![column.name.clone()]);
        let encoding = match layout {
            Layout::Dictionary => None,
            Layout::Differences => Some(Encoding::DELTA_BINARY_PACKED),
            Layout::Split => Some(Encoding::BYTE_STREAM_SPLIT),
            Layout::Plain => Some(Encoding::PLAIN),
        };
        builder = match encoding {
            None => builder.set_column_dictionary_enabled(path, true),
            Some(encoding) => {
                builder.set_column_dictionary_enabled(path.clone(), false).set_column_encoding(path, encoding)
            }
        };
    }
    Arc::new(builder.build())
}

/// The columns of a file, with units where the file tells them.
pub(super) fn columns_of(file: &FileMetaData, path: &Path) -> Result<Vec<ColumnInfo>, LedgerError> {
    let units: BTreeMap<String, String> = match value(file, UNITS) {
        Some(text) => serde_json::from_str(text)
            .map_err(|error| LedgerError::damaged(path, format!("`{UNITS}` cannot be read ({error})")))?,
        None => BTreeMap::new(),
    };
    let mut columns = Vec::new();
    for column in file.schema_descr().columns() {
        let name = column.name().to_owned();
        let kind = match column.physical_type() {
            PhysicalType::INT64 => Kind::Integer,
            PhysicalType::DOUBLE => Kind::Number,
            PhysicalType::BOOLEAN => Kind::Boolean,
            PhysicalType::BYTE_ARRAY => Kind::Text,
            other => return Err(LedgerError::Columns(format!("`{name}` of {} is {other}", path.display()))),
        };
        if column.max_rep_level() > 0 || column.max_def_level() > 1 {
            return Err(LedgerError::Columns(format!("`{name}` of {} is nested", path.display())));
        }
        columns.push(ColumnInfo { unit: units.get(&name).cloned().unwrap_or_default(), name, kind });
    }
    Ok(columns)
}

/// The entry that a file names.
pub(super) fn key_of(file: &FileMetaData) -> Option<Key> {
    value(file, KEY)?.parse().ok()
}

fn value<'a>(file: &'a FileMetaData, key: &str) -> Option<&'a str> {
    file.key_value_metadata()?.iter().find(|pair| pair.key == key)?.value.as_deref()
}

fn unfit(error: parquet::errors::ParquetError) -> LedgerError {
    LedgerError::Columns(error.to_string())
}
