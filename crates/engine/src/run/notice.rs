//! What a run tells while it goes on, and what came of it.

use crate::planning::Products;
use std::collections::BTreeMap;
use std::path::PathBuf;

/// Counts of parcels.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, serde::Serialize)]
pub struct Counts {
    /// Computed by this run.
    pub computed: u64,
    /// On record before, or computed by another run meanwhile.
    pub reused: u64,
    /// Broken.
    pub broken: u64,
}

/// What goes on, for a person or a program to read.
#[derive(Debug)]
pub enum Notice<'a> {
    /// A step was planned.
    Planned {
        /// The step.
        step: &'a str,
        /// Parcels in all.
        parcels: u64,
        /// Of these on record.
        recorded: u64,
        /// Attempted spin updates due, as far as known.
        updates: f64,
    },
    /// A parcel was taken up.
    Started {
        /// The step.
        step: &'a str,
        /// Which parcel, in words.
        parcel: &'a str,
    },
    /// Work goes on.
    Progress {
        /// Attempted spin updates since the last notice.
        updates: u64,
    },
    /// A parcel is done.
    Done {
        /// The step.
        step: &'a str,
        /// Which parcel, in words.
        parcel: &'a str,
        /// Whether this run computed it.
        computed: bool,
    },
    /// A parcel is broken.
    Broken {
        /// The step.
        step: &'a str,
        /// Which parcel, in words.
        parcel: &'a str,
        /// Why.
        message: &'a str,
    },
    /// A step is complete.
    Complete {
        /// The step.
        step: &'a str,
        /// What it counted.
        counts: Counts,
    },
    /// A step is left due, since something that it needs is broken.
    Left {
        /// The step.
        step: &'a str,
    },
    /// The run comes to an end, as asked for; what is being worked on is put on record first.
    Stopping,
    /// Something to be told.
    Warning(&'a str),
}

/// What came of a run.
#[derive(Clone, Debug, Default)]
pub struct Outcome {
    /// In all.
    pub counts: Counts,
    /// By step.
    pub steps: BTreeMap<String, Counts>,
    /// What each step gave.
    pub products: Products,
    /// Steps left due.
    pub left: Vec<String>,
    /// Whether the run came to an early end because that was asked for.
    pub asked: bool,
    /// Why the run came to an early end, if it did: a full disk, a folder that cannot be written, workers that do not start. No parcel is
    /// broken by that.
    pub stopped: Option<String>,
}

/// Why a run came to nothing.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RunError {
    /// The ledger cannot be read.
    #[error("the ledger cannot be read")]
    Ledger(#[from] spinledger_ledger::LedgerError),
    /// The folder of results cannot be written.
    #[error("the results cannot be written to {}", path.display())]
    Results {
        /// The folder.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
    /// There is no such step.
    #[error("there is no step `{0}` in the pipeline")]
    NoStep(String),
}
