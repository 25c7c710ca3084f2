//! The content-addressed store of everything computed: entries with their records, the journals that index them, claims,
//! saved states, and the Parquet tables in all of them.
//!
//! - [`Ledger`] opens a store, [publishes](Ledger::publish) a [`Draft`] once, and reads what was published.
//! - [`Index`] is what the journals say: one [`Line`] an entry, found by key or by chain.
//! - [`Record`] is the provenance of an entry.
//! - [`BlockData`] is a piece of a time series; [`assemble`] joins recorded pieces to one file without decoding them.
//! - [`TableRows`] reads a table of any length, or a folder of them, a batch of rows at a time.
//! - [`join`] puts many tables one below the other into one file.
//! - [`Writes`] is the one way to the disk, also for the files of results, and can be told to fail.
//!
//! What each file is, who touches it, what protects it and how a torn ledger recovers stands in this crate's README.
//!
//! ```
//! use spinledger_ledger::{Draft, Ledger, Payload, Provenance};
//! use spinledger_terms::{Column, Key, Table};
//!
//! let folder = tempfile::tempdir()?;
//! let ledger = Ledger::open(folder.path())?;
//! let table = Table { columns: vec![Column::numbers("value", "J", vec![Some(-2.0), None])] };
//! let preimage = r#"{"step":"averages@1"}"#.to_owned();
//! let key = Key::of(&preimage);
//! let draft = || Draft::new(&preimage, "averages", Provenance::default()).table("main", Payload::Table(table.clone()));
//! assert!(ledger.publish(draft())?.fresh);
//! assert!(!ledger.publish(draft())?.fresh, "an entry is published once");
//! assert_eq!(ledger.read_table(&key, "main")?, table);
//! assert_eq!(ledger.index()?.get(&key).map(|line| line.kind.as_ref()), Some("averages"));
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```
//!
//! Left to others: what goes into a preimage (`plan`), what is computed (`engine`), pipelines and plugins.
#![forbid(unsafe_code)]

mod claim;
mod content;
mod error;
mod host;
mod index;
mod journal;
mod ledger;
mod publish;
mod record;
mod stamp;
mod state;
mod tables;
mod verify;
mod writes;

pub use claim::{Claim, ClaimGuard};
pub use content::{combine, content_of_block, content_of_entry, content_of_table};
pub use error::{LedgerError, WriteError};
pub use index::{ChainPlace, Index, Line};
pub use ledger::Ledger;
pub use publish::{Draft, Payload, Published};
pub use record::{Brief, Input, OtherFile, Processor, Program, Provenance, Record, Streams, TableRecord, now};
pub use stamp::file_key;
pub use state::SavedState;
pub use tables::assemble::{Assembled, Constant, Piece, assemble};
pub use tables::block::{BLOCK_ROWS, BlockData, ColumnData, block_columns, read_block, write_block};
pub use tables::join::{Part, join};
pub use tables::rows::{TableRows, What};
pub use tables::table::{read_table, write_table};
pub use writes::faults::{FailAt, Faults, Mishap, Operation};
pub use writes::{LineFile, NewFile, Writes};
