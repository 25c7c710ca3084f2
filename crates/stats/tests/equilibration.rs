//! R-hat, the tests of equilibration, and what is discarded.

mod common;

use common::Normal;
use proptest::prelude::*;
use spinledger_numerics::elementary::exp;
use spinledger_stats::discard::discard;
use spinledger_stats::equilibration::{EquilibrationParams, Verdict, equilibration};
use spinledger_stats::rhat::{MOST_VALUES, rhat};

fn slices(chains: &[Vec<f64>]) -> Vec<&[f64]> {
    chains.iter().map(Vec::as_slice).collect()
}

fn stationary(name: &str, seed: u64, a: f64, count: usize) -> Vec<Vec<f64>> {
    let mut normal = Normal::new(name, seed);
    (0..4).map(|_| normal.autoregressive(a, count)).collect()
}

#[test]
fn rhat_of_a_case_by_hand() {
    // Halves (1, 2), (3, 4), (5, 6), (7, 8) of two chains: ranks 1 to 8, scores z_r = quantile((r - 3/8)/8.25).
    // With z8 = -z1 = 1.4342, z7 = 0.8523, z6 = 0.4728, z5 = 0.1525: means -1.1433, -0.3127, 0.3127, 1.1433,
    // between = sum/3 = 0.9365 and within = mean of (difference^2)/2 = 0.1101, R-hat = sqrt(1/2 + 0.9365/0.1101).
    let found = rhat(&[&[1.0, 2.0, 3.0, 4.0], &[5.0, 6.0, 7.0, 8.0]]).expect("a value");
    assert!((found - 3.0006).abs() < 0.01, "{found}");
}

#[test]
fn rhat_near_one_for_one_distribution_and_above_for_several() {
    let sound = stationary("sound", 1, 0.5, 2000);
    let near = rhat(&slices(&sound)).expect("a value");
    // Eight halves of 333 independent values: 1 + 1/(2 333) (1 +- 0.5), the larger of two.
    assert!((0.999..1.01).contains(&near), "{near}");
    let mut apart = sound.clone();
    apart[2].iter_mut().for_each(|value| *value += 1.0);
    // Between over within is near (3/16) (8/7) = 0.21.
    assert!(rhat(&slices(&apart)).expect("a value") > 1.05);
    // The same mean and median but another spread: seen by folding only.
    let mut wide = sound.clone();
    wide[1].iter_mut().for_each(|value| *value *= 4.0);
    assert!(rhat(&slices(&wide)).expect("a value") > 1.1);
    // A drift within every chain: seen by splitting only.
    let mut drift = sound;
    for chain in &mut drift {
        chain.iter_mut().enumerate().for_each(|(t, value)| *value += t as f64 / 1000.0);
    }
    assert!(rhat(&slices(&drift)).expect("a value") > 1.1);
}

#[test]
fn rhat_of_degenerate_series() {
    assert_eq!(rhat(&[]), None);
    assert_eq!(rhat(&[&[1.0, 2.0, 3.0]]), None);
    assert_eq!(rhat(&[&[1.0, 2.0, f64::NAN, 3.0]]), None);
    assert_eq!(rhat(&[&[1.0; 10], &[1.0; 10]]), None);
    assert_eq!(rhat(&[&[1.0; 10], &[2.0; 10]]), Some(f64::INFINITY));
    assert_eq!(rhat(&[&[0.0, -0.0, 0.0, -0.0]]), None);
    // Two-valued series are constant when folded at their median, if that lies midway.
    let two = [1.0, -1.0, 1.0, -1.0, -1.0, 1.0, -1.0, 1.0];
    assert!(rhat(&[&two, &two]).is_some_and(|found| found < 1.1));
}

#[test]
fn thinning_changes_rhat_little() {
    let mut long = stationary("thin", 3, 0.9, MOST_VALUES);
    long[0].iter_mut().for_each(|value| *value += 0.3);
    let thinned = rhat(&slices(&long)).expect("a value");
    let short: Vec<Vec<f64>> = long.iter().map(|chain| chain[..MOST_VALUES / 4].to_vec()).collect();
    let whole = rhat(&slices(&short)).expect("a value");
    // Between over within is 0.3^2 (1/4 - 1/16) 8/7 = 0.0193 for either, to a few percent: R-hat 1.0096.
    assert!((thinned - 1.0096).abs() < 0.002 && (thinned - whole).abs() < 0.003, "{thinned} {whole}");
}

#[test]
fn sound_chains_pass() {
    // 200 sets of chains at a false-alarm rate of 1e-3: more than 4 failures have probability 2e-6. Spread never fails here.
    let mut failed = 0;
    for seed in 0..200 {
        let chains = stationary("pass", seed, 0.9, 4000);
        let info = equilibration(&slices(&chains), &EquilibrationParams::default());
        failed += usize::from(info.equilibrated() != Some(true));
        assert!(info.spread.is_some_and(|spread| spread < 1.05));
    }
    assert!(failed <= 4, "{failed}");
}

#[test]
fn chains_that_approach_fail_by_drift() {
    for seed in 0..20 {
        let mut chains = stationary("approach", seed, 0.5, 2000);
        for chain in &mut chains {
            chain.iter_mut().enumerate().for_each(|(t, value)| *value += 2.0 * exp(-(t as f64) / 200.0));
        }
        let info = equilibration(&slices(&chains), &EquilibrationParams::default());
        assert!(matches!(info.verdict, Verdict::Drift { deviation, .. } if deviation > 4.0), "{info:?}");
        assert_eq!(info.equilibrated(), Some(false));
    }
}

#[test]
fn chains_in_different_phases_fail_by_spread() {
    let mut chains = stationary("phases", 1, 0.5, 2000);
    chains[3].iter_mut().for_each(|value| *value += 3.0);
    let info = equilibration(&slices(&chains), &EquilibrationParams::default());
    assert!(matches!(info.verdict, Verdict::Spread { spread } if spread > 1.1), "{info:?}");
}

#[test]
fn short_chains_have_no_verdict() {
    let params = EquilibrationParams::default();
    for chains in [vec![], vec![vec![1.0; 19]], vec![vec![f64::NAN; 50]], stationary("short", 1, 0.99, 100)] {
        let info = equilibration(&slices(&chains), &params);
        assert!(matches!(info.verdict, Verdict::TooShort { .. }), "{info:?}");
        assert_eq!(info.equilibrated(), None);
    }
}

/// Chains that are one drift from beginning to end, too short to know their own time: that all of them go the same way is told. Chains that are short and
/// sound are not: 400 sets at a false-alarm rate of 1e-3, more than 4 have probability 6e-5.
#[test]
fn a_drift_that_all_chains_share_is_told_however_short_they_are() {
    let params = EquilibrationParams::default();
    for seed in 0..20 {
        let mut chains = stationary("shared", seed, 0.9, 100);
        for chain in &mut chains {
            chain.iter_mut().enumerate().for_each(|(t, value)| *value = 0.2 * *value + t as f64 / 5.0);
        }
        let info = equilibration(&slices(&chains), &params);
        assert!(matches!(info.verdict, Verdict::Drift { chain: None, deviation } if deviation < -20.0), "{info:?}");
        // Two go up and two go down: nothing is shared.
        chains[..2].iter_mut().flatten().for_each(|value| *value = -*value);
        let info = equilibration(&slices(&chains), &params);
        assert!(matches!(info.verdict, Verdict::TooShort { .. }), "{info:?}");
    }
    let mut alarms = 0;
    for seed in 0..400 {
        let info = equilibration(&slices(&stationary("short and sound", seed, 0.98, 100)), &params);
        alarms += usize::from(info.equilibrated() == Some(false));
    }
    assert!(alarms <= 4, "{alarms} of 400");
}

#[test]
fn constant_chains_are_equilibrated_unless_they_differ() {
    let params = EquilibrationParams::default();
    let info = equilibration(&[&[0.1; 40], &[0.1; 40]], &params);
    assert_eq!((info.verdict, info.spread), (Verdict::Equilibrated, None));
    let info = equilibration(&[&[0.1; 40], &[0.2; 40]], &params);
    assert_eq!(info.verdict, Verdict::Spread { spread: f64::INFINITY });
    let mut step = [1.0; 40];
    step[0] = 2.0;
    let info = equilibration(&[&step, &step], &params);
    assert_eq!(info.equilibrated(), Some(false), "what moves only at first has drifted");
}

#[test]
fn discard_removes_an_approach_and_little_else() {
    let mut unnecessary = 0;
    for seed in 0..20 {
        let sound = stationary("discard", seed, 0.5, 10_000);
        unnecessary += discard(&slices(&sound)).rows;
        let mut approach = sound.clone();
        let mut opposite = sound;
        for (number, chain) in approach.iter_mut().enumerate() {
            for (t, value) in chain.iter_mut().enumerate() {
                let distance = 20.0 * exp(-(t as f64) / 300.0);
                *value += distance;
                opposite[number][t] += if number % 2 == 0 { distance } else { -distance };
            }
        }
        for (name, chains) in [("approach", approach), ("opposite", opposite)] {
            let found = discard(&slices(&chains));
            // After 1200 measurements 0.37 of 20 is left, after 3000 nothing of any size.
            assert!((1200..=5000).contains(&found.rows) && found.rows.is_multiple_of(100), "{name} {found:?}");
        }
    }
    // Nothing had to go: a fifth on average is what the rule may waste.
    assert!(unnecessary < 20 * 2000, "{unnecessary}");
}

#[test]
fn discard_at_its_limits() {
    let falling: Vec<f64> = (0..1000).map(|t| -f64::from(t)).collect();
    let found = discard(&[&falling]);
    assert!(found.at_limit && found.rows == 500, "{found:?}");
    for chains in [&[][..], &[&[1.0; 9][..]], &[&[1.0; 40]], &[&[f64::NAN; 40]]] {
        let found = discard(chains);
        assert_eq!((found.rows, found.at_limit), (0, false));
    }
}

proptest! {
    // Failing inputs are printed; a file of them would be written beside the sources.
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn rhat_depends_on_order_only(values in proptest::collection::vec(-3.0..3.0f64, 16..100)) {
        let middle = values.len() / 2;
        let plain = rhat(&[&values[..middle], &values[middle..]]);
        // Increasing maps leave the ranks. Folding sees distances, too: a linear map, by a power of two so that no
        // rounding makes or breaks ties.
        let moved: Vec<f64> = values.iter().map(|value| 8.0 * value).collect();
        let moved = rhat(&[&moved[..middle], &moved[middle..]]);
        let swapped = rhat(&[&values[middle..], &values[..middle]]);
        let (plain, moved, swapped) = (plain.expect("a value"), moved.expect("a value"), swapped.expect("a value"));
        prop_assert!(plain > 0.5);
        prop_assert!((plain - moved).abs() < 1e-9 && (plain - swapped).abs() < 1e-9);
    }
}
