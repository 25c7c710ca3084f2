//! Reweighted curves against exact tori (Kaufman 1949), between and beyond the temperatures sampled, and what is said where histograms do not overlap.

use spinledger_exact::closed::torus;
use spinledger_terms::Table;
use spinledger_tests::calibration::CRITICAL;
use spinledger_tests::program::{Desk, number};
use std::collections::BTreeMap;

/// A pipeline with curves and their crossing.
fn pipeline(sizes: &str, temperatures: &str, curve: &str, more: &str) -> String {
    format!(
        "spinledger: 1
pipeline: curves
seed: 20261201
steps:
  chains:
    does: sample
    lattice: {{ plugin: square, size: 8 }}
    model: {{ plugin: ising, coupling: 1 }}
    update: {{ plugin: wolff, clusters: 2 }}
    observe: [energy, magnetisation]
    scan: {{ lattice.size: {sizes}, temperature: {temperatures}{more} }}
    equilibrate: 300
    measure: 2000
    chains: 4
  curves: {{ does: reweight, of: chains, temperature: {curve} }}
  tc: {{ does: crossing, of: curves }}
  onsager:
    does: compare
    items:
      - take: {{ step: tc, quantity: critical_temperature }}
        against: {{ value: 2.269185314213, error: 0 }}
"
    )
}

fn cell(table: &Table, name: &str, row: usize) -> f64 {
    table.column(name).and_then(|column| column.cells.number(row)).unwrap_or(f64::NAN)
}

/// What the curves of a size are like in one region of temperatures.
#[derive(Debug, Default)]
struct Region {
    sound: u32,
    poor: u32,
    squares: f64,
}

/// Eight repetitions (couplings that differ by 1e-9 have streams of their own) of two sizes, between the temperatures sampled, and beyond them on both sides.
/// Neighbouring points of a curve are not independent: they are worth some 60 values, of which a bound of 6 standard errors leaves room for errors 1.4
/// times too small at the edge of what is covered. A sound program exceeds it, or leaves 0.5 to 1.8 with the mean square, once in 10^4 streams.
#[test]
fn curves_are_kaufmans_as_far_as_coverage_says() {
    let desk = Desk::new();
    let couplings: Vec<String> = (0..8).map(|k| (1.0 + 1e-9 * f64::from(k)).to_string()).collect();
    let more = format!(", model.coupling: [{}]", couplings.join(", "));
    let curve = "{ from: 1.7, to: 3.3, count: 65 }";
    desk.write("curves.yaml", &pipeline("[16, 32]", "[2.15, 2.25, 2.35, 2.5]", curve, &more));
    let events = desk.run_pipeline("curves.yaml", &["--only", "curves"], 0);
    assert_eq!(events.counts_of("curves"), (16, 0, 0), "a parcel for each size and coupling");
    let table = desk.table("results/curves/curves.parquet");
    // By size: below what was sampled, between, above.
    let mut regions: [[Region; 3]; 2] = Default::default();
    // By size, side and coupling: how far from the sampled temperatures a curve is covered, and where it is flagged first.
    let mut ends: BTreeMap<(usize, usize, u64), (f64, f64)> = BTreeMap::new();
    for row in 0..table.rows() {
        let (size, t) = (cell(&table, "size", row), cell(&table, "temperature", row));
        let exact = torus(size as usize, size as usize, 1.0 / t);
        let exact = match table.text("quantity", row) {
            Some("energy") => exact.energy,
            Some("heat_capacity") => exact.heat_capacity,
            _ => continue,
        };
        let (which, side) = (usize::from(size == 32.0), usize::from(t >= 2.15) + usize::from(t > 2.5));
        let region = &mut regions[which][side];
        let flags = table.text("flags", row).expect("flags");
        assert!(flags.is_empty() || flags == "poor-overlap", "{size} at {t}: {flags}");
        assert!(!flags.is_empty() || cell(&table, "coverage", row) >= 100.0);
        let far = (2.15 - t).max(t - 2.5);
        let end = ends.entry((which, side, cell(&table, "coupling", row).to_bits())).or_insert((0.0, f64::INFINITY));
        if !flags.is_empty() {
            region.poor += 1;
            end.1 = end.1.min(far);
            continue;
        }
        end.0 = end.0.max(far);
        let deviation = (cell(&table, "value", row) - exact) / cell(&table, "error", row);
        assert!(deviation.abs() < 6.0, "{size} at {t}: {deviation} standard errors");
        region.squares += deviation * deviation;
        region.sound += 1;
    }
    let (mut squares, mut sound) = (0.0, 0);
    for (which, size) in [16, 32].into_iter().enumerate() {
        let [below, between, above] = &regions[which];
        assert!(between.sound >= 200 && between.poor == 0, "{size}: {between:?}");
        // The curve reaches beyond what was sampled on both sides, and in the end too far.
        for beyond in [below, above] {
            assert!(beyond.sound >= 40 && beyond.poor >= 40, "{size}: {beyond:?}");
        }
        for region in &regions[which] {
            squares += region.squares;
            sound += region.sound;
        }
    }
    // Beyond the first temperature that is not covered none is.
    for (at, (covered, flagged)) in ends.iter().filter(|((_, side, _), _)| *side != 1) {
        assert!(covered < flagged, "{at:?}: covered to {covered}, flagged from {flagged}");
    }
    let square = squares / f64::from(sound);
    assert!((0.5..1.8).contains(&square), "mean square deviation {square} of {sound}");
}

#[test]
fn crossings_of_curves_agree_with_onsager_and_order_does_not_matter() {
    let desk = Desk::new();
    let curve = "{ from: 2.2, to: 2.36, count: 81 }";
    desk.write("curves.yaml", &pipeline("[8, 12, 16, 24]", "[2.22, 2.27, 2.32]", curve, ""));
    let events = desk.run_pipeline("curves.yaml", &[], 0);
    assert_eq!(events.counts_of("curves"), (4, 0, 0));
    let tc = desk.table("results/curves/tc.parquet");
    let (value, error) = (number(&tc, "critical_temperature", "value"), number(&tc, "critical_temperature", "error"));
    assert!((value - CRITICAL).abs() < 4.0 * error && error < 0.01, "{value} {error}");
    assert_eq!(tc.text("flags", 0), Some(""));
    assert_eq!(desk.table("results/curves/onsager.parquet").text("verdict", 0), Some("agrees"));
    // The same points in another order.
    desk.write("curves.yaml", &pipeline("[24, 12, 8, 16]", "[2.32, 2.22, 2.27]", curve, ""));
    assert_eq!(desk.run_pipeline("curves.yaml", &[], 0).counts_of("curves"), (0, 4, 0));
    // One size more is one parcel more.
    desk.write("curves.yaml", &pipeline("[8, 12, 16, 20, 24]", "[2.22, 2.27, 2.32]", curve, ""));
    assert_eq!(desk.run_pipeline("curves.yaml", &[], 0).counts_of("curves"), (1, 4, 0));
}

#[test]
fn histograms_that_do_not_overlap_are_told_of() {
    let desk = Desk::new();
    let curve = "{ from: 1.7, to: 3.2, count: 76 }";
    desk.write("curves.yaml", &pipeline("[16, 24, 32, 40]", "[1.8, 3.1]", curve, ""));
    desk.run_pipeline("curves.yaml", &[], 0);
    let curves = desk.table("results/curves/curves.parquet");
    let flagged = |row: usize| curves.text("flags", row).is_some_and(|flags| flags.contains("poor-overlap"));
    for row in 0..curves.rows() {
        let t = cell(&curves, "temperature", row);
        assert!(flagged(row) || !(2.2..=2.6).contains(&t), "a value at {t} that nothing covers");
        assert!(!flagged(row) || ![1.8, 3.1].contains(&t), "a value at {t}, where there is a run");
    }
    let tc = desk.table("results/curves/tc.parquet");
    assert!(tc.text("flags", 0).is_some_and(|flags| flags.contains("poor-overlap")), "{:?}", tc.text("flags", 0));
    assert_eq!(desk.table("results/curves/onsager.parquet").text("verdict", 0), Some("undecided"));
}

#[test]
fn what_cannot_be_reweighted_is_said() {
    let desk = Desk::new();
    let text = pipeline("[4, 6]", "[2.2, 2.4]", "[2.3, 0]", "");
    desk.write("wrong.yaml", &text);
    let ran = desk.run(&["check", "wrong.yaml"]);
    assert_eq!(ran.status, Some(2));
    assert!(ran.err.contains("above 0"), "{}", ran.err);
    // Without the energy there are no histograms; without a magnetisation nothing that crosses.
    for (observe, complaint) in [("[magnetisation]", "needs `energy`"), ("[energy]", "magnetisation")] {
        let text = pipeline("[4, 6]", "[2.2, 2.4]", "[2.3, 2.35]", "").replace("[energy, magnetisation]", observe);
        desk.write("wrong.yaml", &text);
        let events = desk.run_pipeline("wrong.yaml", &[], 1);
        assert!(events.broken().iter().any(|message| message.contains(complaint)), "{:?}", events.broken());
    }
}
