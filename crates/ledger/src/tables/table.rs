//! Tables of analysis steps as Parquet files.

use super::cells::{empty, info, kind, layout, read, write_cells};
use super::format::{ColumnInfo, GROUP_ROWS, Layout, columns_of, key_of, properties, schema};
use crate::error::LedgerError;
use parquet::file::reader::{ChunkReader, FileReader, SerializedFileReader};
use parquet::file::serialized_reader::ReadOptionsBuilder;
use parquet::file::writer::SerializedFileWriter;
use spinledger_terms::{Column, Key, Table};
use std::fs::File;
use std::io::ErrorKind;
use std::path::Path;

/// The bytes of a Parquet file with a table; the same table and key give the same bytes. Row groups have 65536 rows.
///
/// # Errors
/// Where there are no columns, columns have different lengths, or a name is empty or stands there twice.
pub fn write_table(table: &Table, key: &Key) -> Result<Vec<u8>, LedgerError> {
    let rows = table.rows();
    if let Some(column) = table.columns.iter().find(|column| column.cells.len() != rows) {
        let what = format!("`{}` has {} rows where others have {rows}", column.name, column.cells.len());
        return Err(LedgerError::Columns(what));
    }
    let columns: Vec<ColumnInfo> = table.columns.iter().map(|c| info(&c.name, &c.unit, kind(&c.cells))).collect();
    let layouts: Vec<Layout> = table.columns.iter().map(|c| layout(&c.cells)).collect();
    let schema = schema(&columns)?;
    let encode = || {
        let mut bytes = Vec::new();
        let mut writer = SerializedFileWriter::new(&mut bytes, schema, properties(&columns, &layouts, key))?;
        for start in (0..rows).step_by(GROUP_ROWS) {
            let mut group = writer.next_row_group()?;
            for column in &table.columns {
                write_cells(&mut group, &column.cells, start..rows.min(start + GROUP_ROWS))?;
            }
            group.close()?;
        }
        writer.close()?;
        Ok(bytes)
    };
    encode().map_err(LedgerError::parquet("encode", Path::new("a table")))
}

/// Reads a whole Parquet file of integers, doubles, booleans and text: a table of a step or an assembled series.
///
/// # Errors
/// Where the file is absent or cannot be read, or has columns of other types.
pub fn read_table(path: &Path) -> Result<Table, LedgerError> {
    let reader = open(path)?;
    let columns = columns_of(reader.metadata().file_metadata(), path)?;
    let mut table = Table::default();
    for (place, column) in columns.into_iter().enumerate() {
        let mut cells = empty(column.kind);
        let mut decode = || {
            for group in 0..reader.num_row_groups() {
                let group = reader.get_row_group(group)?;
                let rows = usize::try_from(group.metadata().num_rows()).unwrap_or(0);
                read(group.as_ref(), place, rows, &mut cells)?;
            }
            Ok(())
        };
        decode().map_err(LedgerError::parquet("decode", path))?;
        table.columns.push(Column { name: column.name, unit: column.unit, cells });
    }
    Ok(table)
}

/// The key of the ledger entry that a Parquet file names in its metadata; None where it names none.
///
/// # Errors
/// Where the file is absent or is not a Parquet file.
pub(crate) fn parquet_key(path: &Path) -> Result<Option<Key>, LedgerError> {
    Ok(key_of(open(path)?.metadata().file_metadata()))
}

/// Opens a Parquet file and reads its metadata.
pub(super) fn open(path: &Path) -> Result<SerializedFileReader<File>, LedgerError> {
    let file = match File::open(path) {
        Ok(file) => file,
        Err(error) if error.kind() == ErrorKind::NotFound => {
            return Err(LedgerError::Absent { path: path.to_owned() });
        }
        Err(error) => return Err(LedgerError::read("open", path)(error)),
    };
    parse(file).map_err(LedgerError::parquet("read as a Parquet file", path))
}

/// Reads the metadata of a Parquet file, with all that a copied column chunk needs.
pub(super) fn parse<R: ChunkReader + 'static>(source: R) -> parquet::errors::Result<SerializedFileReader<R>> {
    let options = ReadOptionsBuilder::new().with_encoding_stats_as_mask(false).build();
    SerializedFileReader::new_with_options(source, options)
}
