//! The report: one HTML file that asks for nothing.

mod answer;
mod digest;
mod figure;
mod record;
mod table;
mod words;
mod write;

use crate::chart::Chart;
use crate::picture::Picture;
use spinledger_terms::{Table, Value};

pub use words::{flag_remedy, flag_words};

/// Everything that stands on a page, as finished values.
#[derive(Clone, Debug, PartialEq)]
pub struct Page {
    /// The name of the pipeline: a line above the question, and part of the window's title.
    pub name: String,
    /// The question: the pipeline's title.
    pub question: String,
    /// The answers, most important first.
    pub answers: Vec<Answer>,
    /// Sentences after the answers, one paragraph each.
    pub notes: Vec<String>,
    /// Figures, numbered from 1.
    pub figures: Vec<Figure>,
    /// Tables, numbered from 1. What their `flags` columns say is told in a section of its own.
    pub tables: Vec<TableView>,
    /// How to get the same digits again, step by step.
    pub again: Vec<Again>,
    /// The record of the whole: the pipeline with all defaults, identities of plugins; Null for none.
    pub record: Value,
    /// Program, version, commit.
    pub made: String,
}

impl Page {
    /// A page with nothing on it but its question.
    pub fn new(name: impl Into<String>, question: impl Into<String>) -> Self {
        Page {
            name: name.into(),
            question: question.into(),
            answers: Vec::new(),
            notes: Vec::new(),
            figures: Vec::new(),
            tables: Vec::new(),
            again: Vec::new(),
            record: Value::Null,
            made: String::new(),
        }
    }
}

/// A number that the pipeline was made for.
#[derive(Clone, Debug, PartialEq)]
pub struct Answer {
    /// What it is (`tc.critical_temperature`).
    pub name: String,
    /// The number; None where none was found.
    pub value: Option<f64>,
    /// One standard error.
    pub error: Option<f64>,
    /// Its unit; empty for pure numbers.
    pub unit: String,
    /// What it is held against.
    pub reference: Reference,
    /// Where the reference comes from.
    pub source: String,
    /// (value - reference) / combined error, as the comparison computed it.
    pub deviation: Option<f64>,
    /// How many standard errors still agree.
    pub within: f64,
    /// What came of it.
    pub verdict: Verdict,
    /// Flags, as in tables (`not-equilibrated`).
    pub flags: Vec<String>,
    /// What made the number; Null for none.
    pub record: Value,
}

/// What an answer is held against.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Reference {
    /// Nothing.
    None,
    /// A value with its standard error (0 for an exact one).
    Value {
        /// The value.
        value: f64,
        /// Its standard error.
        error: f64,
    },
    /// Rigorous bounds.
    Bracket {
        /// Not below this.
        lower: Option<f64>,
        /// Not above this.
        upper: Option<f64>,
    },
}

/// What came of a comparison.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// Within the agreed number of standard errors.
    Agrees,
    /// Further away.
    Disagrees,
    /// It cannot be said: flagged input, no error, or too large a one.
    Undecided,
    /// Nothing was compared.
    None,
}

/// A figure.
#[derive(Clone, Debug, PartialEq)]
pub struct Figure {
    /// Stands below it.
    pub caption: String,
    /// What is drawn. The page draws a chart twice, for wide and for narrow windows, and reads out its values.
    pub content: Content,
    /// What made it; Null for none.
    pub record: Value,
}

/// What a figure shows.
#[derive(Clone, Debug, PartialEq)]
pub enum Content {
    /// A chart.
    Chart(Chart),
    /// A configuration.
    Picture(Picture),
}

/// A table on the page.
#[derive(Clone, Debug, PartialEq)]
pub struct TableView {
    /// Stands above it.
    pub caption: String,
    /// The table. A column `error` or `x_error` says how many digits `value` or `x` are shown with.
    pub table: Table,
    /// The file that has all of it (`means.parquet`); empty for none.
    pub file: String,
    /// The key of its ledger entry; empty for none.
    pub key: String,
    /// At most this many rows are shown; the page says how many there are.
    pub most_rows: usize,
    /// Where the table is an extract: what the flags of the whole say.
    pub flagged: Option<Flagged>,
    /// What made it; Null for none.
    pub record: Value,
}

/// What the flags of a table say.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Flagged {
    /// Each flag with the number of rows that have it, most first.
    pub flags: Vec<(String, usize)>,
    /// Rows in all.
    pub rows: usize,
}

impl Flagged {
    /// Counts the flags in a table's column `flags`.
    pub fn of(table: &Table) -> Self {
        let mut counts = std::collections::BTreeMap::<&str, usize>::new();
        for row in 0..table.rows() {
            for flag in table.text("flags", row).unwrap_or("").split(';').filter(|f| !f.is_empty()) {
                *counts.entry(flag).or_default() += 1;
            }
        }
        let mut flags: Vec<(String, usize)> = counts.into_iter().map(|(f, n)| (f.to_owned(), n)).collect();
        flags.sort_by(|a, b| b.1.cmp(&a.1).then(a.0.cmp(&b.0)));
        Flagged { flags, rows: table.rows() }
    }
}

/// A step on the way to the same digits.
#[derive(Clone, Debug, PartialEq)]
pub struct Again {
    /// What to do, in words.
    pub words: String,
    /// What to type; empty for nothing.
    pub command: String,
}
