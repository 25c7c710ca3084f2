//! The record of an entry: where it comes from, and what is in it. `record.json`, one for each entry.

use crate::index::{ChainPlace, Line};
use serde::{Deserialize, Serialize};
use spinledger_terms::{ContentHash, Identity, Key, Value};

/// Version of the record's form.
pub(crate) const RECORD_FORMAT: u32 = 1;

/// What is on record of an entry. Fields stand in the file in this order.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Record {
    /// Version of this form: 1.
    pub format: u32,
    /// The entry's key.
    pub key: Key,
    /// What it is: `block`, `series`, `averages` ...
    pub kind: String,
    /// Hash over schema and values of all tables; for an entry without tables as its maker said.
    pub content: ContentHash,
    /// The tables, in order; none in a virtual entry.
    pub tables: Vec<TableRecord>,
    /// Other files, figures and pages, in order.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub files: Vec<OtherFile>,
    /// Its place in a chain, for blocks.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub chain: Option<ChainPlace>,
    /// How it was made.
    pub provenance: Provenance,
    /// The text that the key is the hash of.
    pub preimage: String,
}

/// The part of a record that says what an entry depends on and how large it is: quick to read where there are many.
#[derive(Clone, Debug, PartialEq, Eq, Deserialize)]
pub struct Brief {
    /// The entry's key.
    pub key: Key,
    /// The tables, in order.
    pub tables: Vec<TableRecord>,
    /// The text that the key is the hash of.
    pub preimage: String,
}

/// One table of an entry.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct TableRecord {
    /// Its name: the file is `<name>.parquet`.
    pub name: String,
    /// Number of rows.
    pub rows: u64,
    /// Hash over schema and values.
    pub content: ContentHash,
    /// BLAKE3 of the file.
    pub bytes: ContentHash,
    /// Length of the file in bytes.
    pub size: u64,
}

/// A file of an entry that is no table.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct OtherFile {
    /// Its name, with extension.
    pub name: String,
    /// BLAKE3 of its bytes without the key of the entry.
    pub content: ContentHash,
    /// BLAKE3 of the file.
    pub bytes: ContentHash,
    /// Its length in bytes.
    pub size: u64,
}

/// How an entry was made. Nothing in it enters a key or a content; what is not known is left at its default.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(default)]
pub struct Provenance {
    /// The parameters of the parcel, as checked.
    pub parameters: Value,
    /// The seed of the pipeline, where random numbers were used.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub seed: Option<u64>,
    /// The random generator.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub streams: Option<Streams>,
    /// The plugins that took part.
    pub plugins: Vec<Identity>,
    /// What it was made from.
    pub inputs: Vec<Input>,
    /// The program.
    pub program: Program,
    /// The processor.
    pub processor: Processor,
    /// Name of the host.
    pub host: String,
    /// Number of threads lent.
    pub threads: u32,
    /// When work began, RFC 3339 in UTC (see [`now`]).
    pub started: String,
    /// When it ended.
    pub finished: String,
    /// How long it took, in seconds.
    pub seconds: f64,
    /// Number of attempted spin updates.
    pub updates: u64,
    /// BLAKE3 of the pipeline's text, under which the ledger keeps it.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub pipeline: Option<ContentHash>,
    /// Facts about the content that only its maker knows: number of sites, meaning of columns ...
    #[serde(skip_serializing_if = "is_null")]
    pub facts: Value,
    /// What else should be known: warnings, refusals to continue a saved state ...
    pub notes: Vec<String>,
}

fn is_null(value: &Value) -> bool {
    *value == Value::Null
}

impl Default for Provenance {
    fn default() -> Self {
        Provenance {
            parameters: Value::Map(Default::default()),
            seed: None,
            streams: None,
            plugins: Vec::new(),
            facts: Value::Null,
            inputs: Vec::new(),
            program: Program::default(),
            processor: Processor::default(),
            host: String::new(),
            threads: 0,
            started: String::new(),
            finished: String::new(),
            seconds: 0.0,
            updates: 0,
            pipeline: None,
            notes: Vec::new(),
        }
    }
}

/// A random generator.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Streams {
    /// Its name.
    pub generator: String,
    /// The version of its derivation of streams.
    pub version: u32,
}

/// An entry that another was made from.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Input {
    /// What it serves as.
    pub name: String,
    /// Its key.
    pub key: Key,
    /// Its content, which is what the key of the other depends on.
    pub content: ContentHash,
}

/// The program that made an entry.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Program {
    /// Its name.
    pub name: String,
    /// Its version.
    pub version: String,
    /// The commit it was built from.
    pub commit: String,
    /// The compiler that built it.
    pub compiler: String,
}

/// The processor that an entry was computed on.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Processor {
    /// Its model.
    pub model: String,
    /// The instruction sets used.
    pub features: String,
}

impl Record {
    /// The journal's line of the entry.
    pub fn line(&self) -> Line {
        Line {
            key: self.key,
            kind: self.kind.clone(),
            chain: self.chain,
            content: self.content,
            seconds: self.provenance.seconds,
            updates: self.provenance.updates,
            // Other entries' facts are read with their records: lines are kept short, since there is one for every block.
            note: match &self.provenance.facts {
                facts if self.tables.is_empty() && self.files.is_empty() && *facts != Value::Null => facts.canonical(),
                _ => String::new(),
            },
        }
    }

    pub(crate) fn text(&self) -> String {
        // Only maps with keys other than text can fail, and there are none.
        let mut text = serde_json::to_string_pretty(self).unwrap_or_default();
        text.push('\n');
        text
    }
}

/// The time, as records have it: RFC 3339 in UTC, to the millisecond.
pub fn now() -> String {
    let now = jiff::Timestamp::now();
    now.round(jiff::Unit::Millisecond).unwrap_or(now).to_string()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_are_rfc_3339() {
        let text = now();
        assert!(text.ends_with('Z') && text.parse::<jiff::Timestamp>().is_ok(), "{text}");
    }

    #[test]
    fn a_record_reads_back_and_keeps_its_order() {
        let record = Record {
            format: RECORD_FORMAT,
            key: Key([1; 32]),
            kind: "block".into(),
            content: ContentHash([2; 32]),
            tables: vec![],
            files: vec![],
            chain: Some(ChainPlace { chain: Key([3; 32]), number: 1, block: 2, rows: 3 }),
            provenance: Provenance {
                parameters: Value::map([("temperature", Value::Number(2.269185314213022))]),
                seconds: 0.1,
                inputs: vec![Input { name: "chains".into(), key: Key([4; 32]), content: ContentHash([5; 32]) }],
                ..Provenance::default()
            },
            preimage: "{\"a\":1}".into(),
        };
        let text = record.text();
        assert_eq!(serde_json::from_str::<Record>(&text).unwrap(), record);
        let places: Vec<_> = ["\"format\"", "\"key\"", "\"kind\"", "\"content\"", "\"tables\"", "\"provenance\""]
            .iter()
            .map(|word| text.find(word).unwrap())
            .collect();
        assert!(places.is_sorted());
    }
}
