//! One chain of two states on a regular lattice: everything that sweeps by vectors need beside the plan.

use crate::landscape::Landscape;
use crate::lines::{Lines, is_exact, unit};
use crate::ordered::Ordered;
use crate::plan::Plan;
use crate::rule::Rule;
use crate::simd::Level;
use crate::source::Source;
use crate::stretches::Stretches;
use crate::two::Outcome;
use crate::vector::{Sweep, is_usual};
use std::marker::PhantomData;

/// States in order of visits, and the stretches in them.
pub(crate) struct Rows {
    /// Where states are.
    pub(crate) ordered: Ordered,
    stretches: Stretches,
    /// For each kind.
    lines: Vec<Option<Lines>>,
    unit: f64,
    /// What is added to each change, in units.
    bias: i64,
    /// Largest change of energy of a visit.
    most: f64,
    level: Level,
}

impl Rows {
    /// Gets ready, and renames the sites of the plan's stars to where their states are. None, and the plan as it was, where vectors would not
    /// serve most visits.
    pub(crate) fn new(landscape: &Landscape<'_>, plan: &mut Plan, level: Level) -> Option<Self> {
        let graph = &landscape.problem.graph;
        let unit = unit(plan.kinds.iter().flat_map(|kind| &kind.table))?;
        let lines: Vec<Option<Lines>> = plan.kinds.iter().map(|kind| Lines::new(kind, unit)).collect();
        let bias = lines.iter().flatten().map(|lines| lines.small_bias).max()?;
        let lines: Vec<Option<Lines>> = lines.into_iter().map(|lines| lines?.biased(bias)).collect();
        let ordered = Ordered::new(plan, graph.sites, graph.total)?;
        let energy = &landscape.problem.energy;
        let mut end = 0;
        let mut colours = Vec::new();
        for colour in 0..energy.colours() {
            end += energy.colour(colour).len();
            colours.push(end);
        }
        let old = plan.stars.clone();
        ordered.rename(&mut plan.stars);
        let serves: Vec<bool> =
            plan.kinds.iter().zip(&lines).map(|(kind, lines)| lines.is_some() && is_usual(kind.width - 1)).collect();
        match Stretches::new(plan, &serves, &colours).filter(|found| 2 * found.covered >= plan.sites.len()) {
            Some(stretches) => {
                let changes = plan.kinds.iter().flat_map(|kind| &kind.table).map(|line| line.change.abs());
                let most = changes.fold(0.0, f64::max);
                Some(Rows { ordered, stretches, lines, unit, bias, most, level })
            }
            None => {
                plan.stars = old;
                None
            }
        }
    }

    /// Does a sweep; none if energies might be rounded on the way, so that the order in which they are added would show.
    pub(crate) fn sweep<R: Rule>(
        &self,
        plan: &Plan,
        energy: f64,
        states: &mut [u8],
        source: &mut Source,
    ) -> Option<Outcome> {
        if !is_exact(energy, self.unit, plan.sites.len(), self.most) {
            return None;
        }
        let Rows { stretches, lines, unit, bias, .. } = self;
        Some(self.level.run(Sweep {
            plan,
            stretches,
            lines,
            unit: *unit,
            bias: *bias,
            states,
            source,
            rule: PhantomData::<R>,
        }))
    }
}
