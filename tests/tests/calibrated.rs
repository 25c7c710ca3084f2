//! Errors are what they say: many repetitions of small pipelines with exact answers. The long form is `cargo run --release -p spinledger-tests --example
//! calibration`.
//!
//! Seeds are fixed. Bounds are five standard deviations of the mean and the width of normal deviations, and a tenth more for what is known of short runs:
//! skewed quantities (a susceptibility deep in a phase) have estimates and errors that go together. With normal deviations a sound program passes all
//! but once in 10^5 streams.

use spinledger_tests::calibration::{Averages, Crossings, Pulls, averages, crossings};

fn check(what: &str, pulls: &Pulls) {
    let count = pulls.all.len() as f64;
    let (mean, width) = (pulls.mean(), pulls.width());
    assert!(mean.abs() < 5.0 / count.sqrt() + 0.1, "{what}: {count} deviations have mean {mean}");
    let scatter = 5.0 / (2.0 * count).sqrt() + 0.1;
    assert!(width > 1.0 - scatter && width < 1.0 + scatter, "{what}: {count} deviations have width {width}");
}

#[test]
fn averages_deviate_as_their_errors_say() {
    for update in ["metropolis", "wolff"] {
        let case = Averages { update, sizes: &[4, 8], temperatures: &[2.269_185_314_213_022, 2.5], measure: 2000 };
        let found = averages(&case, 60);
        assert!(found.len() >= 12, "{}", found.len());
        let mut rows = 0;
        let mut flagged = 0;
        for ((quantity, point), pulls) in &found {
            check(&format!("{update}, {quantity}, {point}"), pulls);
            rows += pulls.all.len();
            flagged += pulls.flags.values().sum::<usize>();
        }
        // Two families are tested at each point at a thousandth each; their rows are flagged together.
        assert!(flagged * 100 < rows, "{update}: {flagged} of {rows} rows are flagged");
    }
}

#[test]
fn crossings_deviate_as_their_errors_say() {
    let coarse = Crossings { name: "coarse", sizes: &[6, 8, 12], temperatures: (2.16, 2.40, 7), measure: 1500 };
    let found = crossings(&coarse, 40);
    assert_eq!(found.missing, 0);
    check("critical temperature", &found.place);
    // The exponent of the correction is not known, which widens errors by an amount that is the same each time.
    let width = found.value.width();
    assert!(found.value.mean().abs() < 1.0 && (0.3..1.4).contains(&width), "{} {width}", found.value.mean());
    for word in ["bad-fit", "not-equilibrated", "no-crossing"] {
        let flagged = found.place.flags.get(word).copied().unwrap_or(0);
        assert!(flagged <= 2, "{flagged} of 40 sound scans are flagged {word}");
    }
    // Two pairs cannot test the form that they are fitted to, and that is said.
    assert_eq!(found.place.flags.get("few-sizes"), Some(&40));
}
