//! `picture`: one kept configuration as a picture, in SVG and PNG, with the walls between its domains.

mod dual;
mod place;

use super::cell::{conditions, conditions_words};
use super::chart::PIXELS;
use super::sample::must_keep;
use super::{Checked, NamedTables, Output, Split, StepError, StepKind, Task, as_is};
use crate::job::StateInput;
use crate::kept;
use crate::loaded::Problem;
use crate::planning::starts::{differing, same};
use place::Placed;
use spinledger_numerics::elementary::atan2;
use spinledger_report::{Picture, Shades, Sites, Walls};
use spinledger_terms::{Column, Field, Kind, Problem as Mistake, StepSpec, Table, Value};
use std::collections::{BTreeMap, BTreeSet};

pub(crate) use place::{Seen, chosen};

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "picture", revision: 1, split: Split::State, spec, check, complete: as_is, analyse };

/// Drawing units along the longer side.
const SIDE: f64 = 640.0;
/// Shades of a circle of directions: neighbours can just be told apart.
const SHADES: u16 = 36;
/// A chain is drawn as a band of one part in so many of its length.
const BAND: usize = 16;

fn spec() -> StepSpec {
    let sweep = Kind::Either { of: vec![Kind::words(&["last"]), Kind::COUNT_FROM_ZERO] };
    StepSpec {
        does: "picture".into(),
        about: "one kept configuration as a picture, in SVG and PNG".into(),
        fields: vec![
            Field::new("of", Kind::Step {}, "the sample step that keeps configurations").required(),
            Field::new("where", conditions(), "columns and values that its point must have")
                .default(Value::Map(Default::default())),
            Field::new("start", Kind::words(&["random", "ordered"]), "which start, where chains began from both"),
            Field::new("chain", Kind::COUNT_FROM_ZERO, "which chain").default(Value::Integer(0)),
            Field::new("sweep", sweep, "at which sweep").default(Value::text("last")),
            Field::new("layer", Kind::COUNT_FROM_ZERO, "of three dimensions, which cell along the last direction")
                .default(Value::Integer(0)),
            Field::new("walls", Kind::Boolean {}, "whether walls between domains are drawn").default(Value::Bool(true)),
            Field::new("title", Kind::Text {}, "stands above it; the point, chain and sweep by default"),
        ],
        scan: None,
    }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Mistake>) {
    super::must_be_of(step, "of", &["sample"], problems);
    must_keep(step, "of", problems);
    place::check(step, problems);
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let input = task.state.ok_or_else(|| StepError("there is no configuration".into()))?;
    let problem = (task.problem)(&input.lattice, &input.model)?;
    let table = task.ledger.read_table(&input.key, "main")?;
    (task.progress)();
    let layer = task.parameters.get("layer").and_then(Value::as_i64).unwrap_or(0);
    let placed = Placed::of(&problem.graph, layer).map_err(StepError)?;
    let tables = tables(task.parameters, &placed, &table, &problem)?;
    let [(_, main), (_, walls)] = &tables[..] else { return Err(StepError("two tables".into())) };
    let drawing = picture_of(task.parameters, main, walls)?.draw(SIDE);
    (task.progress)();
    let png = drawing.png(PIXELS).map_err(|e| StepError(crate::chain_text(&e)))?;
    let files = vec![("main.svg".into(), drawing.svg().into_bytes()), ("main.png".into(), png)];
    Ok(Output { tables, files })
}

/// How a configuration is shown, as planning has put it among the parameters: `spins` by value, `colours`, `states` by number, `angles`.
fn shown(parameters: &Value) -> &str {
    parameters.get("shown").and_then(Value::as_str).unwrap_or("states")
}

/// The tables that the picture can be drawn from again: each site with its place, its spin, and the number of its shade; the walls.
fn tables(parameters: &Value, placed: &Placed, table: &Table, problem: &Problem) -> Result<NamedTables, StepError> {
    let numbers = |name: &str| -> Result<Vec<f64>, StepError> {
        let column =
            table.column(name).ok_or_else(|| StepError(format!("the configuration has no column `{name}`")))?;
        Ok((0..table.rows()).map(|row| column.cells.number(row).unwrap_or(f64::NAN)).collect())
    };
    let (values, shades): (Vec<f64>, Vec<i64>) = if table.column("value").is_some() {
        let values = numbers("value")?;
        let mut ranked = kept::spin_values(&problem.energy).unwrap_or_default().to_vec();
        ranked.sort_by(f64::total_cmp);
        // Spin values by size, so that down is the darker one; states and colours by number.
        let shade = |value: &f64| match ranked.iter().position(|v| v == value) {
            Some(rank) => rank as i64,
            None => *value as i64,
        };
        let shades = values.iter().map(shade).collect();
        (values, shades)
    } else {
        let (x, y) = (numbers("x")?, numbers("y")?);
        let angles: Vec<f64> = x.iter().zip(&y).map(|(x, y)| atan2(*y, *x)).collect();
        let shades = angles.iter().map(|a| shade_of_angle(*a, SHADES)).collect();
        (angles, shades)
    };
    let unit = if table.column("value").is_some() { "" } else { "rad" };
    if values.len() < placed.sites.last().map_or(0, |site| site + 1) {
        return Err(StepError("the configuration has fewer sites than the lattice".into()));
    }
    let of = |f: &dyn Fn(usize) -> f64| placed.sites.iter().map(|site| Some(f(*site))).collect::<Vec<_>>();
    let rows = placed.sites.len();
    let main = Table {
        columns: vec![
            Column::integers("site", "", placed.sites.iter().map(|site| Some(*site as i64)).collect()),
            Column::numbers("x", "", placed.positions.iter().map(|p| Some(p[0])).collect()),
            Column::numbers("y", "", placed.positions.iter().map(|p| Some(p[1])).collect()),
            Column::numbers("value", unit, of(&|site| values[site])),
            Column::integers("state", "", placed.sites.iter().map(|site| Some(shades[*site])).collect()),
            Column::texts("flags", vec![Some(String::new()); rows]),
        ],
    };
    // Angles change from site to site: walls would be everywhere.
    let segments = if shown(parameters) == "angles" { Vec::new() } else { placed.walls(&shades) };
    let end = |k: usize| segments.iter().map(|s| Some(s[k])).collect::<Vec<_>>();
    let names = ["x0", "y0", "x1", "y1"];
    let mut columns: Vec<Column> =
        names.iter().enumerate().map(|(k, name)| Column::numbers(name, "", end(k))).collect();
    columns.push(Column::texts("flags", vec![Some(String::new()); segments.len()]));
    Ok(vec![("main".into(), main), ("walls".into(), Table { columns })])
}

/// The shade of an angle from -pi to pi on a ring.
fn shade_of_angle(angle: f64, shades: u16) -> i64 {
    let turn = (angle / std::f64::consts::TAU).rem_euclid(1.0);
    // A turn that rounds to a whole one is none.
    (turn * f64::from(shades)) as i64 % i64::from(shades)
}

/// The picture of the parameters and tables of a step: of one at work, and of one on record.
///
/// # Errors
/// Where a column is missing.
pub(crate) fn picture_of(parameters: &Value, main: &Table, walls: &Table) -> Result<Picture, StepError> {
    let numbers = |table: &Table, name: &str| -> Result<Vec<f64>, StepError> {
        let column = table.numbers(name).ok_or_else(|| StepError(format!("a picture has no column `{name}`")))?;
        Ok(column.into_iter().map(|x| x.unwrap_or(f64::NAN)).collect())
    };
    let (x, y) = (numbers(main, "x")?, numbers(main, "y")?);
    let (values, states) = (numbers(main, "value")?, numbers(main, "state")?);
    let with_walls = parameters.get("walls").and_then(Value::as_bool).unwrap_or(true);
    let ring = parameters.get("shades").and_then(Value::as_i64).and_then(|n| u16::try_from(n).ok()).unwrap_or(SHADES);
    let shown = shown(parameters);
    let shades = if shown == "angles" { Shades::Ring(ring.max(1)) } else { Shades::Apart };
    let states: Vec<u16> = states.iter().map(|s| *s as u16).collect();
    let (sites, states) = match grid(&x, &y) {
        Some((columns, 1, order)) if columns > 1 => (
            Sites::Strip { rows: columns.div_ceil(BAND), walls: with_walls },
            order.iter().map(|i| states[*i]).collect(),
        ),
        Some((columns, rows, order)) => {
            (Sites::Grid { columns, rows, walls: with_walls }, order.iter().map(|i| states[*i]).collect())
        }
        None => {
            let ends = ["x0", "y0", "x1", "y1"].map(|name| numbers(walls, name));
            let [x0, y0, x1, y1] = ends;
            let (x0, y0, x1, y1) = (x0?, y0?, x1?, y1?);
            let count = if with_walls { x0.len() } else { 0 };
            let segments = (0..count).map(|i| [x0[i], y0[i], x1[i], y1[i]]).collect();
            let positions = x.iter().zip(&y).map(|(x, y)| [*x, *y]).collect();
            (Sites::Plane { positions, walls: Walls::Segments(segments) }, states)
        }
    };
    let title = parameters.get("title").and_then(Value::as_str).unwrap_or_default().to_owned();
    Ok(Picture { title, sites, states, names: names(shown, main, &values), shades })
}

/// Names of the states that are there; none for angles.
fn names(shown: &str, main: &Table, values: &[f64]) -> Vec<String> {
    if shown == "angles" {
        return Vec::new();
    }
    let state = |row: usize| main.column("state").and_then(|c| c.cells.number(row)).map_or(0, |s| s as usize);
    let mut names: Vec<String> = Vec::new();
    for (row, value) in values.iter().enumerate() {
        let state = state(row);
        if names.len() <= state {
            names.resize(state + 1, String::new());
        }
        if names[state].is_empty() {
            names[state] = match shown {
                "spins" if *value > 0.0 => format!("+{value}"),
                "spins" => value.to_string().replace('-', "\u{2212}"),
                // Colours count from 1, states from 0.
                "colours" => format!("colour {}", state + 1),
                _ => format!("state {state}"),
            };
        }
    }
    names
}

/// Columns and rows of a grid of which each cell is one of the places, with the places in its order, row by row from the top. None where they are no
/// such grid.
fn grid(x: &[f64], y: &[f64]) -> Option<(usize, usize, Vec<usize>)> {
    const NEAR: f64 = 1e-6;
    let whole = |values: &[f64]| -> Option<(Vec<i64>, i64)> {
        let least = values.iter().copied().fold(f64::INFINITY, f64::min);
        let cells: Vec<i64> = values
            .iter()
            .map(|v| Some((v - least).round()).filter(|n| (v - least - n).abs() < NEAR && *n < 1e6).map(|n| n as i64))
            .collect::<Option<_>>()?;
        let most = cells.iter().copied().max()?;
        Some((cells, most + 1))
    };
    let ((x, columns), (y, rows)) = (whole(x)?, whole(y)?);
    if columns.checked_mul(rows)? != x.len() as i64 {
        return None;
    }
    let mut order = vec![usize::MAX; x.len()];
    for (place, (x, y)) in x.iter().zip(&y).enumerate() {
        let cell = ((rows - 1 - y) * columns + x) as usize;
        if order[cell] != usize::MAX {
            return None;
        }
        order[cell] = place;
    }
    Some((columns as usize, rows as usize, order))
}

/// What planning adds to the parameters: a title where there is none, and how spins are shown.
pub(crate) fn describe(parameters: &mut Value, state: &StateInput, spins: (&str, Option<u64>)) {
    let (shown, states) = spins;
    parameters.set("shown", Value::text(shown));
    if let (true, Some(states)) = (shown == "angles", states) {
        parameters.set("shades", Value::Integer(states as i64));
    }
    if parameters.get("title").is_none() {
        parameters.set("title", Value::text(&state.words));
    }
}

#[cfg(test)]
mod tests;
