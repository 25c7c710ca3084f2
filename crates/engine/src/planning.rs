//! From steps to jobs: plans against the index, one step at a time, as soon as what the step needs is there.

mod analysis;
mod columns;
mod references;

pub use analysis::{AnalysisPlan, Parcel, analysis_parcels};
pub use columns::point_columns;

use crate::job::SeriesNote;
use crate::steps::{self, StepKind, sample};
use crate::study::Study;
use spinledger_ledger::{Index, Ledger};
use spinledger_pipeline::{Expansion, FromStep, Step};
use spinledger_plan::dynamics::Dynamics;
use spinledger_plan::sample::{Piece, Point, plan_point};
use spinledger_terms::{ContentHash, Key, Kind, Problem, Table, Value};
use std::collections::BTreeMap;

/// What a step has given.
#[derive(Clone, Debug)]
pub enum Product {
    /// Series, one a point; None where a parcel broke.
    Series(Vec<Option<Series>>),
    /// Tables in one entry.
    Tables {
        /// The entry.
        key: Key,
        /// Its content.
        content: ContentHash,
    },
    /// Nothing: something that it needs, or itself, is broken.
    Incomplete,
}

/// The series of a point.
#[derive(Clone, Debug)]
pub struct Series {
    /// Its entry.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
    /// The point.
    pub point: Point,
    /// Its blocks.
    pub pieces: Vec<Piece>,
    /// What only loaded plugins know.
    pub note: SeriesNote,
    /// Constant columns of the point in tables, with units, `sites` last.
    pub columns: Vec<(String, String, Value)>,
}

/// Products by step.
pub type Products = BTreeMap<String, Product>;

/// A step that cannot be planned.
#[derive(Debug)]
pub enum Unplanned {
    /// It waits for these steps.
    Waits(Vec<String>),
    /// The values it takes from an earlier step's table are wrong.
    Problems(Vec<Problem>),
    /// A table cannot be read.
    Failed(String),
}

/// The points of a sample step, planned against the index.
///
/// # Errors
/// Where the scan waits for an earlier step, or takes values from it that the parameters cannot have.
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
    let mut planned = Vec::with_capacity(points.len());
    for point in points {
        let body = point.body();
        let dynamics = Dynamics::of(&body, study.pipeline.seed, &study.pipeline.units, &study.vocabulary)
            .ok_or_else(|| Unplanned::Failed("a point has parameters that are not those of a sample step".into()))?;
        let mut columns = point.columns.clone();
        columns::add_size(&mut columns, &body, study);
        planned.push(plan_point(columns, dynamics, &sample::ask(&body), index));
    }
    Ok(planned)
}

/// The values of a column, in the rows asked for.
fn values_from(table: &Table, from: &FromStep) -> Vec<Value> {
    let Some(column) = table.column(&from.column) else { return Vec::new() };
    let same = |a: &Value, b: &Value| a == b || (a.as_f64().is_some() && a.as_f64() == b.as_f64());
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
    let pieces = point.pieces(index)?;
    Some(Series { key: line.key, content: line.content, point: point.clone(), pieces, note, columns })
}

/// The kind of a step; every step of a checked pipeline has one.
pub fn kind_of(step: &Step) -> &'static StepKind {
    steps::kind(&step.does).unwrap_or(&sample::KIND)
}

/// Files of plugins that did not come with the program, as far as a step uses them.
pub fn foreign_files(study: &Study, step: &Step) -> Vec<String> {
    fn walk(kind: &Kind, value: &Value, study: &Study, out: &mut Vec<String>) {
        match (kind, value) {
            (Kind::Plugin { of }, value) => {
                let name = value.as_str().or_else(|| value.get("plugin").and_then(Value::as_str));
                if let Some((identity, _)) = name.and_then(|name| study.vocabulary.item(*of, name))
                    && !identity.standard
                {
                    out.push(identity.file.clone());
                }
            }
            (Kind::List { of, .. }, Value::List(list)) => list.iter().for_each(|v| walk(of, v, study, out)),
            (Kind::Either { of }, value) => of.iter().for_each(|kind| walk(kind, value, study, out)),
            _ => {}
        }
    }
    let mut out = Vec::new();
    for field in &step.spec.fields {
        if let Some(value) = step.body.get(&field.name) {
            walk(&field.kind, value, study, &mut out);
        }
    }
    // A scan over plugins names them in its values.
    for axis in step.scan.iter().flat_map(|block| &block.axes) {
        if let spinledger_pipeline::AxisValues::Listed(values) = &axis.values {
            values.iter().for_each(|value| walk(&axis.kind, value, study, &mut out));
        }
    }
    out
}
