//! One file of many tables, one below the other, each with constant columns in front: read and written a piece at a time, since the whole may be far
//! larger than memory. Unlike a series' blocks the tables may be tiny and very many, so that they are encoded anew, in full row groups.

use super::assemble::{Constant, cells_of, info_of};
use super::cells::{empty, layout, write_cells};
use super::format::{ColumnInfo, GROUP_ROWS, Kind, Layout, properties, schema};
use super::table::read_table;
use crate::error::LedgerError;
use crate::writes::{NewFile, Writes};
use parquet::file::writer::SerializedFileWriter;
use spinledger_terms::{Cells, Column, Key};
use std::path::{Path, PathBuf};

/// A table's file, with constant columns.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// The file.
    pub path: PathBuf,
    /// Columns that are constant within the part; the same names, units and types in every part.
    pub constants: Vec<Constant>,
}

/// Writes one file of the parts in order: the constants, then the columns of the tables. Returns its number of rows. Equal parts give equal bytes;
/// row groups have 65536 rows. Memory is that of one part and one row group.
///
/// # Errors
/// Where there are no parts, a part has other columns than the first, a file cannot be read, or the output cannot be written; a file of that name is
/// then left as it was.
pub fn join(
    writes: &Writes,
    output: &Path,
    key: &Key,
    parts: impl IntoIterator<Item = Part>,
) -> Result<u64, LedgerError> {
    let mut parts = parts.into_iter();
    let Some(first) = parts.next() else {
        return Err(LedgerError::Columns(format!("{} would have no parts", output.display())));
    };
    let table = read_table(&first.path)?;
    let constants = first.constants.iter().map(info_of).collect::<Result<Vec<_>, _>>()?;
    let own: Vec<ColumnInfo> = table.columns.iter().map(info_of_column).collect();
    let columns: Vec<ColumnInfo> = constants.iter().chain(&own).cloned().collect();
    let plain = |kind: Kind| if kind == Kind::Boolean { Layout::Plain } else { Layout::Dictionary };
    let layouts: Vec<Layout> = constants
        .iter()
        .map(|column| plain(column.kind))
        .chain(table.columns.iter().map(|column| layout(&column.cells)))
        .collect();
    let written = LedgerError::parquet;
    let mut file = writes.new_file(output)?;
    let mut writer: SerializedFileWriter<&mut NewFile> =
        SerializedFileWriter::new(&mut file, schema(&columns)?, properties(&columns, &layouts, key))
            .map_err(written("write", output))?;
    let nothing = || -> Vec<Cells> { columns.iter().map(|column| empty(column.kind)).collect() };
    let (mut held, mut rows, mut total) = (nothing(), 0, 0);
    let mut flush = |held: &mut Vec<Cells>| {
        let mut group = writer.next_row_group()?;
        held.iter().try_for_each(|cells| write_cells(&mut group, cells, 0..cells.len()))?;
        *held = nothing();
        group.close()
    };
    let mut ready = Some((first, table));
    loop {
        let (part, table) = match ready.take() {
            Some(ready) => ready,
            None => match parts.next() {
                Some(part) => {
                    let table = read_table(&part.path)?;
                    (part, table)
                }
                None => break,
            },
        };
        let same = part.constants.iter().map(info_of).collect::<Result<Vec<_>, _>>()? == constants
            && table.columns.iter().map(info_of_column).eq(own.iter().cloned());
        if !same {
            let what = format!("the columns of {} are others than those of the first part", part.path.display());
            return Err(LedgerError::Columns(what));
        }
        let mut from = 0;
        while from < table.rows() {
            let count = (GROUP_ROWS - rows).min(table.rows() - from);
            for (cells, constant) in held.iter_mut().zip(&part.constants) {
                if let Some(repeated) = cells_of(&constant.value, count) {
                    append(cells, &repeated, 0, count);
                }
            }
            for (cells, column) in held[constants.len()..].iter_mut().zip(&table.columns) {
                append(cells, &column.cells, from, count);
            }
            (from, rows, total) = (from + count, rows + count, total + count as u64);
            if rows == GROUP_ROWS {
                flush(&mut held).map_err(written("write", output))?;
                rows = 0;
            }
        }
    }
    if rows > 0 {
        flush(&mut held).map_err(written("write", output))?;
    }
    writer.close().map_err(written("write", output))?;
    file.finish()?;
    Ok(total)
}

fn info_of_column(column: &Column) -> ColumnInfo {
    super::cells::info(&column.name, &column.unit, super::cells::kind(&column.cells))
}

/// Appends some rows; of one type, which has been seen to.
fn append(into: &mut Cells, from: &Cells, first: usize, count: usize) {
    let rows = first..first + count;
    match (into, from) {
        (Cells::Integer(into), Cells::Integer(from)) => into.extend_from_slice(&from[rows]),
        (Cells::Number(into), Cells::Number(from)) => into.extend_from_slice(&from[rows]),
        (Cells::Boolean(into), Cells::Boolean(from)) => into.extend_from_slice(&from[rows]),
        (Cells::Text(into), Cells::Text(from)) => into.extend_from_slice(&from[rows]),
        _ => {}
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::tables::table::write_table;
    use spinledger_terms::{Table, Value};

    fn part(folder: &Path, name: &str, rows: i64, chain: i64) -> Part {
        let table = Table {
            columns: vec![
                Column::integers("site", "", (0..rows).map(Some).collect()),
                Column::numbers(
                    "value",
                    "",
                    (0..rows).map(|n| Some(if n % 3 == chain { 1.0 } else { -1.0 })).collect(),
                ),
            ],
        };
        let path = folder.join(name);
        std::fs::write(&path, write_table(&table, &Key([1; 32])).unwrap()).unwrap();
        let constant = |name: &str, value| Constant { name: name.into(), unit: String::new(), value };
        let constants = vec![constant("temperature", Value::Number(2.5)), constant("chain", Value::Integer(chain))];
        Part { path, constants }
    }

    /// Tables of any length, one below the other, also where they do not end with a row group.
    #[test]
    fn parts_stand_one_below_the_other() {
        let folder = tempfile::tempdir().unwrap();
        let lengths = [70_000, 3, 60_000, 140_000];
        let parts: Vec<Part> = lengths
            .iter()
            .enumerate()
            .map(|(chain, rows)| part(folder.path(), &format!("{chain}.parquet"), *rows, chain as i64))
            .collect();
        let output = folder.path().join("all.parquet");
        let rows = join(&Writes::new(), &output, &Key([2; 32]), parts.clone()).unwrap();
        assert_eq!(rows, 270_003);
        let table = read_table(&output).unwrap();
        let names: Vec<&str> = table.columns.iter().map(|c| c.name.as_str()).collect();
        assert_eq!(names, ["temperature", "chain", "site", "value"]);
        let expected = lengths.iter().enumerate().flat_map(|(chain, rows)| (0..*rows).map(move |n| (chain as i64, n)));
        let (Cells::Integer(chain), Cells::Integer(site)) = (&table.columns[1].cells, &table.columns[2].cells) else {
            panic!("integers")
        };
        assert!(expected.eq(chain.iter().flatten().copied().zip(site.iter().flatten().copied())));
        let value = table.columns[3].cells.number(70_000 + 1);
        assert_eq!(value, Some(1.0), "site 1 of chain 1");
        assert_eq!(crate::file_key(&output).unwrap(), Some(Key([2; 32])));
        let again = folder.path().join("again.parquet");
        join(&Writes::new(), &again, &Key([2; 32]), parts).unwrap();
        assert_eq!(std::fs::read(&output).unwrap(), std::fs::read(&again).unwrap());
    }

    #[test]
    fn parts_that_do_not_fit_are_refused() {
        let folder = tempfile::tempdir().unwrap();
        let mut parts = vec![part(folder.path(), "a.parquet", 3, 0), part(folder.path(), "b.parquet", 3, 1)];
        parts[1].constants.pop();
        let output = folder.path().join("all.parquet");
        let error = join(&Writes::new(), &output, &Key([2; 32]), parts).unwrap_err();
        assert!(error.to_string().contains("b.parquet"), "{error}");
        assert!(!output.exists());
        assert!(join(&Writes::new(), &output, &Key([2; 32]), []).is_err());
    }
}
