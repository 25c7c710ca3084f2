//! Which plain version stands beside a rule, and on what.

use super::plain::{Metropolis, Square, SwendsenWang, Wolff};
use serde::Serialize;
use spinledger_numerics::random::StreamKey;
use spinledger_plan::dynamics::Dynamics;

/// Sides of the plain lattice.
const SIDES: (usize, usize) = (8, 8192);

/// Which plain version a rule is held against.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Plain {
    /// [`super::plain::Metropolis`], by visits.
    Metropolis,
    /// [`super::plain::Wolff`], by flips.
    Wolff,
    /// [`super::plain::SwendsenWang`], by sites.
    SwendsenWang,
}

/// Plain code at work.
pub(super) enum Baseline {
    Metropolis(Metropolis),
    Wolff(Wolff),
    SwendsenWang(SwendsenWang),
}

impl Baseline {
    /// The plain version of a rule, on a square of about as many sites as one chain has, so that it lives in a like part of the memory; at the same
    /// temperature where the case is the same system, else where the square lattice orders.
    pub(super) fn of(dynamics: &Dynamics, sites: usize, key: &StreamKey) -> (Baseline, f64) {
        let side = ((sites as f64).sqrt().round() as usize).clamp(SIDES.0, SIDES.1);
        let coupling = dynamics.model.parameters.get("coupling").and_then(|value| value.as_f64());
        let same = dynamics.lattice.identity.item == "square" && dynamics.model.identity.item == "ising";
        let temperature = match coupling {
            Some(j) if same && j != 0.0 => dynamics.temperature / j.abs(),
            _ => spinledger_exact::closed::critical::square_ising(),
        };
        let (square, beta) = (Square::new(side, &key.derive("plain")), 1.0 / temperature);
        let baseline = match dynamics.update[0].0.identity.item.as_str() {
            "wolff" => Baseline::Wolff(Wolff::new(square, beta)),
            "swendsen-wang" => Baseline::SwendsenWang(SwendsenWang::new(square, beta)),
            _ => Baseline::Metropolis(Metropolis::new(square, beta)),
        };
        (baseline, temperature)
    }

    pub(super) fn kind(&self) -> Plain {
        match self {
            Baseline::Metropolis(_) => Plain::Metropolis,
            Baseline::Wolff(_) => Plain::Wolff,
            Baseline::SwendsenWang(_) => Plain::SwendsenWang,
        }
    }

    pub(super) fn square(&self) -> &Square {
        match self {
            Baseline::Metropolis(rule) => &rule.square,
            Baseline::Wolff(rule) => &rule.square,
            Baseline::SwendsenWang(rule) => &rule.square,
        }
    }

    /// So many sweeps; what they count for.
    pub(super) fn run(&mut self, count: u64) -> f64 {
        match self {
            Baseline::Metropolis(rule) => (0..count).for_each(|_| rule.sweep()),
            Baseline::SwendsenWang(rule) => (0..count).for_each(|_| rule.sweep()),
            Baseline::Wolff(rule) => return (0..count).map(|_| rule.cluster() as f64).sum(),
        }
        count as f64 * self.square().sites() as f64
    }
}
