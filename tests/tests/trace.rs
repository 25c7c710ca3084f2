//! What made a result: short whatever the number of points, complete where that is asked for.

use spinledger_ledger::Ledger;
use spinledger_tests::program::Desk;
use std::collections::BTreeSet;

const TEXT: &str = "\
spinledger: 1
pipeline: traced
seed: 11
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: 4 }
    model: { plugin: ising, coupling: 1.5 }
    update: { plugin: wolff, clusters: 2 }
    observe: [energy, magnetisation]
    scan:
      lattice.size: [4, 5, 6, 7]
      temperature: { from: 3.2, to: 3.6, count: 5 }
    equilibrate: 10
    measure: 300
    chains: 3
  means: { does: averages, of: chains }
  tc: { does: crossing, of: chains }
  look:
    does: compare
    items:
      - { take: { step: tc, quantity: critical_temperature }, against: { value: 3.4, source: \"a guess\" } }
      - { take: { step: means, quantity: energy, where: { size: 4, temperature: 3.2 } }, against: { lower: -3, upper: 0 } }
";

fn desk() -> Desk {
    let desk = Desk::new();
    desk.write("traced.yaml", TEXT);
    let ran = desk.run(&["run", "traced.yaml", "--quiet"]);
    assert!(ran.status.is_some_and(|status| status < 2), "{}", ran.err);
    desk
}

fn trace(desk: &Desk, args: &[&str]) -> String {
    let ran = desk.run(&[&["trace"], args].concat());
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    ran.out
}

/// Twenty points, or one: a line each for what is alike, and what matters of it.
#[test]
fn a_step_is_a_level() {
    let desk = desk();
    let out = trace(&desk, &["results/traced/look.parquet"]);
    assert!(out.lines().count() <= 40, "{out}");
    for wanted in [
        "compare ",
        "`- items.1.take: averages.gathered ",
        "+- items.0.take: crossing ",
        "20 averages, ",
        "of: 20 series: size 4 to 7 (4), temperature 3.2 to 3.6 (5), 3 chains x 300 rows, ",
        "lattice square: boundary periodic, size 4 to 7 (4)",
        "model ising: coupling 1.5",
        "update wolff: clusters 2",
        "seed 11",
        "streams xoshiro256++ version 1",
        "cluster-updates/wolff revision 1",
        "made by spinledger 0.1.0",
        "source a guess",
        "tables main (2 rows, content ",
        "pipeline texts/",
    ] {
        assert!(out.contains(wanted), "{wanted} in\n{out}");
    }
    assert_eq!(out.matches("lattice square").count(), 1, "what was told is not told again:\n{out}");
    assert_eq!(out.matches("(above)").count(), 1, "{out}");
    let one = trace(&desk, &["results/traced/chains/size-4_temperature-3.2.parquet"]);
    assert!(one.starts_with("series ") && one.contains("size 4, temperature 3.2, 3 chains x 300 rows"), "{one}");
}

/// `--all` and `--json` leave nothing out.
#[test]
fn everything_can_be_had() {
    let desk = desk();
    let all = trace(&desk, &["results/traced/look.parquet", "--all"]);
    assert_eq!(all.matches("chain 2 block 0: block 0 of chain").count(), 20, "{all}");
    let json = trace(&desk, &["results/traced/look.parquet", "--json"]);
    let keys: Vec<String> = json
        .lines()
        .map(|line| serde_json::from_str::<serde_json::Value>(line).unwrap()["key"].as_str().unwrap().to_owned())
        .collect();
    // 60 blocks, 20 series, 20 averages, their gathered table, a crossing, a comparison: inputs first.
    assert_eq!(keys.len(), 60 + 20 + 20 + 1 + 1 + 1);
    assert_eq!(keys.iter().collect::<BTreeSet<_>>().len(), keys.len());
    let ledger = Ledger::open(&desk.path(".spinledger")).unwrap();
    let top = ledger.read_record(&keys.last().unwrap().parse().unwrap()).unwrap();
    assert_eq!(top.kind, "compare");
}

/// Records that are gone are counted, once each, and the status says so.
#[test]
fn missing_records_are_told() {
    let desk = desk();
    let ledger = Ledger::open(&desk.path(".spinledger")).unwrap();
    let lines = ledger.index().unwrap();
    let blocks: Vec<_> = lines.lines().filter(|line| line.kind == "block").take(3).map(|line| line.key).collect();
    for key in &blocks {
        std::fs::remove_dir_all(ledger.entry(key)).unwrap();
    }
    for how in [&[][..], &["--json"], &["--all"]] {
        let ran = desk.run(&[&["trace", "results/traced/look.parquet"], how].concat());
        assert_eq!(ran.status, Some(1), "{how:?}");
        assert!(ran.err.contains("3 records not in the ledger"), "{how:?}: {}", ran.err);
    }
}

#[test]
fn a_trace_fits_the_terminal() {
    let desk = desk();
    for width in [40, 60, 120] {
        let shown = desk.at_terminal(&["trace", "results/traced/look.parquet"], width);
        assert_eq!(shown.status, Some(0));
        let lines = shown.lines();
        assert!(lines.iter().all(|line| line.chars().count() <= usize::from(width)), "{width}: {lines:#?}");
    }
}
