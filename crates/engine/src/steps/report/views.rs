//! Tables on the page: whole where they are short, extracts where they are curves.

use super::lineage::Lineage;
use super::{Part, StepError, Task};
use spinledger_report::{Flagged, TableView};
use spinledger_terms::{Cells, Column, Table, Value};

/// Rows that are shown of a table.
const MOST_ROWS: usize = 60;
/// Places that are shown of a curve.
const PLACES: usize = 9;

/// The tables, in the order of the parts.
pub(super) fn tables(task: &Task<'_>, parts: &[Part], lineage: &Lineage<'_>) -> Result<Vec<TableView>, StepError> {
    let mut views: Vec<TableView> = Vec::new();
    for part in parts {
        let mut add = |caption: String, table: Table, flagged: Option<Flagged>| {
            let (key, record) = (part.record.key.to_string(), lineage.of(&part.record.key));
            views.push(TableView { caption, table, file: String::new(), key, most_rows: MOST_ROWS, flagged, record });
        };
        match part.does.as_str() {
            // Comparisons are the answers; figures are figures.
            "compare" | "chart" | "picture" => {}
            "averages" => add("Averages at each point.".into(), part.table(task, "wide")?, None),
            "reweight" => {
                let main = part.table(task, "main")?;
                let flagged = Flagged::of(&main);
                let extract = extract(&main).unwrap_or(main);
                add("Reweighted curves, at some of the temperatures.".into(), extract, Some(flagged));
            }
            "crossing" => {
                let criterion = part.record.provenance.parameters.get("quantity").and_then(Value::as_str);
                let criterion = criterion.unwrap_or("curves").replace('_', " ");
                add(
                    format!("Where the curves of the {criterion} cross as sizes grow."),
                    part.table(task, "main")?,
                    None,
                );
                add(format!("Crossings of the {criterion}, pair by pair."), part.table(task, "pairs")?, None);
            }
            other => add(format!("Results of a step that does {other}."), part.table(task, "main")?, None),
        }
    }
    Ok(views)
}

/// A few places of each curve, with a column for each quantity and one for its error. None where the table has another form.
fn extract(main: &Table) -> Option<Table> {
    let quantity = main.columns.iter().position(|c| c.name == "quantity")?;
    let (value, error) = (main.column("value")?, main.column("error")?);
    let mut quantities: Vec<&str> = Vec::new();
    // Rows of one place stand together, a row for each quantity.
    let mut places: Vec<Vec<usize>> = Vec::new();
    let lead = |row: usize| main.columns[..quantity].iter().map(|c| c.cells.value(row)).collect::<Vec<_>>();
    for row in 0..main.rows() {
        let name = main.text("quantity", row)?;
        if !quantities.contains(&name) {
            quantities.push(name);
        }
        match places.last_mut() {
            Some(rows) if lead(rows[0]) == lead(row) => rows.push(row),
            _ => places.push(vec![row]),
        }
    }
    let same_curve = |a: &[usize], b: &[usize]| {
        let others = main.columns[..quantity].iter().filter(|c| c.name != "temperature");
        others.into_iter().all(|c| c.cells.value(a[0]) == c.cells.value(b[0]))
    };
    let curves = places.chunk_by(|a, b| same_curve(a, b));
    let chosen: Vec<&Vec<usize>> = curves
        .flat_map(|curve| {
            let count = curve.len().min(PLACES);
            let at = move |i: usize| if count < 2 { 0 } else { i * (curve.len() - 1) / (count - 1) };
            (0..count).map(move |i| &curve[at(i)])
        })
        .collect();
    let first: Vec<usize> = chosen.iter().map(|rows| rows[0]).collect();
    let mut columns: Vec<Column> = main.columns[..quantity].iter().map(|c| rows_of(c, &first)).collect();
    for name in quantities {
        let of = |rows: &&Vec<usize>| rows.iter().copied().find(|row| main.text("quantity", *row) == Some(name));
        let cells = |column: &Column| chosen.iter().map(|rows| column.cells.number(of(rows)?)).collect();
        columns.push(Column::numbers(name, &value.unit, cells(value)));
        columns.push(Column::numbers(&format!("{name}_error"), &error.unit, cells(error)));
    }
    let flags = |rows: &&Vec<usize>| {
        let own = rows.iter().flat_map(|row| main.text("flags", *row).unwrap_or_default().split(';'));
        Some(super::flags_text(&own.filter(|flag| !flag.is_empty()).collect::<Vec<_>>()))
    };
    columns.push(Column::texts("flags", chosen.iter().map(flags).collect()));
    Some(Table { columns })
}

fn rows_of(column: &Column, rows: &[usize]) -> Column {
    fn pick<T: Clone>(cells: &[T], rows: &[usize]) -> Vec<T> {
        rows.iter().filter_map(|row| cells.get(*row).cloned()).collect()
    }
    let cells = match &column.cells {
        Cells::Integer(cells) => Cells::Integer(pick(cells, rows)),
        Cells::Number(cells) => Cells::Number(pick(cells, rows)),
        Cells::Boolean(cells) => Cells::Boolean(pick(cells, rows)),
        Cells::Text(cells) => Cells::Text(pick(cells, rows)),
    };
    Column { name: column.name.clone(), unit: column.unit.clone(), cells }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn curves_are_thinned_to_their_ends_and_some_between() {
        let rows: Vec<(i64, f64, &str)> = [8, 16]
            .into_iter()
            .flat_map(|size| (0..41).map(move |t| (size, f64::from(t))))
            .flat_map(|(size, t)| ["energy", "binder"].map(|q| (size, t, q)))
            .collect();
        let main = Table {
            columns: vec![
                Column::integers("size", "", rows.iter().map(|r| Some(r.0)).collect()),
                Column::numbers("temperature", "K", rows.iter().map(|r| Some(r.1)).collect()),
                Column::texts("quantity", rows.iter().map(|r| Some(r.2.to_owned())).collect()),
                Column::numbers("value", "", (0..rows.len()).map(|i| Some(i as f64)).collect()),
                Column::numbers("error", "", vec![Some(0.5); rows.len()]),
                Column::texts(
                    "flags",
                    rows.iter().map(|r| Some(if r.1 > 39.0 { "poor-overlap" } else { "" }.into())).collect(),
                ),
            ],
        };
        let found = extract(&main).unwrap();
        let names: Vec<&str> = found.columns.iter().map(|c| c.name.as_str()).collect();
        assert_eq!(names, ["size", "temperature", "energy", "energy_error", "binder", "binder_error", "flags"]);
        assert_eq!(found.rows(), 18);
        let temperature = found.numbers("temperature").unwrap();
        assert_eq!(temperature[..9], [0.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0, 35.0, 40.0].map(Some));
        assert_eq!(found.numbers("binder").unwrap()[1], Some(11.0));
        assert_eq!((found.text("flags", 7), found.text("flags", 8)), (Some(""), Some("poor-overlap")));
    }
}
