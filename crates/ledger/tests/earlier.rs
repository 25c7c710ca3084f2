//! Ledgers of earlier releases must still read. `tests/ledger-1` was made by the example `sample_ledger`.

use spinledger_ledger::{BlockData, ColumnData, Ledger, content_of_table, write_block, write_table};
use spinledger_terms::{Column, Key, Table};
use std::fs;
use std::path::Path;

/// Copies a ledger, so that opening it leaves the kept one alone.
fn copy(from: &Path, to: &Path) {
    fs::create_dir_all(to).unwrap();
    for entry in fs::read_dir(from).unwrap().map(Result::unwrap) {
        let target = to.join(entry.file_name());
        if entry.path().is_dir() {
            copy(&entry.path(), &target)
        } else {
            fs::copy(entry.path(), target).map(drop).unwrap()
        }
    }
}

#[test]
fn a_ledger_of_format_1_reads() {
    let folder = tempfile::tempdir().unwrap();
    copy(&Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/ledger-1"), folder.path());
    let ledger = Ledger::open(folder.path()).unwrap();
    let index = ledger.index().unwrap();
    assert_eq!((index.len(), index.warnings().count()), (3, 0));
    for line in index.lines() {
        assert_eq!(ledger.verify(&line.key).unwrap().line(), *line);
    }
    let chain = Key::of("sample chain");
    let (place, line) = index.blocks(&chain).next().unwrap();
    assert_eq!((place.rows, line.updates, line.seconds), (40, 640, 0.25));
    let block = ledger.read_block(&line.key, "block", None, None).unwrap();
    assert_eq!(block.sweep[39], 295);
    assert!(block.columns[0].values[7].is_nan() && block.columns[0].values[8] == 0.0);
    let series = ledger.read_record(&Key::of("sample series")).unwrap();
    assert_eq!((series.tables.len(), series.provenance.seed), (0, Some(20_261_201)));
    let means = ledger.read_table(&Key::of("sample averages"), "main").unwrap();
    assert_eq!(means.text("quantity", 1), Some("heat_capacity"));
    assert_eq!(means.column("value").unwrap().unit, "J");
    let averages = ledger.read_record(&Key::of("sample averages")).unwrap();
    assert_eq!(averages.provenance.inputs[0].content, series.content);
    assert_eq!(averages.tables[0].content, content_of_table(&means));
    assert_eq!(ledger.load_state(&chain).found(), Some((300, b"sample state".to_vec())));
}

/// Bytes of files may change with a release of the encoder or the compressor, but not unnoticed: records of entries made
/// before then have other byte hashes than the same entries made after.
#[test]
fn value_stability() {
    let hash = |bytes: Vec<u8>| blake3::hash(&bytes).to_hex()[..16].to_owned();
    let block = BlockData {
        sweep: (0..1000).collect(),
        columns: vec![
            ColumnData {
                name: "energy".into(),
                unit: "J".into(),
                values: (0..1000).map(|i| f64::from(i % 17)).collect(),
            },
            ColumnData {
                name: "k".into(),
                unit: String::new(),
                values: (0..1000).map(|i| 1.0 / f64::from(i)).collect(),
            },
        ],
    };
    assert_eq!(hash(write_block(&block, &Key([1; 32])).unwrap()), "9b9982fa88e15116");
    let table = Table {
        columns: vec![
            Column::integers("size", "", vec![Some(1), None, Some(1)]),
            Column::numbers("value", "J", vec![Some(0.5), None, Some(f64::INFINITY)]),
            Column::booleans("equilibrated", vec![Some(true), None, Some(false)]),
            Column::texts("flags", vec![Some(String::new()), None, Some("few-samples".into())]),
        ],
    };
    assert_eq!(hash(write_table(&table, &Key([1; 32])).unwrap()), "0182dc8105131de7");
}
