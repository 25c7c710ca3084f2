//! The kinds of step: one file each, one line each in [`KINDS`].
//!
//! A kind says what its parameters are, how its work is split into parcels, what is wrong with a step beyond its parameters' types, and, for
//! analyses, how tables come from series and tables. Everything else (keys, workers, records, results) is the same for all.

mod averages;
mod cell;
mod chart;
mod compare;
mod crossing;
mod drawn;
pub(crate) mod picture;
mod report;
mod reweight;
pub mod sample;
pub(crate) mod settled;
mod words;

use crate::failure::Failure;
use crate::job::{SeriesInput, StateInput, TableInput, UnitNames};
use crate::series::SeriesReader;
use spinledger_ledger::{Ledger, Record};
use spinledger_pipeline::{Pipeline, Point, Step};
use spinledger_plan::dynamics::ItemRef;
use spinledger_terms::{Key, Path, Problem, StepSpec, Table, Value, Vocabulary};
use std::collections::BTreeMap;

/// All kinds.
pub const KINDS: &[&StepKind] = &[
    &sample::KIND,
    &averages::KIND,
    &reweight::KIND,
    &crossing::KIND,
    &compare::KIND,
    &chart::KIND,
    &picture::KIND,
    &report::KIND,
];

/// Columns of a point that do not tell one group from another.
pub(crate) const WITHIN_GROUP: [&str; 2] = ["temperature", "inverse_temperature"];

/// How the work of a step is split into parcels.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Split {
    /// Groups of chains at points: sampling.
    Chains,
    /// One parcel for each point of the series that it is of.
    Points,
    /// One parcel for all points that differ in temperature and nothing else. Its tables have a column `temperature` of their own.
    Groups,
    /// One parcel.
    Whole,
    /// One parcel, of one kept configuration.
    State,
}

/// A kind of step.
pub struct StepKind {
    /// The word after `does:`.
    pub does: &'static str,
    /// Counts changes of what it computes.
    pub revision: i64,
    /// How its work is split.
    pub split: Split,
    /// Its parameters.
    pub spec: fn() -> StepSpec,
    /// Checks a step beyond the types of its parameters.
    pub check: fn(&Checked<'_>, &mut Vec<Problem>),
    /// Completes parameters with what the step's surroundings tell, before they enter a key.
    pub complete: fn(&mut Value, &Surroundings<'_>),
    /// Makes tables, the first of them `main`, and files. Not for sampling.
    pub analyse: fn(&Task<'_>) -> Result<Output, StepError>,
}

/// Tables by name, in order.
pub type NamedTables = Vec<(String, Table)>;

/// What an analysis gives.
#[derive(Debug, Default)]
pub struct Output {
    /// Its tables.
    pub tables: NamedTables,
    /// Figures and pages by name with extension, in order: `main.svg` becomes `<step>.svg` in the results.
    pub files: Vec<(String, Vec<u8>)>,
}

impl From<NamedTables> for Output {
    fn from(tables: NamedTables) -> Self {
        Output { tables, files: Vec::new() }
    }
}

/// Where a step stands.
pub struct Surroundings<'a> {
    /// The pipeline that it is part of.
    pub pipeline: &'a Pipeline,
}

/// The kind of a name.
pub fn kind(does: &str) -> Option<&'static StepKind> {
    KINDS.iter().copied().find(|kind| kind.does == does)
}

/// A step to be checked.
pub struct Checked<'a> {
    /// Its place.
    pub path: &'a Path,
    /// The step.
    pub step: &'a Step,
    /// Its points: one without columns where it is not scanned, none where its scan waits for an earlier step.
    pub points: &'a [Point],
    /// What kind the steps that it refers to are.
    pub kinds: &'a BTreeMap<String, String>,
    /// The points of the steps before it, by name: of all that it can refer to.
    pub earlier: &'a BTreeMap<String, Vec<Point>>,
    /// The pipeline.
    pub pipeline: &'a Pipeline,
    /// Items and step kinds.
    pub vocabulary: &'a Vocabulary,
}

/// Loads a lattice and a Hamiltonian on it.
type LoadProblem<'a> = dyn Fn(&ItemRef, &ItemRef) -> Result<crate::loaded::Problem, Failure> + 'a;

/// An analysis parcel at work.
pub struct Task<'a> {
    /// Parameters without names of steps.
    pub parameters: &'a Value,
    /// The series it takes.
    pub series: &'a [SeriesInput],
    /// The tables it takes.
    pub tables: &'a [TableInput],
    /// The configuration it takes.
    pub state: Option<&'a StateInput>,
    /// Loads a lattice and a Hamiltonian on it; nothing is loaded before.
    pub(crate) problem: &'a LoadProblem<'a>,
    /// Names of the pipeline's units.
    pub units: &'a UnitNames,
    /// The ledger they are in.
    pub ledger: &'a Ledger,
    /// To be called now and then: the work goes on.
    pub progress: &'a dyn Fn(),
}

impl Task<'_> {
    /// Reads a series.
    pub fn read<'a>(&'a self, series: &'a SeriesInput) -> SeriesReader<'a> {
        SeriesReader::new(self.ledger, series)
    }

    /// Reads a table of the input with a role.
    ///
    /// # Errors
    /// Where there is no such input or table, or it cannot be read.
    pub fn table(&self, role: &str, name: &str) -> Result<Table, StepError> {
        self.inputs().table(role, name)
    }

    /// The entries whose tables it takes.
    pub(crate) fn inputs(&self) -> Inputs<'_> {
        let keys = self.tables.iter().map(|input| (input.role.clone(), input.key));
        Inputs { ledger: self.ledger, keys: keys.collect() }
    }
}

/// Entries by role: those of a task, or those that a record names.
pub(crate) struct Inputs<'a> {
    ledger: &'a Ledger,
    keys: Vec<(String, Key)>,
}

impl<'a> Inputs<'a> {
    /// What an entry on record was made from.
    pub(crate) fn recorded(ledger: &'a Ledger, record: &Record) -> Self {
        let keys = record.provenance.inputs.iter().map(|input| (input.name.clone(), input.key));
        Inputs { ledger, keys: keys.collect() }
    }

    /// Whether there is one.
    pub(crate) fn has(&self, role: &str) -> bool {
        self.keys.iter().any(|(name, _)| name == role)
    }

    /// Reads a table of the input with a role.
    pub(crate) fn table(&self, role: &str, name: &str) -> Result<Table, StepError> {
        let key = self.keys.iter().find(|(known, _)| known == role).map(|(_, key)| key);
        let key = key.ok_or_else(|| StepError(format!("there is no input for `{role}`")))?;
        let record = self.ledger.read_record(key)?;
        if record.tables.iter().all(|table| table.name != name) {
            let known: Vec<&str> = record.tables.iter().map(|t| t.name.as_str()).collect();
            return Err(StepError(format!("the step has no table `{name}`; it has: {}", known.join(", "))));
        }
        Ok(self.ledger.read_table(key, name)?)
    }
}

impl From<Failure> for StepError {
    fn from(failure: Failure) -> Self {
        let (Failure::Broken(text) | Failure::Disk(text)) = failure;
        StepError(text)
    }
}

/// Why a parcel broke, in words.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct StepError(pub String);

impl std::fmt::Display for StepError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(&self.0)
    }
}

impl std::error::Error for StepError {}

impl From<spinledger_ledger::LedgerError> for StepError {
    fn from(error: spinledger_ledger::LedgerError) -> Self {
        // With what can be done about it.
        let (Failure::Broken(text) | Failure::Disk(text)) = Failure::from(error);
        StepError(text)
    }
}

/// The step that a parameter names must be of one of some kinds.
pub(crate) fn must_be_of(step: &Checked<'_>, parameter: &str, kinds: &[&str], problems: &mut Vec<Problem>) {
    let Some(point) = step.points.first() else { return };
    let Some(name) = point.get(parameter) else { return };
    let Some(kind) = name.as_str().and_then(|name| step.kinds.get(name)) else { return };
    if !kinds.contains(&kind.as_str()) {
        let message = format!("`{}` does {kind}", name.as_str().unwrap_or_default());
        let problem = Problem::at_value(&point.place(parameter), message);
        problems.push(problem.expected(format!("a step that does: {}", kinds.join(", "))));
    }
}

/// The sample step that a parameter names must not follow anything: what is concluded from its points takes them for states of equilibrium, and a
/// point of a sequence remembers the one before.
pub(crate) fn must_not_follow(step: &Checked<'_>, parameter: &str, problems: &mut Vec<Problem>) {
    let Some(point) = step.points.first() else { return };
    let Some(name) = point.get(parameter) else { return };
    let points = name.as_str().and_then(|name| step.earlier.get(name)).map_or(&[][..], Vec::as_slice);
    if let Some(followed) = points.iter().find(|point| point.get("follow").is_some()) {
        let name = name.as_str().unwrap_or_default();
        let message = format!("the points of `{name}` follow each other: they are not in equilibrium");
        let problem = Problem::at_value(&point.place(parameter), message).other(followed.place("follow"), "here");
        problems.push(problem.expected("a sample step without `follow`"));
    }
}

/// The step that a parameter names, if any, must be one that gives tables.
pub(crate) fn must_have_tables(step: &Checked<'_>, parameter: &str, problems: &mut Vec<Problem>) {
    let named = step.points.first().and_then(|point| point.get(parameter));
    let sampled = named.and_then(|name| step.kinds.get(name.as_str()?).map(|does| does == "sample"));
    if sampled == Some(true) {
        let with: Vec<&str> = KINDS.iter().filter(|kind| kind.split != Split::Chains).map(|kind| kind.does).collect();
        must_be_of(step, parameter, &with, problems);
    }
}

/// Nothing to complete.
pub(crate) fn as_is(_: &mut Value, _: &Surroundings<'_>) {}

/// Joins flags as tables have them: sorted, without repetition, `;` between.
pub fn flags_text(flags: &[&str]) -> String {
    let mut flags = flags.to_vec();
    flags.sort_unstable();
    flags.dedup();
    flags.join(";")
}
