//! What the runner and its workers say to each other: JSON, a line each.

use serde::{Deserialize, Serialize};
use spinledger_plan::dynamics::ItemRef;
use spinledger_plan::sample::{Group, Piece, Point};
use spinledger_plan::states::Kept;
use spinledger_terms::{ColumnSpec, ContentHash, Key, Value};

/// One piece of work: what the runner tells a worker.
#[derive(Clone, Debug, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Job {
    /// Sample the chains of a group.
    Sample(Box<SampleJob>),
    /// Close a point whose chains are complete: publish its series.
    Close(CloseJob),
    /// Gather the kept configurations of a step.
    States(StatesJob),
    /// Compute an analysis parcel.
    Analyse(Box<AnalyseJob>),
}

/// Sample the chains of a group up to a number of rows.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct SampleJob {
    /// The point, with this one group; those of a sequence in the order in which they are visited.
    pub points: Vec<Point>,
    /// Hash of the pipeline's text.
    pub pipeline: Option<ContentHash>,
}

impl SampleJob {
    /// The group to be sampled at each point.
    pub fn groups(&self) -> impl Iterator<Item = (&Point, &Group)> {
        self.points.iter().filter_map(|point| Some((point, point.groups.first()?)))
    }

    /// Whether code that did not come with the program takes part.
    pub fn is_foreign(&self) -> bool {
        self.points.iter().any(|point| point.dynamics.is_foreign())
    }
}

/// Publish the series of a point, and write its file.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct CloseJob {
    /// Preimage of the series' key.
    pub preimage: String,
    /// Whether the series is not on record yet.
    pub publish: bool,
    /// The blocks.
    pub pieces: Vec<Piece>,
    /// Start configurations, in order.
    pub starts: Vec<String>,
    /// The file to write, if any.
    pub layout: Option<Layout>,
    /// Parameters for the record.
    pub parameters: Value,
    /// Hash of the pipeline's text.
    pub pipeline: Option<ContentHash>,
}

/// A file of a series.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Layout {
    /// Where.
    pub path: std::path::PathBuf,
    /// Constant columns before `sites`: name, unit, value.
    pub columns: Vec<(String, String, Value)>,
}

/// Publish the record of a step's kept configurations, and write their table.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct StatesJob {
    /// Preimage of its key.
    pub preimage: String,
    /// Whether it is not on record yet.
    pub publish: bool,
    /// The points that have any, in order.
    pub points: Vec<StatesOf>,
    /// Whether there is a column `start`.
    pub several: bool,
    /// Where the table goes, if it is to be written.
    pub path: Option<std::path::PathBuf>,
    /// Hash of the pipeline's text.
    pub pipeline: Option<ContentHash>,
}

/// The kept configurations of a point.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct StatesOf {
    /// Constant columns, `sites` last: name, unit, value.
    pub columns: Vec<(String, String, Value)>,
    /// Start configurations, in order.
    pub starts: Vec<String>,
    /// The configurations.
    pub kept: Vec<Kept>,
}

/// A series, as an analysis sees it.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct SeriesInput {
    /// What it serves as.
    pub role: String,
    /// Its entry.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
    /// The scan columns of its point.
    pub columns: Vec<(String, Value)>,
    /// Facts that are not in its content.
    pub facts: SeriesFacts,
    /// The blocks.
    pub pieces: Vec<Piece>,
}

/// What an analysis must know of a series beside its numbers.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SeriesFacts {
    /// Free sites.
    pub sites: u64,
    /// Temperature in the pipeline's unit; None where infinite.
    pub temperature: Option<f64>,
    /// k_B T in energy units; None where infinite.
    pub thermal_energy: Option<f64>,
    /// Name of the energy unit.
    pub energy_unit: String,
    /// Name of the temperature unit.
    pub temperature_unit: String,
    /// Sweeps between rows.
    pub every: u64,
    /// Whether nothing was discarded before recording.
    pub from_start: bool,
    /// Start configurations, in order.
    pub starts: Vec<String>,
    /// The columns of the observables.
    pub observed: Vec<ColumnSpec>,
}

/// What a `series` entry notes in the journal: facts that only a loaded lattice and observable know.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SeriesNote {
    /// Free sites.
    pub sites: u64,
    /// The columns of the observables.
    pub observed: Vec<ColumnSpec>,
}

/// A table, as an analysis sees it.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct TableInput {
    /// What it serves as.
    pub role: String,
    /// Its entry.
    pub key: Key,
    /// The content of the entry.
    pub content: ContentHash,
}

/// A kept configuration, as an analysis sees it.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct StateInput {
    /// What it serves as.
    pub role: String,
    /// Its entry.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
    /// Its lattice.
    pub lattice: ItemRef,
    /// Its model.
    pub model: ItemRef,
    /// Which it is: the point, chain and sweep in words.
    pub words: String,
}

/// Names of units; empty in reduced units.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct UnitNames {
    /// Of energies.
    pub energy: String,
    /// Of temperatures.
    pub temperature: String,
}

/// Compute an analysis parcel.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct AnalyseJob {
    /// The step kind.
    pub does: String,
    /// Preimage of its key.
    pub preimage: String,
    /// Parameters without names of steps.
    pub parameters: Value,
    /// Series to read.
    pub series: Vec<SeriesInput>,
    /// Tables to read.
    pub tables: Vec<TableInput>,
    /// The configuration to read.
    pub state: Option<StateInput>,
    /// Why it cannot be done, found out while it was planned: then it is only said.
    pub refused: Option<String>,
    /// Names of the pipeline's units.
    pub units: UnitNames,
    /// Hash of the pipeline's text.
    pub pipeline: Option<ContentHash>,
}

impl AnalyseJob {
    /// Whether code that did not come with the program takes part.
    pub fn is_foreign(&self) -> bool {
        self.state.iter().any(|state| !state.lattice.identity.standard || !state.model.identity.standard)
    }
}

/// From a worker to the runner.
#[derive(Clone, Debug, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Report {
    /// The job was taken up. Before that, the end of the worker is no fault of the job.
    Taken,
    /// The work goes on: attempted spin updates since the last report.
    Progress {
        /// Attempted spin updates since the last report.
        updates: u64,
    },
    /// Something to be told.
    Log {
        /// The text.
        text: String,
    },
    /// Done. The journal lines of everything published or found.
    Done {
        /// Whether anything was computed here; false where another run had done it all.
        computed: bool,
        /// Attempted spin updates since the last report.
        updates: u64,
        /// What is now on record, as lines of the journal.
        entries: Vec<Entry>,
    },
    /// Another live process works on it.
    Held {
        /// Who.
        by: String,
    },
    /// It was stopped on the way, since there are no more orders; what was done is on record.
    Stopped {
        /// Attempted spin updates since the last report.
        updates: u64,
        /// What is now on record, as lines of the journal.
        entries: Vec<Entry>,
    },
    /// It cannot be done.
    Broken {
        /// Why.
        message: String,
    },
    /// What was computed cannot be kept: the disk is full, or cannot be written. No fault of the parcel.
    Disk {
        /// Why.
        message: String,
    },
}

/// A journal line, for the wire.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Entry {
    /// The entry.
    pub key: Key,
    /// Its kind.
    pub kind: String,
    /// Its place in a chain.
    pub chain: Option<spinledger_ledger::ChainPlace>,
    /// Its content.
    pub content: ContentHash,
    /// Seconds that it took.
    pub seconds: f64,
    /// Attempted spin updates.
    pub updates: u64,
    /// The note of its line.
    pub note: String,
}

impl Entry {
    /// From a line of the journal.
    pub fn of(line: &spinledger_ledger::Line) -> Self {
        Entry {
            key: line.key,
            kind: line.kind.to_string(),
            chain: line.chain,
            content: line.content,
            seconds: line.seconds,
            updates: line.updates,
            note: line.note.to_string(),
        }
    }
}

impl SeriesNote {
    /// As a value, for records and journals.
    pub fn to_value(&self) -> Value {
        let column = |c: &ColumnSpec| {
            Value::map([
                ("name", Value::text(&c.name)),
                ("unit", Value::text(&c.unit)),
                ("invariant", Value::Bool(c.invariant)),
                ("about", Value::text(&c.about)),
            ])
        };
        Value::map([
            ("sites", Value::Integer(self.sites as i64)),
            ("observed", Value::List(self.observed.iter().map(column).collect())),
        ])
    }

    /// From a value; None where it is something else.
    pub fn from_value(value: &Value) -> Option<Self> {
        let text = |v: &Value, name: &str| Some(v.get(name)?.as_str()?.to_owned());
        let column = |c: &Value| {
            Some(ColumnSpec {
                name: text(c, "name")?,
                unit: text(c, "unit")?,
                invariant: c.get("invariant")?.as_bool()?,
                about: text(c, "about")?,
            })
        };
        let observed = value.get("observed")?.as_list()?.iter().map(column).collect::<Option<_>>()?;
        Some(SeriesNote { sites: u64::try_from(value.get("sites")?.as_i64()?).ok()?, observed })
    }

    /// From the note of a journal line.
    pub fn from_text(text: &str) -> Option<Self> {
        Self::from_value(&serde_json::from_str(text).ok()?)
    }
}
