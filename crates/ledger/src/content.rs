//! What a table contains, as a hash over schema and values: independent of row groups, encodings, compression, metadata
//! and the release that wrote the file.
//!
//! The hashed text, frozen as version 1: the number of columns, then for each its name and unit (length and bytes), a byte
//! for the type, the number of values and the BLAKE3 of the values; all numbers are little-endian, lengths and counts 64 bits
//! wide. Values: integers as a byte 1 and eight bytes; doubles as the eight bytes of their bits, so that 0.0 and -0.0 differ;
//! booleans as a byte 0 or 1; text as a byte 1, its length and its bytes. What is not known is a byte 0 (integers, text), a
//! byte 2 (booleans), and for doubles the bits of the quiet NaN, which no known value has.

use crate::tables::block::{BlockData, ColumnData};
use spinledger_terms::{Cells, ContentHash, Table};

const TABLE_CONTEXT: &str = "spinledger table content v1";
const ENTRY_CONTEXT: &str = "spinledger entry content v1";
const COMBINED_CONTEXT: &str = "spinledger combined content v1";

/// Bits that stand for an unknown double: the quiet NaN without payload.
const UNKNOWN: u64 = 0x7ff8_0000_0000_0000;

/// The content of a table.
pub fn content_of_table(table: &Table) -> ContentHash {
    let mut hasher = TableHasher::new(table.columns.len());
    for column in &table.columns {
        let mut values = Values::new();
        let kind = match &column.cells {
            Cells::Integer(cells) => {
                cells.iter().for_each(|cell| values.integer(*cell));
                b'i'
            }
            Cells::Number(cells) => {
                cells.iter().for_each(|cell| values.number(cell.unwrap_or(f64::NAN)));
                b'n'
            }
            Cells::Boolean(cells) => {
                cells.iter().for_each(|cell| values.put(&[cell.map_or(2, u8::from)]));
                b'b'
            }
            Cells::Text(cells) => {
                cells.iter().for_each(|cell| values.text(cell.as_deref()));
                b't'
            }
        };
        hasher.column(&column.name, &column.unit, kind, column.cells.len(), values);
    }
    hasher.finish()
}

/// The content of a block: that of the table with the column `sweep` and then the observables.
pub fn content_of_block(block: &BlockData) -> ContentHash {
    let mut hasher = TableHasher::new(block.columns.len() + 1);
    let mut values = Values::new();
    block.sweep.iter().for_each(|sweep| values.integer(Some(*sweep)));
    hasher.column("sweep", "sweeps", b'i', block.sweep.len(), values);
    for ColumnData { name, unit, values: numbers } in &block.columns {
        let mut values = Values::new();
        numbers.iter().for_each(|x| values.number(*x));
        hasher.column(name, unit, b'n', numbers.len(), values);
    }
    hasher.finish()
}

/// One content made of several in order; `label` says of what kind the whole is, so that different wholes of the same parts
/// differ.
pub fn combine(label: &str, parts: &[ContentHash]) -> ContentHash {
    let mut hasher = blake3::Hasher::new_derive_key(COMBINED_CONTEXT);
    text(&mut hasher, label);
    length(&mut hasher, parts.len());
    parts.iter().for_each(|part| {
        hasher.update(&part.0);
    });
    ContentHash(hasher.finalize().into())
}

/// The content of a file that is no table: a hash of its bytes.
pub(crate) fn content_of_file(bytes: &[u8]) -> ContentHash {
    ContentHash(blake3::hash(bytes).into())
}

/// The content of an entry: its tables and then its other files by name, in order.
pub fn content_of_entry<'a>(parts: impl Iterator<Item = (&'a str, ContentHash)>) -> ContentHash {
    let parts: Vec<_> = parts.collect();
    let mut hasher = blake3::Hasher::new_derive_key(ENTRY_CONTEXT);
    length(&mut hasher, parts.len());
    for (name, content) in parts {
        text(&mut hasher, name);
        hasher.update(&content.0);
    }
    ContentHash(hasher.finalize().into())
}

struct TableHasher(blake3::Hasher);

impl TableHasher {
    fn new(columns: usize) -> Self {
        let mut hasher = blake3::Hasher::new_derive_key(TABLE_CONTEXT);
        length(&mut hasher, columns);
        TableHasher(hasher)
    }

    fn column(&mut self, name: &str, unit: &str, kind: u8, rows: usize, values: Values) {
        text(&mut self.0, name);
        text(&mut self.0, unit);
        self.0.update(&[kind]);
        length(&mut self.0, rows);
        self.0.update(&values.finish());
    }

    fn finish(self) -> ContentHash {
        ContentHash(self.0.finalize().into())
    }
}

/// Hashes values through a buffer: BLAKE3 is several times faster on long inputs than on eight bytes at a time.
struct Values {
    hasher: blake3::Hasher,
    buffer: Vec<u8>,
}

impl Values {
    const BUFFER: usize = 16 * 1024;

    fn new() -> Self {
        Values { hasher: blake3::Hasher::new(), buffer: Vec::with_capacity(Self::BUFFER + 16) }
    }

    fn put(&mut self, bytes: &[u8]) {
        self.buffer.extend_from_slice(bytes);
        if self.buffer.len() >= Self::BUFFER {
            self.hasher.update(&self.buffer);
            self.buffer.clear();
        }
    }

    fn integer(&mut self, value: Option<i64>) {
        match value {
            None => self.put(&[0]),
            Some(value) => {
                let mut bytes = [1; 9];
                bytes[1..].copy_from_slice(&value.to_le_bytes());
                self.put(&bytes);
            }
        }
    }

    fn number(&mut self, value: f64) {
        let bits = if value.is_nan() { UNKNOWN } else { value.to_bits() };
        self.put(&bits.to_le_bytes());
    }

    fn text(&mut self, value: Option<&str>) {
        match value {
            None => self.put(&[0]),
            Some(value) => {
                self.put(&[1]);
                self.put(&(value.len() as u64).to_le_bytes());
                self.put(value.as_bytes());
            }
        }
    }

    fn finish(mut self) -> [u8; 32] {
        self.hasher.update(&self.buffer);
        self.hasher.finalize().into()
    }
}

fn length(hasher: &mut blake3::Hasher, length: usize) {
    hasher.update(&(length as u64).to_le_bytes());
}

fn text(hasher: &mut blake3::Hasher, text: &str) {
    length(hasher, text.len());
    hasher.update(text.as_bytes());
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_terms::Column;

    fn table() -> Table {
        Table {
            columns: vec![
                Column::integers("size", "", vec![Some(8), None]),
                Column::numbers("value", "J", vec![Some(-0.0), None]),
                Column::booleans("equilibrated", vec![Some(true), None]),
                Column::texts("flags", vec![Some("é".into()), None]),
            ],
        }
    }

    /// Contents stand in keys of what was computed from them: a change here orphans every ledger.
    #[test]
    fn value_stability() {
        let content = content_of_table(&table());
        assert_eq!(content.to_string(), "2656f7bdbdbc9022b3586701f36d775c1171efb5e6f1ee152f67aee8a80505db");
        let parts = [content, content_of_table(&Table::default())];
        assert_eq!(
            combine("series", &parts).to_string(),
            "fef24f41e75785d8a4793d48ec79a7b7b391a96f3608b4f62fb38a90b8d01e03"
        );
        assert_eq!(
            content_of_entry([("main", content)].into_iter()).to_string(),
            "2097a4f29c1aca433396173b54540cef4aa91a9fd0aa60009f685053b88ff9e9"
        );
    }

    #[test]
    fn every_part_of_a_table_counts() {
        let changes: [fn(&mut Table); 9] = [
            |t| t.columns[0].name.push('s'),
            |t| t.columns[1].unit.push('K'),
            |t| t.columns[1].cells = Cells::Number(vec![Some(0.0), None]),
            |t| t.columns[1].cells = Cells::Number(vec![None, Some(-0.0)]),
            |t| t.columns[0].cells = Cells::Number(vec![Some(8.0), None]),
            |t| t.columns[2].cells = Cells::Boolean(vec![Some(true), Some(false)]),
            |t| t.columns[3].cells = Cells::Text(vec![Some("é".into()), Some(String::new())]),
            |t| t.columns.swap(0, 1),
            |t| drop(t.columns.pop()),
        ];
        let mut seen = vec![content_of_table(&table())];
        for change in changes {
            let mut changed = table();
            change(&mut changed);
            seen.push(content_of_table(&changed));
        }
        let count = seen.len();
        seen.sort_unstable();
        seen.dedup();
        assert_eq!(seen.len(), count);
    }

    #[test]
    fn a_block_is_the_table_that_its_file_is_read_as() {
        let values = vec![1.5, f64::from_bits(UNKNOWN | 7), -0.0];
        let block = BlockData {
            sweep: vec![10, 20, 30],
            columns: vec![ColumnData { name: "energy".into(), unit: "J".into(), values: values.clone() }],
        };
        let table = Table {
            columns: vec![
                Column::integers("sweep", "sweeps", block.sweep.iter().map(|s| Some(*s)).collect()),
                Column::numbers("energy", "J", values.into_iter().map(Some).collect()),
            ],
        };
        assert_eq!(content_of_block(&block), content_of_table(&table));
    }

    #[test]
    fn wholes_differ_by_label_and_order() {
        let (a, b) = (ContentHash([1; 32]), ContentHash([2; 32]));
        assert_ne!(combine("x", &[a, b]), combine("x", &[b, a]));
        assert_ne!(combine("x", &[a]), combine("y", &[a]));
        assert_ne!(combine("x", &[]), combine("x", &[a]));
    }
}
