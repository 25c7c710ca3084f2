//! A group of chains under a single-spin rule.

use crate::kind::Budget;
use crate::landscape::{Landscape, States};
use crate::ordered::MARGIN;
use crate::plan::Plan;
use crate::rows::Rows;
use crate::rule::Rule;
use crate::simd::Level;
use crate::source::Source;
use crate::sweep::{self, Wide};
use crate::tally::Tally;
use crate::two::Outcome;
use spinledger_sdk::{Error, Host, Parameter, Prepare, Result, Spins, Tallies, UpdateInstance, View};

/// Chains of a group that is advanced together.
pub(crate) const LANES_TOGETHER: usize = 64;

/// The parameter `lanes`.
pub(crate) const LANES: Parameter = Parameter::optional(
    "lanes",
    r#"{"either":{"of":[{"integer":{"min":1,"max":1}},{"integer":{"min":64,"max":64}}]}}"#,
    "1",
    "chains advanced together on one stream: 1 or 64",
);

/// Forms of energy that the single-spin rules serve.
pub(crate) const FORMS: &[&str] = &["pair", "factors", "custom"];

/// One or 64 chains.
pub(crate) struct Group<'a, R> {
    rule: R,
    host: Host<'a>,
    landscape: Landscape<'a>,
    plan: Plan,
    lanes: usize,
    /// Site s of a chain is byte `s * lanes + lane`, pinned sites after free ones; with `rows` it is where they say.
    states: Vec<u8>,
    rows: Option<Rows>,
    wide: Option<Wide>,
    source: Source,
    tally: Tally,
}

impl<'a, R: Rule> Group<'a, R> {
    /// Gets ready. Every chain begins with all spins in state 0, until configurations are imported.
    ///
    /// # Errors
    /// Where spins are vectors, the number of chains is not that of the parameter, or callbacks of the model fail.
    pub(crate) fn new(rule: R, lanes: usize, prepare: Prepare<'a>) -> Result<Self> {
        Self::with(rule, lanes, prepare, Budget::STANDARD, Some(Level::chosen()?))
    }

    /// The same with more or less room for tables, and with vectors of a level or none.
    pub(crate) fn with(
        rule: R,
        lanes: usize,
        prepare: Prepare<'a>,
        budget: Budget,
        level: Option<Level>,
    ) -> Result<Self> {
        if lanes != 1 && lanes != LANES_TOGETHER {
            return Err(Error::new(format!("`lanes` is 1 or {LANES_TOGETHER}, not {lanes}")));
        }
        if prepare.lane_keys.len() != lanes {
            return Err(Error::new(format!(
                "a group of {} chains was asked for, with `lanes` {lanes}",
                prepare.lane_keys.len()
            )));
        }
        let landscape = Landscape::new(prepare.problem)?;
        let mut plan = Plan::new(&landscape, &rule, budget);
        let (total, sites) = (landscape.problem.graph.total, landscape.problem.graph.sites);
        let mut states = vec![0; total * lanes];
        for (chains, pinned) in states[sites * lanes..].chunks_mut(lanes).zip(landscape.problem.energy.pinned_states) {
            chains.fill(*pinned);
        }
        let mut tally = Tally::new(lanes);
        tally.energy.fill(landscape.total(States { data: &states, lanes, lane: 0 })?);
        let rows = match level {
            Some(level) if lanes == 1 && landscape.states() == 2 => Rows::new(&landscape, &mut plan, level),
            _ => None,
        };
        if let Some(rows) = &rows {
            states = rows.ordered.taken_from(&states);
        }
        let wide = match level {
            Some(level) if lanes == LANES_TOGETHER && landscape.states() == 2 => Some(Wide::new(&plan, level)),
            _ => None,
        };
        let source = Source::new(lanes, &prepare.lane_keys, &prepare.group_key);
        Ok(Group { rule, host: prepare.host, landscape, plan, lanes, states, rows, wide, source, tally })
    }

    /// Whether sweeps go by vectors along rows.
    #[cfg(test)]
    pub(crate) fn is_in_rows(&self) -> bool {
        self.rows.is_some()
    }

    /// The states of a chain in order of sites.
    fn chain(&mut self, lane: usize) -> States<'_> {
        match &mut self.rows {
            Some(rows) => States { data: rows.ordered.show(&self.states), lanes: 1, lane: 0 },
            None => States { data: &self.states, lanes: self.lanes, lane },
        }
    }

    /// Where the state of a site is.
    #[inline]
    fn place(&self, site: usize, lane: usize) -> usize {
        match &self.rows {
            Some(rows) => rows.ordered.place(site),
            None => site * self.lanes + lane,
        }
    }

    /// States of all chains at free sites, in no matter what order.
    fn free(&self) -> &[u8] {
        let first = if self.rows.is_some() { MARGIN } else { 0 };
        &self.states[first..][..self.sites() * self.lanes]
    }

    fn sites(&self) -> usize {
        self.landscape.problem.graph.sites
    }

    /// Sum of spin values over free sites, where states have values.
    fn magnetisation(&self, lane: usize) -> Option<f64> {
        let values = self.landscape.problem.energy.values;
        if values.is_empty() {
            return None;
        }
        let free = self.free();
        let mut counts = vec![0_u64; values.len()];
        if let ([zeros, ones], 1) = (&mut counts[..], self.lanes) {
            // Sums of bytes, which compilers vectorise; 255 ones fit in a byte.
            for part in free.chunks(255 * 64) {
                let (rows, rest) = part.as_chunks::<64>();
                let mut sums = [0_u8; 64];
                for row in rows {
                    sums.iter_mut().zip(row).for_each(|(sum, state)| *sum += state);
                }
                *ones += sums.iter().chain(rest).map(|sum| u64::from(*sum)).sum::<u64>();
            }
            *zeros = free.len() as u64 - *ones;
        } else {
            free.iter().skip(lane).step_by(self.lanes).for_each(|s| counts[*s as usize] += 1);
        }
        // Whole numbers times values, in order of states: exact for the usual values, and without a history.
        Some(counts.iter().zip(values).map(|(count, value)| *count as f64 * value).sum())
    }

    fn check_lane(&self, lane: usize) -> Result<()> {
        if lane < self.lanes {
            Ok(())
        } else {
            Err(Error::new(format!("there is no chain {lane} in a group of {}", self.lanes)))
        }
    }
}

impl<R: Rule> UpdateInstance for Group<'_, R> {
    fn import(&mut self, lane: usize, view: &View<'_>) -> Result<()> {
        self.check_lane(lane)?;
        let graph = &self.landscape.problem.graph;
        if view.sites() != graph.total || matches!(view, View::Vectors { .. }) {
            return Err(Error::new(format!("a configuration of {} discrete spins is needed", graph.total)));
        }
        let states = self.landscape.states();
        if let Some(site) = (0..graph.sites).find(|s| view.state(*s) as usize >= states) {
            return Err(Error::new(format!("site {site} is in state {}; there are {states}", view.state(site))));
        }
        // Pinned sites keep the states that the Hamiltonian gives them.
        for site in 0..self.sites() {
            let place = self.place(site, lane);
            self.states[place] = view.state(site);
        }
        let chain = match &mut self.rows {
            Some(rows) => States { data: rows.ordered.show(&self.states), lanes: 1, lane: 0 },
            None => States { data: &self.states, lanes: self.lanes, lane },
        };
        self.tally.energy[lane] = self.landscape.total(chain)?;
        Ok(())
    }

    fn export(&self, lane: usize, spins: &mut Spins<'_>) {
        if let Spins::States(out) = spins {
            out.iter_mut().enumerate().for_each(|(site, state)| *state = self.states[self.place(site, lane)]);
        }
    }

    fn sweep(&mut self, count: u64) -> Result<()> {
        for _ in 0..count {
            if self.host.cancelled() {
                return Err(Error::cancelled());
            }
            if let Some(rows) = &self.rows
                && let Some(Outcome { flips, change }) =
                    rows.sweep::<R>(&self.plan, self.tally.energy[0], &mut self.states, &mut self.source)
            {
                self.tally.energy[0] += change;
                self.tally.accepted[0] += flips;
                self.tally.proposed += self.plan.sites.len() as u64;
                continue;
            }
            for run in &self.plan.runs {
                let mut stage = sweep::Stage {
                    rule: &self.rule,
                    landscape: &self.landscape,
                    plan: &self.plan,
                    lanes: self.lanes,
                    states: &mut self.states,
                    source: &mut self.source,
                    tally: &mut self.tally,
                    wide: self.wide.as_ref(),
                };
                stage.visit(run)?;
            }
            self.tally.proposed += self.plan.sites.len() as u64;
        }
        Ok(())
    }

    fn view(&mut self, lane: usize) -> View<'_> {
        self.chain(lane).view()
    }

    fn tallies(&self, lane: usize) -> Tallies {
        Tallies {
            energy: Some(self.tally.energy[lane]),
            magnetisation: self.magnetisation(lane).map(|sum| [sum, 0.0, 0.0]),
            acceptance: R::PROPOSES.then_some((self.tally.proposed, self.tally.accepted[lane])),
        }
    }

    fn save(&self, out: &mut Vec<u8>) {
        match &self.rows {
            Some(rows) => out.extend(rows.ordered.in_order(&self.states)),
            None => out.extend_from_slice(&self.states),
        }
        self.tally.save(out);
        self.source.save(out);
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let wrong = || Error::new("the saved state is of another lattice, model or number of chains");
        let total = self.landscape.problem.graph.total;
        let (states, rest) = bytes.split_at_checked(total * self.lanes).ok_or_else(wrong)?;
        if states.iter().any(|s| *s as usize >= self.landscape.states()) {
            return Err(wrong());
        }
        let (tally, source) = rest.split_at_checked(self.tally.saved_len()).ok_or_else(wrong)?;
        self.source.restore(source)?;
        self.tally.restore(tally)?;
        match &self.rows {
            Some(rows) => self.states = rows.ordered.taken_from(states),
            None => self.states.copy_from_slice(states),
        }
        Ok(())
    }
}
