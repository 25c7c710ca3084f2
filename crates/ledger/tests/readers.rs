//! Our files as others read them: pyarrow, polars and DuckDB. `SPINLEDGER_PYTHON` names a Python that has all three; where
//! it is not set the test says so and ends, and where it is set nothing is skipped.

use spinledger_ledger::{BlockData, ColumnData, Constant, Piece, Writes, assemble, write_block, write_table};
use spinledger_terms::{Column, Key, Table, Value};
use std::fs;
use std::process::Command;

#[test]
fn other_readers_see_values_units_and_keys() {
    let Ok(python) = std::env::var("SPINLEDGER_PYTHON") else {
        println!("SPINLEDGER_PYTHON is not set: other readers are not tried");
        return;
    };
    let folder = tempfile::tempdir().unwrap();
    let key = Key([0xab; 32]);
    let table = Table {
        columns: vec![
            Column::integers("size", "", vec![Some(8), Some(i64::MIN), None]),
            Column::numbers("temperature", "K", vec![Some(2.5), Some(f64::INFINITY), None]),
            Column::booleans("equilibrated", vec![Some(true), Some(false), None]),
            Column::texts("flags", vec![Some(String::new()), Some("poor-overlap;é".into()), None]),
        ],
    };
    fs::write(folder.path().join("table.parquet"), write_table(&table, &key).unwrap()).unwrap();
    let empty = Table { columns: vec![Column::numbers("value", "J", vec![])] };
    fs::write(folder.path().join("empty.parquet"), write_table(&empty, &key).unwrap()).unwrap();
    let rows = 1000;
    let column = |name: &str, unit: &str, value: &dyn Fn(usize) -> f64| ColumnData {
        name: name.into(),
        unit: unit.into(),
        values: (0..rows).map(value).collect(),
    };
    let block = BlockData {
        sweep: (0..rows as i64).map(|row| 10 * row).collect(),
        columns: vec![
            column("energy", "meV", &|row| (row % 8) as f64 * -0.25),
            column("magnetisation", "", &|row| 1.0 / (row + 1) as f64),
            column("correlation_length", "", &|row| if row % 2 == 0 { f64::NAN } else { row as f64 }),
        ],
    };
    let path = folder.path().join("block.parquet");
    fs::write(&path, write_block(&block, &key).unwrap()).unwrap();
    let constants = [
        Constant { name: "temperature".into(), unit: "K".into(), value: Value::Number(2.5) },
        Constant { name: "size".into(), unit: String::new(), value: Value::text("12x8") },
        Constant { name: "pinned".into(), unit: String::new(), value: Value::Bool(true) },
    ];
    let piece = |rows, chain| Piece { path: path.clone(), rows, chain, extra: vec![] };
    let output = folder.path().join("series.parquet");
    assemble(&Writes::new(), &output, &key, &constants, [piece(1000, 0), piece(1000, 1), piece(300, 0)]).unwrap();
    let script = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/readers.py");
    let outcome = Command::new(python).arg(script).arg(folder.path()).arg(key.to_string()).output().unwrap();
    assert!(outcome.status.success(), "{}", String::from_utf8_lossy(&outcome.stderr));
}
