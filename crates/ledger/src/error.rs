//! What can go wrong with bytes on disk.

use spinledger_terms::{ContentHash, Key};
use std::error::Error;
use std::io;
use std::path::{Path, PathBuf};

/// A change to the disk that failed: what was attempted, and where.
#[derive(Debug, thiserror::Error)]
#[error("cannot {attempted} {}", path.display())]
pub struct WriteError {
    /// What was attempted, as words that the path follows ("write", "rename to").
    pub attempted: &'static str,
    /// The path.
    pub path: PathBuf,
    /// Why it failed.
    pub source: io::Error,
}

/// Why the ledger could not do what it was asked.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum LedgerError {
    /// A change to the disk failed.
    #[error(transparent)]
    Write(#[from] WriteError),
    /// Something could not be read.
    #[error("cannot {attempted} {}", path.display())]
    Read {
        /// What was attempted.
        attempted: &'static str,
        /// The path.
        path: PathBuf,
        /// Why it failed.
        source: io::Error,
    },
    /// The ledger was written by a later release.
    #[error("{} says `{found}`, which this release cannot read; it reads `{expected}`", path.display())]
    NewerFormat {
        /// The format file.
        path: PathBuf,
        /// What it says.
        found: String,
        /// What this release reads.
        expected: &'static str,
    },
    /// The folder holds something else.
    #[error("{} is not a ledger: it holds files, but no `format`", path.display())]
    NotALedger {
        /// The folder.
        path: PathBuf,
    },
    /// The entry is on record with another content: an alarm. Nothing was overwritten.
    #[error(
        "entry {key} is on record with content {recorded}, but {computed} was computed: the same inputs gave two results"
    )]
    Differs {
        /// The entry.
        key: Key,
        /// Its content on record.
        recorded: ContentHash,
        /// The content that was not published.
        computed: ContentHash,
    },
    /// No entry, or no such table in it.
    #[error("{} is not on record", path.display())]
    Absent {
        /// The file that would hold it.
        path: PathBuf,
    },
    /// A file is not what its record says, or not what its format demands.
    #[error("{} is damaged: {what}", path.display())]
    Damaged {
        /// The file.
        path: PathBuf,
        /// What is wrong with it.
        what: String,
    },
    /// A figure or page has no place for the key of its entry.
    #[error("`{name}` is not the kind of file that its name says: it cannot carry the key of its entry")]
    Unfit {
        /// Its name.
        name: String,
    },
    /// The file is of no kind that carries keys.
    #[error("{} is no Parquet, SVG, PNG or HTML file", path.display())]
    Foreign {
        /// The file.
        path: PathBuf,
    },
    /// A file could not be read or written as Parquet.
    #[error("cannot {attempted} {}", path.display())]
    Parquet {
        /// What was attempted.
        attempted: &'static str,
        /// The file.
        path: PathBuf,
        /// Why it failed.
        source: Box<dyn Error + Send + Sync>,
    },
    /// Columns that cannot be written, or do not fit together.
    #[error("columns do not fit: {0}")]
    Columns(String),
    /// A name that cannot be part of a file name.
    #[error("`{0}` cannot name a table: letters, digits, `_` and `-` can")]
    Name(String),
}

impl LedgerError {
    /// Whether the disk (or a quota) is full, so that waiting or making room may help.
    pub fn is_disk_full(&self) -> bool {
        let mut cause: Option<&(dyn Error + 'static)> = Some(self);
        while let Some(error) = cause {
            if let Some(error) = error.downcast_ref::<io::Error>()
                && matches!(error.kind(), io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded)
            {
                return true;
            }
            cause = error.source();
        }
        false
    }

    pub(crate) fn read(attempted: &'static str, path: &Path) -> impl FnOnce(io::Error) -> Self {
        move |source| LedgerError::Read { attempted, path: path.to_owned(), source }
    }

    pub(crate) fn parquet(attempted: &'static str, path: &Path) -> impl FnOnce(parquet::errors::ParquetError) -> Self {
        move |source| {
            let source = match source {
                parquet::errors::ParquetError::External(cause) => cause,
                other => Box::new(other),
            };
            LedgerError::Parquet { attempted, path: path.to_owned(), source }
        }
    }

    pub(crate) fn damaged(path: &Path, what: impl Into<String>) -> Self {
        LedgerError::Damaged { path: path.to_owned(), what: what.into() }
    }
}
