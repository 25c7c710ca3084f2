//! A table for a person at a terminal: digits that mean something, columns that fit, rows that are flagged.

use super::{BATCH, Source, Stop};
use crate::screen::{Width, colours, tinted};
use crate::text::{counted, fit, wide, wrap};
use spinledger_ledger::What;
use spinledger_report::shown;
use spinledger_terms::{Cells, Table};
use std::io::Write;

/// Significant digits of a number without an error.
const DIGITS: usize = 7;
/// The same where it is a rough estimate of something, and the columns in which it is.
const ROUGH_DIGITS: usize = 4;
const ROUGH: [&str; 8] =
    ["tau", "effective", "spread", "chi_squared", "p_value", "deviation", "coverage", "acceptance"];
/// Rows by which the widths of columns are chosen.
const MEASURED: usize = BATCH;
/// Columns that say most about a row, in the order in which they get a place; the others follow from left to right.
const FIRST: [&str; 8] = ["quantity", "name", "value", "error", "verdict", "size", "temperature", "flags"];
/// Fewest columns to which a name is cut.
const SHORTEST: usize = 8;
/// Most columns of a terminal that a text takes.
const WIDEST: usize = 40;

/// Prints the rows as a table, and how many there are more.
pub(super) fn table(source: &mut Source, out: &mut impl Write) -> Result<(), Stop> {
    let width = Width::now();
    let head: Vec<(String, String)> =
        source.head().into_iter().map(|(name, unit)| (name.to_owned(), unit.to_owned())).collect();
    let pairs = pairs(&source.rows.columns().map(|(name, _, what)| (name, what)).collect::<Vec<_>>());
    let mut given = 0;
    let mut view = None;
    while let Some(batch) = source.next(MEASURED)? {
        given += batch.rows() as u64;
        let cells = Text::of(&batch, &pairs);
        let view = match &mut view {
            Some(view) => view,
            None => {
                let made = view.insert(View::fitting(&head, &cells, width, colours()));
                made.write_head(out)?;
                made
            }
        };
        view.write(&cells, out)?;
        out.flush()?;
    }
    let mut notes = Vec::new();
    match view {
        None => {
            let names: Vec<&str> = head.iter().map(|(name, _)| name.as_str()).collect();
            notes.push(format!("no rows; the columns are: {}", names.join(", ")));
        }
        Some(view) if !view.left_out.is_empty() => {
            let names: Vec<&str> = view.left_out.iter().map(|at| head[*at].0.as_str()).collect();
            notes.push(format!("not shown, for want of room: {} (--columns chooses)", names.join(", ")));
        }
        Some(_) => {}
    }
    for note in notes.drain(..) {
        write_wrapped(&note, width, out)?;
    }
    out.flush()?;
    // Counting may take a while, and comes when the rows are there.
    if source.left == 0 {
        let more = source.more(given)?;
        if more > 0 {
            write_wrapped(&format!("and {} (--rows all shows them)", counted(more, "more row")), width, out)?;
        }
    }
    Ok(())
}

fn write_wrapped(text: &str, width: Width, out: &mut impl Write) -> Result<(), Stop> {
    for line in wrap(text, width.columns().unwrap_or(usize::MAX)) {
        writeln!(out, "{line}")?;
    }
    Ok(())
}

/// The cells of a batch as text, by column, and which rows are flagged.
struct Text {
    columns: Vec<Vec<String>>,
    right: Vec<bool>,
    flagged: Vec<bool>,
}

impl Text {
    fn of(table: &Table, pairs: &[(String, String)]) -> Self {
        let column = |at: usize| -> Vec<String> {
            let column = &table.columns[at];
            let name = column.name.as_str();
            let error = pairs.iter().find(|(value, _)| value == name).and_then(|(_, error)| table.column(error));
            let value = pairs.iter().find(|(_, error)| error == name).and_then(|(value, _)| table.column(value));
            let digits = if ROUGH.contains(&name) { ROUGH_DIGITS } else { DIGITS };
            let text = |row: usize| match (&column.cells, error, value) {
                (Cells::Integer(v), _, _) => v[row].map_or(String::new(), |i| i.to_string()),
                (Cells::Number(v), Some(error), _) => {
                    v[row].map_or(String::new(), |x| with_error(x, error.cells.number(row), digits).0)
                }
                (Cells::Number(v), None, value) => match (v[row], value.and_then(|value| value.cells.number(row))) {
                    (None, _) => String::new(),
                    (Some(x), None) => with_error(x, None, digits).0,
                    (Some(x), Some(value)) => with_error(value, Some(x), digits).1,
                },
                (Cells::Boolean(v), _, _) => v[row].map_or(String::new(), |b| b.to_string()),
                (Cells::Text(v), _, _) => plain(v[row].as_deref().unwrap_or_default()),
            };
            (0..column.cells.len()).map(text).collect()
        };
        let flags = |row: usize| table.text("flags", row).is_some_and(|flags| !flags.is_empty());
        Text {
            columns: (0..table.columns.len()).map(column).collect(),
            right: table.columns.iter().map(|c| matches!(c.cells, Cells::Integer(_) | Cells::Number(_))).collect(),
            flagged: (0..table.rows()).map(flags).collect(),
        }
    }
}

/// Text without what would move the cursor.
fn plain(text: &str) -> String {
    text.chars().map(|letter| if letter.is_control() { ' ' } else { letter }).collect()
}

/// Which columns hold the errors of which, by their names in the file: `<name>_error`, and `error` behind the number that it belongs to.
fn pairs(columns: &[(&str, What)]) -> Vec<(String, String)> {
    let mut pairs = Vec::new();
    for (at, (name, what)) in columns.iter().enumerate() {
        let named = format!("{name}_error");
        let next = columns.get(at + 1).map_or("", |(next, _)| *next);
        if *what == What::Number && columns.iter().any(|(other, _)| *other == named) {
            pairs.push(((*name).to_owned(), named));
        } else if *what == What::Number && next == "error" {
            pairs.push(((*name).to_owned(), next.to_owned()));
        }
    }
    pairs
}

/// A number with the digits that its error allows, and the error with its own.
fn with_error(value: f64, error: Option<f64>, digits: usize) -> (String, String) {
    let shown = shown(value, error, digits);
    // ASCII, so that it can be copied into a program.
    let text = |digits: &str| {
        let digits = digits.replace('\u{2212}', "-").replace('∞', "inf");
        if shown.power == 0 { digits } else { format!("{digits}e{}", shown.power) }
    };
    let error = match (&shown.error, error) {
        (Some(digits), _) => text(digits),
        // Zero, or infinite.
        (None, error) => error.map_or(String::new(), |error| format!("{error}")),
    };
    (text(&shown.value), error)
}

/// Which columns are shown, and how wide.
struct View {
    head: Vec<String>,
    /// Places of the columns shown, with their widths.
    columns: Vec<(usize, usize)>,
    right: Vec<bool>,
    left_out: Vec<usize>,
    /// Whether a word marks flagged rows, since there is no room for the flags themselves.
    marked: bool,
    narrow: bool,
    colour: bool,
}

const MARK: &str = "flagged";
const GAP: usize = 2;

impl View {
    fn fitting(head: &[(String, String)], cells: &Text, width: Width, colour: bool) -> Self {
        let titles: Vec<String> = head
            .iter()
            .map(|(name, unit)| if unit.is_empty() { name.clone() } else { format!("{name} [{unit}]") })
            .collect();
        let need = |at: usize| {
            let cells = cells.columns[at].iter().map(|text| wide(text)).max().unwrap_or(0);
            let need = wide(&titles[at]).max(cells);
            if cells > WIDEST && width.columns().is_some() { wide(&titles[at]).max(WIDEST) } else { need }
        };
        let mut needs: Vec<usize> = (0..head.len()).map(need).collect();
        if let Some(room) = width.columns() {
            // A name that leaves no room for its value is cut.
            let of = |name: &str| head.iter().position(|(known, _)| known == name).map_or(0, |at| needs[at] + GAP);
            let left = room.saturating_sub(of("value"));
            for name in ["quantity", "name"] {
                if let Some(at) = head.iter().position(|(known, _)| known == name) {
                    needs[at] = needs[at].min(left.max(SHORTEST));
                }
            }
        }
        let flags = head.iter().position(|(name, _)| name == "flags");
        let mut view = View {
            head: titles,
            columns: Vec::new(),
            right: cells.right.clone(),
            left_out: Vec::new(),
            marked: false,
            narrow: width.columns().is_some(),
            colour,
        };
        let taken: Vec<usize> = match width.columns() {
            Some(room) if needs.iter().sum::<usize>() + GAP * head.len().saturating_sub(1) > room => {
                let any = cells.flagged.iter().any(|flagged| *flagged);
                let fits = |reserve: usize| chosen(head, &needs, room.saturating_sub(reserve));
                let taken = fits(0);
                if any && flags.is_some_and(|flags| !taken.contains(&flags)) {
                    view.marked = true;
                    fits(MARK.len() + GAP)
                } else {
                    taken
                }
            }
            _ => (0..head.len()).collect(),
        };
        view.left_out = (0..head.len()).filter(|at| !taken.contains(at)).collect();
        let most = width.columns().unwrap_or(usize::MAX);
        view.columns = taken.into_iter().map(|at| (at, needs[at].min(most))).collect();
        view
    }

    fn write_head(&self, out: &mut impl Write) -> Result<(), Stop> {
        let titles: Vec<&str> = self.columns.iter().map(|(at, _)| self.head[*at].as_str()).collect();
        writeln!(out, "{}", self.line(titles.into_iter(), ""))?;
        Ok(())
    }

    fn write(&mut self, cells: &Text, out: &mut impl Write) -> Result<(), Stop> {
        if !self.narrow {
            // Where nothing has to fit, later rows may be wider than the first ones.
            for (at, width) in &mut self.columns {
                *width = cells.columns[*at].iter().map(|text| wide(text)).max().unwrap_or(0).max(*width);
            }
        }
        for row in 0..cells.flagged.len() {
            let texts = self.columns.iter().map(|(at, _)| cells.columns[*at][row].as_str());
            let mark = if self.marked && cells.flagged[row] { MARK } else { "" };
            let line = self.line(texts, mark);
            let line = if cells.flagged[row] { tinted(&line, "33", self.colour) } else { line };
            writeln!(out, "{line}")?;
        }
        Ok(())
    }

    fn line<'a>(&self, texts: impl Iterator<Item = &'a str>, mark: &str) -> String {
        let mut line = String::new();
        for (text, (at, width)) in texts.zip(&self.columns) {
            let text = fit(text, if self.narrow { *width } else { usize::MAX });
            let pad = " ".repeat(width.saturating_sub(wide(&text)));
            let (before, behind) = if self.right[*at] { (pad, String::new()) } else { (String::new(), pad) };
            line.push_str(&format!("{before}{text}{behind}{}", " ".repeat(GAP)));
        }
        line.push_str(mark);
        line.trim_end().to_owned()
    }
}

/// Places of the columns that get a place in so much room, in their order; one at least.
fn chosen(head: &[(String, String)], needs: &[usize], room: usize) -> Vec<usize> {
    let rank = |at: &usize| FIRST.iter().position(|first| *first == head[*at].0).unwrap_or(FIRST.len());
    let mut order: Vec<usize> = (0..head.len()).collect();
    order.sort_by_key(rank);
    let mut taken = Vec::new();
    let mut used = 0;
    for at in order {
        let need = needs[at] + if taken.is_empty() { 0 } else { GAP };
        if used + need <= room {
            used += need;
            taken.push(at);
        }
    }
    if taken.is_empty() && !head.is_empty() {
        taken.push(0);
    }
    taken.sort_unstable();
    taken
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_terms::Column;

    fn means() -> Table {
        Table {
            columns: vec![
                Column::integers("size", "", vec![Some(8), Some(16), Some(32)]),
                Column::numbers("temperature", "K", vec![Some(2.26), Some(2.27), Some(0.1 + 0.2)]),
                Column::texts("quantity", ["energy", "binder", "tau"].map(|t| Some(t.to_owned())).to_vec()),
                Column::numbers("value", "", vec![Some(-1.492_187_5), Some(1.234e-7), None]),
                Column::numbers("error", "", vec![Some(0.001_23), Some(5e-9), None]),
                Column::texts("flags", ["", "few-samples", ""].map(|t| Some(t.to_owned())).to_vec()),
            ],
        }
    }

    fn view(width: Width) -> Vec<String> {
        let table = means();
        let head: Vec<(String, String)> = table.columns.iter().map(|c| (c.name.clone(), c.unit.clone())).collect();
        let columns = [("size", What::Integer), ("value", What::Number), ("error", What::Number)];
        let cells = Text::of(&table, &pairs(&columns));
        let mut view = View::fitting(&head, &cells, width, false);
        let mut out = Vec::new();
        view.write_head(&mut out).unwrap();
        view.write(&cells, &mut out).unwrap();
        String::from_utf8(out).unwrap().lines().map(str::to_owned).collect()
    }

    #[test]
    fn values_have_the_digits_that_errors_allow() {
        assert_eq!(
            view(Width::Any),
            [
                "size  temperature [K]  quantity     value     error  flags",
                "   8             2.26  energy     -1.4922    0.0012",
                "  16             2.27  binder    1.234e-7  0.050e-7  few-samples",
                "  32              0.3  tau",
            ]
        );
    }

    #[test]
    fn narrow_tables_keep_what_says_most_and_the_mark() {
        let lines = view(Width::Of(44));
        assert_eq!(lines[0], "size  quantity     value     error");
        assert_eq!(lines[2], "  16  binder    1.234e-7  0.050e-7  flagged");
        for width in 20..80 {
            let lines = view(Width::Of(width));
            assert!(lines.iter().all(|line| wide(line) <= width), "{width}: {lines:?}");
            assert!(lines[2].contains("flagged") || lines[2].contains("few-samples"), "{width}: {lines:?}");
        }
    }

    #[test]
    fn errors_find_their_values() {
        let of = |names: &[&str]| {
            let columns: Vec<(&str, What)> = names.iter().map(|name| (*name, What::Number)).collect();
            pairs(&columns).into_iter().map(|(value, error)| format!("{value}/{error}")).collect::<Vec<_>>()
        };
        assert_eq!(of(&["temperature", "error", "value"]), ["temperature/error"]);
        assert_eq!(
            of(&["value", "error", "reference", "reference_error"]),
            ["value/error", "reference/reference_error"]
        );
        assert_eq!(
            of(&["binder", "binder_error", "energy", "energy_error", "sites"]),
            ["binder/binder_error", "energy/energy_error"]
        );
    }
}
