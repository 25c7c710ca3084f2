//! The store as a folder: opening it, and where things stand in it.

use crate::error::LedgerError;
use crate::index::{Index, Line};
use crate::journal::{self, Journal};
use crate::record::{Brief, Record};
use crate::tables::block::{BlockData, read_block};
use crate::tables::table::read_table;
use crate::writes::Writes;
use serde::de::DeserializeOwned;
use spinledger_terms::{ContentHash, Key, Table};
use std::collections::BTreeSet;
use std::fs;
use std::io::ErrorKind;
use std::path::{Path, PathBuf};
use std::sync::{Mutex, PoisonError};

const FORMAT: &str = "spinledger ledger 1";

/// A store of published entries. Can be shared by threads, and its folder by processes and hosts.
#[derive(Debug)]
pub struct Ledger {
    pub(crate) root: PathBuf,
    pub(crate) writes: Writes,
    journal: Mutex<(Journal, BTreeSet<Key>)>,
}

impl Ledger {
    /// Opens a ledger, making it where the folder is missing or empty, and removes what dead processes left unfinished.
    ///
    /// # Errors
    /// Where the folder holds something else, was written by a later release, or cannot be read or made.
    pub fn open(root: &Path) -> Result<Self, LedgerError> {
        Self::open_with(root, Writes::new())
    }

    /// As [`Ledger::open`], with a given way of writing.
    ///
    /// # Errors
    /// As [`Ledger::open`].
    pub fn open_with(root: &Path, writes: Writes) -> Result<Self, LedgerError> {
        let format = root.join("format");
        match fs::read_to_string(&format) {
            Ok(found) if found.trim_end() == FORMAT => {}
            Ok(found) => {
                let found = found.lines().next().unwrap_or_default().to_owned();
                return Err(LedgerError::NewerFormat { path: format, found, expected: FORMAT });
            }
            Err(error) if error.kind() == ErrorKind::NotFound => {
                if holds_something_else(root)? {
                    return Err(LedgerError::NotALedger { path: root.to_owned() });
                }
            }
            Err(error) => return Err(LedgerError::read("read", &format)(error)),
        }
        let ledger = Ledger {
            root: root.to_owned(),
            journal: Mutex::new((Journal::new(root.join("journal")), BTreeSet::new())),
            writes,
        };
        for folder in ["temporary", "entries", "journal", "claims", "states", "texts"] {
            ledger.writes.make_folder(&root.join(folder))?;
        }
        if !format.exists() {
            ledger.writes.write_file_via(&format, &ledger.temporary(), format!("{FORMAT}\n").as_bytes())?;
        }
        ledger.writes.clear_leftovers(&ledger.temporary());
        Ok(ledger)
    }

    /// Whether a folder holds a ledger; nothing is made.
    pub fn is_at(root: &Path) -> bool {
        root.join("format").is_file()
    }

    /// The ledger's folder.
    pub fn root(&self) -> &Path {
        &self.root
    }

    /// The way of writing that the ledger was opened with.
    pub fn writes(&self) -> &Writes {
        &self.writes
    }

    /// What the journals say. Takes about 2 microseconds for each entry; no entry is looked at.
    ///
    /// # Errors
    /// Where a journal cannot be read. Damaged lines are [warnings](Index::warnings).
    pub fn index(&self) -> Result<Index, LedgerError> {
        journal::read_all(&self.root.join("journal"))
    }

    /// Looks for an entry on the disk that the index does not name: one whose writer was stopped between publishing and
    /// its journal. What is found is put into this process's journal. An entry whose record is damaged counts as absent:
    /// publishing sets it aside.
    ///
    /// # Errors
    /// Where the record or the journal cannot be read or written.
    pub fn lookup(&self, key: &Key) -> Result<Option<Line>, LedgerError> {
        match self.read_record(key) {
            Ok(record) => {
                let line = record.line();
                self.note(&line, false)?;
                Ok(Some(line))
            }
            Err(LedgerError::Absent { .. } | LedgerError::Damaged { .. }) => Ok(None),
            Err(error) => Err(error),
        }
    }

    /// The record of an entry.
    ///
    /// # Errors
    /// [`LedgerError::Absent`] where it is not on record, [`LedgerError::Damaged`] where it cannot be understood.
    pub fn read_record(&self, key: &Key) -> Result<Record, LedgerError> {
        self.read_part(key, |record: &Record| record.key)
    }

    /// What an entry depends on, and how large it is. Takes about 20 microseconds.
    ///
    /// # Errors
    /// As [`Ledger::read_record`].
    pub fn read_brief(&self, key: &Key) -> Result<Brief, LedgerError> {
        self.read_part(key, |brief: &Brief| brief.key)
    }

    fn read_part<T: DeserializeOwned>(&self, key: &Key, key_of: impl Fn(&T) -> Key) -> Result<T, LedgerError> {
        let path = self.entry(key).join("record.json");
        let text = match fs::read(&path) {
            Ok(text) => text,
            Err(error) if matches!(error.kind(), ErrorKind::NotFound | ErrorKind::NotADirectory) => {
                return Err(LedgerError::Absent { path });
            }
            Err(error) => return Err(LedgerError::read("read the record", &path)(error)),
        };
        let part: T = serde_json::from_slice(&text).map_err(|error| LedgerError::damaged(&path, error.to_string()))?;
        let found = key_of(&part);
        if found != *key {
            return Err(LedgerError::damaged(&path, format!("it is the record of {found}")));
        }
        Ok(part)
    }

    /// The folder of an entry, whether it is there or not.
    pub fn entry(&self, key: &Key) -> PathBuf {
        let name = key.to_string();
        self.root.join("entries").join(&name[..2]).join(name)
    }

    /// The file of an entry's table, whether it is there or not.
    pub fn table_path(&self, key: &Key, table: &str) -> PathBuf {
        self.entry(key).join(format!("{table}.parquet"))
    }

    /// A table of an entry.
    ///
    /// # Errors
    /// Where it is absent or cannot be read.
    pub fn read_table(&self, key: &Key, table: &str) -> Result<Table, LedgerError> {
        read_table(&self.table_path(key, table))
    }

    /// A block of an entry: all columns or the named ones, all rows or the first ones.
    ///
    /// # Errors
    /// Where it is absent or cannot be read.
    pub fn read_block(
        &self,
        key: &Key,
        table: &str,
        columns: Option<&[&str]>,
        rows: Option<usize>,
    ) -> Result<BlockData, LedgerError> {
        read_block(&self.table_path(key, table), columns, rows)
    }

    /// The keys on disk that begin with the given hexadecimal digits, in order: what a shortened key stands for. Lists a
    /// folder of entries, or all of them where fewer than two digits are given.
    ///
    /// # Errors
    /// Where a folder cannot be listed.
    pub fn find(&self, prefix: &str) -> Result<Vec<Key>, LedgerError> {
        let entries = self.root.join("entries");
        let mut keys = Vec::new();
        for group in names(&entries)? {
            let shared = group.len().min(prefix.len());
            if group.get(..shared) == prefix.get(..shared) {
                let found = names(&entries.join(&group))?.into_iter().filter(|name| name.starts_with(prefix));
                keys.extend(found.filter_map(|name| name.parse::<Key>().ok()));
            }
        }
        keys.sort_unstable();
        Ok(keys)
    }

    /// Removes entries: first from the journals, then from the disk. A process that publishes meanwhile goes on.
    ///
    /// # Errors
    /// Where a journal or an entry cannot be changed; entries already gone from the journals are then still found by
    /// [`Ledger::lookup`].
    pub fn remove(&self, keys: &BTreeSet<Key>) -> Result<(), LedgerError> {
        let temporary = self.temporary();
        journal::forget(&self.writes, &self.root.join("journal"), &temporary, &|key| keys.contains(key))?;
        let mut journal = self.journal.lock().unwrap_or_else(PoisonError::into_inner);
        for key in keys {
            journal.1.remove(key);
            let entry = self.entry(key);
            if entry.exists() {
                // Under another name first, so that no reader sees half an entry.
                let scratch = self.writes.scratch(&temporary);
                self.writes.rename(&entry, &scratch)?;
                self.writes.remove_folder(&scratch)?;
            }
            self.drop_state(key)?;
        }
        Ok(())
    }

    /// Keeps a text, such as a pipeline, under its hash.
    ///
    /// # Errors
    /// Where it cannot be written.
    pub fn save_text(&self, text: &str) -> Result<ContentHash, LedgerError> {
        let hash = ContentHash(blake3::hash(text.as_bytes()).into());
        let path = self.text_path(&hash);
        if !path.exists() {
            self.writes.write_file_via(&path, &self.temporary(), text.as_bytes())?;
        }
        Ok(hash)
    }

    /// A text by its hash.
    ///
    /// # Errors
    /// [`LedgerError::Absent`] where it is not kept, [`LedgerError::Damaged`] where it is not what its name says.
    pub fn load_text(&self, hash: &ContentHash) -> Result<String, LedgerError> {
        let path = self.text_path(hash);
        let bytes = match fs::read(&path) {
            Ok(bytes) => bytes,
            Err(error) if error.kind() == ErrorKind::NotFound => return Err(LedgerError::Absent { path }),
            Err(error) => return Err(LedgerError::read("read", &path)(error)),
        };
        if *blake3::hash(&bytes).as_bytes() != hash.0 {
            return Err(LedgerError::damaged(&path, "its hash is another"));
        }
        String::from_utf8(bytes).map_err(|_| LedgerError::damaged(&path, "it is not UTF-8"))
    }

    /// Puts an entry into this process's journal; where it is not `fresh` only if this process did not do so before.
    pub(crate) fn note(&self, line: &Line, fresh: bool) -> Result<(), LedgerError> {
        let mut guard = self.journal.lock().unwrap_or_else(PoisonError::into_inner);
        let (journal, noted) = &mut *guard;
        // A fresh entry of a known key was removed in between, by another process, and its line with it.
        if fresh || !noted.contains(&line.key) {
            journal.append(&self.writes, line)?;
            noted.insert(line.key);
        }
        Ok(())
    }

    pub(crate) fn temporary(&self) -> PathBuf {
        self.root.join("temporary")
    }

    fn text_path(&self, hash: &ContentHash) -> PathBuf {
        self.root.join("texts").join(hash.to_string())
    }
}

/// Whether a folder without `format` holds anything but what opening a ledger makes first.
fn holds_something_else(root: &Path) -> Result<bool, LedgerError> {
    let ours = ["temporary", "entries", "journal", "claims", "states", "texts"];
    Ok(names(root)?.iter().any(|name| !ours.contains(&name.as_str())))
}

/// The names in a folder, in order; none where it is missing.
fn names(folder: &Path) -> Result<Vec<String>, LedgerError> {
    let entries = match fs::read_dir(folder) {
        Ok(entries) => entries,
        Err(error) if error.kind() == ErrorKind::NotFound => return Ok(Vec::new()),
        Err(error) => return Err(LedgerError::read("list", folder)(error)),
    };
    let mut names = Vec::new();
    for entry in entries {
        let name = entry.map_err(LedgerError::read("list", folder))?.file_name();
        names.push(name.to_string_lossy().into_owned());
    }
    names.sort();
    Ok(names)
}
