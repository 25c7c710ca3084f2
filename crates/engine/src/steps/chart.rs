//! `chart`: columns of a table as a figure, in SVG and PNG.

use super::cell::{self, conditions, conditions_words, no_column, rows, wanted};
use super::drawn::{Drawn, Lines, line_columns, place, points_on_lines};
use super::words::{label, title, unit};
use super::{Checked, Inputs, NamedTables, Output, Split, StepError, StepKind, Task, as_is};
use crate::job::UnitNames;
use spinledger_report::{Axis, Chart, Frame, Mark, MarkAxis, Scale, Style};
use spinledger_terms::{Column, Field, Kind, Problem, StepSpec, Table, Value};

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "chart", revision: 2, split: Split::Whole, spec, check, complete: as_is, analyse };

/// Pixels of a PNG for each drawing unit.
pub(super) const PIXELS: f64 = 2.0;

fn spec() -> StepSpec {
    let both = |kind: fn() -> Kind, about: [&str; 2]| {
        let fields = vec![Field::new("x", kind(), about[0]), Field::new("y", kind(), about[1])];
        Kind::Tree { fields }
    };
    let ends = || Kind::List { of: Box::new(Kind::NUMBER), min: 2, max: Some(2) };
    let mut mark = cell::fields();
    mark.extend([
        Field::new("on", Kind::words(&["x", "y"]), "the axis that it stands on").default(Value::text("x")),
        Field::new("value", Kind::NUMBER, "where it stands"),
        Field::new("error", Kind::NOT_NEGATIVE, "half the width of a band around it").default(Value::Integer(0)),
        Field::new("label", Kind::Text {}, "what it is; the quantity's name by default"),
    ]);
    let pixels = |name, about| {
        Field::new(name, Kind::Number { min: Some(200.0), max: Some(4000.0), above: None, below: None }, about)
    };
    let columns =
        Kind::Either { of: vec![Kind::Text {}, Kind::List { of: Box::new(Kind::Text {}), min: 0, max: None }] };
    StepSpec {
        does: "chart".into(),
        about: "columns of a table as a figure, in SVG and PNG".into(),
        fields: vec![
            Field::new("of", Kind::Step {}, "the step whose table is drawn").required(),
            Field::new("table", Kind::Text {}, "which of its tables").default(Value::text("main")),
            Field::new("quantity", Kind::Text {}, "rows of this quantity"),
            Field::new("where", conditions(), "columns and values that rows must have"),
            Field::new(
                "points",
                Kind::Step {},
                "a step whose rows of the same quantity are drawn as points on the lines",
            ),
            Field::new("x", Kind::Text {}, "the column along the bottom; the scan column that varies by default"),
            Field::new("y", Kind::Text {}, "the column up the side").default(Value::text("value")),
            Field::new("lines", columns, "columns that tell lines apart; all other scan columns that vary by default"),
            Field::new(
                "style",
                Kind::words(&["points", "joined", "curve", "band"]),
                "markers, joined markers, a line, a line with a band of one error; by the number of points by default",
            ),
            Field::new(
                "scale",
                both(
                    || Kind::words(&["linear", "log"]),
                    ["how numbers lie along the bottom", "how they lie up the side"],
                ),
                "linear or logarithmic axes",
            ),
            Field::new(
                "range",
                Kind::Tree {
                    fields: vec![
                        Field::new("x", ends(), "from where to where along the bottom"),
                        Field::new("y", ends(), "from where to where up the side"),
                    ],
                },
                "ends of the axes; as the data need by default",
            ),
            Field::new(
                "marks",
                Kind::list(Kind::Tree { fields: mark }),
                "reference lines: values, or results of steps",
            ),
            Field::new("title", Kind::Text {}, "stands above the figure; the quantity's name by default"),
            Field::new(
                "frame",
                Kind::Tree {
                    fields: vec![pixels("width", "from left to right"), pixels("height", "from top to bottom")],
                },
                "size of the figure in CSS pixels; 760 by 460 by default",
            ),
        ],
        scan: None,
    }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    super::must_have_tables(step, "of", problems);
    super::must_have_tables(step, "points", problems);
    let Some(point) = step.points.first() else { return };
    for axis in ["x", "y"] {
        let place = format!("range.{axis}");
        let range = point.get(&place);
        let ends: Vec<f64> = range.iter().filter_map(|r| r.as_list()).flatten().filter_map(Value::as_f64).collect();
        if let [from, to] = ends[..]
            && from >= to
        {
            let problem = Problem::at_value(&point.place(&place), "the range is empty");
            problems.push(problem.expected("[from, to] with `from` below `to`"));
        }
    }
    let marks = point.get("marks").and_then(|marks| marks.as_list().map(<[Value]>::len)).unwrap_or(0);
    for number in 0..marks {
        super::must_have_tables(step, &format!("marks.{number}.step"), problems);
        let place = format!("marks.{number}");
        let Some(mark) = point.get(&place) else { continue };
        if mark.get("value").is_some() == mark.get("step").is_some() {
            let problem = Problem::at_value(&point.place(&place), "a reference line stands at a value or at a result");
            problems.push(problem.expected("one of: `value`, `step`"));
        }
    }
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let built = build(task.parameters, &task.inputs(), task.units)?;
    let frame =
        |name: &str, usual: f64| task.parameters.at(&format!("frame.{name}")).and_then(Value::as_f64).unwrap_or(usual);
    let frame = Frame { width: frame("width", Frame::WIDE.width), height: frame("height", Frame::WIDE.height) };
    let drawing = built.chart.draw(frame);
    let png = drawing.png(PIXELS).map_err(|e| StepError(crate::chain_text(&e)))?;
    let files = vec![("main.svg".into(), drawing.svg().into_bytes()), ("main.png".into(), png)];
    Ok(Output { tables: built.tables(), files })
}

/// A chart, and what of its source stands in it.
pub(super) struct Built {
    /// The chart.
    pub(super) chart: Chart,
    flags: Vec<Vec<String>>,
}

/// Builds the chart that the parameters ask for. The same for a step at work and for one on record.
///
/// # Errors
/// Where there is nothing to draw.
pub(super) fn build(parameters: &Value, inputs: &Inputs<'_>, units: &UnitNames) -> Result<Built, StepError> {
    let text = |name: &str| parameters.get(name).and_then(Value::as_str);
    let table = inputs.table("of", text("table").unwrap_or("main"))?;
    let wanted = wanted(parameters);
    let rows = rows(&table, &wanted)?;
    if rows.is_empty() {
        return Err(StepError(format!("no row of the table has {}", conditions_words(&wanted))));
    }
    let x = text("x").map(str::to_owned).or_else(|| place(&table, &rows));
    let x = x.ok_or_else(|| StepError("no column varies that could go along the bottom; name one with `x`".into()))?;
    let y = text("y").unwrap_or("value").to_owned();
    let lines = match parameters.get("lines") {
        Some(Value::Text(one)) => vec![one.clone()],
        Some(Value::List(list)) => list.iter().filter_map(Value::as_str).map(str::to_owned).collect(),
        _ => line_columns(&table, &rows, &x),
    };
    let style = text("style").map(|word| match word {
        "points" => Style::Points,
        "curve" => Style::Curve,
        "band" => Style::Band,
        _ => Style::Joined,
    });
    let drawn = Drawn { table: &table, rows, x, y, lines };
    let Lines { mut lines, rows, mut notes } = drawn.lines(style)?;
    let flags_of = |table: &Table, rows: &[Vec<usize>]| -> Vec<Vec<String>> {
        let flag = |row: &usize| table.text("flags", *row).unwrap_or_default().to_owned();
        rows.iter().map(|rows| rows.iter().map(flag).collect()).collect()
    };
    let mut flags = flags_of(&table, &rows);
    if inputs.has("points") {
        let points = inputs.table("points", "main")?;
        let rows = cell::rows(&points, &wanted)?;
        let mut found = points_on_lines(&points, rows, &drawn.x, &drawn.y, &lines)?;
        if found.lines.is_empty() {
            return Err(StepError("no line of `points` is one of the lines that are drawn".into()));
        }
        flags.append(&mut flags_of(&points, &found.rows));
        lines.append(&mut found.lines);
        notes.extend(found.notes.into_iter().map(|note| format!("points: {note}")));
    }
    let quantity = text("quantity").filter(|_| drawn.y == "value");
    let axis = |name: &str, column: &str, quantity: Option<&str>| -> Result<Axis, StepError> {
        let own = &table.column(column).ok_or_else(|| no_column(&table, column))?.unit;
        let unit = quantity.filter(|_| own.is_empty()).map_or_else(|| own.clone(), |quantity| unit(quantity, units));
        let log = parameters.at(&format!("scale.{name}")).and_then(Value::as_str) == Some("log");
        let range = parameters.at(&format!("range.{name}")).and_then(Value::as_list).unwrap_or_default();
        let ends: Vec<f64> = range.iter().filter_map(Value::as_f64).collect();
        Ok(Axis {
            label: label(quantity.unwrap_or(column)),
            unit,
            scale: if log { Scale::Log } else { Scale::Linear },
            range: if let [from, to] = ends[..] { Some((from, to)) } else { None },
        })
    };
    let usual = title(quantity.unwrap_or(&drawn.y));
    let chart = Chart {
        title: text("title").map_or(usual, str::to_owned),
        x: axis("x", &drawn.x, None)?,
        y: axis("y", &drawn.y, quantity)?,
        lines,
        marks: marks(parameters, inputs)?,
        notes,
    };
    Ok(Built { chart, flags })
}

/// Reference lines, at values or at results of steps.
fn marks(parameters: &Value, inputs: &Inputs<'_>) -> Result<Vec<Mark>, StepError> {
    let mut marks = Vec::new();
    for (number, mark) in parameters.get("marks").and_then(Value::as_list).unwrap_or_default().iter().enumerate() {
        let text = |name: &str| mark.get(name).and_then(Value::as_str);
        let role = format!("marks.{number}.step");
        let mut usual = String::new();
        let (value, error) = if inputs.has(&role) {
            let found = cell::take(inputs, &role, mark).map_err(|e| StepError(format!("mark {}: {e}", number + 1)))?;
            usual = label(text("quantity").or_else(|| text("column")).unwrap_or("value"));
            // A result that was not found leaves the chart without its line, and the table says why.
            let Some(value) = found.value else { continue };
            (value, found.error.unwrap_or(0.0))
        } else {
            let number = |name: &str| mark.get(name).and_then(Value::as_f64);
            (number("value").unwrap_or_default(), number("error").unwrap_or(0.0))
        };
        let on = if text("on") == Some("y") { MarkAxis::Y } else { MarkAxis::X };
        marks.push(Mark { on, value, error, label: text("label").map_or(usual, str::to_owned) });
    }
    Ok(marks)
}

impl Built {
    /// What is drawn: a row for each point.
    fn tables(&self) -> NamedTables {
        let points = || self.chart.lines.iter().flat_map(|line| line.points.iter().map(move |point| (line, point)));
        let flags = self.flags.iter().flatten().map(|flags| Some(flags.clone())).collect();
        let (x, y) = (&self.chart.x.unit, &self.chart.y.unit);
        let table = Table {
            columns: vec![
                Column::texts("line", points().map(|(line, _)| Some(line.label.clone())).collect()),
                Column::numbers("x", x, points().map(|(_, point)| Some(point.x)).collect()),
                Column::numbers("y", y, points().map(|(_, point)| Some(point.y)).collect()),
                Column::numbers("error", y, points().map(|(_, point)| point.error).collect()),
                Column::texts("flags", flags),
            ],
        };
        vec![("main".into(), table)]
    }
}
