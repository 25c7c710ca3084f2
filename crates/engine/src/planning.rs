//! From steps to jobs: plans against the index, one step at a time, as soon as what the step needs is there.

mod analysis;
mod columns;
mod references;
mod sample;
pub(crate) mod starts;
mod state;

pub use analysis::{AnalysisPlan, Parcel, analysis_parcels, inputs_of};
pub use columns::point_columns;
pub use sample::{closed_series, sample_points};

use crate::job::SeriesNote;
use crate::steps::{self, StepKind};
use crate::study::Study;
use spinledger_pipeline::Step;
use spinledger_plan::sample::{Piece, Point};
use spinledger_plan::states::Kept;
use spinledger_terms::{ContentHash, Key, Kind, Problem, Value};
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
    /// Its kept configurations.
    pub kept: Vec<Kept>,
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
    /// A table cannot be read, or configurations to begin from do not fit.
    Failed(String),
}

/// The kind of a step; every step of a checked pipeline has one.
pub fn kind_of(step: &Step) -> &'static StepKind {
    steps::kind(&step.does).unwrap_or(&steps::sample::KIND)
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
