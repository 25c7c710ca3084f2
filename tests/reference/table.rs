//! Reads the reference tables of this folder: comma-separated, one header line, quotes only around whole fields.
//!
//! Included by path into the tests of several crates, none of which uses all of it.

/// A table as text.
pub(crate) struct Table {
    names: Vec<String>,
    rows: Vec<Vec<String>>,
}

impl Table {
    /// Parses the text of a table; rows have as many fields as the header.
    pub(crate) fn parse(text: &str) -> Self {
        let mut lines = text.lines().filter(|line| !line.is_empty()).map(fields);
        let names = lines.next().expect("a reference table has a header");
        let rows: Vec<_> = lines.collect();
        assert!(rows.iter().all(|row| row.len() == names.len()), "ragged reference table");
        assert!(!rows.is_empty(), "empty reference table");
        Self { names, rows }
    }

    /// The rows, in order.
    pub(crate) fn rows(&self) -> impl Iterator<Item = Row<'_>> {
        self.rows.iter().map(|fields| Row { names: &self.names, fields })
    }
}

/// One row of a table.
#[derive(Clone, Copy)]
pub(crate) struct Row<'a> {
    names: &'a [String],
    fields: &'a [String],
}

impl<'a> Row<'a> {
    /// The field of a column.
    pub(crate) fn text(&self, column: &str) -> &'a str {
        let index = self.names.iter().position(|name| name == column);
        &self.fields[index.unwrap_or_else(|| panic!("no column `{column}`"))]
    }

    /// The field of a column as the nearest double.
    pub(crate) fn number(&self, column: &str) -> f64 {
        number(self.text(column))
    }
}

/// Nearest double of decimal text or of a fraction `a/b`.
pub(crate) fn number(text: &str) -> f64 {
    let parse = |text: &str| text.trim().parse::<f64>().unwrap_or_else(|_| panic!("`{text}` is not a number"));
    match text.split_once('/') {
        Some((above, below)) => parse(above) / parse(below),
        None => parse(text),
    }
}

fn fields(line: &str) -> Vec<String> {
    let mut fields = vec![String::new()];
    let mut quoted = false;
    for character in line.chars() {
        match character {
            '"' => quoted = !quoted,
            ',' if !quoted => fields.push(String::new()),
            _ => fields.last_mut().expect("starts with one field").push(character),
        }
    }
    fields
}
