//! Parquet files: round trips, equal bytes for equal data, and assembly from pieces.

use proptest::prelude::*;
use spinledger_ledger::{
    BLOCK_ROWS, BlockData, ColumnData, Constant, FailAt, LedgerError, Piece, Writes, assemble, block_columns,
    content_of_block, content_of_table, file_key, read_block, read_table, write_block, write_table,
};
use spinledger_terms::{Cells, Column, Key, Table, Value};
use std::fs;
use std::path::{Path, PathBuf};
use std::sync::Arc;

const KEY: Key = Key([7; 32]);

fn any_table() -> impl Strategy<Value = Table> {
    let number = prop_oneof![
        Just(0.0),
        Just(-0.0),
        Just(f64::INFINITY),
        Just(f64::NEG_INFINITY),
        proptest::num::f64::NORMAL,
        proptest::num::f64::SUBNORMAL
    ];
    let row = (
        proptest::option::of(any::<i64>()),
        proptest::option::of(number),
        proptest::option::of(any::<bool>()),
        proptest::option::of("\\PC{0,6}"),
    );
    proptest::collection::vec(row, 0..50).prop_map(|rows| Table {
        columns: vec![
            Column::integers("size", "", rows.iter().map(|r| r.0).collect()),
            Column::numbers("value.é", "J", rows.iter().map(|r| r.1).collect()),
            Column::booleans("equilibrated", rows.iter().map(|r| r.2).collect()),
            Column::texts("flags", rows.iter().map(|r| r.3.clone()).collect()),
        ],
    })
}

/// Tables compared by bits, as contents are.
fn same(a: &Table, b: &Table) -> bool {
    let bits = |t: &Table| -> Vec<_> {
        let number = |c: &Column| match &c.cells {
            Cells::Number(v) => v.iter().map(|x| x.map(f64::to_bits)).collect(),
            _ => Vec::new(),
        };
        t.columns.iter().map(number).collect()
    };
    a == b && bits(a) == bits(b)
}

fn on_disk(bytes: &[u8]) -> tempfile::NamedTempFile {
    let file = tempfile::NamedTempFile::new().unwrap();
    fs::write(file.path(), bytes).unwrap();
    file
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn tables_read_back_with_the_same_bits(table in any_table()) {
        let bytes = write_table(&table, &KEY).unwrap();
        prop_assert_eq!(&bytes, &write_table(&table.clone(), &KEY).unwrap());
        let file = on_disk(&bytes);
        let read = read_table(file.path()).unwrap();
        prop_assert!(same(&table, &read), "{:?}", read);
        prop_assert_eq!(content_of_table(&table), content_of_table(&read));
        prop_assert_eq!(file_key(file.path()).unwrap(), Some(KEY));
    }

    /// A block recorded short and continued is the block that a longer run records, byte for byte.
    #[test]
    fn continued_blocks_are_fresh_blocks(rows in 2usize..300, cut in 1usize..299, kind in 0u8..3) {
        let cut = cut.min(rows - 1);
        let fresh = series(0, rows, kind);
        let whole = fresh.truncated(cut).merge(&tail(&fresh, cut)).unwrap();
        prop_assert_eq!(write_block(&whole, &KEY).unwrap(), write_block(&fresh, &KEY).unwrap());
        prop_assert_eq!(content_of_block(&whole), content_of_block(&fresh));
    }
}

/// An invented series: of lattice values, of values that never repeat, or with gaps.
fn series(start: i64, rows: usize, kind: u8) -> BlockData {
    let mut word = 12345u64.wrapping_add(start as u64);
    let mut next = || {
        word ^= word << 13;
        word ^= word >> 7;
        word ^= word << 17;
        word >> 11
    };
    let mut value = |row: usize| match kind {
        0 => (next() % 41) as f64 * 0.0625 - 2.0,
        1 => next() as f64 / (1u64 << 53) as f64,
        _ if row.is_multiple_of(3) => f64::NAN,
        _ => (next() % 5) as f64,
    };
    let mut column = |name: &str, unit: &str| ColumnData {
        name: name.into(),
        unit: unit.into(),
        values: (0..rows).map(&mut value).collect(),
    };
    BlockData {
        columns: vec![column("energy", "J"), column("magnetisation", "")],
        sweep: (0..rows as i64).map(|row| 1000 + 5 * (start + row)).collect(),
    }
}

fn tail(block: &BlockData, from: usize) -> BlockData {
    BlockData {
        sweep: block.sweep[from..].to_vec(),
        columns: block.columns.iter().map(|c| ColumnData { values: c.values[from..].to_vec(), ..c.clone() }).collect(),
    }
}

fn bits(block: &BlockData) -> Vec<(String, String, Vec<u64>)> {
    let column = |c: &ColumnData| {
        let bits = c.values.iter().map(|x| if x.is_nan() { u64::MAX } else { x.to_bits() }).collect();
        (c.name.clone(), c.unit.clone(), bits)
    };
    block.columns.iter().map(column).collect()
}

#[test]
fn blocks_read_back_wholly_or_in_part() {
    for (rows, kind) in [(1, 0), (1, 2), (1000, 0), (1000, 1), (1000, 2), (BLOCK_ROWS, 0), (BLOCK_ROWS, 1)] {
        let block = series(0, rows, kind);
        let bytes = write_block(&block, &KEY).unwrap();
        assert_eq!(bytes, write_block(&block, &KEY).unwrap());
        let file = on_disk(&bytes);
        let read = read_block(file.path(), None, None).unwrap();
        assert_eq!((&read.sweep, bits(&read)), (&block.sweep, bits(&block)));
        let part = read_block(file.path(), Some(&["magnetisation"]), Some(10)).unwrap();
        assert_eq!(part.sweep, block.sweep[..rows.min(10)]);
        assert_eq!(bits(&part), bits(&block.truncated(10))[1..]);
        let named = [("energy".to_owned(), "J".to_owned()), ("magnetisation".to_owned(), String::new())];
        assert_eq!(block_columns(file.path()).unwrap(), (named.to_vec(), rows as u64));
        assert!(matches!(read_block(file.path(), Some(&["order"]), None), Err(LedgerError::Columns(_))));
    }
}

/// Energies and magnetisations on a lattice take few of the sixteen bytes a row that they have in memory.
#[test]
fn lattice_values_become_small() {
    let bytes = write_block(&series(0, BLOCK_ROWS, 0), &KEY).unwrap();
    assert!(bytes.len() < BLOCK_ROWS * 2, "{} bytes", bytes.len());
    let bytes = write_block(&series(0, BLOCK_ROWS, 1), &KEY).unwrap();
    assert!(bytes.len() < BLOCK_ROWS * 17, "{} bytes", bytes.len());
}

#[test]
fn what_cannot_be_written_is_refused() {
    let refused = |block: &BlockData| matches!(write_block(block, &KEY), Err(LedgerError::Columns(_)));
    let good = series(0, 4, 0);
    assert!(!refused(&good));
    assert!(refused(&BlockData::default()));
    assert!(refused(&series(0, BLOCK_ROWS + 1, 0)));
    let mut bad = good.clone();
    bad.columns[0].values.pop();
    assert!(refused(&bad));
    let mut bad = good.clone();
    bad.columns[1].name = "sweep".into();
    assert!(refused(&bad));
    assert!(good.merge(&good).is_err(), "sweeps must go on");
    assert!(good.merge(&BlockData { columns: vec![], ..series(4, 4, 0) }).is_err());
    for columns in [
        vec![],
        vec![Column::texts("", vec![])],
        vec![Column::texts("a", vec![]), Column::texts("a", vec![])],
        vec![Column::texts("a", vec![]), Column::texts("b", vec![None])],
    ] {
        assert!(matches!(write_table(&Table { columns }, &KEY), Err(LedgerError::Columns(_))));
    }
}

#[test]
fn long_tables_have_several_row_groups() {
    let rows = 2 * BLOCK_ROWS + 3;
    let table = Table {
        columns: vec![
            Column::integers("site", "", (0..rows).map(|i| Some(i as i64)).collect()),
            Column::numbers("x", "", (0..rows).map(|i| (i % 7 != 0).then_some(i as f64)).collect()),
            Column::texts("word", (0..rows).map(|i| Some(format!("w{}", i % 100))).collect()),
        ],
    };
    let file = on_disk(&write_table(&table, &KEY).unwrap());
    assert_eq!(read_table(file.path()).unwrap(), table);
}

struct Blocks {
    folder: tempfile::TempDir,
}

impl Blocks {
    fn write(&self, name: &str, block: &BlockData) -> PathBuf {
        let path = self.folder.path().join(name);
        fs::write(&path, write_block(block, &Key([9; 32])).unwrap()).unwrap();
        path
    }

    fn output(&self) -> PathBuf {
        self.folder.path().join("series.parquet")
    }
}

fn constants() -> Vec<Constant> {
    let constant = |name: &str, unit: &str, value| Constant { name: name.into(), unit: unit.into(), value };
    vec![
        constant("temperature", "J", Value::Number(2.27)),
        constant("size", "", Value::Integer(16)),
        constant("sites", "", Value::Integer(256)),
        constant("boundary", "", Value::text("periodic")),
        constant("field", "J", Value::Number(-0.0)),
    ]
}

fn piece(path: &Path, rows: u64, chain: i64) -> Piece {
    let start = ["random", "ordered"][chain as usize % 2];
    let extra = vec![Constant { name: "start".into(), unit: String::new(), value: Value::text(start) }];
    Piece { path: path.to_owned(), rows, chain, extra }
}

#[test]
fn pieces_make_one_file() {
    let blocks = Blocks { folder: tempfile::tempdir().unwrap() };
    let pieces: Vec<_> = [(0, 0, 0), (1, 1, 0), (2, 2, 100), (3, 0, 100)]
        .map(|(name, chain, start)| {
            let path = blocks.write(&name.to_string(), &series(start, 100, (start / 100) as u8));
            piece(&path, if start == 0 { 100 } else { 37 }, chain)
        })
        .to_vec();
    let made = assemble(&Writes::new(), &blocks.output(), &KEY, &constants(), pieces.clone()).unwrap();
    assert_eq!((made.rows, made.pieces), (274, 4));
    let table = read_table(&blocks.output()).unwrap();
    let names: Vec<_> = table.columns.iter().map(|c| c.name.as_str()).collect();
    let expected =
        ["temperature", "size", "sites", "boundary", "field", "start", "chain", "sweep", "energy", "magnetisation"];
    assert_eq!(names, expected);
    let units: Vec<_> = table.columns.iter().map(|c| c.unit.as_str()).collect();
    assert_eq!(units, ["J", "", "", "", "J", "", "", "sweeps", "J", ""]);
    assert_eq!(file_key(&blocks.output()).unwrap(), Some(KEY));
    let mut row = 0;
    for piece in &pieces {
        let block = read_block(&piece.path, None, Some(piece.rows as usize)).unwrap();
        for i in 0..block.rows() {
            let cell = |name: &str| table.column(name).unwrap().cells.value(row);
            assert_eq!(cell("temperature"), Value::Number(2.27));
            assert_eq!(cell("size"), Value::Integer(16));
            assert_eq!(cell("boundary"), Value::text("periodic"));
            assert_eq!(cell("start"), piece.extra[0].value);
            assert_eq!(cell("chain"), Value::Integer(piece.chain));
            assert_eq!(cell("sweep"), Value::Integer(block.sweep[i]));
            assert_eq!(cell("energy").as_f64().unwrap().to_bits(), block.columns[0].values[i].to_bits());
            row += 1;
        }
    }
    assert_eq!(row, table.rows());
    assert!(table.numbers("field").unwrap().iter().all(|x| x.unwrap().to_bits() == (-0.0f64).to_bits()));
}

/// A run cut short by its length gives the bytes of a run that was that short from the start, and a run that was continued
/// those of a run that was that long from the start.
#[test]
fn assembled_bytes_depend_on_rows_only() {
    let blocks = Blocks { folder: tempfile::tempdir().unwrap() };
    for kind in 0..3 {
        let long = series(0, 500, kind);
        let assembled = |block: &BlockData, rows: u64| {
            let pieces = [piece(&blocks.write("a", block), rows, 0), piece(&blocks.write("b", &long), 500, 1)];
            assemble(&Writes::new(), &blocks.output(), &KEY, &constants(), pieces).unwrap();
            fs::read(blocks.output()).unwrap()
        };
        for rows in [1, 2, 77, 499] {
            let cut = assembled(&long, rows as u64);
            let fresh = assembled(&long.truncated(rows), rows as u64);
            assert!(cut == fresh, "kind {kind}, {rows} rows");
            let continued = long.truncated(rows).merge(&tail(&long, rows)).unwrap();
            assert!(assembled(&continued, 500) == assembled(&long, 500), "kind {kind}, continued from {rows} rows");
        }
    }
}

#[test]
fn pieces_that_do_not_fit_leave_the_output_alone() {
    let blocks = Blocks { folder: tempfile::tempdir().unwrap() };
    fs::write(blocks.output(), "before").unwrap();
    let good = blocks.write("good", &series(0, 10, 0));
    let mut other = series(0, 10, 0);
    other.columns[0].unit = "K".into();
    let other = blocks.write("other", &other);
    let refuse = |constants: &[Constant], pieces: Vec<Piece>| {
        let outcome = assemble(&Writes::new(), &blocks.output(), &KEY, constants, pieces);
        assert!(matches!(outcome, Err(LedgerError::Columns(_) | LedgerError::Absent { .. })), "{outcome:?}");
        assert_eq!(fs::read(blocks.output()).unwrap(), b"before");
        assert_eq!(fs::read_dir(blocks.folder.path()).unwrap().count(), 3, "nothing is left behind");
    };
    refuse(&[], vec![]);
    refuse(&[], vec![piece(&good, 11, 0)]);
    refuse(&[], vec![piece(&good, 0, 0)]);
    refuse(&[], vec![piece(&good, 10, 0), piece(&other, 10, 0)]);
    refuse(&[], vec![piece(&good, 10, 0), Piece { extra: vec![], ..piece(&good, 10, 0) }]);
    refuse(&[], vec![piece(&good, 10, 0), piece(&blocks.folder.path().join("none"), 10, 0)]);
    let twice = Constant { name: "sweep".into(), unit: String::new(), value: Value::Integer(1) };
    refuse(&[twice], vec![piece(&good, 10, 0)]);
    let list = Constant { name: "sizes".into(), unit: String::new(), value: Value::List(vec![]) };
    refuse(&[list], vec![piece(&good, 10, 0)]);
}

/// Wherever the disk fills up while a file is assembled, the file of before or the new one stands there, and nothing else.
#[test]
fn a_full_disk_leaves_the_output_whole() {
    let blocks = Blocks { folder: tempfile::tempdir().unwrap() };
    let path = blocks.write("block", &series(0, 1000, 1));
    let pieces = || (0..4).map(|chain| piece(&path, if chain == 3 { 400 } else { 1000 }, chain));
    let counter = Arc::new(FailAt::full(usize::MAX));
    assemble(&Writes::new().with_faults(counter.clone()), &blocks.output(), &KEY, &constants(), pieces()).unwrap();
    let whole = fs::read(blocks.output()).unwrap();
    assert!(counter.seen() >= 6, "created, written, forced to the disk, renamed");
    for at in 0..counter.seen() {
        for fault in [FailAt::full(at), FailAt::short(at, 100)] {
            fs::write(blocks.output(), "before").unwrap();
            let writes = Writes::new().with_faults(Arc::new(fault));
            let error = assemble(&writes, &blocks.output(), &KEY, &constants(), pieces()).unwrap_err();
            assert!(error.is_disk_full(), "{error:?}");
            let found = fs::read(blocks.output()).unwrap();
            assert!(found == b"before" || (at + 1 == counter.seen() && found == whole), "change {at}");
            assert_eq!(fs::read_dir(blocks.folder.path()).unwrap().count(), 2, "nothing is left behind");
        }
    }
}
