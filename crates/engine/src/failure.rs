//! Why a parcel was not done: its own fault, or the disk's.

use crate::chain_text;
use crate::steps::StepError;
use spinledger_host::HostError;
use spinledger_ledger::LedgerError;

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
        match error {
            LedgerError::Write(_) => Failure::Disk(chain_text(&error)),
            other => Failure::Broken(chain_text(&other)),
        }
    }
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
        assert!(matches!(Failure::from(error), Failure::Broken(_)));
    }
}
