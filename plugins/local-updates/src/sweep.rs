//! Visits of a run of sites, by the fastest way that serves them.

use crate::group::LANES_TOGETHER;
use crate::kind::Kind;
use crate::landscape::{Landscape, States};
use crate::lines::{Lines, unit};
use crate::plan::{Plan, Run};
use crate::rule::{Draw, Rule, proposed};
use crate::simd::Level;
use crate::source::Source;
use crate::tally::Tally;
use crate::together::Together;
use crate::two::{self, Outcome};
use spinledger_sdk::Result;
use std::marker::PhantomData;

/// Sites that are handed to a model's callbacks at once.
const BATCH: usize = 64;

/// What a visit works on.
pub(crate) struct Stage<'s, 'a, R> {
    pub(crate) rule: &'s R,
    pub(crate) landscape: &'s Landscape<'a>,
    pub(crate) plan: &'s Plan,
    pub(crate) lanes: usize,
    pub(crate) states: &'s mut [u8],
    pub(crate) source: &'s mut Source,
    pub(crate) tally: &'s mut Tally,
    /// For 64 chains at once.
    pub(crate) wide: Option<&'s Wide>,
}

/// Tables for 64 chains at once.
pub(crate) struct Wide {
    level: Level,
    /// For each kind, with the unit of its energies.
    lines: Vec<Option<(Lines, f64)>>,
}

impl Wide {
    /// The tables of a plan.
    pub(crate) fn new(plan: &Plan, level: Level) -> Self {
        let one = |kind: &Kind| {
            let unit = unit(kind.table.iter())?;
            Some((Lines::new(kind, unit)?, unit))
        };
        Wide { level, lines: plan.kinds.iter().map(one).collect() }
    }
}

impl<R: Rule> Stage<'_, '_, R> {
    /// Visits all sites of a run, in all chains.
    ///
    /// # Errors
    /// What callbacks of the model say.
    pub(crate) fn visit(&mut self, run: &Run) -> Result<()> {
        let sites = &self.plan.sites[run.first..][..run.count];
        let Some(kind) = run.kind else {
            return sites.chunks(BATCH).try_for_each(|sites| self.compute(sites, run.soft));
        };
        let number = kind as usize;
        let kind = &self.plan.kinds[number];
        let stars = &self.plan.stars[run.stars..][..run.count * kind.width];
        match (self.landscape.states(), self.lanes) {
            (2, 1) => self.two_states(kind, stars),
            (2, _) => self.two_states_together(number, kind, stars),
            _ => self.look_up(kind, stars),
        }
        Ok(())
    }

    /// States that may be proposed.
    fn others(&self) -> u32 {
        if R::PROPOSES { self.landscape.states() as u32 - 1 } else { 0 }
    }

    /// One chain of two states: words in bulk.
    fn two_states(&mut self, kind: &Kind, stars: &[u32]) {
        let mut rest = stars;
        while !rest.is_empty() {
            let words = self.source.words.take(rest.len() / kind.width);
            let (part, later) = rest.split_at(words.len() * kind.width);
            let Outcome { flips, change } = two::visit::<R>(kind, part, words, self.states);
            self.tally.energy[0] += change;
            self.tally.accepted[0] += flips;
            rest = later;
        }
    }

    /// 64 chains of two states: a row of 64 words a site.
    fn two_states_together(&mut self, number: usize, kind: &Kind, stars: &[u32]) {
        if let Some(Wide { level, lines }) = self.wide
            && let Some((lines, unit)) = &lines[number]
        {
            let outcomes = level.run(Together {
                lines,
                unit: *unit,
                width: kind.width,
                stars,
                states: self.states,
                source: self.source,
                rule: PhantomData::<R>,
            });
            return self.note_all(outcomes);
        }
        let mut outcomes = [Outcome::default(); LANES_TOGETHER];
        for star in stars.chunks_exact(kind.width) {
            // Draws come in multiples of 64 for two states, so that a row never crosses the end of the words drawn ahead.
            if let Some(words) = self.source.side_by_side() {
                two::visit_together::<R>(kind, star, words, self.states, &mut outcomes);
            }
        }
        self.note_all(outcomes);
    }

    fn note_all(&mut self, outcomes: [Outcome; LANES_TOGETHER]) {
        for (lane, Outcome { flips, change }) in outcomes.into_iter().enumerate() {
            self.tally.energy[lane] += change;
            self.tally.accepted[lane] += flips;
        }
    }

    /// Any number of states, from a table.
    fn look_up(&mut self, kind: &Kind, stars: &[u32]) {
        let (q, lanes, others) = (self.landscape.states(), self.lanes, self.others());
        let mut draws = [Draw::default(); LANES_TOGETHER];
        let draws = &mut draws[..lanes];
        for star in stars.chunks_exact(kind.width) {
            self.source.draw(others, draws);
            for (lane, draw) in draws.iter().enumerate() {
                let code = kind.code(q, star[1..].iter().map(|n| self.states[*n as usize * lanes + lane]));
                let at = star[0] as usize * lanes + lane;
                let state = self.states[at];
                let (next, change) = R::chosen(&kind.table[code * kind.lines..][..kind.lines], q, state, *draw);
                self.tally.note(lane, next != state, change);
                self.states[at] = next;
            }
        }
    }

    /// Any energy: computed site by site. The sites are of one colour and do not interact, so that all draws and the changes that callbacks
    /// give may come first.
    fn compute(&mut self, sites: &[u32], soft: bool) -> Result<()> {
        let (q, lanes, others) = (self.landscape.states(), self.lanes, self.others());
        let mut draws = vec![Draw::default(); sites.len() * lanes];
        draws.chunks_exact_mut(lanes).for_each(|draws| self.source.draw(others, draws));
        for lane in 0..lanes {
            let draw = |place: usize| draws[place * lanes + lane];
            let added = self.ask(sites, lane, draw)?;
            for (place, &site) in sites.iter().enumerate() {
                let at = site as usize * lanes + lane;
                let state = self.states[at];
                let chain = States { data: self.states, lanes, lane };
                let (next, change) = self.rule.decided(q, soft, state, draw(place), |next| {
                    self.landscape.change(site as usize, state, next, chain) + added.at(place, next)
                });
                self.tally.note(lane, next != state, change);
                self.states[at] = next;
            }
        }
        Ok(())
    }

    /// Asks a custom model for the changes of its energy that a decision may need.
    fn ask(&self, sites: &[u32], lane: usize, draw: impl Fn(usize) -> Draw) -> Result<Added> {
        let Some(custom) = &self.landscape.problem.energy.custom else { return Ok(Added::default()) };
        let chain = States { data: self.states, lanes: self.lanes, lane };
        let mut changes = vec![0.0; sites.len()];
        if R::PROPOSES {
            let next = |(place, site): (usize, &u32)| proposed(chain.at(*site as usize), draw(place).proposal);
            let proposals: Vec<u8> = sites.iter().enumerate().map(next).collect();
            custom.delta(&chain.view(), sites, &proposals, &mut changes)?;
            return Ok(Added { changes, sites: 0 });
        }
        let mut all = Vec::with_capacity(sites.len() * self.landscape.states());
        for state in 0..self.landscape.states() {
            custom.delta(&chain.view(), sites, &vec![state as u8; sites.len()], &mut changes)?;
            all.extend_from_slice(&changes);
        }
        Ok(Added { changes: all, sites: sites.len() })
    }
}

/// Changes of energy that a custom model adds: of the proposal at each site or, with `sites` not 0, of each state at each site.
#[derive(Default)]
struct Added {
    changes: Vec<f64>,
    sites: usize,
}

impl Added {
    fn at(&self, place: usize, state: u8) -> f64 {
        self.changes.get(state as usize * self.sites + place).copied().unwrap_or(0.0)
    }
}
