//! The heat bath.

use crate::group::{self, Group};
use crate::rule::{Draw, Entry, Rule};
use spinledger_numerics::elementary::exp;
use spinledger_numerics::random::Threshold32;
use spinledger_sdk::{Params, Prepare, Result, Update, UpdateSpec};

/// Most states of a discrete spin.
const MOST_STATES: usize = 256;

/// The update rule `heat-bath`.
#[derive(Debug)]
pub(crate) struct HeatBath {
    lanes: usize,
}

impl Update for HeatBath {
    const SPEC: UpdateSpec = UpdateSpec {
        name: "heat-bath",
        about: "single-spin heat bath in colour order: the next state is drawn with its probability given the neighbours",
        formula: "P(s) = exp(-E(s)/T) / sum over s' of exp(-E(s')/T), E(s) the energy with the site in state s; each probability right to 2^-32",
        source: "Glauber 1963 J. Math. Phys. 4 294; Creutz 1980 Phys. Rev. D 21 2308",
        parameters: &[group::LANES],
        forms: group::FORMS,
        lanes: "lanes",
        ..UpdateSpec::EMPTY
    };
    type Instance<'a> = Group<'a, HeatBathRule>;

    fn new(params: &Params) -> Result<Self> {
        Ok(HeatBath { lanes: params.count("lanes")? })
    }

    fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Self::Instance<'a>> {
        let rule = HeatBathRule { inverse_temperature: prepare.inverse_temperature };
        Group::new(rule, self.lanes, prepare)
    }
}

/// Conditional probabilities at an inverse temperature.
#[derive(Clone, Copy, Debug)]
pub(crate) struct HeatBathRule {
    pub(crate) inverse_temperature: f64,
}

impl HeatBathRule {
    /// Limits of all states but the last: a half word at or above the limits of states 0 .. s - 1 and below that of s means s.
    ///
    /// Each limit is 2^32 times the probability of the states up to it, rounded to the nearest whole number; a probability, being the
    /// difference of two, is therefore off by at most 2^-32.
    fn limits(&self, energies: &[f64], limits: &mut [u64]) {
        let lowest = energies.iter().copied().fold(f64::INFINITY, f64::min);
        let mut weights = [0.0; MOST_STATES];
        let weights = &mut weights[..energies.len()];
        for (weight, energy) in weights.iter_mut().zip(energies) {
            *weight = exp(-self.inverse_temperature * (energy - lowest));
        }
        let total: f64 = weights.iter().sum();
        let mut sum = 0.0;
        for (limit, weight) in limits.iter_mut().zip(weights) {
            sum += *weight;
            *limit = Threshold32::new(sum / total).limit();
        }
    }
}

impl Rule for HeatBathRule {
    const PROPOSES: bool = false;

    fn lines(states: usize) -> usize {
        states
    }

    /// Line s: limit of state s and its energy. Two states: both lines hold the limit of state 0.
    fn tabulate(&self, energies: &[f64], _soft: bool, lines: &mut [Entry]) {
        let mut limits = [1 << 32; MOST_STATES];
        self.limits(energies, &mut limits[..energies.len() - 1]);
        if let ([down, up], [one, other]) = (&mut lines[..], energies) {
            *down = Entry { limit: limits[0], change: other - one };
            *up = Entry { limit: limits[0], change: one - other };
            return;
        }
        for ((line, limit), energy) in lines.iter_mut().zip(limits).zip(energies) {
            *line = Entry { limit, change: *energy };
        }
    }

    #[inline]
    fn toggled(_state: u8, hit: u8) -> u8 {
        hit ^ 1
    }

    #[inline]
    fn chosen(lines: &[Entry], states: usize, state: u8, draw: Draw) -> (u8, f64) {
        let next =
            lines[..states - 1].iter().map(|line| usize::from(u64::from(draw.word) >= line.limit)).sum::<usize>();
        (next as u8, lines[next].change - lines[state as usize].change)
    }

    fn decided(
        &self,
        states: usize,
        _soft: bool,
        state: u8,
        draw: Draw,
        mut change: impl FnMut(u8) -> f64,
    ) -> (u8, f64) {
        let mut changes = [0.0; MOST_STATES];
        let mut limits = [0; MOST_STATES];
        for (next, slot) in changes[..states].iter_mut().enumerate().filter(|(next, _)| *next != state as usize) {
            *slot = change(next as u8);
        }
        self.limits(&changes[..states], &mut limits[..states - 1]);
        let next = limits[..states - 1].iter().map(|limit| usize::from(u64::from(draw.word) >= *limit)).sum::<usize>();
        (next as u8, changes[next])
    }

    fn inverse_temperature(&self) -> f64 {
        self.inverse_temperature
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn limits_are_cumulative_probabilities() {
        let rule = HeatBathRule { inverse_temperature: 0.7 };
        let energies = [1.0, -2.0, 0.5];
        let mut limits = [0; 2];
        rule.limits(&energies, &mut limits);
        let weights = energies.map(|e| exp(-0.7 * e));
        let total: f64 = weights.iter().sum();
        let first = weights[0] / total;
        let second = (weights[0] + weights[1]) / total;
        assert!((limits[0] as f64 / 4_294_967_296.0 - first).abs() < 2.4e-10);
        assert!((limits[1] as f64 / 4_294_967_296.0 - second).abs() < 2.4e-10);
    }

    #[test]
    fn large_energies_do_not_overflow() {
        let rule = HeatBathRule { inverse_temperature: 1e6 };
        let mut limits = [0; 2];
        rule.limits(&[1e3, -1e3, 1e3], &mut limits);
        assert_eq!(limits, [0, 1 << 32]);
    }
}
