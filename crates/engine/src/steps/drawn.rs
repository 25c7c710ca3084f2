//! From rows of a table to lines of a chart.

use super::StepError;
use super::cell::{error_of, no_column, numbers};
use super::words::label;
use spinledger_report::{Line, Point, Style, flag_words};
use spinledger_terms::{Cells, Column, Table, Value};
use std::collections::BTreeMap;

/// So many points on one line are drawn as a curve with a band: markers would hide each other.
const CROWDED: usize = 60;

/// What of a table is drawn.
pub(super) struct Drawn<'a> {
    /// The table.
    pub(super) table: &'a Table,
    /// The rows.
    pub(super) rows: Vec<usize>,
    /// The column along the bottom.
    pub(super) x: String,
    /// The column up the side.
    pub(super) y: String,
    /// Columns whose values tell one line from another.
    pub(super) lines: Vec<String>,
}

/// Lines, with what became of each row.
pub(super) struct Lines {
    /// The lines, in order of their labels' values.
    pub(super) lines: Vec<Line>,
    /// For each line, the rows of its points.
    pub(super) rows: Vec<Vec<usize>>,
    /// Sentences about points that are missing or doubtful.
    pub(super) notes: Vec<String>,
}

/// The columns that say what a row is of: those before `quantity`; without that, counts and texts before the first number that is no place.
pub(super) fn leading(table: &Table) -> &[Column] {
    let of_numbers = |c: &Column| matches!(c.cells, Cells::Number(_)) && !PLACES.contains(&c.name.as_str());
    let quantity = table.columns.iter().position(|c| c.name == "quantity");
    let end = quantity.or_else(|| table.columns.iter().position(of_numbers)).unwrap_or(table.columns.len());
    &table.columns[..end]
}

/// Columns of numbers that are places and no results.
const PLACES: [&str; 2] = ["temperature", "inverse_temperature"];
/// Columns that say nothing that others do not say.
const TOLD: [&str; 6] = ["sites", "position", "quantity", "flags", "chain", "sweep"];

/// Whether a column takes more than one value in some rows.
pub(super) fn varies(column: &Column, rows: &[usize]) -> bool {
    rows.windows(2).any(|pair| column.cells.value(pair[0]) != column.cells.value(pair[1]))
}

/// The column that goes along the bottom unless another is asked for: `temperature` where it varies, otherwise the number that takes most values.
pub(super) fn place(table: &Table, rows: &[usize]) -> Option<String> {
    let number = |c: &&Column| matches!(c.cells, Cells::Number(_) | Cells::Integer(_));
    let open = leading(table).iter().filter(number).filter(|c| !TOLD.contains(&c.name.as_str()));
    let varying: Vec<&Column> = open.filter(|c| varies(c, rows)).collect();
    if varying.iter().any(|c| c.name == "temperature") {
        return Some("temperature".into());
    }
    let count = |c: &Column| {
        let mut values: Vec<u64> = rows.iter().filter_map(|row| c.cells.number(*row)).map(f64::to_bits).collect();
        values.sort_unstable();
        values.dedup();
        values.len()
    };
    // The first of those with most values.
    varying.iter().rev().max_by_key(|c| count(c)).map(|c| c.name.clone())
}

/// The columns that tell lines apart unless others are asked for: all leading ones that vary, but for the place and what goes with it.
pub(super) fn line_columns(table: &Table, rows: &[usize], x: &str) -> Vec<String> {
    let sizes = table.column("size").is_some();
    leading(table)
        .iter()
        .filter(|c| c.name != x && !TOLD.contains(&c.name.as_str()) && varies(c, rows))
        .filter(|c| !(PLACES.contains(&x) && PLACES.contains(&c.name.as_str())))
        .filter(|c| !(sizes && c.name.starts_with("size_")))
        .map(|c| c.name.clone())
        .collect()
}

impl Drawn<'_> {
    /// The lines. Points are joined in the order of x, or of `position` where the table has it.
    ///
    /// # Errors
    /// Where a column is not there or holds no numbers.
    pub(super) fn lines(&self, style: Option<Style>) -> Result<Lines, StepError> {
        let (x, y) = (numbers(self.table, &self.x)?, numbers(self.table, &self.y)?);
        let error = error_of(self.table, &self.y);
        let tells: Vec<&Column> = self
            .lines
            .iter()
            .map(|name| self.table.column(name).ok_or_else(|| no_column(self.table, name)))
            .collect::<Result<_, _>>()?;
        let mut groups: Vec<(Vec<Value>, Vec<usize>)> = Vec::new();
        let mut unknown = 0;
        for &row in &self.rows {
            if x.number(row).is_none() || y.number(row).is_none() {
                unknown += 1;
                continue;
            }
            let values: Vec<Value> = tells.iter().map(|column| column.cells.value(row)).collect();
            match groups.iter_mut().find(|(known, _)| *known == values) {
                Some((_, rows)) => rows.push(row),
                None => groups.push((values, vec![row])),
            }
        }
        groups.sort_by(|a, b| order(&a.0, &b.0));
        if self.table.column("position").is_none() {
            let place = |row: &usize| x.number(*row).unwrap_or(f64::NAN);
            groups.iter_mut().for_each(|(_, rows)| rows.sort_by(|a, b| place(a).total_cmp(&place(b))));
        }
        let crowded = groups.iter().any(|(_, rows)| rows.len() > CROWDED);
        let own = if crowded && error.is_some() { Style::Band } else { Style::Joined };
        let point = |row: &usize| Point {
            x: x.number(*row).unwrap_or(f64::NAN),
            y: y.number(*row).unwrap_or(f64::NAN),
            error: error.and_then(|column| column.cells.number(*row)),
        };
        let line = |(values, rows): &(Vec<Value>, Vec<usize>)| Line {
            label: self.label(values),
            points: rows.iter().map(point).collect(),
            style: style.unwrap_or(own),
        };
        let lines = groups.iter().map(line).collect();
        let rows: Vec<Vec<usize>> = groups.into_iter().map(|(_, rows)| rows).collect();
        let mut notes = Vec::new();
        if unknown > 0 {
            notes.push(format!("{} left out: not known", counted(unknown)));
        }
        notes.extend(self.doubts(&rows));
        Ok(Lines { lines, rows, notes })
    }

    fn label(&self, values: &[Value]) -> String {
        let parts = self.lines.iter().zip(values).map(|(name, value)| {
            let value = value.as_str().map_or_else(|| value.canonical(), str::to_owned);
            match name.as_str() {
                "size" => format!("L = {value}"),
                "start" => format!("{value} start"),
                name => format!("{} = {value}", label(name)),
            }
        });
        parts.collect::<Vec<_>>().join(", ")
    }

    /// What is flagged among the points, in a sentence for each flag.
    fn doubts(&self, rows: &[Vec<usize>]) -> Vec<String> {
        let mut counts: BTreeMap<&str, usize> = BTreeMap::new();
        for row in rows.iter().flatten() {
            let flags = self.table.text("flags", *row).unwrap_or_default();
            flags.split(';').filter(|flag| !flag.is_empty()).for_each(|flag| *counts.entry(flag).or_default() += 1);
        }
        let all: usize = rows.iter().map(Vec::len).sum();
        let sentence = |(flag, count): (&str, usize)| {
            let of = if count == all { "all points".to_owned() } else { format!("{count} of {}", counted(all)) };
            match flag_words(flag) {
                Some(words) => format!("{of} flagged {}: {words}", flag.replace('-', " ")),
                None => format!("{of} flagged {}", flag.replace('-', " ")),
            }
        };
        counts.into_iter().map(sentence).collect()
    }
}

/// The rows of a table as points on lines that are drawn already: those whose labels are the same.
pub(super) fn points_on_lines(
    table: &Table,
    rows: Vec<usize>,
    x: &str,
    y: &str,
    drawn: &[Line],
) -> Result<Lines, StepError> {
    let lines = line_columns(table, &rows, x);
    let found = Drawn { table, rows, x: x.to_owned(), y: y.to_owned(), lines }.lines(Some(Style::Points))?;
    let known = |line: &Line| drawn.iter().any(|curve| curve.label == line.label);
    let (lines, rows) = found.lines.into_iter().zip(found.rows).filter(|(line, _)| known(line)).unzip();
    Ok(Lines { lines, rows, notes: found.notes })
}

fn counted(points: usize) -> String {
    if points == 1 { "1 point".to_owned() } else { format!("{points} points") }
}

/// Numbers by size, everything else by its text.
fn order(a: &[Value], b: &[Value]) -> std::cmp::Ordering {
    let pairs = a.iter().zip(b).map(|(a, b)| match (a.as_f64(), b.as_f64()) {
        (Some(a), Some(b)) => a.total_cmp(&b),
        _ => a.canonical().cmp(&b.canonical()),
    });
    pairs.fold(std::cmp::Ordering::Equal, std::cmp::Ordering::then)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn table() -> Table {
        let sizes = [16, 8, 8, 16];
        let temperatures = [2.2, 2.3, 2.2, 2.3];
        let flags = ["", "few-samples", "", ""];
        Table {
            columns: vec![
                Column::integers("size", "", sizes.iter().map(|n| Some(*n)).collect()),
                Column::integers("sites", "", sizes.iter().map(|n| Some(n * n)).collect()),
                Column::numbers("temperature", "K", temperatures.iter().map(|t| Some(*t)).collect()),
                Column::texts("quantity", vec![Some("energy".into()); 4]),
                Column::numbers("value", "", vec![Some(1.0), Some(2.0), Some(3.0), None]),
                Column::numbers("error", "", vec![Some(0.1); 4]),
                Column::texts("flags", flags.iter().map(|f| Some((*f).to_owned())).collect()),
            ],
        }
    }

    #[test]
    fn lines_are_told_apart_by_what_varies() {
        let table = table();
        let rows = vec![0, 1, 2, 3];
        assert_eq!(place(&table, &rows).as_deref(), Some("temperature"));
        assert_eq!(line_columns(&table, &rows, "temperature"), ["size"]);
        assert_eq!(line_columns(&table, &rows, "size"), ["temperature"]);
        assert_eq!(place(&table, &[1, 2]).as_deref(), Some("temperature"));
        assert_eq!(place(&table, &[0, 2]).as_deref(), Some("size"), "the temperature does not vary");
        let drawn =
            Drawn { table: &table, rows, x: "temperature".into(), y: "value".into(), lines: vec!["size".into()] };
        let found = drawn.lines(None).unwrap();
        let labels: Vec<&str> = found.lines.iter().map(|line| line.label.as_str()).collect();
        assert_eq!(labels, ["L = 8", "L = 16"], "by size, not by text");
        assert_eq!(found.rows, [vec![2, 1], vec![0]], "by temperature; what is not known is left out");
        assert_eq!(found.lines[0].points[0], Point { x: 2.2, y: 3.0, error: Some(0.1) });
        assert_eq!(found.notes.len(), 2, "{:?}", found.notes);
        assert!(found.notes[0].starts_with("1 point left out"));
        assert!(found.notes[1].starts_with("1 of 3 points flagged few samples"));
    }

    #[test]
    fn a_sequence_keeps_its_order() {
        let mut table = table();
        table.columns.insert(0, Column::integers("position", "", (0..4).map(Some).collect()));
        let drawn =
            Drawn { table: &table, rows: vec![1, 2], x: "temperature".into(), y: "value".into(), lines: vec![] };
        assert_eq!(drawn.lines(None).unwrap().rows, [vec![1, 2]]);
    }
}
