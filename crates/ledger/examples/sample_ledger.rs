//! Makes a small ledger: `cargo run -p spinledger-ledger --example sample_ledger FOLDER`. The one in `tests/ledger-1`, which
//! later releases must read, was made by it. Its numbers are invented.

use spinledger_ledger::{
    BlockData, ChainPlace, ColumnData, Draft, Input, Ledger, Payload, Processor, Program, Provenance, Streams, combine,
    now,
};
use spinledger_terms::{Column, Key, Table, Value};
use std::error::Error;
use std::path::Path;

fn main() -> Result<(), Box<dyn Error>> {
    let folder = std::env::args().nth(1).ok_or("name a folder")?;
    let ledger = Ledger::open(Path::new(&folder))?;
    let provenance = || Provenance {
        parameters: Value::map([("temperature", Value::Number(2.27))]),
        seed: Some(20_261_201),
        streams: Some(Streams { generator: "invented".into(), version: 1 }),
        program: Program { name: "sample_ledger".into(), version: "0.1.0".into(), ..Program::default() },
        processor: Processor { model: "invented".into(), features: "portable".into() },
        host: "invented".into(),
        threads: 1,
        started: now(),
        finished: now(),
        seconds: 0.25,
        updates: 640,
        pipeline: None,
        ..Provenance::default()
    };
    let chain = Key::of("sample chain");
    let energy = (0..40).map(|row| if row == 7 { f64::NAN } else { f64::from(row % 9) * 0.25 - 2.0 }).collect();
    let block = BlockData {
        sweep: (0..40).map(|row| 100 + 5 * row).collect(),
        columns: vec![ColumnData { name: "energy".into(), unit: "J".into(), values: energy }],
    };
    let draft = Draft::new("sample block", "block", provenance())
        .table("block", Payload::Block(block))
        .chain(ChainPlace { chain, block: 0, number: 0, rows: 40 });
    let block = (draft.key, ledger.publish(draft)?.content);
    let series = Draft::new("sample series", "series", provenance()).content(combine("series", &[block.1]));
    let series = (series.key, ledger.publish(series)?.content);
    let means = Table {
        columns: vec![
            Column::texts("quantity", vec![Some("energy".into()), Some("heat_capacity".into())]),
            Column::numbers("value", "J", vec![Some(-1.125), None]),
            Column::booleans("equilibrated", vec![Some(true), None]),
            Column::integers("effective", "", vec![Some(40), None]),
        ],
    };
    let inputs = vec![Input { name: "chains".into(), key: series.0, content: series.1 }];
    let draft = Draft::new("sample averages", "averages", Provenance { inputs, ..provenance() });
    ledger.publish(draft.table("main", Payload::Table(means)))?;
    ledger.save_state(&chain, 300, b"sample state")?;
    ledger.save_text("spinledger: 1\n")?;
    Ok(())
}
