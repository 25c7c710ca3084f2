//! Do chains agree with each other, and with themselves later?

use spinledger_numerics::special::normal_quantile;
use spinledger_numerics::sum::sum_by;

/// Values that are ranked at most; longer series are thinned to every k-th.
pub const MOST_VALUES: usize = 1 << 17;

/// Rank-normalised split R-hat (Vehtari, Gelman, Simpson, Carpenter & Buerkner 2021 Bayesian Anal. 16 667): the
/// larger of that of the ranks and that of the ranks of |x - median|, the second of which sees chains of unequal spread.
///
/// Each chain is cut in two halves (a middle value is left out), so that a drift shows like a disagreement. 1 when all
/// halves agree; infinite when every half is constant but they differ. `None` for a constant series (nothing to
/// compare), for fewer than 4 values in a chain, and for values that are not finite.
///
/// Above [`MOST_VALUES`] values, every k-th of each half is taken with the least k that suffices. Means over k values
/// would be more precise but no longer have the spread of single values, and the scale of R-hat with its usual
/// thresholds would be lost; means of thinned halves differ from the full ones by far less than the spread over 100.
///
/// Cost: n log n.
#[must_use]
pub fn rhat(chains: &[&[f64]]) -> Option<f64> {
    let total: usize = chains.iter().map(|chain| chain.len()).sum();
    if chains.is_empty() || chains.iter().any(|chain| chain.len() < 4 || chain.iter().any(|value| !value.is_finite())) {
        return None;
    }
    let every = total.div_ceil(MOST_VALUES);
    // A stride that leaves a half with fewer than two values would make its variance meaningless.
    let every = chains.iter().map(|chain| chain.len() / 4).min().unwrap_or(1).clamp(1, every);
    let mut halves = Vec::with_capacity(2 * chains.len());
    for chain in chains {
        let half = chain.len() / 2;
        halves.push(thinned(&chain[..half], every));
        halves.push(thinned(&chain[chain.len() - half..], every));
    }
    let tolerance = rounding(chains);
    let bulk = of_ranks(&halves, tolerance)?;
    let median = median(&halves);
    for value in halves.iter_mut().flatten() {
        *value = (*value - median).abs();
    }
    // Folding makes a two-valued series constant: then the first is all there is.
    Some(of_ranks(&halves, tolerance).map_or(bulk, |folded| bulk.max(folded)))
}

/// Values no further apart than this are equal: 1e-10 of the largest. A running energy repeats its levels only up to rounding that
/// accumulates, and ranks would blow up the drift of that into a drift of the chain.
pub(crate) fn rounding(chains: &[&[f64]]) -> f64 {
    1e-10 * chains.iter().flat_map(|chain| chain.iter()).fold(0.0f64, |most, value| most.max(value.abs()))
}

fn thinned(values: &[f64], every: usize) -> Vec<f64> {
    values.iter().step_by(every).copied().collect()
}

fn median(parts: &[Vec<f64>]) -> f64 {
    let mut all: Vec<f64> = parts.iter().flatten().copied().collect();
    all.sort_unstable_by(f64::total_cmp);
    let middle = all.len() / 2;
    if all.len() % 2 == 1 { all[middle] } else { 0.5 * (all[middle - 1] + all[middle]) }
}

/// R-hat of the normal scores of the values; `None` when all are equal.
fn of_ranks(parts: &[Vec<f64>], tolerance: f64) -> Option<f64> {
    let mut places: Vec<(f64, usize, usize)> = Vec::new();
    for (number, part) in parts.iter().enumerate() {
        places.extend(part.iter().enumerate().map(|(index, value)| (*value, number, index)));
    }
    places.sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then((a.1, a.2).cmp(&(b.1, b.2))));
    let count = places.len() as f64;
    let mut scores: Vec<Vec<f64>> = parts.iter().map(|part| vec![0.0; part.len()]).collect();
    let mut start = 0;
    while start < places.len() {
        let value = places[start].0;
        let end = start + places[start..].iter().take_while(|place| place.0 - value <= tolerance).count();
        if start == 0 && end == places.len() {
            return None;
        }
        // Ties share the mean of their ranks, which count from 1.
        let rank = (start + end + 1) as f64 / 2.0;
        let score = normal_quantile((rank - 0.375) / (count + 0.25));
        for (_, number, index) in &places[start..end] {
            scores[*number][*index] = score;
        }
        start = end;
    }
    let means: Vec<f64> =
        scores.iter().map(|part| sum_by(part.len(), |index| part[index]) / part.len() as f64).collect();
    let parts_count = scores.len();
    let length = sum_by(parts_count, |number| scores[number].len() as f64) / parts_count as f64;
    let grand = sum_by(parts_count, |number| means[number]) / parts_count as f64;
    let squares = |from: f64, value: f64| (value - from) * (value - from);
    let between = sum_by(parts_count, |number| squares(grand, means[number])) / (parts_count - 1) as f64;
    let within = sum_by(parts_count, |number| {
        let part = &scores[number];
        sum_by(part.len(), |index| squares(means[number], part[index])) / (part.len() as f64 - 1.0).max(1.0)
    }) / parts_count as f64;
    // Scores are of order 1: less than this is rounding of equal scores.
    if within <= 1e-20 {
        return Some(f64::INFINITY);
    }
    Some(((length - 1.0) / length + between / within).sqrt())
}
