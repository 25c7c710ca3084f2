//! Reading a recorded series for an analysis: a column of a chain at a time, so that memory grows with one chain and not with all of them.

use crate::job::{SeriesFacts, SeriesInput};
use crate::steps::StepError;
use spinledger_ledger::Ledger;

/// Reads columns of a series.
pub struct SeriesReader<'a> {
    ledger: &'a Ledger,
    input: &'a SeriesInput,
}

impl<'a> SeriesReader<'a> {
    pub(crate) fn new(ledger: &'a Ledger, input: &'a SeriesInput) -> Self {
        SeriesReader { ledger, input }
    }

    /// The chains, as pairs of start and number, in order.
    pub fn chains(&self) -> Vec<(usize, u32)> {
        let mut chains: Vec<(usize, u32)> = self.input.pieces.iter().map(|p| (p.start, p.chain)).collect();
        chains.sort_unstable();
        chains.dedup();
        chains
    }

    /// A column of a chain, in order of sweeps. What is not known is NaN.
    ///
    /// # Errors
    /// Where a block cannot be read or has no such column.
    pub fn column(&self, chain: (usize, u32), name: &str) -> Result<Vec<f64>, StepError> {
        let mut values = Vec::new();
        for piece in self.input.pieces.iter().filter(|p| (p.start, p.chain) == chain) {
            let block = self.ledger.read_block(&piece.key, "main", Some(&[name]), Some(piece.rows as usize))?;
            let column = block.columns.into_iter().next();
            values.append(&mut column.ok_or_else(|| StepError(format!("a block has no column `{name}`")))?.values);
        }
        Ok(values)
    }

    /// Whether the series has a column.
    pub fn has(&self, name: &str) -> bool {
        self.input.facts.observed.iter().any(|column| column.name == name)
    }

    /// What is known beside the numbers.
    pub fn facts(&self) -> &'a SeriesFacts {
        &self.input.facts
    }
}
