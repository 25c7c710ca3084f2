//! The rule of Metropolis and others.

use crate::group::{self, Group};
use crate::rule::{Draw, Entry, Rule, below, only_if, proposed};
use spinledger_numerics::elementary::exp;
use spinledger_numerics::random::Threshold32;
use spinledger_sdk::{Params, Prepare, Result, Update, UpdateSpec};

/// Proposals with |beta dE| below this count as near-ties.
const NEAR_TIE: f64 = 0.125;
/// Part of near-ties that is let through; see `README.md`, "Why not every tie is accepted".
const NEAR_TIE_SHARE: f64 = 0.875;

/// The update rule `metropolis`.
#[derive(Debug)]
pub(crate) struct Metropolis {
    lanes: usize,
}

impl Update for Metropolis {
    const SPEC: UpdateSpec = UpdateSpec {
        name: "metropolis",
        about: "single-spin Metropolis in colour order: propose another state, accept with probability min(1, exp(-dE/T))",
        formula: "proposal uniform among the other q - 1 states; accepted with min(1, exp(-x)), x = dE/T; with 7/8 of that where |x| < 1/8; \
                  with 1/(1 + exp(x)) at sites where |x| < ln 2 always",
        source: "Metropolis, Rosenbluth, Rosenbluth, Teller & Teller 1953 J. Chem. Phys. 21 1087; Glauber 1963 J. Math. Phys. 4 294",
        parameters: &[group::LANES],
        forms: group::FORMS,
        lanes: "lanes",
        ..UpdateSpec::EMPTY
    };
    type Instance<'a> = Group<'a, MetropolisRule>;

    fn new(params: &Params) -> Result<Self> {
        Ok(Metropolis { lanes: params.count("lanes")? })
    }

    fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Self::Instance<'a>> {
        let rule = MetropolisRule { inverse_temperature: prepare.inverse_temperature };
        Group::new(rule, self.lanes, prepare)
    }
}

/// Acceptance at an inverse temperature.
#[derive(Clone, Copy, Debug)]
pub(crate) struct MetropolisRule {
    pub(crate) inverse_temperature: f64,
}

impl MetropolisRule {
    /// Probability of accepting a change of energy; `soft` at sites whose every |beta dE| is below ln 2.
    ///
    /// Both forms satisfy A(x) = exp(-x) A(-x), which is detailed balance for uniform proposals.
    fn acceptance(&self, change: f64, soft: bool) -> f64 {
        let x = self.inverse_temperature * change;
        if soft {
            return 1.0 / (1.0 + exp(x));
        }
        let metropolis = if x <= 0.0 { 1.0 } else { exp(-x) };
        if x.abs() < NEAR_TIE { NEAR_TIE_SHARE * metropolis } else { metropolis }
    }

    fn entry(&self, change: f64, soft: bool) -> Entry {
        Entry { limit: Threshold32::new(self.acceptance(change, soft)).limit(), change }
    }
}

impl Rule for MetropolisRule {
    const PROPOSES: bool = true;

    fn lines(states: usize) -> usize {
        states * (states - 1)
    }

    /// Line a (q - 1) + p: state a, proposal p.
    fn tabulate(&self, energies: &[f64], soft: bool, lines: &mut [Entry]) {
        let others = energies.len() - 1;
        for (number, line) in lines.iter_mut().enumerate() {
            let state = number / others;
            let next = proposed(state as u8, (number % others) as u32);
            *line = self.entry(energies[next as usize] - energies[state], soft);
        }
    }

    #[inline]
    fn toggled(state: u8, hit: u8) -> u8 {
        state ^ hit
    }

    #[inline]
    fn chosen(lines: &[Entry], states: usize, state: u8, draw: Draw) -> (u8, f64) {
        let line = lines[state as usize * (states - 1) + draw.proposal as usize];
        let accepted = below(draw.word, line.limit);
        let step = proposed(state, draw.proposal) ^ state;
        (state ^ (step & accepted.wrapping_neg()), only_if(accepted, line.change))
    }

    fn decided(
        &self,
        _states: usize,
        soft: bool,
        state: u8,
        draw: Draw,
        mut change: impl FnMut(u8) -> f64,
    ) -> (u8, f64) {
        let next = proposed(state, draw.proposal);
        let change = change(next);
        if u64::from(draw.word) < self.entry(change, soft).limit { (next, change) } else { (state, 0.0) }
    }

    fn inverse_temperature(&self) -> f64 {
        self.inverse_temperature
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn acceptance_satisfies_detailed_balance() {
        for inverse_temperature in [0.0, 0.01, 0.4, 3.0] {
            let rule = MetropolisRule { inverse_temperature };
            for change in [0.0, 1e-9, 0.02, 0.3, 1.0, 4.0] {
                for soft in [false, true] {
                    let there = rule.acceptance(change, soft);
                    let back = rule.acceptance(-change, soft);
                    let weight = exp(-inverse_temperature * change);
                    assert!((there - weight * back).abs() < 1e-15, "{inverse_temperature} {change} {soft}");
                }
            }
        }
    }

    #[test]
    fn nothing_is_certain_at_ties() {
        let rule = MetropolisRule { inverse_temperature: 1.0 };
        assert_eq!(rule.acceptance(0.0, false), 0.875);
        assert_eq!(rule.acceptance(0.0, true), 0.5);
        assert_eq!(rule.acceptance(-4.0, false), 1.0);
    }
}
