//! The table of a step that is split by points: the tables of its parcels one below the other, with the scan columns in front.

use crate::failure::Failure;
use crate::planning::Parcel;
use crate::program;
use crate::steps::StepKind;
use spinledger_ledger::{Draft, Index, Input, Ledger, Payload};
use spinledger_plan::analysis::gather_preimage;
use spinledger_terms::{Cells, Column, ContentHash, Key, Table, Value};

/// The preimage of the gathered entry; None where a parcel is not on record.
pub(crate) fn preimage(kind: &StepKind, parcels: &[Parcel], index: &Index) -> Option<String> {
    let part = |parcel: &Parcel| {
        let columns = parcel
            .columns
            .iter()
            .map(|(name, unit, value)| Value::List(vec![Value::text(name), Value::text(unit), value.clone()]));
        Some((Value::List(columns.collect()), index.get(&parcel.key)?.content))
    };
    let parts: Vec<_> = parcels.iter().map(part).collect::<Option<_>>()?;
    Some(gather_preimage(kind.does, kind.revision, &parts))
}

/// The gathered entry: found, or made and published.
///
/// # Errors
/// Where a parcel's table cannot be read, tables do not fit together, or the ledger cannot be written.
pub(crate) fn gather(
    kind: &StepKind,
    parcels: &[Parcel],
    ledger: &Ledger,
    index: &mut Index,
    pipeline: Option<ContentHash>,
) -> Result<(Key, ContentHash), Failure> {
    let preimage = preimage(kind, parcels, index).ok_or("a parcel is not on record")?;
    let key = Key::of(&preimage);
    if let Some(line) = index.get(&key) {
        return Ok((key, line.content));
    }
    if let Some(line) = ledger.lookup(&key)? {
        let content = line.content;
        index.add(line);
        return Ok((key, content));
    }
    let input = |parcel: &Parcel| {
        let line = index.get(&parcel.key)?;
        Some(Input { name: "point".into(), key: line.key, content: line.content })
    };
    let inputs = parcels.iter().filter_map(input).collect();
    let mut tables: Vec<(String, Table)> = Vec::new();
    for parcel in parcels {
        let record = ledger.read_record(&parcel.key)?;
        for (at, described) in record.tables.iter().enumerate() {
            let part = ledger.read_table(&parcel.key, &described.name)?;
            let part = in_front(&parcel.columns, part);
            if tables.len() <= at {
                tables.push((described.name.clone(), Table::default()));
            }
            tables[at].1.append(&part).map_err(|e| format!("the tables `{}` of two points: {e}", described.name))?;
        }
    }
    let mut provenance = program::provenance(Value::Map(Default::default()), 1);
    provenance.inputs = inputs;
    provenance.finished = spinledger_ledger::now();
    provenance.pipeline = pipeline;
    let mut draft = Draft::new(&preimage, &format!("{}.gathered", kind.does), provenance);
    for (name, table) in tables {
        draft = draft.table(&name, Payload::Table(table));
    }
    let published = ledger.publish(draft)?;
    if let Some(line) = ledger.lookup(&key)? {
        index.add(line);
    }
    Ok((key, published.content))
}

fn in_front(columns: &[(String, String, Value)], table: Table) -> Table {
    let rows = table.rows();
    let mut all: Vec<Column> = columns
        .iter()
        .map(|(name, unit, value)| {
            let cells = match value {
                Value::Integer(i) => Cells::Integer(vec![Some(*i); rows]),
                Value::Number(x) => Cells::Number(vec![Some(*x); rows]),
                Value::Bool(b) => Cells::Boolean(vec![Some(*b); rows]),
                Value::Text(t) => Cells::Text(vec![Some(t.clone()); rows]),
                other => Cells::Text(vec![Some(other.canonical()); rows]),
            };
            Column { name: name.clone(), unit: unit.clone(), cells }
        })
        .collect();
    all.extend(table.columns);
    Table { columns: all }
}
