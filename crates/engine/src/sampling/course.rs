//! The course of a group of chains: where it begins or goes on, sweeps, saved states, the clock.

use crate::failure::Failure;
use crate::kept;
use crate::line::Line;
use crate::loaded::Problem;
use crate::saved;
use spinledger_host::{Configuration, Sampler, ordered_start, random_start};
use spinledger_ledger::{ClaimGuard, Ledger, SavedState};
use spinledger_numerics::random::StreamKey;
use spinledger_plan::sample::{Group, Point};
use spinledger_plan::states::Begin;
use spinledger_terms::Key;
use std::time::{Duration, Instant};

/// How often the state is saved at most.
const SAVE_EVERY: Duration = Duration::from_millis(500);
/// Saving takes at most one part in so many of the time.
const SAVE_SHARE: u32 = 50;
/// How often the claim is kept alive.
const TOUCH_EVERY: Duration = Duration::from_secs(60);
/// How long sweeps may go on before progress is told and a stop is looked for.
const LOOK_EVERY: Duration = Duration::from_millis(50);

/// A group of chains at work.
pub(super) struct Course<'a> {
    point: &'a Point,
    group: &'a Group,
    problem: Problem,
    /// The rules of a sweep and how often each is done.
    rules: Vec<(Sampler, u64)>,
    /// The rule that holds the current configurations.
    holder: usize,
    /// Sweeps done, settling included.
    swept: u64,
    /// Sweeps whose updates were told.
    told: u64,
    /// Sweeps to do before looking at the clock.
    batch: u64,
    line: &'a Line,
    last_look: Instant,
    last_save: Instant,
    save_pause: Duration,
    /// Whether the state is saved: not where a later one is there.
    saves: bool,
    last_touch: Instant,
    ledger: &'a Ledger,
    claim: ClaimGuard,
    notes: Vec<String>,
}

impl<'a> Course<'a> {
    /// With rules that have no configurations yet.
    pub(super) fn new(
        point: &'a Point,
        group: &'a Group,
        problem: Problem,
        rules: Vec<(Sampler, u64)>,
        ledger: &'a Ledger,
        claim: ClaimGuard,
        line: &'a Line,
    ) -> Self {
        let now = Instant::now();
        Course {
            point,
            group,
            problem,
            rules,
            holder: 0,
            swept: 0,
            told: 0,
            batch: 1,
            line,
            last_look: now,
            last_save: now,
            save_pause: SAVE_EVERY,
            saves: true,
            last_touch: now,
            ledger,
            claim,
            notes: Vec::new(),
        }
    }

    pub(super) fn point(&self) -> &'a Point {
        self.point
    }

    /// Sweeps done, settling included.
    pub(super) fn swept(&self) -> u64 {
        self.swept
    }

    /// Sweeps done when a row is measured. Checking a pipeline has seen to it that they can be counted.
    pub(super) fn sweeps_at(&self, row: u64) -> u64 {
        let d = &self.point.dynamics;
        d.settle + d.equilibrate + row * d.every
    }

    /// The rule that holds the current configurations.
    pub(super) fn holder(&mut self) -> &mut Sampler {
        &mut self.rules[self.holder].0
    }

    pub(super) fn holder_name(&self) -> &'a str {
        &self.point.dynamics.update[self.holder].0.identity.item
    }

    /// Something for the record of the next block.
    pub(super) fn note(&mut self, text: String) {
        self.notes.push(text);
    }

    pub(super) fn take_notes(&mut self) -> Vec<String> {
        std::mem::take(&mut self.notes)
    }

    fn lanes(&self) -> usize {
        self.point.dynamics.lanes as usize
    }

    /// Goes on from the saved state where it is not past `latest` sweeps, and begins where there is none. A saved state past `last`, the end of what
    /// is to be done, stays the newest. The inner error says why a state that should have served did not; the rules are then in no order.
    pub(super) fn take_up(
        &mut self,
        latest: u64,
        last: u64,
        stream: &StreamKey,
    ) -> Result<Result<(), String>, Failure> {
        match self.ledger.load_state(&self.group.key) {
            SavedState::Found { position, bytes } if position <= latest => {
                if let Err(reason) = self.restore(&bytes) {
                    return Ok(Err(format!("the saved state was not taken up ({reason})")));
                }
                (self.swept, self.told) = (position, position);
                Ok(Ok(()))
            }
            SavedState::Damaged(warning) => Ok(Err(warning)),
            SavedState::Found { position, .. } if position > last => {
                self.saves = false;
                self.begin(stream).map(Ok)
            }
            _ => self.begin(stream).map(Ok),
        }
    }

    /// Begins with new rules, which have no configurations yet.
    pub(super) fn begin_with(&mut self, rules: Vec<(Sampler, u64)>, stream: &StreamKey) -> Result<(), Failure> {
        self.rules = rules;
        self.begin(stream)
    }

    fn begin(&mut self, stream: &StreamKey) -> Result<(), Failure> {
        let start = stream.derive("start");
        for lane in 0..self.lanes() {
            let configuration = match &self.group.begin {
                Begin::Ordered => ordered_start(&self.problem.energy, &self.problem.graph),
                Begin::Random => random_start(&self.problem.energy, &self.problem.graph, &start.lane(lane as u32)),
                Begin::States(keys) => self.kept(keys.get(lane).ok_or("a chain has nothing to begin from")?)?,
            };
            self.rules[0].0.import(lane, &configuration)?;
        }
        self.holder = 0;
        (self.swept, self.told) = (0, 0);
        self.adapt(self.point.dynamics.settle > 0)
    }

    /// A kept configuration.
    fn kept(&self, key: &Key) -> Result<Configuration, Failure> {
        let table = self.ledger.read_table(key, "main")?;
        let misfit = |what: String| Failure::Broken(format!("the configuration to begin from does not fit: {what}"));
        kept::configuration(&table, &self.problem).map_err(misfit)
    }

    fn adapt(&mut self, on: bool) -> Result<(), Failure> {
        for (sampler, _) in &mut self.rules {
            sampler.adapt(on)?;
        }
        Ok(())
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<(), String> {
        let (holder, blobs) = saved::unpack(bytes).ok_or("it is damaged")?;
        if blobs.len() != self.rules.len() || holder >= blobs.len() {
            return Err("it is of other rules".into());
        }
        for ((sampler, _), blob) in self.rules.iter_mut().zip(blobs) {
            sampler.restore(blob).map_err(|e| crate::chain_text(&e))?;
        }
        self.holder = holder;
        Ok(())
    }

    /// Saves the state.
    pub(super) fn save(&mut self) -> Result<(), Failure> {
        if !self.saves {
            return Ok(());
        }
        let started = Instant::now();
        let blobs: Vec<Vec<u8>> = self.rules.iter_mut().map(|(s, _)| s.save()).collect::<Result<_, _>>()?;
        let bytes = saved::pack(self.holder, &blobs);
        self.ledger.save_state(&self.group.key, self.swept, &bytes)?;
        self.save_pause = SAVE_EVERY.max(started.elapsed() * SAVE_SHARE);
        self.last_save = Instant::now();
        Ok(())
    }

    /// Saves the state where that was long ago. To be called where nothing measured is unpublished: a later run takes up no state that is past
    /// the first row that is due.
    pub(super) fn save_when_due(&mut self) -> Result<(), Failure> {
        if self.last_save.elapsed() > self.save_pause { self.save() } else { Ok(()) }
    }

    /// Does sweeps up to a number; false where it was stopped on the way.
    pub(super) fn sweep_to(&mut self, target: u64) -> Result<bool, Failure> {
        while self.swept < target {
            let mut step = (target - self.swept).min(self.batch);
            let settle = self.point.dynamics.settle;
            if self.swept < settle {
                step = step.min(settle - self.swept);
            }
            let before = Instant::now();
            self.sweep(step)?;
            self.swept += step;
            if self.swept == settle && settle > 0 {
                self.adapt(false)?;
            }
            if step == self.batch {
                let took = before.elapsed();
                if took < LOOK_EVERY / 4 {
                    self.batch = self.batch.saturating_mul(2).min(1 << 40);
                } else if took > LOOK_EVERY {
                    self.batch = (self.batch / 2).max(1);
                }
            }
            if !self.look()? {
                return Ok(false);
            }
        }
        Ok(true)
    }

    /// Each rule in turn, as often as it is asked for; configurations go from one to the next.
    fn sweep(&mut self, count: u64) -> Result<(), Failure> {
        if let [(sampler, times)] = self.rules.as_mut_slice() {
            let sweeps = count.checked_mul(*times).ok_or("more sweeps than can be counted")?;
            return Ok(sampler.sweep(sweeps)?);
        }
        for _ in 0..count {
            for next in 0..self.rules.len() {
                if next != self.holder {
                    for lane in 0..self.lanes() {
                        let configuration = self.rules[self.holder].0.export(lane)?;
                        self.rules[next].0.import(lane, &configuration)?;
                    }
                    self.holder = next;
                }
                let (sampler, times) = &mut self.rules[next];
                sampler.sweep(*times)?;
            }
        }
        Ok(())
    }

    /// Looks at the clock: tells progress, keeps the claim alive, saves the state before the first row. False: stop.
    pub(super) fn look(&mut self) -> Result<bool, Failure> {
        if self.last_look.elapsed() < LOOK_EVERY {
            return Ok(true);
        }
        self.last_look = Instant::now();
        self.tell();
        if self.last_touch.elapsed() > TOUCH_EVERY {
            self.last_touch = Instant::now();
            // A claim that was lost costs double work at worst; an entry is published once all the same.
            let _ = self.claim.touch();
        }
        if self.swept < self.sweeps_at(0) {
            self.save_when_due()?;
        }
        Ok(!self.line.stopping())
    }

    /// Tells the updates that were not told yet.
    pub(super) fn tell(&mut self) {
        let lanes = u64::from(self.point.dynamics.lanes);
        let updates = (self.swept - self.told).saturating_mul(self.updates_per_chain()).saturating_mul(lanes);
        self.told = self.swept;
        self.line.progress(updates);
    }

    /// Checks the states of all lanes.
    pub(super) fn look_at_states(&mut self) -> Result<(), Failure> {
        for lane in 0..self.lanes() {
            self.holder().export(lane)?;
        }
        Ok(())
    }

    /// Attempted spin updates of one chain in a sweep.
    pub(super) fn updates_per_chain(&self) -> u64 {
        (self.problem.graph.sites as u64).saturating_mul(self.point.dynamics.passes())
    }
}
