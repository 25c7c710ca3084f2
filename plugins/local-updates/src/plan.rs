//! In which order sites are visited, and which of them share a table.

use crate::kind::{Budget, Kind};
use crate::landscape::Landscape;
use crate::rule::Rule;
use std::collections::HashMap;

/// Consecutive visits of one colour that are decided alike.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Run {
    /// The table of these sites; none: each is computed directly.
    pub(crate) kind: Option<u32>,
    /// Whether every |beta dE| at these sites is below ln 2.
    pub(crate) soft: bool,
    /// First visit, an index into [`Plan::sites`].
    pub(crate) first: usize,
    /// Number of visits.
    pub(crate) count: usize,
    /// Where they begin in [`Plan::stars`].
    pub(crate) stars: usize,
}

/// One sweep.
pub(crate) struct Plan {
    /// Sites in order of visits: by colour, ascending within each.
    pub(crate) sites: Vec<u32>,
    /// Sites with a table, in order of visits, each followed by its neighbours: one stream of memory to read.
    pub(crate) stars: Vec<u32>,
    /// Runs in order; none goes over the end of a colour.
    pub(crate) runs: Vec<Run>,
    /// The tables.
    pub(crate) kinds: Vec<Kind>,
}

impl Plan {
    /// Plans the sweeps of a rule; `budget` limits the tables. Cost: one pass over the adjacency, and the tables.
    pub(crate) fn new<R: Rule>(landscape: &Landscape<'_>, rule: &R, mut budget: Budget) -> Self {
        let energy = &landscape.problem.energy;
        let mut plan = Plan { sites: Vec::new(), stars: Vec::new(), runs: Vec::new(), kinds: Vec::new() };
        // Looked up only, never walked: its order cannot show.
        let mut known: HashMap<Vec<u64>, (Option<u32>, bool)> = HashMap::new();
        let mut key = Vec::new();
        let mut last: (Vec<u64>, (Option<u32>, bool)) = (Vec::new(), (None, false));
        for colour in 0..energy.colours() {
            let mut fresh = true;
            for &site in energy.colour(colour) {
                let site = site as usize;
                let (kind, soft) = if landscape.is_pairwise(site) {
                    surroundings(landscape, site, &mut key);
                    if last.0 != key {
                        let made = known.get(&key).copied().unwrap_or_else(|| {
                            let soft = is_soft(landscape, rule, site);
                            let kind = Kind::new(landscape, site, rule, soft, &mut budget).map(|kind| {
                                plan.kinds.push(kind);
                                (plan.kinds.len() - 1) as u32
                            });
                            // Without a table there is nothing to share; and quenched disorder would fill the memory with keys.
                            if kind.is_some() {
                                known.insert(key.clone(), (kind, soft));
                            }
                            (kind, soft)
                        });
                        last = (key.clone(), made);
                    }
                    last.1
                } else {
                    (None, is_soft(landscape, rule, site))
                };
                match plan.runs.last_mut() {
                    Some(run) if !fresh && run.kind == kind && run.soft == soft => run.count += 1,
                    _ => plan.runs.push(Run { kind, soft, first: plan.sites.len(), count: 1, stars: plan.stars.len() }),
                }
                fresh = false;
                plan.sites.push(site as u32);
                if kind.is_some() {
                    plan.stars.push(site as u32);
                    plan.stars.extend_from_slice(landscape.neighbours(site));
                }
            }
        }
        plan
    }
}

/// Everything that the energy at a site depends on beside the neighbours' states, as a key: equal keys, equal tables.
fn surroundings(landscape: &Landscape<'_>, site: usize, key: &mut Vec<u64>) {
    key.clear();
    key.extend((0..landscape.states()).map(|s| landscape.own(site, s).to_bits()));
    key.extend(landscape.ties(site).flat_map(|(table, strength)| [u64::from(table), strength.to_bits()]));
}

fn is_soft<R: Rule>(landscape: &Landscape<'_>, rule: &R, site: usize) -> bool {
    let inverse_temperature = rule.inverse_temperature();
    inverse_temperature == 0.0 || inverse_temperature * landscape.bound(site) < std::f64::consts::LN_2
}
