//! Which columns and rows are wanted.

use crate::args::PrintArgs;
use spinledger_ledger::{TableRows, What};
use spinledger_terms::{Cells, Column, Table, nearest};

/// A value that a column must have.
#[derive(Clone, Debug, PartialEq)]
enum Wanted {
    Unknown,
    Integer(i64),
    Number(f64),
    Boolean(bool),
    Text(String),
}

/// Columns to be read, how many of them are shown, and what rows must fulfil.
pub(super) struct Choice {
    /// Places of the columns to read: those shown, then those that only conditions look at.
    pub(super) places: Vec<usize>,
    shown: usize,
    /// Place in the file, value.
    pub(super) conditions: Vec<(usize, ConditionValue)>,
}

/// The value of a condition.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct ConditionValue(Wanted);

/// Rows that fit.
pub(super) struct Kept {
    /// The columns to be shown.
    pub(super) table: Table,
    /// How many.
    pub(super) rows: usize,
}

impl Choice {
    /// From the command line; the error says what is wrong with it.
    pub(super) fn of(args: &PrintArgs, rows: &TableRows) -> Result<Self, String> {
        let known: Vec<(&str, What)> = rows.columns().map(|(name, _, what)| (name, what)).collect();
        let place = |name: &str| {
            known.iter().position(|(known, _)| *known == name).ok_or_else(|| {
                let names: Vec<&str> = known.iter().map(|(name, _)| *name).collect();
                let near = nearest(name, names.iter().copied());
                let near = near.map_or(String::new(), |near| format!("; the nearest is `{near}`"));
                format!("there is no column `{name}` in {}{near}; it has: {}", args.file.display(), names.join(", "))
            })
        };
        let mut places: Vec<usize> = match args.columns.as_slice() {
            [] => (0..known.len()).collect(),
            names => names.iter().map(|name| place(name.trim())).collect::<Result<_, _>>()?,
        };
        let shown = places.len();
        let mut conditions = Vec::new();
        for text in &args.filter {
            let (name, value) = text
                .split_once('=')
                .ok_or_else(|| format!("`{text}` is no condition; expected COLUMN=VALUE, such as size=32"))?;
            let at = place(name.trim())?;
            let wanted = wanted(value.trim(), known[at].1)
                .ok_or_else(|| format!("column `{}` holds {}, not `{value}`", known[at].0, words(known[at].1)))?;
            conditions.push((at, ConditionValue(wanted)));
            if !places.contains(&at) {
                places.push(at);
            }
        }
        Ok(Choice { places, shown, conditions })
    }

    /// Places of the columns that are shown.
    pub(super) fn shown(&self) -> impl Iterator<Item = usize> {
        self.places[..self.shown].iter().copied()
    }

    /// Places of the columns that conditions look at.
    pub(super) fn condition_places(&self) -> Vec<usize> {
        self.conditions.iter().map(|(place, _)| *place).collect()
    }

    /// The rows of a batch of the chosen columns that fit, `most` at most.
    pub(super) fn keep(&self, batch: &Table, most: usize) -> Kept {
        let rows = batch.columns.first().map_or(0, |c| c.cells.len());
        let at = |place: usize| self.places.iter().position(|p| *p == place).unwrap_or(0);
        let fits = |row: &usize| {
            self.conditions.iter().all(|(place, value)| value.fits(&batch.columns[at(*place)].cells, *row))
        };
        let kept: Vec<usize> = (0..rows).filter(fits).take(most).collect();
        let columns = batch.columns[..self.shown].iter();
        let columns = columns.map(|c| Column { cells: pick(&c.cells, &kept), ..c.clone_head() });
        Kept { table: Table { columns: columns.collect() }, rows: kept.len() }
    }

    /// How many rows fit of a batch of the columns that conditions look at.
    pub(super) fn count(&self, batch: &Table) -> u64 {
        let fits = |row: &usize| {
            self.conditions.iter().zip(&batch.columns).all(|((_, value), column)| value.fits(&column.cells, *row))
        };
        (0..batch.rows()).filter(fits).count() as u64
    }
}

/// A column without its cells.
trait Head {
    fn clone_head(&self) -> Column;
}

impl Head for Column {
    fn clone_head(&self) -> Column {
        Column { name: self.name.clone(), unit: self.unit.clone(), cells: Cells::Integer(Vec::new()) }
    }
}

fn pick(cells: &Cells, rows: &[usize]) -> Cells {
    match cells {
        Cells::Integer(v) => Cells::Integer(rows.iter().map(|row| v[*row]).collect()),
        Cells::Number(v) => Cells::Number(rows.iter().map(|row| v[*row]).collect()),
        Cells::Boolean(v) => Cells::Boolean(rows.iter().map(|row| v[*row]).collect()),
        Cells::Text(v) => Cells::Text(rows.iter().map(|row| v[*row].clone()).collect()),
    }
}

impl ConditionValue {
    fn fits(&self, cells: &Cells, row: usize) -> bool {
        match (&self.0, cells) {
            (Wanted::Unknown, Cells::Integer(v)) => v[row].is_none(),
            (Wanted::Unknown, Cells::Number(v)) => v[row].is_none(),
            (Wanted::Unknown, Cells::Boolean(v)) => v[row].is_none(),
            (Wanted::Integer(wanted), Cells::Integer(v)) => v[row] == Some(*wanted),
            (Wanted::Number(wanted), Cells::Number(v)) => v[row] == Some(*wanted),
            (Wanted::Boolean(wanted), Cells::Boolean(v)) => v[row] == Some(*wanted),
            // What is not known is as empty as empty text.
            (Wanted::Text(wanted), Cells::Text(v)) => v[row].as_deref().unwrap_or_default() == wanted,
            _ => false,
        }
    }
}

/// A value of a column's type; an empty text stands for what is not known.
fn wanted(text: &str, what: What) -> Option<Wanted> {
    match what {
        What::Text => Some(Wanted::Text(text.to_owned())),
        _ if text.is_empty() => Some(Wanted::Unknown),
        // 16.0 is 16.
        What::Integer => {
            let whole = |x: f64| (x.fract() == 0.0 && x.abs() < 9e15).then_some(x as i64);
            text.parse().ok().or_else(|| text.parse().ok().and_then(whole)).map(Wanted::Integer)
        }
        What::Number => text.parse().ok().map(Wanted::Number),
        What::Boolean => text.parse().ok().map(Wanted::Boolean),
    }
}

fn words(what: What) -> &'static str {
    match what {
        What::Integer => "whole numbers",
        What::Number => "numbers",
        What::Boolean => "`true` and `false`",
        What::Text => "text",
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_of_the_columns_type() {
        assert_eq!(wanted("16", What::Integer), Some(Wanted::Integer(16)));
        assert_eq!(wanted("16.0", What::Integer), Some(Wanted::Integer(16)));
        assert_eq!(wanted("16.5", What::Integer), None);
        assert_eq!(wanted("2.26", What::Number), Some(Wanted::Number(2.26)));
        assert_eq!(wanted("", What::Number), Some(Wanted::Unknown));
        assert_eq!(wanted("yes", What::Boolean), None);
        assert_eq!(wanted("", What::Text), Some(Wanted::Text(String::new())));
    }

    #[test]
    fn rows_that_fit_are_kept() {
        let choice = Choice { places: vec![1, 0], shown: 1, conditions: vec![(0, ConditionValue(Wanted::Integer(2)))] };
        let batch = Table {
            columns: vec![
                Column::numbers("x", "J", vec![Some(0.5), Some(1.5), None, Some(3.5)]),
                Column::integers("n", "", vec![Some(2), Some(1), Some(2), Some(2)]),
            ],
        };
        let kept = choice.keep(&batch, 2);
        assert_eq!((kept.rows, kept.table.columns.len()), (2, 1));
        assert_eq!(kept.table.columns[0], Column::numbers("x", "J", vec![Some(0.5), None]));
        assert_eq!(choice.count(&Table { columns: vec![batch.columns[1].clone()] }), 3);
    }
}
