//! `spinledger print`: a result table in the terminal, as CSV, or as JSON lines.

mod choice;
mod lines;
mod view;

use crate::args::{PrintArgs, Rows};
use crate::commands::{WELL, WRONG};
use crate::screen::complain;
use choice::Choice;
use spinledger_engine::chain_text;
use spinledger_ledger::{LedgerError, TableRows};
use spinledger_terms::Table;
use std::io::{BufWriter, ErrorKind, Write};

/// Rows of a batch: few enough to be there at once, many enough to be fast.
const BATCH: usize = 1024;
/// Rows that are shown in a terminal when nothing else is asked for.
const SHOWN: u64 = 40;

/// Why printing came to an end.
#[derive(Debug, thiserror::Error)]
enum Stop {
    /// The file cannot be decoded.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// The reader went away, or the disk is full.
    #[error("cannot print")]
    Output(#[from] std::io::Error),
}

/// Prints a table.
pub(crate) fn print(args: &PrintArgs) -> anyhow::Result<u8> {
    let mut rows = match TableRows::open(&args.file) {
        Ok(rows) => rows,
        Err(error) => {
            complain(&format!("spinledger: {}", cannot_open(args, &error)));
            return Ok(WRONG);
        }
    };
    let choice = match Choice::of(args, &rows) {
        Ok(choice) => choice,
        Err(text) => {
            complain(&format!("spinledger: {text}"));
            return Ok(WRONG);
        }
    };
    rows.choose(&choice.places);
    let shown = match args.rows {
        Some(Rows::First(shown)) => shown,
        None if !args.csv && !args.json => SHOWN,
        Some(Rows::All) | None => u64::MAX,
    };
    let mut out = BufWriter::new(std::io::stdout().lock());
    let mut source = Source { rows, choice, left: shown };
    let printed = if args.csv {
        lines::csv(&mut source, &mut out)
    } else if args.json {
        lines::json(&mut source, &mut out)
    } else {
        view::table(&mut source, &mut out)
    };
    match printed.and_then(|()| Ok(out.flush()?)) {
        // A reader that has seen enough is no mistake.
        Err(Stop::Output(error)) if error.kind() == ErrorKind::BrokenPipe => Ok(WELL),
        other => Ok(other.map(|()| WELL)?),
    }
}

/// What is wrong with the file, in words.
fn cannot_open(args: &PrintArgs, error: &LedgerError) -> String {
    let path = args.file.display();
    match error {
        LedgerError::Absent { .. } => format!("there is no file or folder {path}"),
        LedgerError::Parquet { path, .. } => {
            format!("{} is no Parquet table; tables of results end in .parquet", path.display())
        }
        LedgerError::Columns(what) if args.file.is_dir() => {
            format!("{what}; name one of the files, or a folder that a sample step wrote")
        }
        LedgerError::Columns(what) => what.clone(),
        other => chain_text(other),
    }
}

/// Rows that are wanted, batch by batch.
struct Source {
    rows: TableRows,
    choice: Choice,
    left: u64,
}

impl Source {
    /// Columns to be shown, without rows.
    fn head(&self) -> Vec<(&str, &str)> {
        let all: Vec<(&str, &str)> = self.rows.columns().map(|(name, unit, _)| (name, unit)).collect();
        self.choice.shown().map(|place| all[place]).collect()
    }

    /// The next batch of rows that fit, at least one row; None at the end or when as many as asked for were given.
    fn next(&mut self, most: usize) -> Result<Option<Table>, Stop> {
        if self.left == 0 {
            return Ok(None);
        }
        while let Some(batch) = self.rows.next_batch(most)? {
            let kept = self.choice.keep(&batch, usize::try_from(self.left).unwrap_or(usize::MAX));
            if kept.rows > 0 {
                self.left -= kept.rows as u64;
                return Ok(Some(kept.table));
            }
        }
        Ok(None)
    }

    /// How many rows fit that were not given, of those behind the ones that were.
    fn more(&mut self, given: u64) -> Result<u64, Stop> {
        if self.choice.conditions.is_empty() {
            return Ok(self.rows.rows().saturating_sub(given));
        }
        // Only the columns of the conditions are decoded; the rows that were given are counted again.
        self.rows.choose(&self.choice.condition_places());
        let mut fitting = 0;
        while let Some(batch) = self.rows.next_batch(1 << 16)? {
            fitting += self.choice.count(&batch);
        }
        Ok(fitting.saturating_sub(given))
    }
}
