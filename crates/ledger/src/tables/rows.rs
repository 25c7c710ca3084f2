//! Tables of any length, read a batch of rows at a time.

use super::cells::{empty, go_on};
use super::format::{ColumnInfo, Kind, columns_of};
use super::table::open;
use crate::error::LedgerError;
use parquet::column::reader::ColumnReader;
use parquet::file::reader::{FileReader, SerializedFileReader};
use spinledger_terms::{Cells, Column, Table};
use std::fs::{self, File};
use std::path::{Path, PathBuf};

/// What a column holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum What {
    /// Whole numbers.
    Integer,
    /// Doubles.
    Number,
    /// True or false.
    Boolean,
    /// Text.
    Text,
}

impl From<Kind> for What {
    fn from(kind: Kind) -> Self {
        match kind {
            Kind::Integer => What::Integer,
            Kind::Number => What::Number,
            Kind::Boolean => What::Boolean,
            Kind::Text => What::Text,
        }
    }
}

/// The rows of a Parquet file, or of all the Parquet files of a folder in order of their names, which must have the same columns.
///
/// Memory is bounded by the batch and by one encoded page of each chosen column, whatever the number of rows. Opening reads the metadata of
/// every file; columns that were not chosen are not touched.
pub struct TableRows {
    files: Vec<PathBuf>,
    columns: Vec<ColumnInfo>,
    rows: u64,
    wanted: Vec<usize>,
    /// The file that is read next or just now.
    file: usize,
    reader: Option<SerializedFileReader<File>>,
    /// The row group that is read next.
    group: usize,
    /// What is left of the row group that is read just now, and its columns.
    left: usize,
    readers: Vec<ColumnReader>,
}

impl std::fmt::Debug for TableRows {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("TableRows").field("files", &self.files).field("rows", &self.rows).finish_non_exhaustive()
    }
}

impl TableRows {
    /// Opens a file or a folder; all columns are chosen.
    ///
    /// # Errors
    /// Where there is no such file, it is no Parquet file of integers, doubles, booleans and text, or a folder holds no Parquet file or such
    /// with different columns.
    pub fn open(path: &Path) -> Result<Self, LedgerError> {
        let files = if path.is_dir() { parquet_files(path)? } else { vec![path.to_owned()] };
        let mut columns: Option<Vec<ColumnInfo>> = None;
        let mut rows = 0;
        for file in &files {
            let reader = open(file)?;
            let metadata = reader.metadata().file_metadata();
            let own = columns_of(metadata, file)?;
            rows += u64::try_from(metadata.num_rows()).unwrap_or(0);
            match &columns {
                None => columns = Some(own),
                Some(first) if *first == own => {}
                Some(_) => {
                    let (one, other) = (files[0].display(), file.display());
                    return Err(LedgerError::Columns(format!("{one} and {other} are no one table")));
                }
            }
        }
        let Some(columns) = columns else {
            return Err(LedgerError::Columns(format!("the folder {} holds no Parquet file", path.display())));
        };
        let wanted = (0..columns.len()).collect();
        let (file, reader, group, left, readers) = (0, None, 0, 0, Vec::new());
        Ok(TableRows { files, columns, rows, wanted, file, reader, group, left, readers })
    }

    /// Names, units and types of all columns, in order.
    pub fn columns(&self) -> impl Iterator<Item = (&str, &str, What)> {
        self.columns.iter().map(|c| (c.name.as_str(), c.unit.as_str(), c.kind.into()))
    }

    /// Number of rows, by the files' metadata.
    pub fn rows(&self) -> u64 {
        self.rows
    }

    /// Chooses columns by their places, in the order of later batches, and begins with the first row. Places beyond the columns are left out.
    pub fn choose(&mut self, places: &[usize]) {
        self.wanted = places.iter().copied().filter(|place| *place < self.columns.len()).collect();
        (self.file, self.reader, self.group, self.left) = (0, None, 0, 0);
        self.readers.clear();
    }

    /// The next rows, `most` of them at most and one at least; None at the end.
    ///
    /// # Errors
    /// Where a file cannot be decoded.
    pub fn next_batch(&mut self, most: usize) -> Result<Option<Table>, LedgerError> {
        while self.left == 0 {
            if !self.next_group()? {
                return Ok(None);
            }
        }
        let rows = self.left.min(most.max(1));
        let mut table = Table::default();
        for (reader, place) in self.readers.iter_mut().zip(&self.wanted) {
            let ColumnInfo { name, unit, kind } = &self.columns[*place];
            let mut cells: Cells = empty(*kind);
            go_on(reader, rows, &mut cells).map_err(LedgerError::parquet("decode", &self.files[self.file]))?;
            table.columns.push(Column { name: name.clone(), unit: unit.clone(), cells });
        }
        self.left -= rows;
        Ok(Some(table))
    }

    /// Goes on to the next row group, of the next file where this one has no more; false at the end.
    fn next_group(&mut self) -> Result<bool, LedgerError> {
        let Some(path) = self.files.get(self.file) else { return Ok(false) };
        let reader = match &self.reader {
            Some(reader) => reader,
            None => self.reader.insert(open(path)?),
        };
        if self.group == reader.num_row_groups() {
            (self.file, self.reader, self.group) = (self.file + 1, None, 0);
            return Ok(self.file < self.files.len());
        }
        let begin = || {
            let group = reader.get_row_group(self.group)?;
            let rows = usize::try_from(group.metadata().num_rows()).unwrap_or(0);
            let readers = self.wanted.iter().map(|place| group.get_column_reader(*place));
            Ok((rows, readers.collect::<Result<Vec<_>, parquet::errors::ParquetError>>()?))
        };
        (self.left, self.readers) = begin().map_err(LedgerError::parquet("decode", path))?;
        self.group += 1;
        Ok(true)
    }
}

/// The Parquet files of a folder, not of those in it, in order of their names.
fn parquet_files(folder: &Path) -> Result<Vec<PathBuf>, LedgerError> {
    let mut files = Vec::new();
    for entry in fs::read_dir(folder).map_err(LedgerError::read("list", folder))? {
        let path = entry.map_err(LedgerError::read("list", folder))?.path();
        // What is being written has a hidden name.
        let hidden = path.file_name().is_some_and(|name| name.to_string_lossy().starts_with('.'));
        if !hidden && path.extension().is_some_and(|e| e == "parquet") && path.is_file() {
            files.push(path);
        }
    }
    files.sort();
    Ok(files)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::tables::table::{read_table, write_table};
    use spinledger_terms::Key;

    fn table(from: i64, rows: i64) -> Table {
        let of = |i: i64| (i % 3 != 0).then_some(i);
        let each = from..from + rows;
        Table {
            columns: vec![
                Column::integers("n", "sweeps", each.clone().map(of).collect()),
                Column::numbers("x", "J", each.clone().map(|i| of(i).map(|i| i as f64 / 7.0)).collect()),
                Column::booleans("even", each.clone().map(|i| of(i).map(|i| i % 2 == 0)).collect()),
                Column::texts("word", each.map(|i| of(i).map(|i| format!("w{}", i % 10))).collect()),
            ],
        }
    }

    fn write(path: &Path, table: &Table) {
        fs::write(path, write_table(table, &Key([1; 32])).unwrap()).unwrap();
    }

    /// Batches of any size give what reading the whole gives, across row groups and pages.
    #[test]
    fn batches_are_the_table() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("t.parquet");
        write(&path, &table(0, 150_000));
        let whole = read_table(&path).unwrap();
        for most in [1000, 65_537, 1 << 20] {
            let mut rows = TableRows::open(&path).unwrap();
            assert_eq!(rows.rows(), 150_000);
            let mut all = Table::default();
            while let Some(batch) = rows.next_batch(most).unwrap() {
                assert!((1..=most).contains(&batch.rows()));
                all.append(&batch).unwrap();
            }
            assert_eq!(all, whole);
            assert!(rows.next_batch(1).unwrap().is_none(), "the end is the end");
        }
    }

    #[test]
    fn a_folder_is_one_table_in_order_of_names() {
        let folder = tempfile::tempdir().unwrap();
        write(&folder.path().join("b.parquet"), &table(5, 5));
        write(&folder.path().join("a.parquet"), &table(0, 5));
        write(&folder.path().join(".hidden.parquet"), &table(0, 5));
        fs::write(folder.path().join("mine.txt"), "mine").unwrap();
        let mut rows = TableRows::open(folder.path()).unwrap();
        rows.choose(&[3, 0]);
        let mut all = Table::default();
        while let Some(batch) = rows.next_batch(3).unwrap() {
            all.append(&batch).unwrap();
        }
        let expected = table(0, 10);
        assert_eq!(all.columns, [expected.columns[3].clone(), expected.columns[0].clone()]);
        let what: Vec<What> = rows.columns().map(|(_, _, what)| what).collect();
        assert_eq!(what, [What::Integer, What::Number, What::Boolean, What::Text]);
    }

    #[test]
    fn what_is_no_table_is_refused() {
        let folder = tempfile::tempdir().unwrap();
        assert!(matches!(TableRows::open(folder.path()), Err(LedgerError::Columns(_))), "an empty folder");
        let path = folder.path().join("a.parquet");
        assert!(matches!(TableRows::open(&path), Err(LedgerError::Absent { .. })));
        fs::write(&path, "PAR1 it is not").unwrap();
        assert!(matches!(TableRows::open(&path), Err(LedgerError::Parquet { .. })));
        write(&path, &table(0, 2));
        let other = Table { columns: vec![Column::integers("n", "", vec![Some(1)])] };
        write(&folder.path().join("b.parquet"), &other);
        let error = TableRows::open(folder.path()).unwrap_err().to_string();
        assert!(error.contains("a.parquet") && error.contains("b.parquet"), "{error}");
    }
}
