//! Whether the chains of a point have forgotten where they began, and how much of them is left out: for every analysis the same.

use super::averages::family::{Family, families};
use crate::series::SeriesReader;
use crate::steps::StepError;
use spinledger_stats::discard::discard;
use spinledger_stats::equilibration::{EquilibrationInfo, EquilibrationParams, Verdict, equilibration};

/// The chains of one column, without what is discarded.
pub(crate) struct Chains {
    /// By chain, in order.
    pub(crate) values: Vec<Vec<f64>>,
}

impl Chains {
    /// Reads a column of all chains.
    pub(crate) fn read(reader: &SeriesReader<'_>, column: &str, discarded: usize) -> Result<Self, StepError> {
        let mut values = Vec::new();
        for chain in reader.chains() {
            let mut rows = reader.column(chain, column)?;
            rows.drain(..discarded.min(rows.len()));
            values.push(rows);
        }
        Ok(Chains { values })
    }

    /// How often the sign changes within chains.
    pub(crate) fn reversals(&self) -> usize {
        let mut reversals = 0;
        for chain in &self.values {
            let mut positive = None;
            for value in chain.iter().filter(|value| **value != 0.0) {
                reversals += usize::from(positive.is_some_and(|before| before != (*value > 0.0)));
                positive = Some(*value > 0.0);
            }
        }
        reversals
    }

    pub(crate) fn slices(&self) -> Vec<&[f64]> {
        self.values.iter().map(Vec::as_slice).collect()
    }

    pub(crate) fn apply(&mut self, function: fn(f64) -> f64) {
        self.values.iter_mut().flatten().for_each(|value| *value = function(*value));
    }
}

/// What is left out of a series.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Discarded {
    /// Rows of each chain.
    pub(crate) rows: usize,
    /// Half of a chain was not enough.
    pub(crate) at_limit: bool,
}

/// How much is left out at the beginning of each chain: nothing where sweeps were left out before recording, otherwise what the invariant
/// columns that decide ask for. One column is in memory at a time.
pub(crate) fn discarded(reader: &SeriesReader<'_>) -> Result<Discarded, StepError> {
    let mut found = Discarded::default();
    let facts = reader.facts();
    if !facts.from_start {
        return Ok(found);
    }
    for family in families(&facts.observed).iter().filter(|family| family.decides) {
        let Some(invariant) = family.invariant else { continue };
        let mut chains = Chains::read(reader, &family.column, 0)?;
        chains.apply(invariant);
        let one = discard(&chains.slices());
        found.rows = found.rows.max(one.rows);
        found.at_limit |= one.at_limit;
    }
    Ok(found)
}

/// Tests the invariant series of a family, one of `among` that are tested for one conclusion: the chance of a false alarm is for all of them.
pub(crate) fn test(invariant: &Chains, among: usize) -> EquilibrationInfo {
    let default = EquilibrationParams::default();
    let params = EquilibrationParams { false_alarm: default.false_alarm / among.max(1) as f64, ..default };
    equilibration(&invariant.slices(), &params)
}

/// Flags of a point for an analysis that uses `points` series as a whole: `not-equilibrated`, `few-samples`.
pub(crate) fn flags(
    reader: &SeriesReader<'_>,
    discarded: Discarded,
    points: usize,
) -> Result<Vec<&'static str>, StepError> {
    let mut flags = Vec::new();
    if discarded.at_limit {
        flags.push("not-equilibrated");
    }
    let families = families(&reader.facts().observed);
    let deciding: Vec<&Family> = families.iter().filter(|family| family.decides).collect();
    let among = points * deciding.len();
    for family in deciding {
        let Some(invariant) = family.invariant else { continue };
        let mut chains = Chains::read(reader, &family.column, discarded.rows)?;
        chains.apply(invariant);
        match test(&chains, among).verdict {
            Verdict::Drift { .. } | Verdict::Spread { .. } => flags.push("not-equilibrated"),
            Verdict::TooShort { .. } => flags.push("few-samples"),
            _ => {}
        }
    }
    Ok(flags)
}
