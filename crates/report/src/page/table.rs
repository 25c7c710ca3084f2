//! Tables: numbers with the digits that their errors allow.

use super::TableView;
use super::record::{breakable, fold};
use super::words::{counted, flag_name};
use crate::number::{fixed, shown};
use crate::text::escape;
use spinledger_terms::{Cells, Column, Table};
use std::fmt::Write as _;

pub(super) fn write(out: &mut String, number: usize, view: &TableView) {
    let table = &view.table;
    let rows = table.rows();
    let most = rows.min(view.most_rows);
    let caption = format!("<b>Table {number}.</b> {}", escape(&view.caption));
    let _ = write!(
        out,
        "<section class=\"table\" id=\"table-{number}\">\n<p class=\"caption\" id=\"caption-{number}\" dir=\"auto\">{caption}</p>\n\
         <div class=\"scroll\" tabindex=\"0\" role=\"region\" aria-labelledby=\"caption-{number}\"><table>\n<thead><tr>"
    );
    let looks: Vec<Look> = table.columns.iter().map(|c| Look::of(table, c, most)).collect();
    for (column, look) in table.columns.iter().zip(&looks) {
        let _ = write!(out, "<th scope=\"col\"{}>{}", look.class(), breakable(&column.name));
        if !column.unit.is_empty() {
            let _ = write!(out, "<span class=\"unit\">{}</span>", escape(&column.unit));
        }
        out.push_str("</th>");
    }
    out.push_str("</tr></thead>\n<tbody>\n");
    for row in 0..most {
        let flagged = table.text("flags", row).is_some_and(|f| !f.is_empty());
        out.push_str(if flagged { "<tr class=\"flagged\">" } else { "<tr>" });
        for (column, look) in table.columns.iter().zip(&looks) {
            let _ = write!(out, "<td{}>{}</td>", look.class(), look.cell(column, row));
        }
        out.push_str("</tr>\n");
    }
    out.push_str("</tbody></table></div>\n<p class=\"below\">");
    let whole = view.flagged.as_ref().map_or(rows, |whole| whole.rows.max(rows));
    if most < whole {
        let _ = write!(out, "{most} of {} shown. ", counted(whole, "row", "rows"));
    } else if rows == 0 {
        out.push_str("No rows. ");
    }
    if !view.file.is_empty() {
        let _ = write!(out, "All digits in <code dir=\"auto\">{}</code>. ", escape(&view.file));
    }
    if !view.key.is_empty() {
        let _ = write!(out, "Key <code class=\"key\">{}</code>", escape(&view.key));
    }
    out.push_str("</p>\n");
    fold(out, "Record of this table", &view.record);
    out.push_str("</section>\n");
}

/// How the cells of a column are shown.
enum Look<'a> {
    /// Text and truth.
    Words,
    /// `flags`.
    Flags,
    Counts,
    /// Numbers with their errors.
    Value(&'a Cells),
    /// Errors with their numbers.
    Error(&'a Cells),
    /// Numbers that are short as they are, all with as many decimals.
    Short(usize),
    /// Other numbers.
    Free,
}

impl<'a> Look<'a> {
    fn of(table: &'a Table, column: &Column, rows: usize) -> Look<'a> {
        let cells = match &column.cells {
            Cells::Boolean(_) => return Look::Words,
            Cells::Text(_) => return if column.name == "flags" { Look::Flags } else { Look::Words },
            Cells::Integer(_) => return Look::Counts,
            Cells::Number(_) => &column.cells,
        };
        let named = |name: &str| table.column(name).map(|c| &c.cells);
        let error = if column.name == "value" { "error".to_owned() } else { format!("{}_error", column.name) };
        if let Some(errors) = named(&error) {
            return Look::Value(errors);
        }
        let value = if column.name == "error" { Some("value") } else { column.name.strip_suffix("_error") };
        if let Some(values) = value.and_then(named) {
            return Look::Error(values);
        }
        let mut decimals = 0;
        for x in (0..rows).filter_map(|row| cells.number(row)) {
            let text = shown(x, None, 7);
            let exact = x == 0.0 || (text.power == 0 && text.value.replace('\u{2212}', "-").parse() == Ok(x));
            if !exact {
                return Look::Free;
            }
            decimals = decimals.max(text.value.split_once('.').map_or(0, |(_, d)| d.len()));
        }
        Look::Short(decimals)
    }

    fn class(&self) -> &'static str {
        match self {
            Look::Words | Look::Flags => "",
            _ => " class=\"n\"",
        }
    }

    fn cell(&self, column: &Column, row: usize) -> String {
        const UNKNOWN: &str = "<span class=\"unknown\" title=\"not known\">–</span>";
        let number = || column.cells.number(row);
        let text = match self {
            Look::Words => match &column.cells {
                Cells::Boolean(v) => v.get(row).copied().flatten().map(|b| if b { "yes" } else { "no" }.to_owned()),
                _ => column.cells.text(row).map(|t| format!("<bdi>{}</bdi>", escape(t))),
            },
            Look::Flags => column.cells.text(row).map(|t| {
                let words: Vec<String> =
                    t.split(';').filter(|f| !f.is_empty()).map(|f| escape(&flag_name(f))).collect();
                words.join("; ")
            }),
            Look::Counts => column.cells.value(row).as_i64().map(|i| i.to_string().replace('-', "\u{2212}")),
            Look::Value(errors) => number().map(|x| shown(x, errors.number(row), 7).value_text()),
            Look::Error(values) => number().map(|e| {
                let with = shown(values.number(row).unwrap_or(f64::NAN), Some(e), 7);
                if with.error.is_some() { with.error_text() } else { shown(e, None, 2).text() }
            }),
            Look::Short(decimals) => number().map(|x| fixed(x, *decimals)),
            Look::Free => number().map(|x| shown(x, None, 5).text()),
        };
        text.unwrap_or_else(|| UNKNOWN.to_owned())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cells(table: &Table, name: &str) -> Vec<String> {
        let column = table.column(name).unwrap();
        let look = Look::of(table, column, table.rows());
        (0..table.rows()).map(|row| look.cell(column, row)).collect()
    }

    #[test]
    fn digits_go_by_errors() {
        let table = Table {
            columns: vec![
                Column::numbers("temperature", "J", vec![Some(2.2), Some(2.25), None]),
                Column::numbers("value", "", vec![Some(0.123_456), Some(-0.5), Some(1.0)]),
                Column::numbers("error", "", vec![Some(0.001_23), None, Some(0.0)]),
                Column::numbers("tau", "sweeps", vec![Some(1.234_567_89), Some(123.456_789), Some(0.5)]),
                Column::integers("size", "", vec![Some(8), Some(-3), None]),
                Column::texts("flags", vec![Some("bad-fit;new-thing".into()), Some(String::new()), None]),
            ],
        };
        let unknown = "<span class=\"unknown\" title=\"not known\">–</span>";
        assert_eq!(cells(&table, "temperature"), ["2.20", "2.25", unknown]);
        assert_eq!(cells(&table, "value"), ["0.1235", "\u{2212}0.5", "1"]);
        assert_eq!(cells(&table, "error"), ["0.0012", unknown, "0"]);
        assert_eq!(cells(&table, "tau"), ["1.2346", "123.46", "0.5"]);
        assert_eq!(cells(&table, "size"), ["8", "\u{2212}3", unknown]);
        assert_eq!(cells(&table, "flags")[0], "bad fit; new thing");
        let flagged = super::super::Flagged::of(&table);
        assert_eq!(flagged.flags, [("bad-fit".to_owned(), 1), ("new-thing".to_owned(), 1)]);
        assert_eq!(flagged.rows, 3);
    }
}
