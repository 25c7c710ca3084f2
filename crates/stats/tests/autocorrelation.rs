//! Autocorrelation times, derived quantities and the jackknife against exact values.

mod common;
#[allow(dead_code, reason = "shared by the tests of several crates")]
#[path = "../../../tests/reference/table.rs"]
mod table;

use common::{Normal, moments};
use proptest::prelude::*;
use spinledger_numerics::elementary::pow;
use spinledger_stats::autocorrelation::{
    Autocorrelation, AutocorrelationError, AutocorrelationParams, Window, autocorrelation,
};
use spinledger_stats::derived::{DerivedError, derived};
use spinledger_stats::jackknife::{Blocks, Jackknife, JackknifeError, blocks_per_chain, replicate_error};
use table::{Table, number};

fn estimate(chains: &[&[f64]]) -> Autocorrelation {
    autocorrelation(chains, &AutocorrelationParams::default()).expect("sound chains")
}

/// tau of autoregressive series by their coefficient, from the table.
fn known_times() -> Vec<(f64, f64)> {
    let table = Table::parse(include_str!("../../../tests/reference/worked_examples.csv"));
    let of = |row: table::Row<'_>| (number(row.text("input").trim_start_matches("a=")), row.number("value"));
    let times: Vec<_> =
        table.rows().filter(|row| row.text("example") == "ar1" && row.text("quantity") == "tau_int").map(of).collect();
    assert!(times.len() >= 6, "{times:?}");
    times
}

/// 40 seeds for each coefficient and rule; false-alarm rate of all bounds together about 1e-3.
#[test]
fn times_of_autoregressive_series() {
    for (a, exact) in known_times() {
        for window in [Window::Wolff { s: 1.5 }, Window::Sokal { c: 6.0 }] {
            let params = AutocorrelationParams { window };
            let (mut pulls, mut means, mut claimed) = (Vec::new(), Vec::new(), Vec::new());
            for seed in 0..40 {
                let mut normal = Normal::new("times", seed);
                let chains: Vec<Vec<f64>> = (0..4).map(|_| normal.autoregressive(a, 10_000)).collect();
                let chains: Vec<&[f64]> = chains.iter().map(Vec::as_slice).collect();
                let found = autocorrelation(&chains, &params).expect("sound chains");
                assert!(found.closed);
                means.push(found.mean / found.error);
                claimed.push(found.tau_error);
                pulls.push(found.tau - exact.max(0.5));
            }
            let (mean, width) = moments(&pulls);
            let error = moments(&claimed).0;
            // Cutting at the window leaves a bias below half an error of tau (Wolff 2004, sect. 3.3) and, for the error
            // of the mean, below a few percent. Anticorrelated series get 1/2 and hence too large an error.
            assert!(mean.abs() < 0.5 * error + 4.0 * width / 40f64.sqrt() + 1e-3, "{a} {window:?}: {mean} {error}");
            let (centre, spread) = moments(&means);
            assert!(centre.abs() < 0.6 && spread < 1.5, "{a}: {centre} {spread}");
            if a >= 0.0 {
                assert!(spread > 0.65, "{a}: {spread}");
                assert!((0.5..2.0).contains(&(width / error)) || a == 0.0, "{a} {window:?}: {width} {error}");
            }
        }
    }
}

#[test]
fn a_long_time_is_found_in_a_long_series() {
    // tau = 1000, for which lags beyond the direct sums are needed; one seed, bound at five errors (6e-7).
    let exact = 1000.0;
    let a = (2.0 * exact - 1.0) / (2.0 * exact + 1.0);
    let chain = Normal::new("long", 1).autoregressive(a, 1_000_000);
    let found = estimate(&[&chain]);
    assert!(found.closed && (2000..20_000).contains(&found.window), "{}", found.window);
    assert!((found.tau - exact).abs() < 5.0 * found.tau_error, "{} {}", found.tau, found.tau_error);
    assert!(found.tau_error < 0.2 * exact);
}

#[test]
fn correlation_function_and_its_error() {
    let a = 0.8;
    let mut outside = 0;
    for seed in 0..50 {
        let chain = Normal::new("rho", seed).autoregressive(a, 20_000);
        let found = estimate(&[&chain]);
        assert_eq!((found.rho[0], found.rho_error(0)), (1.0, 0.0));
        for lag in [1, 3, 8] {
            let exact = pow(a, lag as f64);
            outside += usize::from((found.rho[lag] - exact).abs() > 2.0 * found.rho_error(lag));
        }
    }
    // 150 comparisons at 4.6 percent each, in threes correlated: 6.8 expected, and more than 22 has probability 1e-4.
    assert!((1..=22).contains(&outside), "{outside}");
}

#[test]
fn chains_at_different_means_have_a_large_error() {
    let mut normal = Normal::new("apart", 1);
    let low: Vec<f64> = (0..1000).map(|_| normal.next()).collect();
    let high: Vec<f64> = (0..1000).map(|_| 10.0 + normal.next()).collect();
    let found = estimate(&[&low, &high]);
    assert!(!found.closed && found.error > 1.0, "{found:?}");
}

#[test]
fn series_without_fluctuation_or_length() {
    let constant = estimate(&[&[0.1; 50], &[0.1; 7]]);
    assert_eq!((constant.tau, constant.error, constant.mean, constant.variance), (0.5, 0.0, 0.1, 0.0));
    assert_eq!((constant.effective, constant.closed, constant.rho), (57.0, true, vec![1.0]));
    let refused = |chains: &[&[f64]]| autocorrelation(chains, &AutocorrelationParams::default()).expect_err("refused");
    assert_eq!(refused(&[]), AutocorrelationError::TooShort { count: 0 });
    assert_eq!(refused(&[&[], &[3.0]]), AutocorrelationError::TooShort { count: 1 });
    let bad = AutocorrelationError::NotFinite { chain: 1, index: 2 };
    assert_eq!(refused(&[&[1.0], &[1.0, 2.0, f64::NAN]]), bad);
    assert_eq!(refused(&[&[1.0], &[1.0, 2.0, f64::NEG_INFINITY]]), bad);
    for chains in [&[&[1.0, 2.0][..]][..], &[&[1.0], &[2.0]], &[&[1.0, 2.0, 4.0], &[]]] {
        let found = estimate(chains);
        assert!(found.error > 0.0 && found.error.is_finite() && found.tau >= 0.5, "{found:?}");
    }
}

#[test]
fn derived_quantity_has_the_error_of_its_fluctuations() {
    // F = <x^2> - <x>^2 of an autoregressive series: to first order the fluctuations of x^2, whose correlation is a^2t.
    // 60 seeds; mean within 0.5 and width 0.7 to 1.35 are about four standard deviations.
    let a: f64 = 0.9;
    let mut pulls = Vec::new();
    let mut times = Vec::new();
    for seed in 0..60 {
        let mut normal = Normal::new("derived", seed);
        let columns: Vec<[Vec<f64>; 2]> = (0..3)
            .map(|_| {
                let x: Vec<f64> = normal.autoregressive(a, 5000).iter().map(|x| 3.0 + x).collect();
                let squares = x.iter().map(|x| x * x).collect();
                [x, squares]
            })
            .collect();
        let columns: Vec<[&[f64]; 2]> = columns.iter().map(|[x, squares]| [&x[..], &squares[..]]).collect();
        let chains: Vec<&[&[f64]]> = columns.iter().map(<[&[f64]; 2]>::as_slice).collect();
        let variance = |means: &[f64]| means[1] - means[0] * means[0];
        let found = derived(&chains, variance, &AutocorrelationParams::default()).expect("sound chains");
        assert!((found.gradient[1] - 1.0).abs() < 1e-9 && (found.gradient[0] + 6.0).abs() < 0.5);
        let tau = 0.5 * (1.0 + a * a) / (1.0 - a * a);
        times.push(found.projected.tau / tau);
        pulls.push((found.value - 1.0) / found.error);
    }
    // One time scatters by 0.12 of itself; four standard deviations of the mean.
    let (mean, _) = moments(&times);
    assert!((mean - 1.0).abs() < 0.06, "{mean}");
    let (mean, width) = moments(&pulls);
    assert!(mean.abs() < 0.5 && (0.7..1.35).contains(&width), "{mean} {width}");
}

#[test]
fn derived_refuses_what_it_cannot_do() {
    let params = AutocorrelationParams::default();
    let (x, y) = ([1.0, 2.0, 3.0], [1.0, 2.0]);
    assert_eq!(derived(&[&[&x, &y]], |m| m[0], &params), Err(DerivedError::Shape { chain: 0 }));
    assert_eq!(derived(&[&[&x], &[&x, &x]], |m| m[0], &params), Err(DerivedError::Shape { chain: 1 }));
    assert_eq!(derived(&[&[&x]], |m| 1.0 / (m[0] - 2.0), &params), Err(DerivedError::NotFinite));
    let short = DerivedError::Series(AutocorrelationError::TooShort { count: 0 });
    assert_eq!(derived(&[], |_| 1.0, &params), Err(short));
    // A constant column contributes nothing.
    let constant = [5.0; 3];
    let found = derived(&[&[&constant]], |m| m[0] * m[0], &params).expect("sound");
    assert_eq!((found.value, found.error), (25.0, 0.0));
}

fn worked(example: &str, input: &str) -> Vec<f64> {
    let table = Table::parse(include_str!("../../../tests/reference/worked_examples.csv"));
    let rows = table.rows().filter(|row| row.text("example") == example && row.text("input") == input);
    let values: Vec<f64> = rows.map(|row| row.number("value")).collect();
    assert_eq!(values.len(), 3, "{example} {input}");
    values
}

fn assert_worked(found: &Jackknife, example: &str, input: &str) {
    let [estimate, corrected, variance] = worked(example, input)[..] else { unreachable!("three values") };
    let close = |a: f64, b: f64| assert!((a - b).abs() < 1e-13 * b.abs().max(1.0), "{example} {input}: {a} {b}");
    close(found.estimates[0], estimate);
    close(found.corrected[0], corrected);
    close(found.covariance[(0, 0)], variance);
    let column: Vec<f64> = (0..found.replicates.rows()).map(|block| found.replicates[(block, 0)]).collect();
    close(replicate_error(&column), variance.sqrt());
}

#[test]
fn worked_jackknives() {
    let ratio = |pairs: &[[f64; 2]]| {
        let mut blocks = Blocks::new(2);
        pairs.iter().for_each(|pair| blocks.push(1.0, pair));
        blocks.jackknife(1, |means, out| out[0] = means[0] / means[1]).expect("sound blocks")
    };
    let name = "jackknife ratio sum x / sum y";
    assert_worked(&ratio(&[[1.0, 2.0], [2.0, 1.0], [3.0, 3.0], [4.0, 5.0]]), name, "[(1; 2); (2; 1); (3; 3); (4; 5)]");
    assert_worked(
        &ratio(&[[3.0, 4.0], [1.0, 2.0], [4.0, 5.0], [1.0, 3.0], [5.0, 7.0], [9.0, 8.0]]),
        name,
        "[(3; 4); (1; 2); (4; 5); (1; 3); (5; 7); (9; 8)]",
    );
    let mut blocks = Blocks::new(2);
    let x = [1.0, 2.0, 3.0, 5.0, 8.0];
    let squares = x.map(|x| x * x);
    blocks.push_chain(&[&x, &squares], 5);
    let found = blocks.jackknife(1, |means, out| out[0] = means[1] / (means[0] * means[0])).expect("sound blocks");
    assert_worked(&found, "jackknife mean(x^2)/mean(x)^2", "[1; 2; 3; 5; 8]");
    let mut blocks = Blocks::new(1);
    blocks.push_chain(&[&[2.0, 4.0, 4.0, 5.0, 10.0]], 99);
    let found = blocks.jackknife(1, |means, out| out[0] = means[0]).expect("sound blocks");
    assert_worked(&found, "jackknife mean", "[2; 4; 4; 5; 10]");
}

#[test]
fn jackknife_of_unequal_blocks_is_unbiased_for_a_mean() {
    // Blocks of 1 to 5 values; the variance of the mean of n unit normals is 1/n. 400 repetitions: the mean of the
    // estimated variance has a relative error of about sqrt(2/14/400) = 0.02.
    let mut ratios = Vec::new();
    for seed in 0..400 {
        let mut normal = Normal::new("unequal", seed);
        let mut blocks = Blocks::new(1);
        let mut count = 0;
        for block in 0..15 {
            let length = 1 + block % 5;
            count += length;
            let sum: f64 = (0..length).map(|_| normal.next()).sum();
            blocks.push(length as f64, &[sum]);
        }
        let found = blocks.jackknife(1, |means, out| out[0] = means[0]).expect("sound blocks");
        assert!((found.corrected[0] - found.estimates[0]).abs() < 1e-12);
        ratios.push(found.covariance[(0, 0)] * count as f64);
    }
    assert!((moments(&ratios).0 - 1.0).abs() < 0.1, "{:?}", moments(&ratios));
}

#[test]
fn jackknife_refuses_what_it_cannot_do() {
    let mut blocks = Blocks::new(1);
    assert!(blocks.is_empty());
    blocks.push(1.0, &[1.0]);
    assert_eq!(blocks.jackknife(1, |m, out| out[0] = m[0]), Err(JackknifeError::TooFew { blocks: 1 }));
    blocks.push(1.0, &[0.0]);
    assert_eq!(blocks.len(), 2);
    assert_eq!(blocks.jackknife(1, |m, out| out[0] = 1.0 / m[0]), Err(JackknifeError::NotFinite));
    assert_eq!(blocks_per_chain(10_000, 4, 0.5), 32);
    assert_eq!(blocks_per_chain(10_000, 4, 50.0), 10);
    assert_eq!(blocks_per_chain(10, 1, 1e9), 2);
    assert_eq!(blocks_per_chain(0, 200, 1.0), 1);
}

proptest! {
    // Failing inputs are printed; a file of them would be written beside the sources.
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn shifts_scales_and_order_of_chains(
        values in proptest::collection::vec(-1.0..1.0f64, 20..200),
        cut in 1..19usize,
        shift in -100.0..100.0f64,
        scale in 0.01..100.0f64,
    ) {
        let (a, b) = values.split_at(cut);
        let plain = estimate(&[a, b]);
        let swapped = estimate(&[b, a]);
        prop_assert!((swapped.tau - plain.tau).abs() < 1e-9 && (swapped.error - plain.error).abs() < 1e-9);
        let moved: Vec<f64> = values.iter().map(|value| shift + scale * value).collect();
        let (a, b) = moved.split_at(cut);
        let moved = estimate(&[a, b]);
        prop_assert!((moved.tau - plain.tau).abs() < 1e-6 * plain.tau);
        prop_assert!((moved.error / scale - plain.error).abs() < 1e-6 * plain.error + 1e-9);
        prop_assert!((moved.mean - shift - scale * plain.mean).abs() < 1e-9);
        prop_assert!(plain.tau >= 0.5 && plain.effective <= values.len() as f64);
    }
}
