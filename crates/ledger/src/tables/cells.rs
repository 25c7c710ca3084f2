//! Values into column chunks and back.

use super::format::{ColumnInfo, Kind, Layout};
use parquet::column::reader::{ColumnReader, ColumnReaderImpl};
use parquet::data_type::{BoolType, ByteArray, ByteArrayType, DataType, DoubleType, Int64Type};
use parquet::errors::{ParquetError, Result};
use parquet::file::reader::RowGroupReader;
use parquet::file::writer::SerializedRowGroupWriter;
use spinledger_terms::Cells;
use std::collections::HashSet;
use std::io::Write;
use std::ops::Range;

/// Writes the next column of a row group.
pub(super) fn write<T: DataType, W: Write + Send>(
    group: &mut SerializedRowGroupWriter<'_, W>,
    cells: impl Iterator<Item = Option<T::T>>,
) -> Result<()> {
    let mut levels = Vec::with_capacity(cells.size_hint().0);
    let mut values = Vec::with_capacity(cells.size_hint().0);
    for cell in cells {
        levels.push(i16::from(cell.is_some()));
        values.extend(cell);
    }
    let mut column = group.next_column()?.ok_or_else(|| ParquetError::General("a column too many".to_owned()))?;
    column.typed::<T>().write_batch(&values, Some(&levels), None)?;
    column.close()
}

/// Writes some rows of a column as the next of a row group.
pub(super) fn write_cells<W: Write + Send>(
    group: &mut SerializedRowGroupWriter<'_, W>,
    cells: &Cells,
    rows: Range<usize>,
) -> Result<()> {
    match cells {
        Cells::Integer(cells) => write::<Int64Type, W>(group, cells[rows].iter().copied()),
        // A NaN in a table is as unknown as a missing value, as in its content hash.
        Cells::Number(cells) => {
            write::<DoubleType, W>(group, cells[rows].iter().map(|cell| cell.filter(|x| !x.is_nan())))
        }
        Cells::Boolean(cells) => write::<BoolType, W>(group, cells[rows].iter().copied()),
        Cells::Text(cells) => write::<ByteArrayType, W>(
            group,
            cells[rows].iter().map(|cell| cell.as_deref().map(|text| ByteArray::from(text.as_bytes().to_vec()))),
        ),
    }
}

/// Reads the first rows of a column of a row group behind what is there.
pub(super) fn read(group: &dyn RowGroupReader, column: usize, rows: usize, into: &mut Cells) -> Result<()> {
    go_on(&mut group.get_column_reader(column)?, rows, into)
}

/// Reads the next rows of a column behind what is there.
pub(super) fn go_on(reader: &mut ColumnReader, rows: usize, into: &mut Cells) -> Result<()> {
    match (reader, into) {
        (ColumnReader::Int64ColumnReader(reader), Cells::Integer(cells)) => take(reader, rows, Ok, cells),
        (ColumnReader::DoubleColumnReader(reader), Cells::Number(cells)) => take(reader, rows, Ok, cells),
        (ColumnReader::BoolColumnReader(reader), Cells::Boolean(cells)) => take(reader, rows, Ok, cells),
        (ColumnReader::ByteArrayColumnReader(reader), Cells::Text(cells)) => {
            take(reader, rows, |text| Ok(text.as_utf8()?.to_owned()), cells)
        }
        _ => Err(ParquetError::General("a column of another type".to_owned())),
    }
}

fn take<T: DataType, V>(
    reader: &mut ColumnReaderImpl<T>,
    rows: usize,
    convert: impl Fn(T::T) -> Result<V>,
    into: &mut Vec<Option<V>>,
) -> Result<()> {
    let (mut levels, mut values) = (Vec::new(), Vec::new());
    let (read, _, leveled) = reader.read_records(rows, Some(&mut levels), None, &mut values)?;
    if read != rows {
        return Err(ParquetError::General(format!("{read} rows where {rows} should be")));
    }
    into.reserve(rows);
    let mut values = values.into_iter();
    // A required column of a foreign file has no levels.
    let known = (0..rows).map(|row| leveled == 0 || levels.is_empty() || levels.get(row) == Some(&1));
    for known in known {
        match known {
            true => {
                let value = values.next().ok_or_else(|| ParquetError::General("a value is missing".to_owned()))?;
                into.push(Some(convert(value)?));
            }
            false => into.push(None),
        }
    }
    Ok(())
}

/// An empty column of a kind.
pub(super) fn empty(kind: Kind) -> Cells {
    match kind {
        Kind::Integer => Cells::Integer(Vec::new()),
        Kind::Number => Cells::Number(Vec::new()),
        Kind::Boolean => Cells::Boolean(Vec::new()),
        Kind::Text => Cells::Text(Vec::new()),
    }
}

/// The kind of a column.
pub(super) fn kind(cells: &Cells) -> Kind {
    match cells {
        Cells::Integer(_) => Kind::Integer,
        Cells::Number(_) => Kind::Number,
        Cells::Boolean(_) => Kind::Boolean,
        Cells::Text(_) => Kind::Text,
    }
}

/// The layout for a column: a function of its values alone. A dictionary pays where half of the values or more repeat, as
/// they do for energies on a lattice.
pub(super) fn layout(cells: &Cells) -> Layout {
    let limit = cells.len() / 2;
    let few = match cells {
        Cells::Integer(cells) => few_different(cells.iter().flatten().map(|v| *v as u64), limit),
        Cells::Number(cells) => few_different(cells.iter().flatten().map(|v| v.to_bits()), limit),
        Cells::Boolean(_) => false,
        Cells::Text(cells) => cells.iter().flatten().collect::<HashSet<_>>().len() <= limit,
    };
    match cells {
        _ if few => Layout::Dictionary,
        Cells::Integer(_) => Layout::Differences,
        Cells::Number(_) => Layout::Split,
        Cells::Boolean(_) | Cells::Text(_) => Layout::Plain,
    }
}

/// The layout for known numbers; NaN is not one.
pub(super) fn layout_of_numbers(numbers: &[f64]) -> Layout {
    let known = numbers.iter().filter(|x| !x.is_nan()).map(|x| x.to_bits());
    if few_different(known, numbers.len() / 2) { Layout::Dictionary } else { Layout::Split }
}

/// Name, unit and type of a column of numbers.
pub(super) fn info(name: &str, unit: &str, kind: Kind) -> ColumnInfo {
    ColumnInfo { name: name.to_owned(), unit: unit.to_owned(), kind }
}

/// Whether at most `limit` different words come; gives up at the first beyond. A table of open addresses at most half full:
/// a block is looked through in a fraction of the time that the general map takes.
fn few_different(words: impl Iterator<Item = u64>, limit: usize) -> bool {
    let capacity = (2 * limit + 2).next_power_of_two();
    let shift = 64 - capacity.trailing_zeros();
    let mut slots: Vec<Option<u64>> = vec![None; capacity];
    let mut seen = 0;
    for word in words {
        // Multiplication by 2^64 over the golden ratio spreads to the upper digits whatever differs below.
        let mut slot = ((word ^ word >> 32).wrapping_mul(0x9e37_79b9_7f4a_7c15) >> shift) as usize;
        loop {
            match slots[slot] {
                Some(known) if known == word => break,
                Some(_) => slot = (slot + 1) & (capacity - 1),
                None => {
                    seen += 1;
                    if seen > limit {
                        return false;
                    }
                    slots[slot] = Some(word);
                    break;
                }
            }
        }
    }
    true
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;
    use std::collections::BTreeSet;

    proptest! {
        #[test]
        fn different_words_are_counted(words in proptest::collection::vec(0u64..20, 0..40), limit in 0usize..25) {
            let different = words.iter().collect::<BTreeSet<_>>().len();
            prop_assert_eq!(few_different(words.iter().copied(), limit), different <= limit);
        }
    }
}
