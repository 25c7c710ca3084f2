//! Units: the same physics written in tesla or as energies, in meV and kelvin or reduced, is the same numbers.

use spinledger_exact::closed::ring;
use spinledger_ledger::read_table;
use spinledger_terms::Table;
use spinledger_tests::program::Desk;

/// k_B in meV/K: 1.380649e-23 J/K over 1.602176634e-22 J/meV, exact in the SI of 2019, rounded to a double.
const BOLTZMANN: f64 = 0.086_173_332_621_451_77;

/// A ring of 8 spins.
#[derive(Clone, Copy)]
struct Study<'a> {
    units: &'a str,
    coupling: f64,
    field: &'a str,
    temperature: f64,
    measure: u64,
}

impl Study<'_> {
    /// Runs it; series of the chains and averages, and the desk that they are on.
    fn run(&self) -> (Vec<Table>, Table, Desk) {
        let Study { units, coupling, field, temperature, measure } = self;
        let desk = Desk::new();
        desk.write(
            "units.yaml",
            &format!(
                r#"spinledger: 1
pipeline: units
title: A ring
seed: 5
units: {units}
steps:
  chains:
    does: sample
    lattice: {{ plugin: chain, size: 8 }}
    model: {{ plugin: ising, coupling: {coupling:?} }}
    update: {{ plugin: heat-bath }}
    observe: [energy, magnetisation]
    temperature: {temperature:?}
    scan: {{ model.field: [{field}] }}
    equilibrate: 50
    measure: {measure}
    chains: 2
  means: {{ does: averages, of: chains }}
"#
            ),
        );
        desk.run_pipeline("units.yaml", &[], 0);
        let files = desk.parquet("results/units/chains");
        let series: Vec<Table> = files
            .keys()
            .map(|name| read_table(&desk.path("results/units/chains").join(name)).expect("a table of the results"))
            .collect();
        assert!(!series.is_empty());
        let means = desk.table("results/units/means.parquet");
        (series, means, desk)
    }
}

/// Values of a column, one file after the other.
fn values(series: &[Table], column: &str) -> Vec<f64> {
    let of = |table: &Table| table.numbers(column).unwrap_or_else(|| panic!("a column `{column}`"));
    series.iter().flat_map(of).map(|value| value.expect("no gaps")).collect()
}

fn unit<'a>(table: &'a Table, column: &str) -> &'a str {
    &table.column(column).unwrap_or_else(|| panic!("a column `{column}`")).unit
}

/// Value and error of a quantity.
fn mean(means: &Table, quantity: &str) -> [f64; 2] {
    let row = (0..means.rows()).find(|row| means.text("quantity", *row) == Some(quantity)).expect("a row");
    ["value", "error"].map(|column| means.column(column).and_then(|c| c.cells.number(row)).expect("a number"))
}

fn near(a: f64, b: f64) -> bool {
    (a - b).abs() <= 1e-12 * a.abs().max(b.abs())
}

#[test]
fn a_field_in_tesla_is_the_same_field_as_an_energy() {
    // 0.7 T on three Bohr magnetons (CODATA 2018), in meV and in K.
    for (word, joule) in [("meV", 1.602_176_634e-22), ("K", 1.380_649e-23)] {
        let energy = 0.7 * (3.0 * (9.274_010_078_3e-24 / joule));
        let tesla = format!("{{ energy: {word}, moment: 3.0 }}");
        let study = Study { units: &tesla, coupling: 0.4, field: "0.7", temperature: 5.0, measure: 500 };
        let (in_tesla, in_tesla_means, _desk) = study.run();
        let (as_energy, as_energy_means, _desk) = Study { units: word, field: &format!("{energy:?}"), ..study }.run();
        for column in ["energy", "magnetisation"] {
            let (one, other) = (values(&in_tesla, column), values(&as_energy, column));
            assert_eq!(one.len(), 1000);
            assert!(one == other, "{word}: {column}");
        }
        for quantity in ["energy", "heat_capacity", "susceptibility", "magnetisation_abs"] {
            assert_eq!(mean(&in_tesla_means, quantity), mean(&as_energy_means, quantity), "{word}: {quantity}");
        }
        assert_eq!((unit(&in_tesla[0], "field"), unit(&as_energy[0], "field")), ("T", word));
        assert_eq!((unit(&in_tesla[0], "energy"), unit(&in_tesla[0], "temperature")), (word, "K"));
        assert!(values(&in_tesla, "field").iter().all(|field| *field == 0.7), "columns keep what people wrote");
    }
}

#[test]
fn a_field_does_what_it_should() {
    // Strong against the couplings: every spin by itself, <s> = tanh(mu B/k_B T).
    let units = "{ energy: meV, moment: 3.0 }";
    let study = Study { units, coupling: 1e-9, field: "2", temperature: 4.0, measure: 20_000 };
    let (_, means, _desk) = study.run();
    let [m, error] = mean(&means, "magnetisation");
    let ratio: f64 = 3.0 * 9.274_010_078_3e-24 * 2.0 / (1.380_649e-23 * 4.0);
    let expected = ratio.tanh();
    assert!((m - expected).abs() < 5.0 * error && error < 0.005, "{m} +- {error}, and {expected}");
}

#[test]
fn units_of_energy_scale() {
    // 20 K, and k_B times as much in units of a coupling of 1 meV: one inverse temperature to the bit, and so the same random numbers.
    let temperature = BOLTZMANN * 20.0;
    let reduced = Study { units: "reduced", coupling: 1.0, field: "0.25", temperature, measure: 500 };
    let (series, means, _desk) = reduced.run();
    for (units, temperature) in [("K", temperature), ("meV", 20.0)] {
        let (same, same_means, _desk) = Study { units, temperature, ..reduced }.run();
        for column in ["energy", "magnetisation"] {
            assert!(values(&series, column) == values(&same, column), "{units}: {column}");
        }
        for quantity in ["energy", "magnetisation", "binder"] {
            assert_eq!(mean(&means, quantity), mean(&same_means, quantity), "{units}: {quantity}");
        }
        // What is divided by the temperature: in energy units for heat capacity and susceptibility.
        for quantity in ["heat_capacity", "susceptibility"] {
            let [a, b] = [mean(&means, quantity), mean(&same_means, quantity)];
            assert!(near(a[0], b[0]) && near(a[1], b[1]), "{units}: {quantity}: {a:?} and {b:?}");
        }
        assert!(values(&same, "temperature").iter().all(|t| *t == temperature));
        assert_eq!((unit(&same[0], "energy"), unit(&same[0], "field")), (units, units));
    }
    assert_eq!((unit(&series[0], "energy"), unit(&series[0], "temperature"), unit(&series[0], "field")), ("", "", ""));
}

/// Couplings and temperatures in meV and K give the closed form's energy, in meV.
#[test]
fn energies_of_a_ring_in_mev() {
    let (coupling, field, temperature) = (2.5, 0.75, 40.0);
    let study = Study { units: "meV", coupling, field: "0.75", temperature, measure: 20_000 };
    let (series, means, _desk) = study.run();
    let beta = 1.0 / (BOLTZMANN * temperature);
    let exact = ring(8, coupling * beta, field * beta);
    let [energy, error] = mean(&means, "energy");
    let expected = -coupling * exact.neighbour_correlation - field * exact.magnetisation;
    assert!((energy - expected).abs() < 5.0 * error && error < 0.02, "{energy} +- {error}, and {expected}");
    assert_eq!(unit(&series[0], "energy"), "meV");
}
