//! Pipelines that cannot settle say so: in the tables, at the end of the run, on the page, and in the verdict, which is `undecided` and no failure.

use spinledger_terms::Table;
use spinledger_tests::program::{Desk, Ran};

/// Runs a pipeline in words and expects status 0: nothing broke, nothing disagrees.
fn run(desk: &Desk, name: &str, text: &str) -> Ran {
    desk.write(&format!("{name}.yaml"), text);
    let ran = desk.run(&["run", &format!("{name}.yaml")]);
    assert_eq!(ran.status, Some(0), "{name}: {}\n{}", ran.out, ran.err);
    ran
}

fn flags(table: &Table, row: usize) -> Vec<&str> {
    table.text("flags", row).expect("flags").split(';').filter(|flag| !flag.is_empty()).collect()
}

/// Every comparison is undecided for want of what `flag` says; the terminal and the page say it.
fn is_told(desk: &Desk, name: &str, ran: &Ran, flag: &str, terminal: &str, page: &str) {
    let held = desk.table(&format!("results/{name}/held.parquet"));
    assert!(held.rows() > 0);
    for row in 0..held.rows() {
        let verdict = (held.text("name", row), held.text("verdict", row));
        assert_eq!(verdict.1, Some("undecided"), "{name}: {verdict:?} {}", ran.out);
        assert!(flags(&held, row).contains(&flag), "{name}: {verdict:?}: {:?}", flags(&held, row));
    }
    let (_, end) = ran.out.split_once("not settled: ").unwrap_or_else(|| panic!("{name}: {}", ran.out));
    assert!(end.contains(terminal), "{name}: {}", ran.out);
    assert!(ran.out.contains("undecided"), "{name}: {}", ran.out);
    let html = std::fs::read_to_string(desk.path(&format!("results/{name}/page.html"))).expect("a page");
    let (_, settled) = html.split_once("What is not settled").expect("the page has that part");
    assert!(settled.contains(page), "{name}: the page does not say that {page}");
}

/// A large lattice quenched from infinite temperature to well below ordering: domains grow as the root of time and would meet their walls only after
/// some 10^5 sweeps. Whatever sweeps are left out, however the chains start, the energy is not that of equilibrium, and no run here is long enough to pretend.
#[test]
fn a_quench_that_does_not_equilibrate() {
    let (flag, terminal) = ("not-equilibrated", "have not forgotten where they began");
    let page = "the chains have not forgotten where they began";
    let forms = [
        // Every chain is one drift, and its autocorrelation time as long as itself.
        ("early", "start: random\n    equilibrate: 20\n    measure: 100"),
        ("late", "start: random\n    equilibrate: 600\n    measure: 100"),
        ("automatic", "start: random\n    equilibrate: auto\n    measure: 300"),
        ("both", "start: both\n    equilibrate: 100\n    measure: 100"),
        ("both-automatic", "start: both\n    measure: 200"),
    ];
    for (name, how) in forms {
        let desk = Desk::new();
        let text = format!(
            "spinledger: 1
pipeline: {name}
seed: 20261201
steps:
  quench:
    does: sample
    lattice: {{ plugin: square, size: 256 }}
    model: ising
    update: metropolis
    observe: [energy, magnetisation]
    temperature: 1.5
    {how}
  means: {{ does: averages, of: quench }}
  held:
    does: compare
    items:
      - take: {{ step: means, quantity: energy }}
        against: {{ value: -1.9509, error: 0.0001, source: Onsager 1944 }}
        within: 1000
      - take: {{ step: means, quantity: magnetisation_abs }}
        against: {{ value: 0.9865, error: 0.0001, source: Yang 1952 }}
        within: 1000
  page: {{ does: report, of: [means, held] }}
"
        );
        let ran = run(&desk, name, &text);
        let means = desk.table(&format!("results/{name}/means.parquet"));
        for row in 0..means.rows() {
            let (quantity, flags) = (means.text("quantity", row), flags(&means, row));
            // A signed magnetisation is not judged for equilibration, but that it says nothing is said.
            assert!(!flags.is_empty(), "{name}: {quantity:?} is not flagged");
        }
        is_told(&desk, name, &ran, flag, terminal, page);
    }
}

/// Runs far apart with nothing between: the curve in the gap, and a crossing that lies there.
#[test]
fn histograms_with_a_gap_between_them() {
    let desk = Desk::new();
    let text = "spinledger: 1
pipeline: gap
seed: 20261201
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: 16 }
    model: ising
    update: { plugin: wolff, clusters: 3 }
    observe: [energy, magnetisation]
    scan: { lattice.size: [24, 32, 40, 48], temperature: [1.8, 3.1] }
    equilibrate: 300
    measure: 3000
  curves: { does: reweight, of: chains, temperature: { from: 1.8, to: 3.1, count: 27 } }
  tc: { does: crossing, of: curves }
  held:
    does: compare
    items:
      - name: in the gap
        take: { step: curves, quantity: energy, where: { size: 32, temperature: 2.4 } }
        against: { value: -1.204, error: 0.01, source: Onsager 1944 }
        within: 1000
      - name: ordering
        take: { step: tc, quantity: critical_temperature }
        against: { value: 2.269185314213, source: Onsager 1944 }
        within: 1000
  page: { does: report, of: [curves, tc, held] }
";
    let ran = run(&desk, "gap", text);
    is_told(
        &desk,
        "gap",
        &ran,
        "poor-overlap",
        "hardly overlap",
        "histograms of neighbouring temperatures hardly overlap",
    );
    let tc = desk.table("results/gap/tc.parquet");
    assert!((0..tc.rows()).all(|row| !flags(&tc, row).is_empty()), "{tc:?}");
}

/// Windows on either side of the transition, near and far, with crossings of series and of curves. Far above it every cumulant is zero within its noise, far
/// below two thirds: crossings of noise are none.
#[test]
fn sizes_that_do_not_cross() {
    let windows = [
        ("below", "{ from: 1.6, to: 2.0, count: 5 }"),
        ("near-below", "{ from: 2.0, to: 2.15, count: 4 }"),
        ("near-above", "{ from: 2.5, to: 2.8, count: 4 }"),
        ("above", "{ from: 3.0, to: 3.6, count: 4 }"),
        ("far-above", "{ from: 5, to: 6, count: 5 }"),
    ];
    for (name, window) in windows {
        let desk = Desk::new();
        let text = format!(
            "spinledger: 1
pipeline: {name}
seed: 20261201
steps:
  chains:
    does: sample
    lattice: {{ plugin: square, size: 16 }}
    model: ising
    update: [heat-bath, {{ plugin: wolff, clusters: 2 }}]
    observe: [energy, magnetisation]
    scan: {{ lattice.size: [8, 12, 16, 24], temperature: {window} }}
    equilibrate: 200
    measure: 2000
    start: ordered
  curves: {{ does: reweight, of: chains, temperature: {window} }}
  tc: {{ does: crossing, of: chains }}
  tcs: {{ does: crossing, of: curves }}
  held:
    does: compare
    items:
      - take: {{ step: tc, quantity: critical_temperature }}
        against: {{ value: 2.269185314213, source: Onsager 1944 }}
        within: 1000
      - take: {{ step: tcs, quantity: critical_temperature }}
        against: {{ value: 2.269185314213, source: Onsager 1944 }}
        within: 1000
  page: {{ does: report, of: [tc, tcs, held] }}
"
        );
        let ran = run(&desk, name, &text);
        is_told(&desk, name, &ran, "no-crossing", "two sizes do not cross", "curves of two sizes do not cross");
        for step in ["tc", "tcs"] {
            let tc = desk.table(&format!("results/{name}/{step}.parquet"));
            for row in 0..tc.rows() {
                assert!(flags(&tc, row).contains(&"no-crossing"), "{name}, {step}: {:?}", tc.text("quantity", row));
            }
        }
    }
}
