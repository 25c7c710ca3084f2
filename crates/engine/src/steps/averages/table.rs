//! The tables of `averages`.

use super::family::{Member, Quantity};
use crate::steps::flags_text;
use spinledger_stats::autocorrelation::Autocorrelation;
use spinledger_stats::equilibration::EquilibrationInfo;
use spinledger_terms::{Column, Table};

/// Most lags of a series in the table of autocorrelations.
const MOST_LAGS: usize = 1000;

/// A row.
pub(super) struct Row {
    pub(super) member: Member,
    pub(super) quantity: Quantity,
    pub(super) verdict: Option<EquilibrationInfo>,
    pub(super) flags: Vec<&'static str>,
}

impl Row {
    fn value(&self) -> Option<f64> {
        if let Quantity::Found(found) = &self.quantity { Some(found.value) } else { None }
    }

    fn error(&self) -> Option<f64> {
        if let Quantity::Found(found) = &self.quantity { Some(found.error) } else { None }
    }
}

/// A row for each quantity.
pub(super) fn main(rows: &[Row]) -> Table {
    let found = |row: &Row| if let Quantity::Found(found) = &row.quantity { Some(found.clone()) } else { None };
    Table {
        columns: vec![
            Column::texts("quantity", rows.iter().map(|r| Some(r.member.name.clone())).collect()),
            Column::numbers("value", "", rows.iter().map(Row::value).collect()),
            Column::numbers("error", "", rows.iter().map(Row::error).collect()),
            Column::numbers("tau", "sweeps", rows.iter().map(|r| found(r).map(|f| f.tau)).collect()),
            Column::numbers("effective", "", rows.iter().map(|r| found(r).and_then(|f| f.effective)).collect()),
            Column::booleans("equilibrated", rows.iter().map(|r| r.verdict.and_then(|v| v.equilibrated())).collect()),
            Column::numbers("spread", "", rows.iter().map(|r| r.verdict.and_then(|v| v.spread)).collect()),
            Column::texts("flags", rows.iter().map(|r| Some(flags_text(&r.flags))).collect()),
        ],
    }
}

/// A column for each quantity and one for its error.
pub(super) fn wide(rows: &[Row], energy_unit: &str) -> Table {
    let mut columns = Vec::new();
    for row in rows {
        let unit = match (row.member.unit, energy_unit) {
            ("energy", unit) => unit.to_owned(),
            ("1/energy", unit) if !unit.is_empty() => format!("1/{unit}"),
            _ => String::new(),
        };
        columns.push(Column::numbers(&row.member.name, &unit, vec![row.value()]));
        columns.push(Column::numbers(&format!("{}_error", row.member.name), &unit, vec![row.error()]));
    }
    let flags: Vec<&str> = rows.iter().flat_map(|row| row.flags.iter().copied()).collect();
    columns.push(Column::texts("flags", vec![Some(flags_text(&flags))]));
    Table { columns }
}

/// Autocorrelation functions.
#[derive(Default)]
pub(super) struct Correlations {
    quantity: Vec<Option<String>>,
    lag: Vec<Option<i64>>,
    rho: Vec<Option<f64>>,
    error: Vec<Option<f64>>,
    flags: Vec<Option<String>>,
}

impl Correlations {
    /// Adds those of a series, up to twice its window.
    pub(super) fn push(&mut self, name: &str, found: &Autocorrelation, every: u64) {
        let last = (2 * found.window).min(found.rho.len().saturating_sub(1)).min(MOST_LAGS);
        if found.rho.is_empty() {
            return;
        }
        let flags = if found.closed { String::new() } else { "few-samples".to_owned() };
        for lag in 0..=last {
            self.quantity.push(Some(name.to_owned()));
            self.lag.push(Some((lag as u64 * every) as i64));
            self.rho.push(Some(found.rho[lag]));
            self.error.push(Some(found.rho_error(lag)));
            self.flags.push(Some(flags.clone()));
        }
    }

    /// The table.
    pub(super) fn table(self) -> Table {
        Table {
            columns: vec![
                Column::texts("quantity", self.quantity),
                Column::integers("lag", "sweeps", self.lag),
                Column::numbers("rho", "", self.rho),
                Column::numbers("error", "", self.error),
                Column::texts("flags", self.flags),
            ],
        }
    }
}
