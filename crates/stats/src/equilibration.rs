//! Has a set of chains forgotten where it began?
//!
//! Two tests, both of which must pass:
//!
//! - *Drift* (after Geweke 1992, in Bayesian Statistics 4): the mean of the first fifth of each chain is compared with
//!   that of its last half, and the same for the average of all chains, which sees a common drift too small for any one
//!   of them. Errors include the autocorrelation time, which is taken from the last halves only, each about its own
//!   mean: a drift would otherwise lengthen the time and excuse itself. Values are replaced by normal scores of their ranks first, as in
//!   R-hat: the mean of a short piece of a skewed series (rare excursions at low temperature) is far from normal, and failed ten times more
//!   often than promised. The limit is Student's for as many degrees of freedom as the error was estimated from.
//!   Where the chains are too short to know their autocorrelation time, a drift that all of them share is still told: the differences between first
//!   and last fifth of independent chains are independent, and their mean is compared with their scatter. Each chain is ranked by itself
//!   for that, so that one drift looks like another however far apart they are; first and last are taken alike, since equilibrium looks the same
//!   backwards.
//! - *Spread*: rank-normalised split R-hat at most 1.05. Vehtari et al. 2021 recommend 1.01 for chains that are to be
//!   run until it is met. Here the lengths are given, halves with only 20 independent measurements have 1.02
//!   to 1.04 though nothing is wrong, and their large error is already in the error bar: 1.01 would flag short sound
//!   runs. Chains in different phases have 1.2 and more.
//!
//! A quantity whose sign is not fixed by the symmetry (a magnetisation in the ordered phase) fails both by its nature
//! and must not be tested.

use spinledger_numerics::special::normal_quantile;
use spinledger_numerics::sum::{mean, sum_by};

use crate::autocorrelation::{AutocorrelationParams, autocorrelation};
use crate::rhat::{MOST_VALUES, rhat, rounding};

/// Thresholds of [`equilibration`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EquilibrationParams {
    /// Probability that the drift test fails sound chains: 1e-3, for all its comparisons together.
    pub false_alarm: f64,
    /// Largest R-hat: 1.05.
    pub most_spread: f64,
    /// Independent measurements a last half must have for a verdict: 10.
    pub least_effective: f64,
}

impl Default for EquilibrationParams {
    fn default() -> Self {
        Self { false_alarm: 1e-3, most_spread: 1.05, least_effective: 10.0 }
    }
}

/// What the tests say.
#[derive(Clone, Copy, Debug, PartialEq)]
#[non_exhaustive]
pub enum Verdict {
    /// Both tests passed.
    Equilibrated,
    /// A chain, or the average of all (`None`), has drifted.
    Drift {
        /// Chain, from 0.
        chain: Option<usize>,
        /// Early mean minus late mean in standard errors.
        deviation: f64,
    },
    /// The chains disagree.
    Spread {
        /// R-hat found.
        spread: f64,
    },
    /// Too few independent measurements to say.
    TooShort {
        /// Independent measurements in a last half.
        effective: f64,
    },
}

/// Result of [`equilibration`].
#[derive(Clone, Copy, Debug, PartialEq)]
#[non_exhaustive]
pub struct EquilibrationInfo {
    /// The verdict; drift is reported before spread.
    pub verdict: Verdict,
    /// R-hat, `None` for a constant series.
    pub spread: Option<f64>,
    /// Largest deviation of the drift test in standard errors.
    pub deviation: f64,
}

impl EquilibrationInfo {
    /// `Some(true)` if equilibrated, `Some(false)` if not, `None` if the chains are too short to tell.
    #[must_use]
    pub fn equilibrated(&self) -> Option<bool> {
        match self.verdict {
            Verdict::Equilibrated => Some(true),
            Verdict::Drift { .. } | Verdict::Spread { .. } => Some(false),
            Verdict::TooShort { .. } => None,
        }
    }
}

/// Tests the chains of one quantity, without what was discarded.
///
/// `TooShort` for fewer than 20 measurements in a chain or values that are not finite. A series that is constant over
/// all chains is equilibrated. Cost: that of `autocorrelation` and of `rhat`.
#[must_use]
pub fn equilibration(chains: &[&[f64]], params: &EquilibrationParams) -> EquilibrationInfo {
    let spread = rhat(chains);
    let short = |effective: f64| EquilibrationInfo { verdict: Verdict::TooShort { effective }, spread, deviation: 0.0 };
    if chains.is_empty() || chains.iter().any(|chain| chain.len() < 20 || !chain.iter().all(|v| v.is_finite())) {
        return short(0.0);
    }
    let given = chains;
    let scored = scores(given);
    let chains: Vec<&[f64]> = scored.iter().map(Vec::as_slice).collect();
    let early: Vec<&[f64]> = chains.iter().map(|chain| &chain[..chain.len() / 5]).collect();
    let late: Vec<&[f64]> = chains.iter().map(|chain| &chain[chain.len() - chain.len() / 2..]).collect();
    // Too short to say, but for a drift that all chains share.
    let shared = |effective: f64| match shared_drift(&alone(given), params.false_alarm) {
        Some(deviation) => EquilibrationInfo { verdict: Verdict::Drift { chain: None, deviation }, spread, deviation },
        None => short(effective),
    };
    // Each last half about its own mean.
    let centred: Vec<Vec<f64>> = late
        .iter()
        .map(|part| {
            let centre = mean(part).unwrap_or(0.0);
            part.iter().map(|value| value - centre).collect()
        })
        .collect();
    let centred: Vec<&[f64]> = centred.iter().map(Vec::as_slice).collect();
    let Ok(found) = autocorrelation(&centred, &AutocorrelationParams::default()) else {
        return shared(0.0);
    };
    // A sum over independent values has at least this variance per value: 2 tau times that of one.
    let variance = 2.0 * found.tau * found.variance;
    let effective = late.iter().map(|part| part.len()).min().unwrap_or(0) as f64 / (2.0 * found.tau);
    if variance > 0.0 && (!found.closed || effective < params.least_effective) {
        return shared(effective);
    }
    let differences: Vec<f64> =
        early.iter().zip(&late).map(|(early, late)| mean(early).unwrap_or(0.0) - mean(late).unwrap_or(0.0)).collect();
    let variances: Vec<f64> = early
        .iter()
        .zip(&late)
        .map(|(early, late)| variance * (1.0 / early.len() as f64 + 1.0 / late.len() as f64))
        .collect();
    let comparisons = if chains.len() > 1 { chains.len() + 1 } else { 1 };
    // The relative variance of the error squared is 2 (2 W + 1)/N (Wolff 2004 eq. 42), that of chi^2 over its degrees 2/degrees.
    let degrees = found.count as f64 / (2 * found.window + 1) as f64;
    let limit = student(-normal_quantile(0.5 * params.false_alarm / comparisons as f64), degrees);
    let in_errors = |difference: f64, variance: f64| {
        // Scores are of order 1; differences of rounding size are none, in particular when nothing fluctuates.
        if difference.abs() <= 1e-12 { 0.0 } else { difference / variance.sqrt() }
    };
    let count = chains.len();
    let pooled = in_errors(
        sum_by(count, |chain| differences[chain]) / count as f64,
        sum_by(count, |chain| variances[chain]) / (count * count) as f64,
    );
    let mut worst = (None, pooled);
    for chain in 0..count {
        let deviation = in_errors(differences[chain], variances[chain]);
        if deviation.abs() > worst.1.abs() {
            worst = (Some(chain), deviation);
        }
    }
    let verdict = if worst.1.abs() > limit {
        Verdict::Drift { chain: worst.0, deviation: worst.1 }
    } else {
        match spread {
            Some(spread) if spread > params.most_spread => Verdict::Spread { spread },
            _ => Verdict::Equilibrated,
        }
    };
    EquilibrationInfo { verdict, spread, deviation: worst.1 }
}

/// First minus last fifth of each chain, in scores of its own ranks.
fn alone(chains: &[&[f64]]) -> Vec<f64> {
    let difference = |chain: &&[f64]| {
        let scored = &scores(&[*chain])[0];
        let part = scored.len() / 5;
        mean(&scored[..part]).unwrap_or(0.0) - mean(&scored[scored.len() - part..]).unwrap_or(0.0)
    };
    chains.iter().map(difference).collect()
}

/// The mean of the chains' differences in standard errors, both from the chains alone, where chance gives so large a one less often than
/// `false_alarm`.
///
/// The tail of Student's distribution with d degrees of freedom is bounded by its power law, which is exact far out, where such small probabilities are:
/// P(|t| > x) <= 2 c d^((d - 1)/2) x^-d, c = G((d + 1)/2)/((pi d)^1/2 G(d/2)) (from its density, leaving out 1 in 1 + t^2/d).
fn shared_drift(differences: &[f64], false_alarm: f64) -> Option<f64> {
    let count = differences.len();
    let degrees = count.checked_sub(1).filter(|degrees| *degrees > 0)?;
    let centre = mean(differences)?;
    let square = sum_by(count, |chain| (differences[chain] - centre) * (differences[chain] - centre));
    // Scores are of order 1: what is below this is rounding, of the mean and of the scatter.
    let error = (square / (count * degrees) as f64).sqrt().max(1e-12);
    let deviation = centre / error;
    // c d^1/2 = 1/pi for one degree and 1/2 for two; G(x + 1) = x G(x) gives the rest by steps of two.
    let mut peak = if degrees % 2 == 1 { std::f64::consts::FRAC_1_PI } else { 0.5 };
    let mut from = 2 - degrees % 2;
    while from < degrees {
        peak *= (from + 1) as f64 / from as f64;
        from += 2;
    }
    // c d^((d - 1)/2) x^-d = c d^1/2 / d (d^1/2/x)^d.
    let ratio = (degrees as f64).sqrt() / deviation.abs();
    let tail = (0..degrees).fold(2.0 * peak / degrees as f64, |tail, _| tail * ratio);
    (tail < false_alarm).then_some(deviation)
}

/// The values as normal scores of their ranks among all of them; values that are equal up to rounding have equal scores.
///
/// Ranks are taken in at most 2^17 values, every k-th of each chain, which moves a score by far less than its spread.
fn scores(chains: &[&[f64]]) -> Vec<Vec<f64>> {
    let every = chains.iter().map(|chain| chain.len()).sum::<usize>().div_ceil(MOST_VALUES).max(1);
    let mut sorted: Vec<f64> = chains.iter().flat_map(|chain| chain.iter().step_by(every).copied()).collect();
    sorted.sort_unstable_by(f64::total_cmp);
    let tolerance = rounding(chains);
    let count = sorted.len();
    let table: Vec<f64> =
        (0..=2 * count).map(|place| normal_quantile((place + 1) as f64 / (2 * (count + 1)) as f64)).collect();
    let score = |value: &f64| {
        let below = sorted.partition_point(|other| *other < value - tolerance);
        let upto = below + sorted[below..].partition_point(|other| *other <= value + tolerance);
        table[below + upto]
    };
    chains.iter().map(|chain| chain.iter().map(score).collect()).collect()
}

/// Student's quantile where the normal one is z (Cornish-Fisher expansion: Abramowitz & Stegun 26.7.5), for 5 degrees and more.
fn student(z: f64, degrees: f64) -> f64 {
    let degrees = degrees.max(5.0);
    let (square, cube) = (z * z, z * z * z);
    let first = 0.25 * (cube + z);
    let second = (5.0 * cube * square + 16.0 * cube + 3.0 * z) / 96.0;
    let third = (3.0 * cube * square * square + 19.0 * cube * square + 17.0 * cube - 15.0 * z) / 384.0;
    z + (first + (second + third / degrees) / degrees) / degrees
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn students_quantiles_are_those_of_tables() {
        // Two-sided 1e-3: z = 3.2905; t(10) = 4.5869, t(30) = 3.6460, t(120) = 3.3735 (any table of Student's distribution).
        let z = -normal_quantile(5e-4);
        for (degrees, expected, within) in [(10.0, 4.5869, 0.02), (30.0, 3.6460, 0.001), (120.0, 3.3735, 1e-4)] {
            assert!((student(z, degrees) - expected).abs() < within, "{degrees} {}", student(z, degrees));
        }
    }

    #[test]
    fn shared_drifts_are_judged_by_students_tail() {
        // Differences of mean m with three degrees of freedom: t = 12.924 has the two-sided probability 1e-3, and the bound 1.022e-3; with
        // four 8.610 and 1.092e-3, with seven 5.408 and 1.952e-3 (quantiles of any table of Student's distribution).
        for (count, quantile, above) in [(4, 12.924, 1.03), (5, 8.610, 1.1), (8, 5.408, 1.96)] {
            // Half of them at 1, half at -1 about the mean, one at 0 if there is one over: the error is known.
            let pairs = count / 2;
            let error = (2.0 * pairs as f64 / (count * (count - 1)) as f64).sqrt();
            let at = |t: f64| {
                let mut values: Vec<f64> = (0..2 * pairs).map(|k| if k % 2 == 0 { 1.0 } else { -1.0 }).collect();
                values.resize(count, 0.0);
                values.iter().map(|value| value + t * error).collect::<Vec<f64>>()
            };
            // Never more often than promised, and not much less often.
            assert_eq!(shared_drift(&at(quantile), 1e-3), None, "{count}");
            let found = shared_drift(&at(-quantile), above * 1e-3).expect("a drift");
            assert!((found + quantile).abs() < 1e-9, "{count}: {found}");
        }
        assert_eq!(shared_drift(&[], 1e-3), None);
        assert_eq!(shared_drift(&[3.0], 1e-3), None);
        assert_eq!(shared_drift(&[0.0, 0.0, 0.0], 1e-3), None);
        assert!(shared_drift(&[1.0, 1.0, 1.0], 1e-3).is_some());
    }

    #[test]
    fn scores_keep_order_and_ties_and_ignore_rounding() {
        let scored = scores(&[&[3.0, 1.0, 2.0], &[2.0, 5.0]]);
        assert!(scored[0][1] < scored[0][2] && scored[0][2] < scored[0][0] && scored[0][0] < scored[1][1]);
        assert_eq!(scored[0][2], scored[1][0]);
        assert!((scored[0][1] + scored[1][1]).abs() < 1e-12);
        // Levels that repeat up to rounding, later ones always a little higher.
        let drifting: Vec<f64> = (0..100).map(|k| f64::from(k % 3) + 1e-15 * f64::from(k)).collect();
        let scored = scores(&[&drifting]);
        assert!(scored[0].iter().zip(&scored[0][3..]).all(|(now, later)| now == later));
        assert_eq!(scores(&[&[0.1 + 0.2, 0.3]]), [[0.0, 0.0]]);
    }
}
