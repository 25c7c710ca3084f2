//! How much of the beginning of recorded chains to leave out.
//!
//! The marginal standard error rule (White 1997 Simulation 69 323; White, Cobb & Spratt 2000): leave out the d
//! measurements that minimise sum_{t>=d} (x_t - mean)^2 / (n - d)^2, which weighs the bias that goes against
//! the precision that is lost. It is applied to means over cells of a hundredth of a chain, in two ways: to the average
//! over chains, in which noise is smallest, and to the squared deviations of all chains from their common
//! mean, which sees chains that approach from opposite sides. The larger answer counts, and one cell more is
//! left out when there is anything to leave out. Never more than half.

use spinledger_numerics::sum::sum_by;

/// Cells a chain is cut into.
const CELLS: usize = 100;

/// What [`discard`] found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Discard {
    /// Measurements to leave out at the beginning of each chain.
    pub rows: usize,
    /// Whether half of the chain was not enough: the chains have probably not equilibrated.
    pub at_limit: bool,
}

/// Chooses what to leave out of chains of one quantity; for several quantities take the largest.
///
/// 0 for chains of fewer than 10 measurements or values that are not finite. Chains are compared over the
/// length of the shortest. Cost: one pass.
#[must_use]
pub fn discard(chains: &[&[f64]]) -> Discard {
    let rows = chains.iter().map(|chain| chain.len()).min().unwrap_or(0);
    if rows < 10 || chains.iter().any(|chain| chain.iter().any(|value| !value.is_finite())) {
        return Discard { rows: 0, at_limit: false };
    }
    let cells = rows.min(CELLS);
    let edge = |cell: usize| cell * rows / cells;
    let means: Vec<Vec<f64>> = chains
        .iter()
        .map(|chain| {
            let mean = |cell: usize| {
                let (start, end) = (edge(cell), edge(cell + 1));
                sum_by(end - start, |row| chain[start + row] - chain[0]) / (end - start) as f64 + chain[0]
            };
            (0..cells).map(mean).collect()
        })
        .collect();
    let average = |cell: usize| sum_by(means.len(), |chain| means[chain][cell]) / means.len() as f64;
    let average: Vec<Vec<f64>> = vec![(0..cells).map(average).collect()];
    let (of_average, of_all) = (least(&average), least(&means));
    let cell = of_average.max(of_all);
    let most = cells / 2;
    let cell = if cell == 0 { 0 } else { (cell + 1).min(most) };
    Discard { rows: edge(cell), at_limit: cell == most }
}

/// Number of leading cells whose removal minimises the marginal standard error of the common mean; at most half.
fn least(series: &[Vec<f64>]) -> usize {
    let cells = series[0].len();
    let mut best = (0, f64::INFINITY);
    for start in 0..=cells / 2 {
        let left = cells - start;
        let count = (left * series.len()) as f64;
        let at = |index: usize| series[index / left][start + index % left];
        let mean = sum_by(left * series.len(), at) / count;
        let squares = sum_by(left * series.len(), |index| (at(index) - mean) * (at(index) - mean));
        let error = squares / count / count;
        // Strictly smaller by more than rounding: equal candidates keep more data.
        if error < best.1 * (1.0 - 1e-12) {
            best = (start, error);
        }
    }
    best.0
}
