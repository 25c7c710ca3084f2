//! Single-spin rules in order of colours, one a form of energy.

use crate::chains::{Chain, New};
use spinledger_sdk::numerics::elementary::exp;
use spinledger_sdk::numerics::random::{Xoshiro, below, unit_f64};
use spinledger_sdk::{
    Error, Params, Prepare, Problem, Result, Spins, Tallies, Update, UpdateInstance, UpdateSpec, View,
};

/// Draws proposals for all sites of a colour, then decides on each: the sites of a colour do not interact, so that the order does not matter.
///
/// A proposal is accepted with probability 1/(1 + e^(beta change)). With Metropolis' min(1, e^(-beta change)), visiting sites in a fixed order and
/// flipping without a draw wherever the change is 0 can run in a circle for ever: on small closed lattices, and at beta = 0 on all.
pub struct Probe<'a> {
    problem: Problem<'a>,
    beta: f64,
    chains: Vec<Chain>,
}

impl<'a> Probe<'a> {
    fn new(prepare: Prepare<'a>) -> Self {
        let chains = prepare.lane_keys.iter().map(|key| Chain::new(key, &prepare.problem)).collect();
        Probe { problem: prepare.problem, beta: prepare.inverse_temperature, chains }
    }
}

/// A state other than the present one, or a vector in any direction.
fn propose(stream: &mut Xoshiro, states: usize, components: usize, now: u8) -> New {
    if components == 0 {
        let other = below(states as u64 - 1, || stream.next()) as u8;
        return New::State(if other >= now { other + 1 } else { other });
    }
    loop {
        let mut vector = [0.0; 3];
        vector[..components].iter_mut().for_each(|x| *x = 2.0 * unit_f64(stream.next()) - 1.0);
        let square: f64 = vector.iter().map(|x| x * x).sum();
        if square > 1e-6 && square <= 1.0 {
            return New::Vector(vector.map(|x| x / square.sqrt()));
        }
    }
}

impl UpdateInstance for Probe<'_> {
    fn import(&mut self, lane: usize, view: &View<'_>) -> Result<()> {
        self.chains[lane].import(&self.problem, view)
    }

    fn export(&self, lane: usize, spins: &mut Spins<'_>) {
        self.chains[lane].export(spins);
    }

    fn sweep(&mut self, count: u64) -> Result<()> {
        let (g, e) = (&self.problem.graph, &self.problem.energy);
        let n = e.components;
        for _ in 0..count {
            for chain in &mut self.chains {
                for colour in 0..e.colours() {
                    let sites = e.colour(colour);
                    let mut news = Vec::with_capacity(sites.len());
                    for &site in sites {
                        let now = chain.states.get(site as usize).copied().unwrap_or(0);
                        news.push(propose(&mut chain.stream, e.states, n, now));
                    }
                    let mut changes = vec![0.0; sites.len()];
                    if let Some(custom) = e.custom {
                        let view = chain.view(n);
                        if n == 0 {
                            let states: Vec<u8> = news
                                .iter()
                                .filter_map(|new| if let New::State(s) = new { Some(*s) } else { None })
                                .collect();
                            custom.delta(&view, sites, &states, &mut changes)?;
                        } else {
                            let vectors: Vec<f64> = news
                                .iter()
                                .flat_map(|new| if let New::Vector(v) = new { v[..n].to_vec() } else { Vec::new() })
                                .collect();
                            custom.delta_vectors(&view, sites, &vectors, &mut changes)?;
                        }
                    }
                    for ((&site, new), added) in sites.iter().zip(&news).zip(changes) {
                        let site = site as usize;
                        let change = added + chain.change(g, e, site, new);
                        chain.proposed += 1;
                        if unit_f64(chain.stream.next()) < 1.0 / (1.0 + exp(self.beta * change)) {
                            chain.accepted += 1;
                            chain.energy += change;
                            match new {
                                New::State(state) => chain.states[site] = *state,
                                New::Vector(v) => chain.vectors[site * n..][..n].copy_from_slice(&v[..n]),
                            }
                        }
                    }
                }
            }
        }
        Ok(())
    }

    fn view(&mut self, lane: usize) -> View<'_> {
        self.chains[lane].view(self.problem.energy.components)
    }

    fn tallies(&self, lane: usize) -> Tallies {
        let chain = &self.chains[lane];
        Tallies { energy: Some(chain.energy), magnetisation: None, acceptance: Some((chain.proposed, chain.accepted)) }
    }

    fn path(&self) -> &str {
        "by colour"
    }

    fn save(&self, out: &mut Vec<u8>) {
        self.chains.iter().for_each(|chain| chain.save(out));
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let rest = self.chains.iter_mut().try_fold(bytes, |rest, chain| chain.restore(rest))?;
        if rest.is_empty() { Ok(()) } else { Err(Error::new("the saved state is too long")) }
    }
}

macro_rules! probe {
    ($($rule:ident, $name:literal, $forms:expr;)*) => {$(
        /// A rule for some forms of energy.
        pub struct $rule;

        impl Update for $rule {
            const SPEC: UpdateSpec = UpdateSpec {
                name: $name,
                about: "Single-spin heat bath in order of colours, for tests.",
                forms: $forms,
                ..UpdateSpec::EMPTY
            };
            type Instance<'a> = Probe<'a>;

            fn new(_: &Params) -> Result<Self> {
                Ok($rule)
            }

            fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Probe<'a>> {
                Ok(Probe::new(prepare))
            }
        }
    )*};
}

probe! {
    ProbePair, "probe-pair", &["pair"];
    ProbeFactors, "probe-factors", &["pair", "factors"];
    ProbeVectors, "probe-vectors", &["vectors"];
    ProbeCustom, "probe-custom", &["pair", "factors", "custom"];
}
