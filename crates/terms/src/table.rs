//! A small table in memory: what analysis steps take and give. Series, which may be long, do not go through it.

use std::fmt;

/// Columns of equal length.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Table {
    /// The columns, in order.
    pub columns: Vec<Column>,
}

/// A named column.
#[derive(Clone, Debug, PartialEq)]
pub struct Column {
    /// Its name.
    pub name: String,
    /// Its unit (`J`, `meV`, `K`, `sweeps` ...); empty for pure numbers and text.
    pub unit: String,
    /// Its values.
    pub cells: Cells,
}

/// The values of a column; what is not known is None, and numbers are never NaN.
#[derive(Clone, Debug, PartialEq)]
pub enum Cells {
    /// Counts.
    Integer(Vec<Option<i64>>),
    /// Numbers.
    Number(Vec<Option<f64>>),
    /// True or false.
    Boolean(Vec<Option<bool>>),
    /// Text.
    Text(Vec<Option<String>>),
}

impl Cells {
    /// Number of values.
    pub fn len(&self) -> usize {
        match self {
            Cells::Integer(v) => v.len(),
            Cells::Number(v) => v.len(),
            Cells::Boolean(v) => v.len(),
            Cells::Text(v) => v.len(),
        }
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The word for the type: `integer`, `number`, `boolean`, `text`.
    pub fn what(&self) -> &'static str {
        match self {
            Cells::Integer(_) => "integer",
            Cells::Number(_) => "number",
            Cells::Boolean(_) => "boolean",
            Cells::Text(_) => "text",
        }
    }

    /// The value as a number, for integers and numbers.
    pub fn number(&self, row: usize) -> Option<f64> {
        match self {
            Cells::Integer(v) => v.get(row).copied().flatten().map(|i| i as f64),
            Cells::Number(v) => v.get(row).copied().flatten(),
            _ => None,
        }
    }

    /// The value as text, for text.
    pub fn text(&self, row: usize) -> Option<&str> {
        match self {
            Cells::Text(v) => v.get(row).and_then(Option::as_deref),
            _ => None,
        }
    }

    /// The value as a [`crate::Value`]; null where it is not known.
    pub fn value(&self, row: usize) -> crate::Value {
        use crate::Value;
        match self {
            Cells::Integer(v) => v.get(row).copied().flatten().map_or(Value::Null, Value::Integer),
            Cells::Number(v) => v.get(row).copied().flatten().map_or(Value::Null, Value::Number),
            Cells::Boolean(v) => v.get(row).copied().flatten().map_or(Value::Null, Value::Bool),
            Cells::Text(v) => v.get(row).cloned().flatten().map_or(Value::Null, Value::Text),
        }
    }
}

impl Column {
    /// Counts.
    pub fn integers(name: &str, unit: &str, values: Vec<Option<i64>>) -> Self {
        Column { name: name.into(), unit: unit.into(), cells: Cells::Integer(values) }
    }

    /// Numbers; NaN becomes unknown.
    pub fn numbers(name: &str, unit: &str, values: Vec<Option<f64>>) -> Self {
        let values = values.into_iter().map(|x| x.filter(|x| !x.is_nan())).collect();
        Column { name: name.into(), unit: unit.into(), cells: Cells::Number(values) }
    }

    /// True or false.
    pub fn booleans(name: &str, values: Vec<Option<bool>>) -> Self {
        Column { name: name.into(), unit: String::new(), cells: Cells::Boolean(values) }
    }

    /// Text.
    pub fn texts(name: &str, values: Vec<Option<String>>) -> Self {
        Column { name: name.into(), unit: String::new(), cells: Cells::Text(values) }
    }
}

impl Table {
    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.columns.first().map_or(0, |c| c.cells.len())
    }

    /// The column of a name.
    pub fn column(&self, name: &str) -> Option<&Column> {
        self.columns.iter().find(|c| c.name == name)
    }

    /// The numbers of a column.
    pub fn numbers(&self, name: &str) -> Option<Vec<Option<f64>>> {
        let cells = &self.column(name)?.cells;
        matches!(cells, Cells::Integer(_) | Cells::Number(_))
            .then(|| (0..cells.len()).map(|i| cells.number(i)).collect())
    }

    /// The text of a cell.
    pub fn text(&self, name: &str, row: usize) -> Option<&str> {
        self.column(name)?.cells.text(row)
    }

    /// Appends the rows of another table with the same columns.
    ///
    /// # Errors
    /// Where names, units or types differ.
    pub fn append(&mut self, other: &Table) -> Result<(), TableError> {
        if self.columns.is_empty() {
            self.columns.clone_from(&other.columns);
            return Ok(());
        }
        if self.columns.len() != other.columns.len() {
            return Err(TableError(format!("{} columns meet {}", self.columns.len(), other.columns.len())));
        }
        for (mine, theirs) in self.columns.iter().zip(&other.columns) {
            if mine.name != theirs.name || mine.unit != theirs.unit || mine.cells.what() != theirs.cells.what() {
                let show = |c: &Column| format!("`{}` ({}, unit `{}`)", c.name, c.cells.what(), c.unit);
                return Err(TableError(format!("column {} meets {}", show(mine), show(theirs))));
            }
        }
        for (mine, theirs) in self.columns.iter_mut().zip(&other.columns) {
            match (&mut mine.cells, &theirs.cells) {
                (Cells::Integer(a), Cells::Integer(b)) => a.extend_from_slice(b),
                (Cells::Number(a), Cells::Number(b)) => a.extend_from_slice(b),
                (Cells::Boolean(a), Cells::Boolean(b)) => a.extend_from_slice(b),
                (Cells::Text(a), Cells::Text(b)) => a.extend_from_slice(b),
                _ => return Err(TableError("columns of different types meet".to_owned())),
            }
        }
        Ok(())
    }
}

/// Two tables do not fit together.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct TableError(pub String);

impl fmt::Display for TableError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "tables do not fit together: {}", self.0)
    }
}

impl std::error::Error for TableError {}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tables_append_only_what_fits() {
        let mut a = Table { columns: vec![Column::numbers("value", "J", vec![Some(1.0), Some(f64::NAN)])] };
        assert_eq!(a.columns[0].cells.number(1), None, "NaN is unknown");
        let b = a.clone();
        a.append(&b).unwrap();
        assert_eq!(a.rows(), 4);
        let other = Table { columns: vec![Column::numbers("value", "K", vec![])] };
        assert!(a.append(&other).is_err());
    }
}
