//! Whether an entry still is what its record says.

use crate::content::{content_of_entry, content_of_table};
use crate::error::LedgerError;
use crate::ledger::Ledger;
use crate::record::Record;
use crate::stamp::file_key;
use crate::tables::table::read_table;
use spinledger_terms::Key;
use std::fs;
use std::io::ErrorKind;

impl Ledger {
    /// Reads an entry wholly and compares it with its record: key and preimage, length and BLAKE3 of each file, then the
    /// content of each table and of the whole. Returns the record.
    ///
    /// # Errors
    /// [`LedgerError::Absent`] where record or table are missing, [`LedgerError::Damaged`] where something differs.
    pub fn verify(&self, key: &Key) -> Result<Record, LedgerError> {
        let record = self.read_record(key)?;
        let path = self.entry(key).join("record.json");
        if Key::of(&record.preimage) != *key {
            return Err(LedgerError::damaged(&path, "its key is not the hash of its preimage"));
        }
        for table in &record.tables {
            let path = self.table_path(key, &table.name);
            let bytes = match fs::read(&path) {
                Ok(bytes) => bytes,
                Err(error) if error.kind() == ErrorKind::NotFound => return Err(LedgerError::Absent { path }),
                Err(error) => return Err(LedgerError::read("read", &path)(error)),
            };
            if bytes.len() as u64 != table.size {
                let what = format!("it has {} bytes, its record says {}", bytes.len(), table.size);
                return Err(LedgerError::damaged(&path, what));
            }
            if *blake3::hash(&bytes).as_bytes() != table.bytes.0 {
                return Err(LedgerError::damaged(&path, "its bytes are not those that were recorded"));
            }
            if file_key(&path)? != Some(*key) {
                return Err(LedgerError::damaged(&path, "it names another entry"));
            }
            let read = read_table(&path)?;
            if read.rows() as u64 != table.rows || content_of_table(&read) != table.content {
                return Err(LedgerError::damaged(&path, "its values are not those that were recorded"));
            }
        }
        for file in &record.files {
            let path = self.entry(key).join(&file.name);
            let bytes = match fs::read(&path) {
                Ok(bytes) => bytes,
                Err(error) if error.kind() == ErrorKind::NotFound => return Err(LedgerError::Absent { path }),
                Err(error) => return Err(LedgerError::read("read", &path)(error)),
            };
            if bytes.len() as u64 != file.size || *blake3::hash(&bytes).as_bytes() != file.bytes.0 {
                return Err(LedgerError::damaged(&path, "its bytes are not those that were recorded"));
            }
        }
        let tables = record.tables.iter().map(|t| (t.name.as_str(), t.content));
        let whole = content_of_entry(tables.chain(record.files.iter().map(|f| (f.name.as_str(), f.content))));
        let parts = record.tables.len() + record.files.len();
        if parts > 0 && whole != record.content {
            return Err(LedgerError::damaged(&path, "its content is not that of its tables"));
        }
        Ok(record)
    }
}
