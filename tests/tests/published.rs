//! What the program finds against exact values: tori (Kaufman 1949), small systems by enumeration, cumulants at the critical point, the
//! infinite square lattice (Onsager 1944, Yang 1952), rings in a field (Ising 1925). Tables and sources are in tests/reference.
//!
//! Seeds are fixed. Each file of checks allows [`WIDE`] standard errors: with normal errors a sound program exceeds 4.8 in one value of 6e5, and
//! about 350 values are checked in all, so that the false-alarm rate of this file is 6e-4. The mean square of all deviations guards the other side.

#[path = "../reference/table.rs"]
mod table;

use spinledger_terms::Table;
use spinledger_tests::program::Desk;
use table::Table as Reference;

/// Standard errors that a value may be off.
const WIDE: f64 = 4.8;

const RULES: [&str; 4] = ["metropolis", "heat-bath", "wolff", "[heat-bath, { plugin: wolff, clusters: 3 }]"];

/// A pipeline with a sample step and its averages.
fn pipeline(name: &str, lattice: &str, model: &str, update: &str, scan: &str, more: &str) -> String {
    format!(
        r#"spinledger: 1
pipeline: {name}
seed: 20261201
steps:
  chains:
    does: sample
    lattice: {{ {lattice} }}
    model: {{ {model} }}
    update: {update}
    observe: [energy, magnetisation]
    scan: {{ {scan} }}
    equilibrate: 300
    chains: 4
    {more}
  means: {{ does: averages, of: chains }}
"#
    )
}

/// Runs it and reads the averages.
fn averages(text: &str) -> Table {
    let desk = Desk::new();
    desk.write("published.yaml", text);
    desk.run_pipeline("published.yaml", &[], 0);
    let name = text.lines().find_map(|line| line.strip_prefix("pipeline: ")).expect("a name");
    desk.table(&format!("results/{name}/means.parquet"))
}

/// Collects deviations in standard errors.
#[derive(Default)]
struct Deviations {
    all: Vec<f64>,
    far: Vec<String>,
}

impl Deviations {
    /// Takes the value of a quantity in the row of `column` = `at`.
    fn take(&mut self, averages: &Table, quantity: &str, column: &str, at: f64, exact: f64, what: &str) {
        let number = |name: &str, row: usize| averages.column(name).and_then(|c| c.cells.number(row));
        let row = (0..averages.rows())
            .find(|row| averages.text("quantity", *row) == Some(quantity) && number(column, *row) == Some(at))
            .unwrap_or_else(|| panic!("{what}: no {quantity} at {column} = {at}"));
        let (value, error) = (number("value", row).expect("a value"), number("error", row).expect("an error"));
        if error == 0.0 {
            assert!(
                (value - exact).abs() <= 1e-12 * exact.abs().max(1.0),
                "{what}: {quantity} is {value} without error, exactly {exact}"
            );
            return;
        }
        let deviation = (value - exact) / error;
        self.all.push(deviation);
        if deviation.abs() > WIDE {
            self.far.push(format!("{what}: {quantity} at {at}: {value} +- {error}, exactly {exact}: {deviation:.1}"));
        }
    }

    /// None is far off, and together they are neither too wide nor suspiciously narrow: the mean square of n normal deviations, of
    /// which at least a third are independent, leaves 1 +- 5 sqrt(6/n) once in 2e6.
    fn settle(self, least: usize) {
        assert!(self.far.is_empty(), "{}", self.far.join("\n"));
        assert!(self.all.len() >= least, "{} values were checked, {least} expected", self.all.len());
        let square = self.all.iter().map(|d| d * d).sum::<f64>() / self.all.len() as f64;
        let spread = 5.0 * (6.0 / self.all.len() as f64).sqrt();
        assert!(
            square < 1.0 + spread && square > (1.0 - spread).max(0.1),
            "mean square deviation {square} of {}",
            self.all.len()
        );
    }
}

#[test]
fn tori_have_kaufmans_energies() {
    let reference = Reference::parse(include_str!("../reference/kaufman_finite.csv"));
    let mut deviations = Deviations::default();
    for (size, rules) in [(16, &RULES[..3]), (32, &RULES[2..3])] {
        for rule in rules {
            let scan = "temperature: [2, 2.2, 2.3, 2.5, 3]";
            let text = pipeline(
                "kaufman",
                &format!("plugin: square, size: {size}"),
                "plugin: ising",
                rule,
                scan,
                "measure: 20000",
            );
            let averages = averages(&text);
            let side = size.to_string();
            for row in reference.rows().filter(|r| r.text("nx") == side && r.text("ny") == side) {
                let t = row.number("T");
                if [2.0, 2.2, 2.3, 2.5, 3.0].contains(&t) {
                    let what = format!("{size} x {size}, {rule}");
                    deviations.take(&averages, "energy", "temperature", t, row.number("energy"), &what);
                    deviations.take(&averages, "heat_capacity", "temperature", t, row.number("specific_heat"), &what);
                }
            }
        }
    }
    deviations.settle(40);
}

/// Small systems, with every boundary and rule, by complete enumeration.
#[test]
fn small_systems_have_enumerated_averages() {
    let systems = [
        ("square_4x4_periodic", "plugin: square, size: 4"),
        ("square_2x4_periodic_double", "plugin: square, size: [2, 4]"),
        ("square_3x3_free", "plugin: square, size: 3, boundary: free"),
        ("square_4x4_plus_ring", "plugin: square, size: 4, boundary: plus"),
        ("triangular_4x4_periodic", "plugin: triangular, size: 4"),
        ("cubic_2x2x3_free", "plugin: cubic, size: [2, 2, 3], boundary: free"),
    ];
    let reference = Reference::parse(include_str!("../reference/small_system_observables.csv"));
    let mut deviations = Deviations::default();
    for (number, (system, lattice)) in systems.into_iter().enumerate() {
        let rules = [RULES[number % 4], RULES[(number + 1) % 4]];
        for rule in rules {
            let text = pipeline(
                system,
                lattice,
                "plugin: ising",
                rule,
                "temperature: [1.5, 2.5, 4]",
                "measure: 20000\n    every: 2",
            );
            let averages = averages(&text);
            for row in reference.rows().filter(|r| r.text("system") == system) {
                let t = row.number("T");
                if ![1.5, 2.5, 4.0].contains(&t) {
                    continue;
                }
                let what = format!("{system}, {rule}");
                for (quantity, column) in [
                    ("energy", "energy"),
                    ("heat_capacity", "specific_heat"),
                    ("magnetisation_abs", "abs_m"),
                    ("magnetisation_squared", "m2"),
                    ("binder", "binder_u4"),
                ] {
                    deviations.take(&averages, quantity, "temperature", t, row.number(column), &what);
                }
                let susceptibility = {
                    let sites: f64 = if system.starts_with("cubic") {
                        12.0
                    } else if system.contains("3x3") {
                        9.0
                    } else if system.contains("2x4") {
                        8.0
                    } else {
                        16.0
                    };
                    sites * (row.number("m2") - row.number("abs_m").powi(2)) / t
                };
                deviations.take(&averages, "susceptibility", "temperature", t, susceptibility, &what);
            }
        }
    }
    deviations.settle(200);
}

/// Cumulants at the critical point, by exact transfer.
#[test]
fn critical_cumulants_are_exact() {
    let reference = Reference::parse(include_str!("../reference/binder_finite.csv"));
    let mut deviations = Deviations::default();
    for rule in ["{ plugin: wolff, clusters: 4 }", "{ plugin: metropolis, lanes: 64 }"] {
        let scan = "lattice.size: [4, 7, 8, 11], temperature: [2.269185314213022]";
        let measure = if rule.contains("lanes") { "measure: 20000\n    every: 2" } else { "measure: 20000" };
        let averages = averages(&pipeline("critical", "plugin: square, size: 4", "plugin: ising", rule, scan, measure));
        for row in reference.rows() {
            let size = row.number("L");
            if [4.0, 7.0, 8.0, 11.0].contains(&size) {
                let what = format!("critical {size}, {rule}");
                deviations.take(&averages, "magnetisation_squared", "size", size, row.number("m2"), &what);
                deviations.take(&averages, "binder", "size", size, row.number("binder_u4"), &what);
            }
        }
    }
    deviations.settle(16);
}

/// Far from the critical point a torus of 64 x 64 is the infinite lattice: corrections are of order exp(-L/xi), with L/xi above 20.
#[test]
fn the_infinite_lattice_is_onsagers_and_yangs() {
    let reference = Reference::parse(include_str!("../reference/onsager.csv"));
    let mut deviations = Deviations::default();
    let scan = "temperature: [1.5, 1.8, 3, 3.5]";
    let more = "measure: 10000\n    start: ordered";
    let averages =
        averages(&pipeline("infinite", "plugin: square, size: 64", "plugin: ising", "heat-bath", scan, more));
    for row in reference.rows() {
        let t = row.number("T");
        if [1.5, 1.8, 3.0, 3.5].contains(&t) {
            deviations.take(&averages, "energy", "temperature", t, row.number("energy"), "infinite");
            deviations.take(&averages, "heat_capacity", "temperature", t, row.number("specific_heat"), "infinite");
            if t < 2.0 {
                deviations.take(
                    &averages,
                    "magnetisation_abs",
                    "temperature",
                    t,
                    row.number("magnetisation"),
                    "infinite",
                );
            }
        }
    }
    deviations.settle(10);
}

/// Rings in a field: the sign and the size of the field.
#[test]
fn rings_in_a_field_are_exact() {
    let reference = Reference::parse(include_str!("../reference/chain_1d.csv"));
    let mut deviations = Deviations::default();
    for rule in ["metropolis", "heat-bath", "{ plugin: heat-bath, lanes: 64 }"] {
        for row in reference.rows().filter(|r| r.text("N") == "10" && r.number("h_over_T") != 0.0) {
            let (k, h) = (row.number("K"), row.number("h_over_T"));
            // In units of T: coupling K, field h, temperature 1.
            let model = format!("plugin: ising, coupling: {k}, field: {h}");
            let text = pipeline(
                "ring",
                "plugin: chain, size: 10",
                &model,
                rule,
                "temperature: [1]",
                "measure: 10000\n    every: 2",
            );
            let averages = averages(&text);
            let what = format!("ring, K = {k}, h = {h}, {rule}");
            deviations.take(&averages, "magnetisation", "temperature", 1.0, row.number("m"), &what);
        }
    }
    deviations.settle(18);
}

/// Three Potts colours on 3 x 3 sites by their density of states, at infinite temperature too; M is the size of the largest colour, so that the order
/// parameter is (3 M/9 - 1)/2.
#[test]
fn potts_colours_are_enumerated() {
    let reference = Reference::parse(include_str!("../reference/density_of_states.csv"));
    let mut deviations = Deviations::default();
    for rule in ["metropolis", "heat-bath", "wolff", "{ plugin: metropolis, lanes: 64 }"] {
        let scan = "inverse_temperature: [0, 0.4, 1.1]";
        let text = pipeline(
            "potts",
            "plugin: square, size: 3",
            "plugin: potts, q: 3",
            rule,
            scan,
            "measure: 10000\n    every: 2",
        );
        let averages = averages(&text.replace("[energy, magnetisation]", "[energy, order-parameter]"));
        for beta in [0.0, 0.4, 1.1] {
            let (mut z, mut energy, mut order) = (0.0, 0.0, 0.0);
            for row in reference.rows().filter(|r| r.text("system") == "potts3_3x3_periodic") {
                let weight = row.number("g") * (-beta * row.number("E")).exp();
                z += weight;
                energy += weight * row.number("E") / 9.0;
                order += weight * (3.0 * row.number("M") / 9.0 - 1.0) / 2.0;
            }
            let what = format!("potts, {rule}");
            deviations.take(&averages, "energy", "inverse_temperature", beta, energy / z, &what);
            deviations.take(&averages, "order", "inverse_temperature", beta, order / z, &what);
        }
    }
    deviations.settle(24);
}
