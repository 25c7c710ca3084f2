//! A step's series file: recorded blocks one after another, with constant columns before them. Encoded column chunks are
//! copied as they are; only the last block of a chain is decoded, where fewer rows are wanted than were recorded.

use super::block::{block_infos, read_block, write_block};
use super::cells::{self, info, kind};
use super::format::{ColumnInfo, Kind, Layout, properties, schema};
use super::table::{open, parse};
use crate::error::LedgerError;
use crate::writes::{NewFile, Writes};
use bytes::Bytes;
use parquet::column::writer::ColumnCloseResult;
use parquet::errors::Result as ParquetResult;
use parquet::file::metadata::{ColumnChunkMetaData, ParquetMetaData};
use parquet::file::reader::{ChunkReader, FileReader};
use parquet::file::writer::{SerializedFileWriter, SerializedRowGroupWriter};
use spinledger_terms::{Cells, Key, Value};
use std::collections::BTreeMap;
use std::fs::File;
use std::path::{Path, PathBuf};

/// A column with one value in all rows.
#[derive(Clone, Debug, PartialEq)]
pub struct Constant {
    /// Its name.
    pub name: String,
    /// Its unit; empty for pure numbers and text.
    pub unit: String,
    /// Its value: a whole number, a double, text, or true or false.
    pub value: Value,
}

/// A recorded block, or its first rows: one row group of the assembled file.
#[derive(Clone, Debug, PartialEq)]
pub struct Piece {
    /// The block's file.
    pub path: PathBuf,
    /// How many of its rows to take, from the first.
    pub rows: u64,
    /// The chain, as in column `chain`.
    pub chain: i64,
    /// Columns that are constant within the piece, such as `start`; the same names, units and types in every piece.
    pub extra: Vec<Constant>,
}

/// What was assembled.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Assembled {
    /// Number of rows.
    pub rows: u64,
    /// Number of pieces, that is row groups.
    pub pieces: u64,
}

/// Writes one file of the pieces in order. Its columns: the constants, the extras of the pieces, `chain`, `sweep`, the
/// observables. Equal input gives equal bytes, whatever the recorded lengths of blocks of which fewer rows are taken. Time
/// is that of copying; memory that of one block, plus a footer of some hundred bytes for each column chunk.
///
/// # Errors
/// Where there are no pieces, a piece has other columns than the first or fewer rows than are to be taken, a file cannot be
/// read, or the output cannot be written; a file of that name is then left as it was.
pub fn assemble(
    writes: &Writes,
    output: &Path,
    key: &Key,
    constants: &[Constant],
    pieces: impl IntoIterator<Item = Piece>,
) -> Result<Assembled, LedgerError> {
    let mut pieces = pieces.into_iter();
    let Some(first) = pieces.next() else {
        return Err(LedgerError::Columns(format!("{} would have no pieces", output.display())));
    };
    let observed = block_infos(&first.path, &open(&first.path)?)?;
    let mut fixed = constants.iter().map(info_of).collect::<Result<Vec<_>, _>>()?;
    let extras = first.extra.iter().map(info_of).collect::<Result<Vec<_>, _>>()?;
    fixed.extend(extras.iter().cloned());
    fixed.push(info("chain", "", Kind::Integer));
    let columns: Vec<ColumnInfo> = fixed.iter().chain(&observed).cloned().collect();
    let layouts = vec![Layout::Dictionary; columns.len()];
    let written = LedgerError::parquet;
    let mut file = writes.new_file(output)?;
    let mut writer: SerializedFileWriter<&mut NewFile> =
        SerializedFileWriter::new(&mut file, schema(&columns)?, properties(&columns, &layouts, key))
            .map_err(written("write", output))?;
    let mut made = Fixed { columns: fixed, key: *key, chunks: BTreeMap::new() };
    let mut assembled = Assembled { rows: 0, pieces: 0 };
    for piece in std::iter::once(first).chain(pieces) {
        if piece.extra.iter().map(info_of).collect::<Result<Vec<_>, _>>()? != extras {
            let what = format!("the constants of {} are others than those of the first piece", piece.path.display());
            return Err(LedgerError::Columns(what));
        }
        let source = Source::open(&piece, &observed, key)?;
        let chain = Value::Integer(piece.chain);
        let values = constants.iter().chain(&piece.extra).map(|c| &c.value).chain([&chain]);
        let mut group = writer.next_row_group().map_err(written("write", output))?;
        for (place, value) in values.enumerate() {
            let chunk = made.chunk(place, value, piece.rows)?;
            append(&mut group, &chunk.bytes, &chunk.metadata, piece.rows).map_err(written("write", output))?;
        }
        source.append_to(&mut group, piece.rows).map_err(written("write", output))?;
        group.close().map_err(written("write", output))?;
        assembled.rows += piece.rows;
        assembled.pieces += 1;
    }
    writer.close().map_err(written("write", output))?;
    file.finish()?;
    Ok(assembled)
}

pub(super) fn info_of(constant: &Constant) -> Result<ColumnInfo, LedgerError> {
    let Constant { name, unit, value } = constant;
    let cells =
        cells_of(value, 0).ok_or_else(|| LedgerError::Columns(format!("`{name}` cannot be {}", value.what())))?;
    Ok(info(name, unit, kind(&cells)))
}

/// A value repeated; None where columns cannot hold it.
pub(super) fn cells_of(value: &Value, rows: usize) -> Option<Cells> {
    match value {
        Value::Bool(value) => Some(Cells::Boolean(vec![Some(*value); rows])),
        Value::Integer(value) => Some(Cells::Integer(vec![Some(*value); rows])),
        Value::Number(value) => Some(Cells::Number(vec![Some(*value); rows])),
        Value::Text(value) => Some(Cells::Text(vec![Some(value.clone()); rows])),
        Value::Null | Value::List(_) | Value::Map(_) => None,
    }
}

/// Where the chunks of a piece come from.
enum Source {
    /// The block's file, as it is.
    Whole(File, ParquetMetaData),
    /// Its first rows, encoded as a block of that length would be.
    Head(Bytes, ParquetMetaData),
}

impl Source {
    fn open(piece: &Piece, observed: &[ColumnInfo], key: &Key) -> Result<Self, LedgerError> {
        let reader = open(&piece.path)?;
        if block_infos(&piece.path, &reader)? != observed {
            let what = format!("the columns of {} are others than those of the first piece", piece.path.display());
            return Err(LedgerError::Columns(what));
        }
        let recorded = u64::try_from(reader.metadata().file_metadata().num_rows()).unwrap_or(0);
        if piece.rows == 0 || piece.rows > recorded {
            let what = format!("{} has {recorded} rows, of which {} cannot be taken", piece.path.display(), piece.rows);
            return Err(LedgerError::Columns(what));
        }
        if piece.rows == recorded {
            let file = File::open(&piece.path).map_err(LedgerError::read("open", &piece.path))?;
            return Ok(Source::Whole(file, reader.metadata().clone()));
        }
        let head = read_block(&piece.path, None, Some(piece.rows as usize))?;
        let bytes = Bytes::from(write_block(&head, key)?);
        // Metadata as read, not as written: they differ in what the footer leaves out, and the output's bytes show it.
        let reader = parse(bytes.clone()).map_err(LedgerError::parquet("encode the first rows of", &piece.path))?;
        Ok(Source::Head(bytes, reader.metadata().clone()))
    }

    fn append_to(&self, group: &mut SerializedRowGroupWriter<'_, &mut NewFile>, rows: u64) -> ParquetResult<()> {
        let (Source::Whole(_, metadata) | Source::Head(_, metadata)) = self;
        metadata.row_group(0).columns().iter().try_for_each(|column| match self {
            Source::Whole(file, _) => append(group, file, column, rows),
            Source::Head(bytes, _) => append(group, bytes, column, rows),
        })
    }
}

/// Copies a column chunk.
fn append<R: ChunkReader>(
    group: &mut SerializedRowGroupWriter<'_, &mut NewFile>,
    source: &R,
    metadata: &ColumnChunkMetaData,
    rows: u64,
) -> ParquetResult<()> {
    let chunk = ColumnCloseResult {
        bytes_written: u64::try_from(metadata.compressed_size()).unwrap_or(0),
        rows_written: rows,
        metadata: metadata.clone(),
        bloom_filter: None,
        column_index: None,
        offset_index: None,
    };
    group.append_column(source, chunk)
}

/// An encoded column chunk.
struct Chunk {
    bytes: Bytes,
    metadata: ColumnChunkMetaData,
}

/// Encoded chunks of constant columns, kept: blocks mostly have equal lengths.
struct Fixed {
    columns: Vec<ColumnInfo>,
    key: Key,
    chunks: BTreeMap<(usize, String, u64), Chunk>,
}

impl Fixed {
    /// Some chains' worth; a chunk takes about a hundred bytes.
    const KEPT: usize = 4096;

    fn chunk(&mut self, place: usize, value: &Value, rows: u64) -> Result<&Chunk, LedgerError> {
        // Canonical text does not tell -0.0 from 0.0.
        let text = match value {
            Value::Number(x) => format!("{:x}", x.to_bits()),
            other => other.canonical(),
        };
        let id = (place, text, rows);
        if !self.chunks.contains_key(&id) {
            if self.chunks.len() >= Self::KEPT {
                self.chunks.clear();
            }
            let chunk = self.encode(place, value, rows)?;
            self.chunks.insert(id.clone(), chunk);
        }
        self.chunks.get(&id).ok_or_else(|| LedgerError::Columns(format!("column {place} was not encoded")))
    }

    /// Encodes a chunk as the only column of a file in memory.
    fn encode(&self, place: usize, value: &Value, rows: u64) -> Result<Chunk, LedgerError> {
        let column = std::slice::from_ref(&self.columns[place]);
        let cells = cells_of(value, rows as usize).unwrap_or(Cells::Integer(Vec::new()));
        let layout = if column[0].kind == Kind::Boolean { Layout::Plain } else { Layout::Dictionary };
        let (schema, properties) = (schema(column)?, properties(column, &[layout], &self.key));
        let write = || {
            let mut bytes = Vec::new();
            let mut writer = SerializedFileWriter::new(&mut bytes, schema, properties)?;
            let mut group = writer.next_row_group()?;
            cells::write_cells(&mut group, &cells, 0..cells.len())?;
            group.close()?;
            let metadata = writer.close()?;
            Ok(Chunk { metadata: metadata.row_group(0).column(0).clone(), bytes: bytes.into() })
        };
        write().map_err(LedgerError::parquet("encode", Path::new(&self.columns[place].name)))
    }
}
