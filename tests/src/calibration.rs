//! Are errors what they say? Many independent repetitions of small pipelines whose answers are exact, through the whole program.
//!
//! Repetitions are points of one pipeline that differ by 1e-9 in temperature or coupling: their streams have nothing in common, since the
//! stream key contains both, and their answers differ by a millionth of an error.

#[allow(dead_code, reason = "shared by the tests of several crates")]
#[path = "../reference/table.rs"]
mod table;

use crate::program::Desk;
use spinledger_terms::Table;
use std::collections::BTreeMap;
use table::Table as Reference;

/// 2/ln(1 + sqrt 2) (Onsager 1944).
pub const CRITICAL: f64 = 2.269_185_314_213_022;

/// Value of the cumulant at crossings of large sizes with periodic boundaries (Kamieniarz & Bloete 1993 J. Phys. A 26 201).
pub const CROSSING_VALUE: f64 = 0.610_690_1;

/// Deviations from exact values in standard errors.
#[derive(Clone, Debug, Default)]
pub struct Pulls {
    /// One a repetition.
    pub all: Vec<f64>,
    /// Flags of the rows they come from, by word.
    pub flags: BTreeMap<String, usize>,
}

impl Pulls {
    fn add(&mut self, value: f64, error: f64, exact: f64, flags: &str) {
        self.all.push((value - exact) / error);
        self.flag(flags);
    }

    fn flag(&mut self, flags: &str) {
        for word in flags.split(';').filter(|word| !word.is_empty()) {
            *self.flags.entry(word.to_owned()).or_default() += 1;
        }
    }

    /// The mean, 0 where estimates are without bias.
    pub fn mean(&self) -> f64 {
        self.all.iter().sum::<f64>() / self.all.len() as f64
    }

    /// Standard deviation, 1 where errors are honest and smaller where they are too large.
    pub fn width(&self) -> f64 {
        let mean = self.mean();
        (self.all.iter().map(|pull| (pull - mean) * (pull - mean)).sum::<f64>() / (self.all.len() as f64 - 1.0)).sqrt()
    }

    /// Largest deviation.
    pub fn largest(&self) -> f64 {
        self.all.iter().fold(0.0, |most, pull| most.max(pull.abs()))
    }
}

/// Exact averages by size, temperature and quantity.
fn exact() -> Vec<(u64, f64, &'static str, f64)> {
    let mut exact = Vec::new();
    let kaufman = Reference::parse(include_str!("../reference/kaufman_finite.csv"));
    for row in kaufman.rows().filter(|row| row.text("nx") == row.text("ny")) {
        let (size, t) = (row.number("nx") as u64, row.number("T"));
        if size != 4 {
            exact.push((size, t, "energy", row.number("energy")));
            exact.push((size, t, "heat_capacity", row.number("specific_heat")));
        }
    }
    let cumulants = Reference::parse(include_str!("../reference/binder_finite.csv"));
    for row in cumulants.rows().filter(|row| row.text("L") != "4") {
        let size = row.number("L") as u64;
        exact.push((size, CRITICAL, "magnetisation_squared", row.number("m2")));
        exact.push((size, CRITICAL, "binder", row.number("binder_u4")));
    }
    let small = Reference::parse(include_str!("../reference/small_system_observables.csv"));
    for row in small.rows().filter(|row| row.text("system") == "square_4x4_periodic") {
        let t = row.number("T");
        let (abs, squared) = (row.number("abs_m"), row.number("m2"));
        exact.push((4, t, "energy", row.number("energy")));
        exact.push((4, t, "heat_capacity", row.number("specific_heat")));
        exact.push((4, t, "magnetisation_abs", abs));
        exact.push((4, t, "magnetisation_squared", squared));
        exact.push((4, t, "binder", row.number("binder_u4")));
        exact.push((4, t, "susceptibility", 16.0 * (squared - abs * abs) / t));
    }
    exact
}

/// Points to repeat, and how.
#[derive(Clone, Copy, Debug)]
pub struct Averages<'a> {
    /// The rule, as written in a pipeline.
    pub update: &'a str,
    /// Sizes of squares.
    pub sizes: &'a [u64],
    /// Temperatures; those that the references have.
    pub temperatures: &'a [f64],
    /// Measurements of each of four chains.
    pub measure: u64,
}

fn list<T: std::fmt::Display>(values: impl Iterator<Item = T>) -> String {
    values.map(|value| value.to_string()).collect::<Vec<_>>().join(", ")
}

fn number(table: &Table, name: &str, row: usize) -> Option<f64> {
    table.column(name).and_then(|column| column.cells.number(row))
}

/// Deviations of `averages` by quantity and point.
///
/// # Panics
/// Where the program fails or a value is missing.
pub fn averages(case: &Averages<'_>, repetitions: usize) -> BTreeMap<(String, String), Pulls> {
    let temperatures = case.temperatures.iter().flat_map(|t| (0..repetitions).map(move |k| t + 1e-9 * k as f64));
    let text = format!(
        "spinledger: 1
pipeline: calibration
seed: 20261201
steps:
  chains:
    does: sample
    lattice: {{ plugin: square, size: 8 }}
    model: ising
    update: {}
    observe: [energy, magnetisation]
    scan: {{ lattice.size: [{}], temperature: [{}] }}
    equilibrate: 1000
    measure: {}
    chains: 4
  means: {{ does: averages, of: chains }}
",
        case.update,
        list(case.sizes.iter()),
        list(temperatures),
        case.measure
    );
    let desk = Desk::new();
    desk.write("calibration.yaml", &text);
    desk.run_pipeline("calibration.yaml", &[], 0);
    let table = desk.table("results/calibration/means.parquet");
    let mut pulls: BTreeMap<(String, String), Pulls> = BTreeMap::new();
    let exact = exact();
    for row in 0..table.rows() {
        let quantity = table.text("quantity", row).unwrap_or_default();
        let (size, t) = (number(&table, "size", row), number(&table, "temperature", row));
        let (size, t) = (size.expect("a size") as u64, t.expect("a temperature"));
        let Some((_, t, _, exact)) =
            exact.iter().find(|(l, near, of, _)| *l == size && (near - t).abs() < 1e-6 && *of == quantity)
        else {
            continue;
        };
        let (value, error) = (number(&table, "value", row), number(&table, "error", row));
        let own = pulls.entry((quantity.to_owned(), format!("{size} x {size} at {t:.3}"))).or_default();
        let flags = table.text("flags", row).unwrap_or_default();
        own.add(value.expect("a value"), error.expect("an error"), *exact, flags);
    }
    assert!(pulls.values().all(|pulls| pulls.all.len() == repetitions), "a point for each repetition");
    pulls
}

/// A scan whose crossing is looked for, and how often.
#[derive(Clone, Copy, Debug)]
pub struct Crossings<'a> {
    /// Name for the table.
    pub name: &'a str,
    /// Sizes of squares.
    pub sizes: &'a [u64],
    /// Lowest and highest temperature and their number.
    pub temperatures: (f64, f64, usize),
    /// Measurements of each of four chains.
    pub measure: u64,
}

/// Deviations of the critical temperature and of the value at the crossing.
#[derive(Clone, Debug, Default)]
pub struct Crossed {
    /// Of the critical temperature.
    pub place: Pulls,
    /// Of the cumulant.
    pub value: Pulls,
    /// Mean error of the critical temperature.
    pub error: f64,
    /// Repetitions without a value.
    pub missing: usize,
}

/// Deviations of `crossing`.
///
/// # Panics
/// Where the program fails.
pub fn crossings(case: &Crossings<'_>, repetitions: usize) -> Crossed {
    let (from, to, count) = case.temperatures;
    let text = format!(
        "spinledger: 1
pipeline: calibration
seed: 20261201
steps:
  chains:
    does: sample
    lattice: {{ plugin: square, size: 8 }}
    model: {{ plugin: ising, coupling: 1 }}
    update: {{ plugin: wolff, clusters: 2 }}
    observe: [energy, magnetisation]
    scan:
      lattice.size: [{}]
      model.coupling: [{}]
      temperature: {{ from: {from}, to: {to}, count: {count} }}
    equilibrate: 300
    measure: {}
    chains: 4
  tc: {{ does: crossing, of: chains }}
",
        list(case.sizes.iter()),
        list((0..repetitions).map(|k| 1.0 + 1e-9 * k as f64)),
        case.measure
    );
    let desk = Desk::new();
    desk.write("calibration.yaml", &text);
    desk.run_pipeline("calibration.yaml", &[], 0);
    let table = desk.table("results/calibration/tc.parquet");
    let mut crossed = Crossed::default();
    for row in 0..table.rows() {
        let (pulls, exact) = match table.text("quantity", row) {
            Some("critical_temperature") => (&mut crossed.place, CRITICAL),
            Some("crossing_value") => (&mut crossed.value, CROSSING_VALUE),
            _ => continue,
        };
        let flags = table.text("flags", row).unwrap_or_default();
        match (number(&table, "value", row), number(&table, "error", row)) {
            (Some(value), Some(error)) => {
                pulls.add(value, error, exact, flags);
                if exact == CRITICAL {
                    crossed.error += error / repetitions as f64;
                }
            }
            _ => {
                pulls.flag(flags);
                crossed.missing += usize::from(exact == CRITICAL);
            }
        }
    }
    assert_eq!(crossed.place.all.len() + crossed.missing, repetitions, "a crossing for each repetition");
    crossed
}
