//! Points of sample steps, planned against the index.

use super::columns::add_size;
use super::starts::{Sources, same};
use super::{Product, Products, Series, Unplanned, point_columns};
use crate::job::SeriesNote;
use crate::steps::sample;
use crate::study::Study;
use spinledger_ledger::{Index, Ledger};
use spinledger_pipeline::{Expansion, FromStep, Step};
use spinledger_plan::dynamics::Dynamics;
use spinledger_plan::sample::{Ask, Point, plan_point};
use spinledger_plan::sequence::Place;
use spinledger_terms::{Key, Table, Value};
use std::collections::BTreeMap;

/// The points of a sample step, planned against the index.
///
/// # Errors
/// Where the scan waits for an earlier step, or takes values from it that the parameters cannot have; where the configurations to begin from wait for an
/// earlier step, or do not fit.
pub fn sample_points(
    study: &Study,
    step: &Step,
    products: &Products,
    ledger: Option<&Ledger>,
    index: &Index,
) -> Result<Vec<Point>, Unplanned> {
    let failed = std::cell::RefCell::new(None);
    let lookup = |from: &FromStep| -> Option<Vec<Value>> {
        let Some(Product::Tables { key, .. }) = products.get(&from.step) else { return None };
        match ledger?.read_table(key, from.table.as_deref().unwrap_or("main")) {
            Ok(table) => Some(values_from(&table, from)),
            Err(error) => {
                *failed.borrow_mut() = Some(crate::chain_text(&error));
                None
            }
        }
    };
    let expansion = step.expand(&lookup, &study.vocabulary).map_err(Unplanned::Problems)?;
    if let Some(error) = failed.borrow_mut().take() {
        return Err(Unplanned::Failed(error));
    }
    let points = match expansion {
        Expansion::Points(points) => points,
        Expansion::Waits(steps) => return Err(Unplanned::Waits(steps)),
    };
    let mut sources = Sources::new(&study.vocabulary, products);
    let mut drafts = Vec::with_capacity(points.len());
    for point in points {
        let body = point.body();
        let dynamics = Dynamics::of(&body, study.pipeline.seed, &study.pipeline.units, &study.vocabulary)
            .ok_or_else(|| Unplanned::Failed("a point has parameters that are not those of a sample step".into()))?;
        let mut columns = point.columns.clone();
        add_size(&mut columns, &body, &study.vocabulary);
        let kept = sources.states(&body, &columns, &dynamics)?;
        drafts.push(Draft { columns, dynamics, ask: sample::ask(&body, kept) });
    }
    Ok(plan(drafts, &step.followed(), index))
}

/// A point before it is planned.
struct Draft {
    columns: Vec<(String, Value)>,
    dynamics: Dynamics,
    ask: Ask,
}

/// Plans points in their order; those of a sequence each after the one that it follows.
fn plan(mut drafts: Vec<Draft>, followed: &[String], index: &Index) -> Vec<Point> {
    if followed.is_empty() {
        let one = |d: Draft| plan_point(d.columns, d.dynamics, &d.ask, None, None, index);
        return drafts.into_iter().map(one).collect();
    }
    let mut numbers: BTreeMap<String, u32> = BTreeMap::new();
    let mut places = Vec::with_capacity(drafts.len());
    for draft in &drafts {
        let others = draft.columns.iter().filter(|(name, _)| name != "position" && !followed.contains(name));
        let name: Vec<String> = others.map(|(name, value)| format!("{name} {}", value.canonical())).collect();
        let next = numbers.len() as u32;
        let sequence = *numbers.entry(name.join(",")).or_insert(next);
        let position = draft.columns.iter().find(|(name, _)| name == "position").and_then(|(_, value)| value.as_i64());
        places.push(Place { sequence, position: position.and_then(|n| u64::try_from(n).ok()).unwrap_or(0) });
    }
    // A sequence has one number of chains, the largest that is asked for along it.
    let mut chains: BTreeMap<u32, u32> = BTreeMap::new();
    for (draft, place) in drafts.iter().zip(&places) {
        let most = chains.entry(place.sequence).or_default();
        *most = (*most).max(draft.ask.chains);
    }
    for (draft, place) in drafts.iter_mut().zip(&places) {
        draft.ask.chains = chains[&place.sequence];
    }
    let mut order: Vec<usize> = (0..drafts.len()).collect();
    order.sort_by_key(|at| places[*at]);
    let mut drafts: Vec<Option<Draft>> = drafts.into_iter().map(Some).collect();
    let mut planned: Vec<Option<Point>> = vec![None; drafts.len()];
    let mut before: Option<usize> = None;
    for at in order {
        let Some(draft) = drafts[at].take() else { continue };
        let follows = before.filter(|before| places[*before].sequence == places[at].sequence);
        let follows = follows.and_then(|before| planned[before].as_ref());
        let point = plan_point(draft.columns, draft.dynamics, &draft.ask, Some(places[at]), follows, index);
        planned[at] = Some(point);
        before = Some(at);
    }
    planned.into_iter().flatten().collect()
}

/// The values of a column, in the rows asked for.
fn values_from(table: &Table, from: &FromStep) -> Vec<Value> {
    let Some(column) = table.column(&from.column) else { return Vec::new() };
    let fits = |row: usize| {
        let filter = from
            .filter
            .iter()
            .all(|(name, value)| table.column(name).is_some_and(|column| same(&column.cells.value(row), value)));
        filter
            && from
                .beside
                .iter()
                .all(|(name, value)| table.column(name).is_none_or(|column| same(&column.cells.value(row), value)))
    };
    (0..table.rows())
        .filter(|row| fits(*row))
        .map(|row| column.cells.value(row))
        .filter(|v| *v != Value::Null)
        .collect()
}

/// The series of a point, where it is complete and closed.
pub fn closed_series(study: &Study, step: &Step, point: &Point, index: &Index) -> Option<Series> {
    let mut columns = point_columns(study, step, point);
    let preimage = point.series_preimage(&columns);
    let line = index.get(&Key::of(&preimage))?;
    let note = SeriesNote::from_text(&line.note)?;
    columns.push(("sites".into(), String::new(), Value::Integer(note.sites as i64)));
    let (pieces, kept) = (point.pieces(index)?, point.kept(index)?);
    Some(Series { key: line.key, content: line.content, point: point.clone(), pieces, kept, note, columns })
}
