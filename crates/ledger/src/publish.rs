//! Publishing: an entry appears complete, once, and is never changed.

use crate::content::{content_of_block, content_of_entry, content_of_file, content_of_table};
use crate::error::LedgerError;
use crate::index::ChainPlace;
use crate::ledger::Ledger;
use crate::record::{OtherFile, Provenance, RECORD_FORMAT, Record, TableRecord};
use crate::stamp::stamped;
use crate::tables::block::{BlockData, write_block};
use crate::tables::table::write_table;
use spinledger_terms::{ContentHash, Key, Table};
use std::path::PathBuf;

/// What is to be published.
#[derive(Clone, Debug)]
pub struct Draft {
    /// The key: the hash of the preimage.
    pub key: Key,
    /// The canonical text of everything that the entry depends on.
    pub preimage: String,
    /// What it is: `block`, `series`, `averages` ...
    pub kind: String,
    /// Tables by name, in order; no tables and no files make a virtual entry.
    pub tables: Vec<(String, Payload)>,
    /// Other files, figures and pages, by name with extension, in order.
    pub files: Vec<(String, Vec<u8>)>,
    /// The content of an entry without tables; of others it is computed, and this is not looked at.
    pub content: Option<ContentHash>,
    /// Its place in a chain, for blocks.
    pub chain: Option<ChainPlace>,
    /// How it was made.
    pub provenance: Provenance,
}

/// A table of a draft.
#[derive(Clone, Debug, PartialEq)]
pub enum Payload {
    /// A table.
    Table(Table),
    /// A piece of a time series.
    Block(BlockData),
}

/// What publishing did.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Published {
    /// Whether this call published it; false where the same content was on record.
    pub fresh: bool,
    /// The entry's content.
    pub content: ContentHash,
    /// Where a damaged entry of that key was set aside: worth a warning.
    pub set_aside: Option<PathBuf>,
}

impl Draft {
    /// A draft without tables.
    pub fn new(preimage: &str, kind: &str, provenance: Provenance) -> Self {
        Draft {
            key: Key::of(preimage),
            preimage: preimage.to_owned(),
            kind: kind.to_owned(),
            tables: Vec::new(),
            files: Vec::new(),
            content: None,
            chain: None,
            provenance,
        }
    }

    /// Adds a table.
    #[must_use]
    pub fn table(mut self, name: &str, payload: Payload) -> Self {
        self.tables.push((name.to_owned(), payload));
        self
    }

    /// Adds a file; its name is a table's name, a dot and an extension.
    #[must_use]
    pub fn file(mut self, name: &str, bytes: Vec<u8>) -> Self {
        self.files.push((name.to_owned(), bytes));
        self
    }

    /// Sets the content of an entry without tables.
    #[must_use]
    pub fn content(mut self, content: ContentHash) -> Self {
        self.content = Some(content);
        self
    }

    /// Sets the place in a chain.
    #[must_use]
    pub fn chain(mut self, place: ChainPlace) -> Self {
        self.chain = Some(place);
        self
    }
}

impl Payload {
    fn content(&self) -> ContentHash {
        match self {
            Payload::Table(table) => content_of_table(table),
            Payload::Block(block) => content_of_block(block),
        }
    }

    fn rows(&self) -> usize {
        match self {
            Payload::Table(table) => table.rows(),
            Payload::Block(block) => block.rows(),
        }
    }

    fn encode(&self, key: &Key) -> Result<Vec<u8>, LedgerError> {
        match self {
            Payload::Table(table) => write_table(table, key),
            Payload::Block(block) => write_block(block, key),
        }
    }
}

/// The name and the bytes of a file.
type Named = (String, Vec<u8>);

impl Ledger {
    /// Publishes an entry: tables and record are written to a folder of their own, forced to the disk, and renamed to their
    /// place; then the journal gets its line. Where the entry is on record already, contents are compared. Where its record
    /// is damaged, the old entry is set aside (`<root>/aside`) and this one published.
    ///
    /// # Errors
    /// [`LedgerError::Differs`] where another content is on record: an alarm, and nothing is overwritten. Else where the
    /// tables cannot be encoded or the disk not written; the entry is then published completely (when the journal was the
    /// last thing to fail) or not at all, and publishing again succeeds.
    pub fn publish(&self, draft: Draft) -> Result<Published, LedgerError> {
        let mut contents = Vec::with_capacity(draft.tables.len());
        for (place, (name, payload)) in draft.tables.iter().enumerate() {
            let twice = draft.tables[..place].iter().any(|(other, _)| other == name);
            if twice || !is_table_name(name) {
                return Err(LedgerError::Name(name.clone()));
            }
            contents.push(payload.content());
        }
        for (place, (name, _)) in draft.files.iter().enumerate() {
            let parts = name.split_once('.').filter(|(_, extension)| *extension != "parquet" && *extension != "json");
            let sound = parts.is_some_and(|(stem, extension)| is_table_name(stem) && is_table_name(extension));
            if !sound || draft.files[..place].iter().any(|(other, _)| other == name) {
                return Err(LedgerError::Name(name.clone()));
            }
        }
        let content = match draft.content {
            Some(content) if draft.tables.is_empty() && draft.files.is_empty() => content,
            _ => {
                let tables = draft.tables.iter().map(|(name, _)| name.as_str()).zip(contents.iter().copied());
                let files = draft.files.iter().map(|(name, bytes)| (name.as_str(), content_of_file(bytes)));
                content_of_entry(tables.chain(files))
            }
        };
        let mut published = Published { fresh: false, content, set_aside: None };
        if self.compare(&draft.key, &mut published)? {
            return Ok(published);
        }
        let (record, files) = self.encode(draft, content, &contents)?;
        // The second round is for a folder in the way that has no readable record.
        for _ in 0..2 {
            let target = self.entry(&record.key);
            if self.writes.publish_folder(&target, &self.temporary(), &files)? {
                self.note(&record.line(), true)?;
                published.fresh = true;
                return Ok(published);
            }
            if self.compare(&record.key, &mut published)? {
                return Ok(published);
            }
        }
        Err(LedgerError::damaged(&self.entry(&record.key), "a folder without a record is in the way, and comes back"))
    }

    /// Whether the same content is on record. What is in the way without a readable record is set aside.
    fn compare(&self, key: &Key, published: &mut Published) -> Result<bool, LedgerError> {
        match self.read_record(key) {
            Ok(record) if record.content == published.content => {
                self.note(&record.line(), false)?;
                Ok(true)
            }
            Ok(record) => {
                Err(LedgerError::Differs { key: *key, recorded: record.content, computed: published.content })
            }
            Err(LedgerError::Absent { .. } | LedgerError::Damaged { .. }) => {
                let entry = self.entry(key);
                if entry.exists() {
                    let aside = self.root.join("aside");
                    self.writes.make_folder(&aside)?;
                    let target = aside.join(format!("{key}-{}", crate::host::unique()));
                    self.writes.rename(&entry, &target)?;
                    published.set_aside = Some(target);
                }
                Ok(false)
            }
            Err(error) => Err(error),
        }
    }

    fn encode(
        &self,
        draft: Draft,
        content: ContentHash,
        contents: &[ContentHash],
    ) -> Result<(Record, Vec<Named>), LedgerError> {
        let mut tables = Vec::with_capacity(contents.len());
        let mut files = Vec::with_capacity(contents.len() + 1);
        for ((name, payload), content) in draft.tables.into_iter().zip(contents) {
            let bytes = payload.encode(&draft.key)?;
            tables.push(TableRecord {
                rows: payload.rows() as u64,
                content: *content,
                bytes: ContentHash(blake3::hash(&bytes).into()),
                size: bytes.len() as u64,
                name: name.clone(),
            });
            files.push((format!("{name}.parquet"), bytes));
        }
        let mut others = Vec::with_capacity(draft.files.len());
        for (name, bytes) in draft.files {
            let content = content_of_file(&bytes);
            let bytes = stamped(&name, bytes, &draft.key)?;
            let hash = ContentHash(blake3::hash(&bytes).into());
            others.push(OtherFile { content, bytes: hash, size: bytes.len() as u64, name: name.clone() });
            files.push((name, bytes));
        }
        let Draft { key, preimage, kind, chain, provenance, .. } = draft;
        let record =
            Record { format: RECORD_FORMAT, key, kind, content, tables, files: others, chain, provenance, preimage };
        files.push(("record.json".to_owned(), record.text().into_bytes()));
        Ok((record, files))
    }
}

/// Whether a name can be part of a file name anywhere.
fn is_table_name(name: &str) -> bool {
    !name.is_empty() && name.len() <= 100 && name.bytes().all(|b| b.is_ascii_alphanumeric() || b == b'_' || b == b'-')
}
