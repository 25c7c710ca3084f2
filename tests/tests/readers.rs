//! Every table is read by pyarrow, polars and duckdb, with units and key in the metadata; and by the lines that README shows.

use spinledger_tests::program::{Desk, top};
use std::process::Command;

/// The Python of the tests' own environment; `tests/all` makes it and names it.
fn python() -> std::path::PathBuf {
    std::env::var_os("SPINLEDGER_PYTHON").map_or_else(|| top().join(".venv/bin/python"), std::path::PathBuf::from)
}

#[test]
fn other_programs_read_every_table() {
    let desk = Desk::new();
    // An invented layered magnet, in meV and kelvin, so that there are units.
    desk.write(
        "units.yaml",
        r#"spinledger: 1
pipeline: units
seed: 5
units: meV
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: [4, 6], boundary: [periodic, free] }
    model: { plugin: ising, coupling: 2.0, field: 0.1 }
    update: metropolis
    observe: [energy, magnetisation]
    scan: { temperature: [40, 60], model.field: [0.1, 0.2] }
    equilibrate: 20
    measure: 500
    chains: 2
    start: both
  sizes:
    does: sample
    lattice: { plugin: square, size: 4 }
    model: { plugin: ising, coupling: 2.0 }
    update: wolff
    observe: [energy, magnetisation]
    scan: { lattice.size: [4, 6, 8, 12], temperature: [48, 50, 52, 54, 56, 58, 60] }
    equilibrate: 100
    measure: 4000
  means: { does: averages, of: chains }
  tc: { does: crossing, of: sizes }
  held:
    does: compare
    items:
      - take: { step: tc, quantity: critical_temperature }
        against: { value: 52.665, source: "2.269185 J/k_B with J = 2 meV: Onsager 1944" }
"#,
    );
    let ran = desk.run(&["run", "units.yaml"]);
    assert!(ran.status == Some(0), "{}{}", ran.out, ran.err);
    let script = top().join("tests/readers.py");
    let output = Command::new(python()).arg(script).arg(desk.path("results/units")).output();
    let output = output.expect("Python runs: `tests/all` makes its environment");
    let said = format!("{}{}", String::from_utf8_lossy(&output.stdout), String::from_utf8_lossy(&output.stderr));
    assert!(output.status.success(), "{said}");
}
