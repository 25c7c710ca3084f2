//! What a run looks like at a terminal: a line at the bottom that fits, colours only where they are wanted, nothing of either elsewhere.

use spinledger_tests::program::Desk;

/// Runs for some seconds, has a step of each sort, one flagged result and one that disagrees.
const TEXT: &str = "\
spinledger: 1
pipeline: terminal
title: What a terminal shows
seed: 5
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: 64 }
    model: ising
    update: metropolis
    observe: [energy, magnetisation]
    scan: { temperature: [2.1, 2.2, 2.3, 2.4] }
    every: 8
    equilibrate: 5
    measure: 15000
    chains: 2
  means: { does: averages, of: chains }
  held:
    does: compare
    items:
      - { take: { step: means, quantity: energy, where: { temperature: 2.4 } }, against: { value: 7 } }
";

fn desk() -> Desk {
    let desk = Desk::new();
    desk.write("terminal.yaml", TEXT);
    desk
}

fn wide(text: &str) -> usize {
    text.chars().count()
}

/// Whatever is drawn fits: neither the line at the bottom nor anything else wraps, from 20 columns up.
#[test]
fn a_run_fits_the_terminal() {
    for width in [20, 24, 60, 120] {
        let shown = desk().at_terminal(&["run", "terminal.yaml", "--workers", "2"], width);
        assert_eq!(shown.status, Some(1), "{}", shown.raw);
        let too_wide: Vec<String> =
            shown.pieces().into_iter().filter(|piece| wide(piece.trim_end()) > usize::from(width)).collect();
        assert!(too_wide.is_empty(), "{width}: {too_wide:#?}");
        let drawn: Vec<String> =
            shown.pieces().into_iter().filter(|piece| piece.contains(" of 8") || piece.contains("/8")).collect();
        assert!(drawn.len() > 5, "{width}: the line at the bottom is drawn: {:#?}", shown.pieces());
        let lines = shown.lines();
        assert!(lines.iter().all(|line| !line.contains(" left |")), "{width}: nothing of the line stays: {lines:#?}");
        let end = lines.join(" ").split_whitespace().collect::<Vec<_>>().join(" ");
        for wanted in ["disagrees", "results in results/terminal", "not settled"] {
            assert!(end.contains(wanted), "{width}: {wanted} in {lines:#?}");
        }
        if width == 120 {
            let told = |words: &str| drawn.iter().any(|line| line.contains(words));
            assert!(
                told(" updates/s") && told("| chains size 64, temperature 2.") && told("then means, held"),
                "{drawn:#?}"
            );
            assert!(!drawn.iter().any(|line| line.contains(" ms left")), "{drawn:#?}");
        }
    }
}

#[test]
fn colours_are_for_those_who_want_them() {
    let shown = desk().at_terminal(&["run", "terminal.yaml", "--workers", "2"], 80);
    assert!(shown.raw.contains("\x1b[31m") && shown.raw.contains("\x1b[33m"), "{}", shown.raw);
    let desk = desk().with("NO_COLOR", "1");
    let shown = desk.at_terminal(&["run", "terminal.yaml", "--workers", "2"], 80);
    assert!(!shown.raw.contains('\x1b'), "{}", shown.raw);
    assert!(shown.raw.contains("disagrees"));
    let ran = desk.run(&["run", "terminal.yaml"]);
    assert!(!ran.out.contains('\x1b') && !ran.out.contains('\r'), "{}", ran.out);
    assert!(ran.out.lines().all(|line| wide(line) <= 80), "{}", ran.out);
}

/// Each flag of a result is told in a sentence, with what helps.
#[test]
fn what_is_not_settled_is_told_in_sentences() {
    let desk = Desk::new();
    desk.write("terminal.yaml", &TEXT.replace("measure: 15000", "measure: 30").replace("value: 7", "value: -1"));
    let ran = desk.run(&["run", "terminal.yaml"]);
    let all = ran.out.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(all.contains("not settled: means:"), "{}", ran.out);
    let wanted = "few-samples: there are too few independent measurements for an error that can be relied on (what helps: measure longer, or with another rule)";
    assert!(all.contains(wanted), "{}", ran.out);
}

/// Wrong usage: status 2, and a line that says what is wrong, on standard error.
#[test]
fn wrong_usage_is_told() {
    let desk = desk();
    let cases: [(&[&str], &str); 8] = [
        // First, since later ones make a ledger.
        (&["trace", "0123456789"], "there is no ledger at .spinledger"),
        (&["run"], "PIPELINE"),
        (&["run", "nothing.yaml"], "cannot read the pipeline nothing.yaml"),
        (&["run", "terminal.yaml", "--workers", "0"], "--workers"),
        (&["run", "terminal.yaml", "--only", "nothing"], "there is no step `nothing`"),
        (&["forecast", "nothing.yaml"], "cannot read the pipeline nothing.yaml"),
        (&["forecast", "terminal.yaml", "--workers", "many"], "--workers"),
        (&["print"], "FILE"),
    ];
    for (args, wanted) in cases {
        let ran = desk.run(args);
        assert_eq!(ran.status, Some(2), "{args:?}");
        assert!(ran.err.contains(wanted) && !ran.err.contains("panicked"), "{args:?}: {}", ran.err);
    }
}
