//! One cell of a step's table, picked by quantity and by columns that its row must have.

use super::{Inputs, StepError};
use spinledger_terms::{Cells, Column, Field, Kind, Table, Value};

/// A value with its error and flags.
pub(super) struct Found {
    pub(super) value: Option<f64>,
    pub(super) error: Option<f64>,
    pub(super) flags: String,
}

/// What picks a cell: `step`, `quantity`, `where`, `table`, `column`. None is required.
pub(super) fn fields() -> Vec<Field> {
    vec![
        Field::new("step", Kind::Step {}, "the step"),
        Field::new("quantity", Kind::Text {}, "the row's quantity"),
        Field::new("where", conditions(), "columns and values that the row must have"),
        Field::new("table", Kind::Text {}, "which of the step's tables; the main one by default"),
        Field::new("column", Kind::Text {}, "the column of the value; `value` by default"),
    ]
}

/// Columns and values.
pub(super) fn conditions() -> Kind {
    Kind::Map { of: Box::new(Kind::Any {}) }
}

/// The one row that is meant.
pub(super) fn take(inputs: &Inputs<'_>, role: &str, which: &Value) -> Result<Found, StepError> {
    let text = |key: &str| which.get(key).and_then(Value::as_str);
    let table = inputs.table(role, text("table").unwrap_or("main"))?;
    let column = text("column").unwrap_or("value");
    let values = numbers(&table, column)?;
    let wanted = wanted(which);
    let matching = rows(&table, &wanted)?;
    let [row] = matching[..] else {
        let words = conditions_words(&wanted);
        return Err(StepError(format!(
            "{} rows match ({words}) where one must; narrow it with `where`",
            matching.len()
        )));
    };
    Ok(Found {
        value: values.number(row),
        error: error_of(&table, column).and_then(|c| c.cells.number(row)),
        flags: table.text("flags", row).unwrap_or_default().to_owned(),
    })
}

/// Columns and values that rows must have, by `quantity` and `where`.
pub(super) fn wanted(which: &Value) -> Vec<(String, Value)> {
    let quantity = which.get("quantity").and_then(Value::as_str).map(|name| ("quantity".to_owned(), Value::text(name)));
    let others = which.get("where").and_then(Value::as_map).into_iter().flatten();
    quantity.into_iter().chain(others.map(|(name, value)| (name.clone(), value.clone()))).collect()
}

/// The same, in words.
pub(super) fn conditions_words(wanted: &[(String, Value)]) -> String {
    let words: Vec<String> = wanted.iter().map(|(name, value)| format!("{name} = {}", value.canonical())).collect();
    if words.is_empty() { "no condition".to_owned() } else { words.join(", ") }
}

/// The rows that have them.
pub(super) fn rows(table: &Table, wanted: &[(String, Value)]) -> Result<Vec<usize>, StepError> {
    let mut rows: Vec<usize> = (0..table.rows()).collect();
    for (name, value) in wanted {
        let cells = &table.column(name).ok_or_else(|| no_column(table, name))?.cells;
        rows.retain(|row| same(&cells.value(*row), value));
    }
    Ok(rows)
}

/// The cells of a column of numbers.
pub(super) fn numbers<'a>(table: &'a Table, column: &str) -> Result<&'a Cells, StepError> {
    let cells = &table.column(column).ok_or_else(|| no_column(table, column))?.cells;
    if matches!(cells, Cells::Number(_) | Cells::Integer(_)) {
        return Ok(cells);
    }
    Err(StepError(format!("the column `{column}` holds no numbers")))
}

/// The column of a column's errors: `<column>_error`, or `error` where that stands right behind it.
pub(super) fn error_of<'a>(table: &'a Table, column: &str) -> Option<&'a Column> {
    let behind = table.columns.windows(2).find(|pair| pair[0].name == column).map(|pair| &pair[1]);
    table.column(&format!("{column}_error")).or(behind.filter(|next| next.name == "error"))
}

pub(super) fn no_column(table: &Table, name: &str) -> StepError {
    let known: Vec<&str> = table.columns.iter().map(|c| c.name.as_str()).collect();
    StepError(format!("the table has no column `{name}`; it has: {}", known.join(", ")))
}

pub(super) fn same(a: &Value, b: &Value) -> bool {
    a == b || (a.as_f64().is_some() && a.as_f64() == b.as_f64())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_stand_beside_their_values() {
        let number = |name: &str, x: f64| Column::numbers(name, "", vec![Some(x)]);
        let names = ["temperature", "error", "value", "value_error", "tau"];
        let table = Table { columns: names.iter().zip(1..).map(|(name, x)| number(name, f64::from(x))).collect() };
        let error = |column: &str| error_of(&table, column).map(|c| c.name.as_str());
        assert_eq!(error("temperature"), Some("error"));
        assert_eq!(error("value"), Some("value_error"));
        assert_eq!(error("tau"), None);
    }
}
