//! A row a line: CSV and JSON lines, with the digits that read back to the same bits.

use super::{BATCH, Source, Stop};
use serde_json::Value as Json;
use spinledger_terms::{Cells, Table};
use std::io::Write;

/// CSV: RFC 4180, with line feeds alone; what is not known is empty, empty text is `""`.
pub(super) fn csv(source: &mut Source, out: &mut impl Write) -> Result<(), Stop> {
    let names: Vec<String> = source.head().iter().map(|(name, _)| quoted(name)).collect();
    writeln!(out, "{}", names.join(","))?;
    let mut line = String::new();
    let mut first = true;
    while let Some(table) = source.next(BATCH)? {
        for row in 0..table.rows() {
            line.clear();
            for (at, column) in table.columns.iter().enumerate() {
                if at > 0 {
                    line.push(',');
                }
                push(&column.cells, row, &mut line);
            }
            line.push('\n');
            out.write_all(line.as_bytes())?;
        }
        // The first rows are there at once.
        if std::mem::take(&mut first) {
            out.flush()?;
        }
    }
    Ok(())
}

fn push(cells: &Cells, row: usize, line: &mut String) {
    use std::fmt::Write as _;
    // Writing to text cannot fail.
    let _ = match cells {
        Cells::Integer(v) => v[row].map_or(Ok(()), |i| write!(line, "{i}")),
        // The shortest digits that read back to the same bits, powers of ten for the very large and small.
        Cells::Number(v) => v[row].map_or(Ok(()), |x| write!(line, "{x:?}")),
        Cells::Boolean(v) => v[row].map_or(Ok(()), |b| write!(line, "{b}")),
        Cells::Text(v) => v[row].as_deref().map_or(Ok(()), |text| line.write_str(&quoted(text))),
    };
}

/// A field of a CSV file.
fn quoted(text: &str) -> String {
    let plain = !text.is_empty() && !text.contains([',', '"', '\n', '\r']) && text.trim() == text;
    if plain { text.to_owned() } else { format!("\"{}\"", text.replace('"', "\"\"")) }
}

/// JSON lines, an object a row with columns in order; what is not known is null, an infinity is the text `inf` or `-inf`.
pub(super) fn json(source: &mut Source, out: &mut impl Write) -> Result<(), Stop> {
    let names: Vec<String> = source.head().iter().map(|(name, _)| Json::from(*name).to_string()).collect();
    let mut first = true;
    while let Some(table) = source.next(BATCH)? {
        for row in 0..table.rows() {
            // By hand, since the columns keep their order.
            let fields: Vec<String> =
                names.iter().zip(values(&table, row)).map(|(name, value)| format!("{name}:{value}")).collect();
            writeln!(out, "{{{}}}", fields.join(","))?;
        }
        if std::mem::take(&mut first) {
            out.flush()?;
        }
    }
    Ok(())
}

fn values(table: &Table, row: usize) -> impl Iterator<Item = Json> {
    table.columns.iter().map(move |column| match &column.cells {
        Cells::Integer(v) => v[row].map_or(Json::Null, Json::from),
        Cells::Number(v) => match v[row] {
            Some(x) if x.is_infinite() => Json::from(format!("{x}")),
            x => x.map_or(Json::Null, Json::from),
        },
        Cells::Boolean(v) => v[row].map_or(Json::Null, Json::from),
        Cells::Text(v) => v[row].as_deref().map_or(Json::Null, Json::from),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// RFC 4180, section 2.
    #[test]
    fn fields_are_quoted_where_they_must_be() {
        assert_eq!(quoted("energy"), "energy");
        assert_eq!(quoted("a,b"), "\"a,b\"");
        assert_eq!(quoted("a \"b\"\nc"), "\"a \"\"b\"\"\nc\"");
        assert_eq!(quoted(""), "\"\"");
        assert_eq!(quoted(" a"), "\" a\"");
    }

    #[test]
    fn digits_read_back() {
        let values = [0.1 + 0.2, 1e300, -0.0, 5e-324, f64::INFINITY, 2.0, -1.4921875];
        let cells = Cells::Number(values.map(Some).to_vec());
        for (row, x) in values.into_iter().enumerate() {
            let mut line = String::new();
            push(&cells, row, &mut line);
            assert_eq!(line.parse::<f64>().unwrap().to_bits(), x.to_bits(), "{line}");
            assert!(line.len() < 25, "{line}");
        }
    }
}
