//! Figures: those that steps draw, and the usual quantities of tables.

use super::lineage::Lineage;
use super::{Part, StepError, Task};
use crate::steps::drawn::{Drawn, line_columns, place, points_on_lines};
use crate::steps::words::{label, title, unit};
use crate::steps::{Inputs, cell};
use crate::steps::{chart, picture};
use spinledger_report::{Axis, Chart, Content, Figure, Line, Mark, MarkAxis, Point, Style, shown};
use spinledger_terms::{Table, Value};

/// What is drawn unless the step says otherwise, as far as it is there.
const USUAL: [&str; 5] = ["binder", "energy", "heat_capacity", "magnetisation_abs", "susceptibility"];
/// More lines cannot be told apart in one figure: of more, so many are drawn, evenly chosen.
const MOST_LINES: usize = 8;

/// Longest name of a source that stands in a figure.
const LONGEST: usize = 28;

/// The figures, in the order of the parts.
pub(super) fn figures(task: &Task<'_>, parts: &[Part], lineage: &Lineage<'_>) -> Result<Vec<Figure>, StepError> {
    let wanted = task.parameters.get("figures");
    let wanted: Vec<&str> = match wanted {
        Some(Value::List(list)) => list.iter().filter_map(Value::as_str).collect(),
        Some(Value::Text(word)) if word == "none" => Vec::new(),
        _ => USUAL.to_vec(),
    };
    let marks = marks(task, parts)?;
    let mut figures = Vec::new();
    for part in parts {
        let record = || lineage.of(&part.record.key);
        match part.does.as_str() {
            "chart" => {
                let inputs = Inputs::recorded(task.ledger, &part.record);
                let chart = chart::build(&part.record.provenance.parameters, &inputs, task.units)?.chart;
                let caption = format!("{}.", chart.title);
                figures.push(Figure { caption, content: Content::Chart(chart), record: record() });
            }
            "picture" => {
                let (main, walls) = (part.table(task, "main")?, part.table(task, "walls")?);
                let picture = picture::picture_of(&part.record.provenance.parameters, &main, &walls)?;
                let caption = format!("A configuration: {}.", picture.title);
                figures.push(Figure { caption, content: Content::Picture(picture), record: record() });
            }
            "averages" | "reweight" => {
                let table = part.table(task, "main")?;
                for quantity in wanted.iter().filter(|q| !is_drawn_elsewhere(q, part, parts)) {
                    if let Some((mut chart, mut caption)) = of_quantity(task, &table, quantity, &marks)? {
                        if part.does == "reweight" && measured(task, parts, quantity, &mut chart)? {
                            caption += " Points are the measured averages, with bars of one standard error.";
                        }
                        figures.push(Figure { caption, content: Content::Chart(chart), record: record() });
                    }
                }
            }
            "crossing" if !wanted.is_empty() => {
                if let Some((chart, caption)) = of_pairs(task, part)? {
                    figures.push(Figure { caption, content: Content::Chart(chart), record: record() });
                }
            }
            _ => {}
        }
        (task.progress)();
    }
    Ok(figures)
}

/// Whether a chart draws the quantity, or curves do so where this part has only points.
fn is_drawn_elsewhere(quantity: &str, part: &Part, parts: &[Part]) -> bool {
    let of =
        |other: &Part| other.record.provenance.parameters.get("quantity").and_then(Value::as_str) == Some(quantity);
    parts
        .iter()
        .any(|other| (other.does == "chart" && of(other)) || (part.does == "averages" && other.does == "reweight"))
}

/// A quantity of a table against what is scanned.
fn of_quantity(
    task: &Task<'_>,
    table: &Table,
    quantity: &str,
    marks: &[Mark],
) -> Result<Option<(Chart, String)>, StepError> {
    let rows = cell::rows(table, &[("quantity".to_owned(), Value::text(quantity))])?;
    let Some(x) = place(table, &rows) else { return Ok(None) };
    let lines = line_columns(table, &rows, &x);
    let drawn = Drawn { table, rows, x, y: "value".into(), lines };
    let mut found = drawn.lines(None)?;
    if found.lines.is_empty() {
        return Ok(None);
    }
    let count = found.lines.len();
    if count > MOST_LINES {
        let chosen: Vec<Line> =
            (0..MOST_LINES).map(|i| found.lines[i * (count - 1) / (MOST_LINES - 1)].clone()).collect();
        found.lines = chosen;
        found.notes.push(format!("{MOST_LINES} of {count} lines are drawn"));
    }
    let unit_of_x = table.column(&drawn.x).map(|column| column.unit.clone()).unwrap_or_default();
    let chart = Chart {
        title: title(quantity),
        x: Axis::new(label(&drawn.x), unit_of_x),
        y: Axis::new(label(quantity), unit(quantity, task.units)),
        lines: found.lines,
        marks: if drawn.x == "temperature" { marks.to_vec() } else { Vec::new() },
        notes: found.notes,
    };
    let bands = chart.lines.iter().any(|line| line.style == Style::Band);
    let errors = if bands { "Bands" } else { "Bars" };
    let caption = format!("{} against {}. {errors} are one standard error.", title(quantity), label(&drawn.x));
    Ok(Some((chart, caption)))
}

/// Adds the points of averages on the page to the curves of the same label; whether there are any.
fn measured(task: &Task<'_>, parts: &[Part], quantity: &str, chart: &mut Chart) -> Result<bool, StepError> {
    let curves = chart.lines.len();
    for part in parts.iter().filter(|part| part.does == "averages") {
        let table = part.table(task, "main")?;
        let rows = cell::rows(&table, &[("quantity".to_owned(), Value::text(quantity))])?;
        let found = points_on_lines(&table, rows, "temperature", "value", &chart.lines[..curves])?;
        chart.lines.extend(found.lines);
    }
    Ok(chart.lines.len() > curves)
}

/// The ordering temperature, where the page has one, and what it is held against.
fn marks(task: &Task<'_>, parts: &[Part]) -> Result<Vec<Mark>, StepError> {
    let mut marks = Vec::new();
    for part in parts.iter().filter(|part| part.does == "crossing") {
        let table = part.table(task, "main")?;
        let rows = cell::rows(&table, &[("quantity".to_owned(), Value::text("critical_temperature"))])?;
        let number = |name: &str, row: usize| table.column(name).and_then(|column| column.cells.number(row));
        // Several sets of curves have several temperatures, and which line belongs to which could not be told.
        if let [row] = rows[..]
            && let Some(value) = number("value", row)
        {
            let error = number("error", row);
            let label = format!("found {}", shown(value, error, 7).text());
            marks.push(Mark { on: MarkAxis::X, value, error: error.unwrap_or(0.0), label });
        }
    }
    for part in parts.iter().filter(|part| part.does == "compare") {
        let table = part.table(task, "main")?;
        let items = part.record.provenance.parameters.get("items").and_then(Value::as_list).unwrap_or_default();
        for (row, item) in items.iter().enumerate() {
            let temperature = item.at("take.quantity").and_then(Value::as_str) == Some("critical_temperature");
            let number = |name: &str| table.column(name).and_then(|column| column.cells.number(row));
            if let (true, Some(value), Some(_)) = (temperature, number("reference"), item.at("against.value")) {
                let error = number("reference_error").unwrap_or(0.0);
                let source = item.at("against.source").and_then(Value::as_str);
                // What is too long for a figure stands with the answer.
                let source = source.filter(|source| source.chars().count() <= LONGEST);
                let label =
                    source.map_or_else(|| format!("reference {}", shown(value, Some(error), 7).text()), str::to_owned);
                marks.push(Mark { on: MarkAxis::X, value, error, label });
            }
        }
    }
    if marks.len() > 4 {
        marks.clear();
    }
    Ok(marks)
}

/// Crossings of pairs against the inverse of their size, with what they tend to.
fn of_pairs(task: &Task<'_>, part: &Part) -> Result<Option<(Chart, String)>, StepError> {
    let pairs = part.table(task, "pairs")?;
    let number = |name: &str, row: usize| pairs.column(name).and_then(|column| column.cells.number(row));
    // Several sets of curves would need several extrapolated values.
    if pairs.rows() == 0 || pairs.columns.first().is_none_or(|first| first.name != "size") {
        return Ok(None);
    }
    let points: Vec<Point> = (0..pairs.rows())
        .filter_map(|row| {
            let mean = (number("size", row)? * number("partner", row)?).sqrt();
            Some(Point { x: 1.0 / mean, y: number("temperature", row)?, error: number("error", row) })
        })
        .collect();
    let table = part.table(task, "main")?;
    let mark = |quantity: &str, words: &str| -> Result<Option<Mark>, StepError> {
        let rows = cell::rows(&table, &[("quantity".to_owned(), Value::text(quantity))])?;
        let number = |name: &str, row: usize| table.column(name).and_then(|column| column.cells.number(row));
        let Some((value, error)) = rows.first().and_then(|row| Some((number("value", *row)?, number("error", *row))))
        else {
            return Ok(None);
        };
        let label = format!("{words} {}", shown(value, error, 7).text());
        Ok(Some(Mark { on: MarkAxis::Y, value, error: error.unwrap_or(0.0), label }))
    };
    let marks = [
        mark("critical_temperature", "extrapolated")?,
        mark("critical_temperature_uncorrected", "without correction")?,
    ];
    let largest = points.iter().map(|point| point.x).fold(0.0, f64::max);
    let chart = Chart {
        title: "Where pairs of sizes cross".to_owned(),
        x: Axis { range: Some((0.0, 1.06 * largest)), ..Axis::new("1/√(L L′)", "") },
        y: Axis::new(label("critical_temperature"), task.units.temperature.clone()),
        lines: vec![Line { label: "pairs of sizes".to_owned(), points, style: Style::Points }],
        marks: marks.into_iter().flatten().collect(),
        notes: Vec::new(),
    };
    let caption = "Crossing temperatures of pairs of sizes L and L′ against the inverse of their geometric mean, and what they tend to. \
                   Bars and bands are one standard error.";
    Ok(Some((chart, caption.to_owned())))
}
