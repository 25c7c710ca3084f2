//! Why a parcel was not done: its own fault, or the disk's.

use crate::chain_text;
use crate::steps::StepError;
use spinledger_host::HostError;
use spinledger_ledger::LedgerError;
use std::path::Path;

/// Why a parcel was not done.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) enum Failure {
    /// The parcel is broken, in words.
    Broken(String),
    /// What was computed cannot be kept: a full disk, a folder that cannot be written. No parcel can help it, and none is broken by it.
    Disk(String),
}

impl From<LedgerError> for Failure {
    fn from(error: LedgerError) -> Self {
        if error.is_disk_full() {
            return Failure::Disk(format!("the disk is full: {}", chain_text(&error)));
        }
        let text = chain_text(&error);
        match &error {
            LedgerError::Write(_) => Failure::Disk(text),
            LedgerError::Absent { path } | LedgerError::Damaged { path, .. } | LedgerError::Parquet { path, .. } => {
                Failure::Broken(text + &remedy(path))
            }
            _ => Failure::Broken(text),
        }
    }
}

/// How to have an entry made again of which something was removed or damaged: journals name what was published, and are believed; without them
/// everything that is there is looked up. Empty where the file is not one of an entry.
fn remedy(path: &Path) -> String {
    let is_entries = |folder: &&Path| folder.file_name().is_some_and(|name| name == "entries");
    let root = path.ancestors().find(is_entries).and_then(Path::parent);
    let (Some(entry), Some(root)) = (path.parent(), root) else { return String::new() };
    let (entry, journal) = (entry.display(), root.join("journal"));
    format!(
        "; to have it made again, remove {entry} and {} and run again: all else is then found where it is",
        journal.display()
    )
}

impl From<HostError> for Failure {
    fn from(error: HostError) -> Self {
        Failure::Broken(chain_text(&error))
    }
}

impl From<StepError> for Failure {
    fn from(error: StepError) -> Self {
        Failure::Broken(error.0)
    }
}

impl From<String> for Failure {
    fn from(text: String) -> Self {
        Failure::Broken(text)
    }
}

impl From<&str> for Failure {
    fn from(text: &str) -> Self {
        Failure::Broken(text.to_owned())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_ledger::{Draft, FailAt, Ledger, Payload, Provenance, Writes};
    use spinledger_terms::{Column, Table};
    use std::sync::Arc;

    #[test]
    fn a_disk_that_fails_breaks_no_parcel() {
        let folder = tempfile::tempdir().unwrap();
        let writes = Writes::new().with_faults(Arc::new(FailAt::full(40)));
        let ledger = Ledger::open_with(folder.path(), writes).unwrap();
        let publish = |name: &str| {
            let table = Payload::Table(Table { columns: vec![Column::integers("n", "", vec![Some(1)])] });
            ledger.publish(Draft::new(name, "test", Provenance::default()).table("main", table))
        };
        let error = (0..100).find_map(|n| publish(&n.to_string()).err()).expect("the disk becomes full");
        let Failure::Disk(text) = Failure::from(error) else { panic!("the parcel is not to blame") };
        assert!(text.starts_with("the disk is full: cannot "), "{text}");
    }

    #[test]
    fn what_cannot_be_read_breaks_its_parcel() {
        let folder = tempfile::tempdir().unwrap();
        let ledger = Ledger::open(folder.path()).unwrap();
        let error = ledger.read_record(&spinledger_terms::Key([0; 32])).unwrap_err();
        let Failure::Broken(text) = Failure::from(error) else { panic!("the disk is not to blame") };
        let journal = folder.path().join("journal");
        assert!(text.contains("is not on record; to have it made again, remove "), "{text}");
        assert!(text.contains(&journal.display().to_string()), "{text}");
    }
}
