//! Blocks: pieces of time series, as recorded.

use super::cells::{self, empty, info, layout_of_numbers};
use super::format::{ColumnInfo, GROUP_ROWS, Kind, Layout, columns_of, properties, schema};
use super::table::open;
use crate::error::LedgerError;
use parquet::data_type::{DoubleType, Int64Type};
use parquet::errors::Result as ParquetResult;
use parquet::file::reader::FileReader;
use parquet::file::writer::SerializedFileWriter;
use spinledger_terms::{Cells, Key};
use std::path::Path;

/// The most rows that a block can have.
pub const BLOCK_ROWS: usize = GROUP_ROWS;

pub(super) const SWEEP: &str = "sweep";
pub(super) const SWEEP_UNIT: &str = "sweeps";

/// Measurements of one chain, in order.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct BlockData {
    /// The sweep of each measurement.
    pub sweep: Vec<i64>,
    /// The observables' columns.
    pub columns: Vec<ColumnData>,
}

/// A column of measurements.
#[derive(Clone, Debug, PartialEq)]
pub struct ColumnData {
    /// Its name.
    pub name: String,
    /// Its unit; empty for pure numbers.
    pub unit: String,
    /// One value for each sweep; NaN where it is not known, which is null in the file.
    pub values: Vec<f64>,
}

impl BlockData {
    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.sweep.len()
    }

    /// The values of a column.
    pub fn column(&self, name: &str) -> Option<&[f64]> {
        self.columns.iter().find(|column| column.name == name).map(|column| column.values.as_slice())
    }

    /// The first rows; all where there are fewer.
    #[must_use]
    pub fn truncated(&self, rows: usize) -> BlockData {
        let head = |values: &[f64]| values[..rows.min(values.len())].to_vec();
        BlockData {
            sweep: self.sweep[..rows.min(self.rows())].to_vec(),
            columns: self.columns.iter().map(|c| ColumnData { values: head(&c.values), ..c.clone() }).collect(),
        }
    }

    /// This block followed by more rows: a block recorded short becomes the block that a longer run would have recorded.
    ///
    /// # Errors
    /// Where columns differ, or the sweeps do not go on.
    pub fn merge(&self, more: &BlockData) -> Result<BlockData, LedgerError> {
        let same = self.columns.len() == more.columns.len()
            && self.columns.iter().zip(&more.columns).all(|(a, b)| a.name == b.name && a.unit == b.unit);
        if !same {
            return Err(LedgerError::Columns("the rows that continue a block have other columns".into()));
        }
        if let (Some(last), Some(next)) = (self.sweep.last(), more.sweep.first())
            && last >= next
        {
            return Err(LedgerError::Columns(format!("sweep {next} cannot follow sweep {last}")));
        }
        let mut whole = self.clone();
        whole.sweep.extend_from_slice(&more.sweep);
        for (mine, theirs) in whole.columns.iter_mut().zip(&more.columns) {
            mine.values.extend_from_slice(&theirs.values);
        }
        Ok(whole)
    }

    fn infos(&self) -> Vec<ColumnInfo> {
        let columns = self.columns.iter().map(|c| info(&c.name, &c.unit, Kind::Number));
        std::iter::once(info(SWEEP, SWEEP_UNIT, Kind::Integer)).chain(columns).collect()
    }
}

/// The bytes of a Parquet file with a block, in one row group: `sweep`, then the observables. The same block and key give
/// the same bytes. Columns of which at most half the values differ, as on a lattice, become small; others are kept whole.
///
/// # Errors
/// Where there are no rows or more than [`BLOCK_ROWS`], columns have different lengths, or a name is empty or stands there
/// twice.
pub fn write_block(block: &BlockData, key: &Key) -> Result<Vec<u8>, LedgerError> {
    let rows = block.rows();
    if rows == 0 || rows > BLOCK_ROWS {
        return Err(LedgerError::Columns(format!("a block has from 1 to {BLOCK_ROWS} rows, not {rows}")));
    }
    if let Some(column) = block.columns.iter().find(|column| column.values.len() != rows) {
        let what = format!("`{}` has {} rows, `{SWEEP}` has {rows}", column.name, column.values.len());
        return Err(LedgerError::Columns(what));
    }
    let columns = block.infos();
    let layouts: Vec<Layout> = std::iter::once(Layout::Differences)
        .chain(block.columns.iter().map(|column| layout_of_numbers(&column.values)))
        .collect();
    let schema = schema(&columns)?;
    let write = || {
        let mut bytes = Vec::new();
        let mut writer = SerializedFileWriter::new(&mut bytes, schema, properties(&columns, &layouts, key))?;
        let mut group = writer.next_row_group()?;
        cells::write::<Int64Type, _>(&mut group, block.sweep.iter().map(|sweep| Some(*sweep)))?;
        for column in &block.columns {
            let known = column.values.iter().map(|x| Some(*x).filter(|x| !x.is_nan()));
            cells::write::<DoubleType, _>(&mut group, known)?;
        }
        group.close()?;
        writer.close()?;
        Ok(bytes)
    };
    write().map_err(LedgerError::parquet("encode", Path::new("a block")))
}

/// Reads a block: `sweep` and all columns or the named ones in the order of the names; all rows, or at most the first
/// `rows`. Columns that are not asked for are not touched.
///
/// # Errors
/// Where the file is absent, is not a block or lacks a column.
pub fn read_block(path: &Path, columns: Option<&[&str]>, rows: Option<usize>) -> Result<BlockData, LedgerError> {
    let reader = open(path)?;
    let infos = block_infos(path, &reader)?;
    let wanted: Vec<usize> = match columns {
        None => (1..infos.len()).collect(),
        Some(names) => names.iter().map(|name| place_of(&infos, name, path)).collect::<Result<_, _>>()?,
    };
    let decode = || {
        let group = reader.get_row_group(0)?;
        let recorded = usize::try_from(group.metadata().num_rows()).unwrap_or(0);
        let rows = rows.map_or(recorded, |rows| rows.min(recorded));
        let numbers = |place: usize| -> ParquetResult<Cells> {
            let mut cells = empty(infos[place].kind);
            cells::read(group.as_ref(), place, rows, &mut cells)?;
            Ok(cells)
        };
        let mut block = BlockData::default();
        if let Cells::Integer(sweeps) = numbers(0)? {
            block.sweep = sweeps.into_iter().flatten().collect();
        }
        for place in &wanted {
            if let Cells::Number(values) = numbers(*place)? {
                let values = values.into_iter().map(|x| x.unwrap_or(f64::NAN)).collect();
                let ColumnInfo { name, unit, .. } = infos[*place].clone();
                block.columns.push(ColumnData { name, unit, values });
            }
        }
        Ok(block)
    };
    decode().map_err(LedgerError::parquet("decode", path))
}

/// Names and units of a block's columns, without `sweep`, and its number of rows: reads the file's metadata only.
///
/// # Errors
/// Where the file is absent or is not a block.
pub fn block_columns(path: &Path) -> Result<(Vec<(String, String)>, u64), LedgerError> {
    let reader = open(path)?;
    let infos = block_infos(path, &reader)?;
    let rows = u64::try_from(reader.metadata().file_metadata().num_rows()).unwrap_or(0);
    Ok((infos.into_iter().skip(1).map(|column| (column.name, column.unit)).collect(), rows))
}

/// The columns of a file that is a block.
pub(super) fn block_infos(path: &Path, reader: &impl FileReader) -> Result<Vec<ColumnInfo>, LedgerError> {
    let infos = columns_of(reader.metadata().file_metadata(), path)?;
    let is_block = infos.first().is_some_and(|c| c.name == SWEEP && c.kind == Kind::Integer)
        && infos[1..].iter().all(|c| c.kind == Kind::Number)
        && reader.num_row_groups() == 1;
    if is_block { Ok(infos) } else { Err(LedgerError::damaged(path, "it is not a block of a series")) }
}

fn place_of(infos: &[ColumnInfo], name: &str, path: &Path) -> Result<usize, LedgerError> {
    let place = infos.iter().position(|column| column.name == name).filter(|place| *place > 0);
    place.ok_or_else(|| LedgerError::Columns(format!("{} has no column `{name}`", path.display())))
}
