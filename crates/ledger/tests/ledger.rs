//! Publishing, recovery and damage, as a run meets them.

use spinledger_ledger::{
    BlockData, ChainPlace, ColumnData, Draft, FailAt, Ledger, LedgerError, Payload, Provenance, Writes, combine,
};
use spinledger_terms::{Column, ContentHash, Key, Table};
use std::collections::BTreeSet;
use std::fs;
use std::path::Path;
use std::sync::{Arc, Barrier};

const PREIMAGE: &str = r#"{"step":"averages@1"}"#;

fn table(value: f64) -> Table {
    let flags = vec![Some(String::new())];
    Table { columns: vec![Column::numbers("value", "J", vec![Some(value)]), Column::texts("flags", flags)] }
}

fn draft(value: f64) -> Draft {
    let block = BlockData {
        sweep: vec![1, 2],
        columns: vec![ColumnData { name: "energy".into(), unit: "J".into(), values: vec![-1.0, -2.0] }],
    };
    let provenance = Provenance { seconds: 1.5, updates: 64, ..Provenance::default() };
    Draft::new(PREIMAGE, "averages", provenance)
        .table("main", Payload::Table(table(value)))
        .table("series", Payload::Block(block))
        .chain(ChainPlace { chain: Key([1; 32]), block: 0, number: 0, rows: 2 })
}

fn key() -> Key {
    Key::of(PREIMAGE)
}

/// The ledger holds the entry, whole, and says so everywhere.
fn assert_published(root: &Path) {
    let ledger = Ledger::open(root).unwrap();
    let record = ledger.verify(&key()).unwrap();
    assert_eq!(ledger.index().unwrap().get(&key()), Some(&record.line()));
    assert_eq!(ledger.read_table(&key(), "main").unwrap(), table(1.0));
    assert_eq!(ledger.read_block(&key(), "series", None, None).unwrap().sweep, [1, 2]);
    assert_eq!(ledger.find(&key().short()).unwrap(), [key()]);
}

#[test]
fn an_entry_is_published_once_and_never_changed() {
    let folder = tempfile::tempdir().unwrap();
    assert!(!Ledger::is_at(folder.path()));
    let ledger = Ledger::open(folder.path()).unwrap();
    assert!(Ledger::is_at(folder.path()));
    assert_eq!(ledger.lookup(&key()).unwrap(), None);
    let first = ledger.publish(draft(1.0)).unwrap();
    assert!(first.fresh && first.set_aside.is_none());
    let again = Ledger::open(folder.path()).unwrap().publish(draft(1.0)).unwrap();
    assert_eq!((again.fresh, again.content), (false, first.content));
    match ledger.publish(draft(1.5)) {
        Err(LedgerError::Differs { key: k, recorded, computed }) => {
            assert_eq!((k, recorded), (key(), first.content));
            assert_ne!(computed, recorded);
        }
        other => panic!("an alarm, not {other:?}"),
    }
    assert_published(folder.path());
    let index = ledger.index().unwrap();
    assert_eq!((index.len(), index.warnings().count()), (1, 0));
    assert_eq!(index.blocks(&Key([1; 32])).count(), 1);
}

#[test]
fn a_virtual_entry_has_only_its_record() {
    let folder = tempfile::tempdir().unwrap();
    let ledger = Ledger::open(folder.path()).unwrap();
    let content = combine("series", &[ContentHash([3; 32])]);
    let draft = Draft::new(PREIMAGE, "series", Provenance::default()).content(content);
    assert_eq!(ledger.publish(draft).unwrap().content, content);
    assert_eq!(ledger.verify(&key()).unwrap().content, content);
    assert_eq!(fs::read_dir(ledger.entry(&key())).unwrap().count(), 1);
}

/// Whatever change to the disk fails, and however: the ledger opens again, holds the entry wholly or not at all, and
/// publishing again succeeds.
#[test]
fn no_mishap_loses_anything() {
    let count = {
        let folder = tempfile::tempdir().unwrap();
        let faults = Arc::new(FailAt::full(usize::MAX));
        let writes = Writes::new().with_faults(faults.clone());
        Ledger::open_with(folder.path(), writes).unwrap().publish(draft(1.0)).unwrap();
        faults.seen()
    };
    assert!(count > 30, "only {count} changes were seen");
    let kinds: [fn(usize) -> FailAt; 5] = [
        FailAt::full,
        |at| FailAt::short(at, 5),
        |at| FailAt::short(at, 0),
        |at| FailAt::crash(at, 0),
        |at| FailAt::crash(at, 17),
    ];
    for (kind, fail) in kinds.iter().enumerate() {
        for at in 0..count {
            let folder = tempfile::tempdir().unwrap();
            let writes = Writes::new().with_faults(Arc::new(fail(at)));
            let outcome = Ledger::open_with(folder.path(), writes).and_then(|ledger| {
                let outcome = ledger.publish(draft(1.0)).map(|_| ());
                if kind < 3 && outcome.is_err() {
                    // The disk has room again: the same process goes on.
                    ledger.publish(draft(1.0)).unwrap();
                    assert_published(folder.path());
                    fs::remove_dir_all(folder.path().join("journal")).unwrap();
                }
                outcome
            });
            if let Err(error) = &outcome {
                assert_eq!(error.is_disk_full(), kind < 3 || at_first(error), "kind {kind}, change {at}: {error:?}");
            }
            let ledger = Ledger::open(folder.path()).unwrap();
            if let Some(line) = ledger.lookup(&key()).unwrap() {
                assert_eq!(ledger.verify(&key()).unwrap().line(), line);
            }
            ledger.publish(draft(1.0)).unwrap();
            assert_eq!(ledger.index().unwrap().warnings().count(), 0, "kind {kind}, change {at}");
            assert_published(folder.path());
        }
    }
}

/// A crash's first change reports a full disk, those after it a kill.
fn at_first(error: &LedgerError) -> bool {
    !std::error::Error::source(error).is_some_and(|cause| cause.to_string().contains("killed"))
}

#[test]
fn an_entry_without_a_line_is_found_and_put_back_into_a_journal() {
    let folder = tempfile::tempdir().unwrap();
    Ledger::open(folder.path()).unwrap().publish(draft(1.0)).unwrap();
    for file in fs::read_dir(folder.path().join("journal")).unwrap() {
        fs::remove_file(file.unwrap().path()).unwrap();
    }
    let ledger = Ledger::open(folder.path()).unwrap();
    assert!(ledger.index().unwrap().is_empty());
    let line = ledger.lookup(&key()).unwrap().unwrap();
    assert_eq!(ledger.lookup(&key()).unwrap().as_ref(), Some(&line), "asking twice writes one line");
    let journal = fs::read_dir(folder.path().join("journal")).unwrap().next().unwrap().unwrap().path();
    assert_eq!(fs::read_to_string(journal).unwrap().lines().count(), 1);
    assert_published(folder.path());
}

#[test]
fn many_writers_publish_one_entry() {
    let folder = tempfile::tempdir().unwrap();
    for round in 0..10 {
        let preimage = format!("{{\"round\":{round}}}");
        let barrier = Barrier::new(4);
        let fresh: usize = std::thread::scope(|scope| {
            let write = || {
                // A ledger of its own for each, as processes have.
                let ledger = Ledger::open(folder.path()).unwrap();
                let draft = Draft::new(&preimage, "averages", Provenance::default());
                barrier.wait();
                usize::from(ledger.publish(draft.table("main", Payload::Table(table(1.0)))).unwrap().fresh)
            };
            let threads: Vec<_> = (0..4).map(|_| scope.spawn(write)).collect();
            threads.into_iter().map(|thread| thread.join().unwrap()).sum()
        });
        assert_eq!(fresh, 1);
    }
    let ledger = Ledger::open(folder.path()).unwrap();
    assert_eq!(ledger.index().unwrap().len(), 10);
    assert_eq!(fs::read_dir(folder.path().join("temporary")).unwrap().count(), 0);
}

/// Each file of an entry, cut or changed, is noticed; an entry that lost its record is set aside and published again.
#[test]
fn damage_is_noticed() {
    let folder = tempfile::tempdir().unwrap();
    let ledger = Ledger::open(folder.path()).unwrap();
    ledger.publish(draft(1.0)).unwrap();
    for name in ["main.parquet", "series.parquet", "record.json"] {
        let path = ledger.entry(&key()).join(name);
        let good = fs::read(&path).unwrap();
        let mut flipped = good.clone();
        let place = good.len() / 3;
        flipped[place] ^= 1;
        for bad in [&good[..good.len() / 2], &flipped, b""] {
            fs::write(&path, bad).unwrap();
            let outcome = ledger.verify(&key());
            assert!(matches!(outcome, Err(LedgerError::Damaged { .. })), "{name}: {outcome:?}");
        }
        fs::remove_file(&path).unwrap();
        assert!(matches!(ledger.verify(&key()), Err(LedgerError::Absent { .. })));
        fs::write(&path, good).unwrap();
    }
    ledger.verify(&key()).unwrap();
    fs::write(ledger.entry(&key()).join("record.json"), "{").unwrap();
    assert_eq!(ledger.lookup(&key()).unwrap(), None);
    let published = ledger.publish(draft(1.0)).unwrap();
    assert!(published.fresh);
    assert!(published.set_aside.unwrap().join("main.parquet").exists(), "nothing is thrown away");
    assert_published(folder.path());
}

#[test]
fn other_folders_and_later_formats_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("thesis.tex"), "").unwrap();
    assert!(matches!(Ledger::open(folder.path()), Err(LedgerError::NotALedger { .. })));
    let folder = tempfile::tempdir().unwrap();
    Ledger::open(folder.path()).unwrap();
    fs::write(folder.path().join("format"), "spinledger ledger 2\n").unwrap();
    let error = Ledger::open(folder.path()).unwrap_err().to_string();
    assert!(error.contains("`spinledger ledger 2`") && error.contains("`spinledger ledger 1`"), "{error}");
}

#[test]
fn removed_entries_are_forgotten_while_others_write_on() {
    let folder = tempfile::tempdir().unwrap();
    let (one, two) = (Ledger::open(folder.path()).unwrap(), Ledger::open(folder.path()).unwrap());
    let named =
        |name: &str| Draft::new(name, "averages", Provenance::default()).table("main", Payload::Table(table(1.0)));
    for name in ["a", "b", "c"] {
        one.publish(named(name)).unwrap();
    }
    one.save_state(&Key::of("a"), 1, b"state").unwrap();
    two.remove(&BTreeSet::from([Key::of("a"), Key::of("c"), Key::of("never")])).unwrap();
    assert_eq!(two.load_state(&Key::of("a")).found(), None);
    one.publish(named("d")).unwrap();
    let index = two.index().unwrap();
    let keys: BTreeSet<_> = index.lines().map(|line| line.key).collect();
    assert_eq!(keys, BTreeSet::from([Key::of("b"), Key::of("d")]));
    assert_eq!(two.lookup(&Key::of("a")).unwrap(), None);
    assert!(one.publish(named("a")).unwrap().fresh);
    assert!(two.index().unwrap().get(&Key::of("a")).is_some());
}

#[test]
fn texts_and_names() {
    let folder = tempfile::tempdir().unwrap();
    let ledger = Ledger::open(folder.path()).unwrap();
    let hash = ledger.save_text("spinledger: 1\n").unwrap();
    assert_eq!(ledger.save_text("spinledger: 1\n").unwrap(), hash);
    assert_eq!(ledger.load_text(&hash).unwrap(), "spinledger: 1\n");
    assert!(matches!(ledger.load_text(&ContentHash([0; 32])), Err(LedgerError::Absent { .. })));
    fs::write(folder.path().join("texts").join(hash.to_string()), "changed").unwrap();
    assert!(matches!(ledger.load_text(&hash), Err(LedgerError::Damaged { .. })));
    for name in ["", "../main", "record.json", "a b"] {
        let draft = Draft::new(PREIMAGE, "averages", Provenance::default()).table(name, Payload::Table(table(1.0)));
        assert!(matches!(ledger.publish(draft), Err(LedgerError::Name(_))), "{name}");
    }
    for prefix in ["", "0", "é", "zz", &"0".repeat(65)] {
        assert_eq!(ledger.find(prefix).unwrap(), []);
    }
}

/// Figures and pages are parts of an entry like tables: hashed, published once, damage noticed; names that could be mistaken are refused.
#[test]
fn entries_hold_other_files() {
    let folder = tempfile::tempdir().unwrap();
    let ledger = Ledger::open(folder.path()).unwrap();
    let draft =
        |bytes: &str| Draft::new("{\"figure\":1}", "chart", Provenance::default()).file("main.svg", bytes.into());
    let first = ledger.publish(draft("<svg></svg>")).unwrap();
    assert!(first.fresh && !ledger.publish(draft("<svg></svg>")).unwrap().fresh);
    assert!(matches!(ledger.publish(draft("<svg>1</svg>")), Err(LedgerError::Differs { .. })));
    let key = Key::of("{\"figure\":1}");
    let record = ledger.verify(&key).unwrap();
    let path = ledger.entry(&key).join("main.svg");
    let written = std::fs::read_to_string(&path).unwrap();
    assert_eq!(written, format!("<svg>\n<metadata>spinledger.key {key}</metadata></svg>"), "it names its entry");
    assert_eq!(spinledger_ledger::file_key(&path).unwrap(), Some(key));
    let file = &record.files[0];
    assert_eq!((file.name.as_str(), file.size, record.line().note), ("main.svg", written.len() as u64, String::new()));
    assert_eq!(file.content.0, *blake3::hash(b"<svg></svg>").as_bytes(), "the key is no part of the content");
    std::fs::write(ledger.entry(&key).join("main.svg"), "<svg?>").unwrap();
    assert!(matches!(ledger.verify(&key), Err(LedgerError::Damaged { .. })));
    for name in ["main", "main.parquet", "record.json", "../x.svg", "a.b.svg", ".svg"] {
        let draft = Draft::new("{\"figure\":2}", "chart", Provenance::default()).file(name, vec![1]);
        assert!(matches!(ledger.publish(draft), Err(LedgerError::Name(_))), "{name}");
    }
}
