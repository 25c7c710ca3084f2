//! One parcel of sampling: a group of chains, from where its record ends to the number of rows asked for.
//!
//! Row r is measured when `settle + equilibrate + r every` sweeps are done. The state of the group is saved, by the clock, with the number of
//! sweeps done; a later run goes on from it and skips what is on record. Where the state was saved cannot be seen in the results.

use crate::job::{Entry, Report, SampleJob, SeriesNote};
use crate::loaded::{Loaded, Problem};
use crate::program;
use crate::worker::Line;
use crate::{chain_text, saved};
use spinledger_host::{Observer, Sampler, energy_scale, energy_total, measure_all, ordered_start, random_start};
use spinledger_ledger::{BlockData, ChainPlace, Claim, ClaimGuard, ColumnData, Draft, Ledger, Payload, SavedState};
use spinledger_numerics::random::StreamKey;
use spinledger_plan::blocks::{Block, blocks};
use spinledger_plan::sample::{Group, Point};
use spinledger_terms::{ColumnSpec, Key, Value};
use std::time::{Duration, Instant};

/// How often the state is saved at most.
const SAVE_EVERY: Duration = Duration::from_millis(500);
/// Saving takes at most one part in so many of the time.
const SAVE_SHARE: u32 = 50;
/// How often the claim is kept alive.
const TOUCH_EVERY: Duration = Duration::from_secs(60);
/// How long sweeps may go on before progress is told and a stop is looked for.
const LOOK_EVERY: Duration = Duration::from_millis(50);
/// How far a tracked energy may be from a recomputation, in parts of the sum of the largest absolute values of all terms: rounding
/// errors of 10^12 additions stay below it, and a wrong energy change of a single spin in 10^8 does not.
const ENERGY_TOLERANCE: f64 = 1e-9;

/// Does the parcel.
///
/// # Errors
/// In words: why the parcel is broken.
pub(crate) fn sample(job: &SampleJob, ledger: &Ledger, loaded: &mut Loaded, line: &Line) -> Result<Report, String> {
    let group = job.group();
    let claim = match ledger.claim(&group.key, "sample").map_err(|e| chain_text(&e))? {
        Claim::Mine(guard) => guard,
        Claim::Theirs { host, pid, .. } => return Ok(Report::Held { by: format!("process {pid} on {host}") }),
    };
    let mut entries = Vec::new();
    let covered = refresh(ledger, &job.point, group, &mut entries)?;
    if covered.iter().all(|rows| *rows >= job.point.measure) {
        return Ok(Report::Done { computed: false, updates: 0, entries });
    }
    let problem = loaded.problem(&job.point.dynamics)?;
    let (observers, columns) = loaded.observers(&job.point.dynamics, &problem)?;
    let stream = StreamKey::from_text(&group.stream);
    let rules = loaded.rules(&job.point.dynamics, &problem, &stream)?;
    let mut chains = Chains {
        point: &job.point,
        group,
        problem,
        rules,
        observers,
        columns,
        holder: 0,
        swept: 0,
        told: 0,
        batch: 1,
        line,
        last_look: Instant::now(),
        last_save: Instant::now(),
        save_pause: SAVE_EVERY,
        last_touch: Instant::now(),
        ledger,
        claim,
        notes: Vec::new(),
        threads: loaded.threads(),
    };
    let first = covered.iter().copied().min().unwrap_or(0);
    chains.take_up(chains.sweeps_at(first), &stream)?;
    let (finished, next) = chains.record(job, &covered, &mut entries)?;
    // Stopped within a block, the state is past the first row that is due: the one saved before serves better.
    if chains.swept <= chains.sweeps_at(next) {
        chains.save()?;
    }
    if finished {
        Ok(Report::Done { computed: true, updates: line.untold(), entries })
    } else {
        Ok(Report::Stopped { entries })
    }
}

/// What is on record by now: another run may have gone on since the plan was made.
fn refresh(ledger: &Ledger, point: &Point, group: &Group, entries: &mut Vec<Entry>) -> Result<Vec<u64>, String> {
    let mut covered = group.covered.clone();
    for (lane, rows) in covered.iter_mut().enumerate() {
        let have = *rows;
        for block in blocks(point.measure, point.block_rows).filter(|b| b.first + b.rows > have) {
            // Each block that is due may be there at the length asked for; the first that is not ends the search.
            let key = Key::of(&group.block_preimage(lane as u32, block));
            match ledger.lookup(&key).map_err(|e| chain_text(&e))? {
                Some(found) => {
                    *rows = block.first + block.rows;
                    entries.push(Entry::of(&found));
                }
                None => break,
            }
        }
    }
    Ok(covered)
}

/// A group of chains at work.
struct Chains<'a> {
    point: &'a Point,
    group: &'a Group,
    problem: Problem,
    /// The rules of a sweep and how often each is done.
    rules: Vec<(Sampler, u64)>,
    observers: Vec<Observer>,
    columns: Vec<ColumnSpec>,
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
    last_touch: Instant,
    ledger: &'a Ledger,
    claim: ClaimGuard,
    notes: Vec<String>,
    /// Threads lent.
    threads: usize,
}

impl Chains<'_> {
    /// Sweeps done when a row is measured.
    fn sweeps_at(&self, row: u64) -> u64 {
        let d = &self.point.dynamics;
        d.settle + d.equilibrate + row * d.every
    }

    fn lanes(&self) -> usize {
        self.point.dynamics.lanes as usize
    }

    /// Goes on from the saved state where it is not past `latest` sweeps; starts anew otherwise.
    fn take_up(&mut self, latest: u64, stream: &StreamKey) -> Result<(), String> {
        let state = self.ledger.load_state(&self.group.key);
        if let SavedState::Damaged(warning) = &state {
            self.notes.push(format!("{warning}: started anew"));
        }
        if let Some((position, bytes)) = state.found().filter(|(position, _)| *position <= latest) {
            match self.restore(&bytes) {
                Ok(()) => {
                    self.swept = position;
                    self.told = position;
                    return Ok(());
                }
                Err(reason) => self.notes.push(format!("the saved state was not taken up ({reason}): started anew")),
            }
        }
        let start = stream.derive("start");
        for lane in 0..self.lanes() {
            let configuration = match self.group.start.as_str() {
                "ordered" => ordered_start(&self.problem.energy, &self.problem.graph),
                _ => random_start(&self.problem.energy, &self.problem.graph, &start.lane(lane as u32)),
            };
            self.rules[0].0.import(lane, &configuration).map_err(|e| chain_text(&e))?;
        }
        self.holder = 0;
        self.swept = 0;
        for (sampler, _) in &mut self.rules {
            sampler.adapt(self.point.dynamics.settle > 0).map_err(|e| chain_text(&e))?;
        }
        Ok(())
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<(), String> {
        let (holder, blobs) = saved::unpack(bytes).ok_or("it is damaged")?;
        if blobs.len() != self.rules.len() || holder >= blobs.len() {
            return Err("it is of other rules".into());
        }
        for ((sampler, _), blob) in self.rules.iter_mut().zip(blobs) {
            sampler.restore(blob).map_err(|e| chain_text(&e))?;
        }
        self.holder = holder;
        Ok(())
    }

    /// Saves the state.
    fn save(&mut self) -> Result<(), String> {
        let started = Instant::now();
        let blobs: Vec<Vec<u8>> =
            self.rules.iter_mut().map(|(s, _)| s.save()).collect::<Result<_, _>>().map_err(|e| chain_text(&e))?;
        let bytes = saved::pack(self.holder, &blobs);
        self.ledger.save_state(&self.group.key, self.swept, &bytes).map_err(|e| chain_text(&e))?;
        self.save_pause = SAVE_EVERY.max(started.elapsed() * SAVE_SHARE);
        self.last_save = Instant::now();
        Ok(())
    }

    /// Does sweeps up to a number; false where it was stopped on the way.
    fn sweep_to(&mut self, target: u64) -> Result<bool, String> {
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
                for (sampler, _) in &mut self.rules {
                    sampler.adapt(false).map_err(|e| chain_text(&e))?;
                }
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
    fn sweep(&mut self, count: u64) -> Result<(), String> {
        if let [(sampler, times)] = self.rules.as_mut_slice() {
            return sampler.sweep(count * *times).map_err(|e| chain_text(&e));
        }
        for _ in 0..count {
            for next in 0..self.rules.len() {
                if next != self.holder {
                    for lane in 0..self.lanes() {
                        let configuration = self.rules[self.holder].0.export(lane).map_err(|e| chain_text(&e))?;
                        self.rules[next].0.import(lane, &configuration).map_err(|e| chain_text(&e))?;
                    }
                    self.holder = next;
                }
                let (sampler, times) = &mut self.rules[next];
                sampler.sweep(*times).map_err(|e| chain_text(&e))?;
            }
        }
        Ok(())
    }

    /// Looks at the clock: tells progress, keeps the claim alive, saves the state before the first row. False: stop.
    fn look(&mut self) -> Result<bool, String> {
        if self.last_look.elapsed() < LOOK_EVERY {
            return Ok(true);
        }
        self.last_look = Instant::now();
        let updates = (self.swept - self.told).saturating_mul(self.updates_per_sweep());
        self.told = self.swept;
        self.line.progress(updates);
        if self.last_touch.elapsed() > TOUCH_EVERY {
            self.last_touch = Instant::now();
            // A claim that was lost costs double work at worst; an entry is published once all the same.
            let _ = self.claim.touch();
        }
        if self.swept < self.sweeps_at(0) && self.last_save.elapsed() > self.save_pause {
            self.save()?;
        }
        Ok(!self.line.stopping())
    }

    fn updates_per_chain(&self) -> u64 {
        (self.problem.graph.sites as u64).saturating_mul(self.point.dynamics.passes())
    }

    fn updates_per_sweep(&self) -> u64 {
        self.updates_per_chain().saturating_mul(u64::from(self.point.dynamics.lanes))
    }

    /// Measures and publishes all blocks that are due. Returns whether it came to the end, and the first row that is not on record.
    fn record(&mut self, job: &SampleJob, covered: &[u64], entries: &mut Vec<Entry>) -> Result<(bool, u64), String> {
        let width = self.columns.len();
        let mut values = vec![0.0; width];
        let mut looked = false;
        for block in blocks(self.point.measure, self.point.block_rows) {
            let end = block.first + block.rows;
            if covered.iter().all(|rows| *rows >= end) {
                continue;
            }
            let started = (Instant::now(), spinledger_ledger::now(), self.swept);
            let mut lanes: Vec<Option<BlockData>> = Vec::new();
            for (lane, rows) in covered.iter().enumerate() {
                lanes.push(if *rows >= end { None } else { Some(self.begin_block(lane, block, *rows)?) });
            }
            let have = |lane: &Option<BlockData>| lane.as_ref().map_or(end, |b| block.first + b.rows() as u64);
            for row in block.first..end {
                if lanes.iter().all(|lane| have(lane) > row) {
                    continue;
                }
                if !self.sweep_to(self.sweeps_at(row))? {
                    return Ok((false, block.first));
                }
                if !looked {
                    // Observables trust the states that they are shown: a rule that makes others is found out before, and named.
                    for lane in 0..self.lanes() {
                        self.rules[self.holder].0.export(lane).map_err(|e| chain_text(&e))?;
                    }
                    looked = true;
                }
                for (lane, data) in lanes.iter_mut().enumerate() {
                    let Some(data) = data.as_mut().filter(|d| block.first + d.rows() as u64 == row) else { continue };
                    let sampler = &mut self.rules[self.holder].0;
                    measure_all(&mut self.observers, sampler, lane, &mut values).map_err(|e| chain_text(&e))?;
                    let sweep = self.point.dynamics.equilibrate + row * self.point.dynamics.every;
                    data.sweep.push(sweep as i64);
                    for (column, value) in data.columns.iter_mut().zip(&values) {
                        column.values.push(*value);
                    }
                }
                self.look()?;
            }
            for (lane, data) in lanes.into_iter().enumerate() {
                if let Some(data) = data {
                    self.check_energy(lane, &data)?;
                    entries.push(self.publish(job, lane as u32, block, data, &started)?);
                }
            }
            if self.last_save.elapsed() > self.save_pause {
                self.save()?;
            }
        }
        let updates = (self.swept - self.told).saturating_mul(self.updates_per_sweep());
        self.told = self.swept;
        self.line.progress(updates);
        Ok((true, self.point.measure))
    }

    /// A block to be filled, with the rows that are on record of it.
    fn begin_block(&self, lane: usize, block: Block, covered: u64) -> Result<BlockData, String> {
        if covered > block.first {
            let partial = Block { rows: covered - block.first, ..block };
            let key = Key::of(&self.group.block_preimage(lane as u32, partial));
            return self.ledger.read_block(&key, "main", None, None).map_err(|e| chain_text(&e));
        }
        let column = |spec: &ColumnSpec| ColumnData {
            name: spec.name.clone(),
            unit: if spec.unit == "energy" { self.point.dynamics.energy_unit.clone() } else { spec.unit.clone() },
            values: Vec::with_capacity(block.rows as usize),
        };
        let columns = self.columns.iter().map(column).collect();
        Ok(BlockData { sweep: Vec::with_capacity(block.rows as usize), columns })
    }

    /// The energy that the rule tracks, and the one just recorded, against a recomputation.
    fn check_energy(&mut self, lane: usize, data: &BlockData) -> Result<(), String> {
        let sampler = &mut self.rules[self.holder].0;
        let configuration = sampler.export(lane).map_err(|e| chain_text(&e))?;
        let energy =
            energy_total(&self.problem.graph, &self.problem.energy, &configuration).map_err(|e| chain_text(&e))?;
        let scale = energy_scale(&self.problem.energy, &self.problem.graph).max(energy.abs());
        let off = |found: f64| (found - energy).abs() > ENERGY_TOLERANCE * scale || found.is_nan();
        if let Some(tracked) = sampler.tallies(lane).map_err(|e| chain_text(&e))?.energy
            && off(tracked)
        {
            let rule = &self.point.dynamics.update[self.holder].0.identity.item;
            return Err(format!(
                "after {} sweeps the rule `{rule}` tracks a total energy of {tracked}, recomputed it is {energy}: the \
                     rule's or the model's change of energy is wrong",
                self.swept
            ));
        }
        let standard = self.point.dynamics.observe.iter().any(|o| o.identity.standard && o.identity.item == "energy");
        let column = data.columns.iter().find(|c| standard && c.name == "energy");
        if let Some(recorded) = column.and_then(|c| c.values.last()) {
            let total = recorded * self.problem.graph.sites as f64;
            if off(total) {
                return Err(format!(
                    "after {} sweeps an energy of {recorded} per site was recorded, recomputed it is {}",
                    self.swept,
                    energy / self.problem.graph.sites as f64
                ));
            }
        }
        Ok(())
    }

    fn publish(
        &mut self,
        job: &SampleJob,
        lane: u32,
        block: Block,
        data: BlockData,
        started: &(Instant, String, u64),
    ) -> Result<Entry, String> {
        let dynamics = &self.point.dynamics;
        let preimage = self.group.block_preimage(lane, block);
        // The time of a block is shared by the chains that were advanced together.
        let seconds = started.0.elapsed().as_secs_f64() / f64::from(dynamics.lanes);
        let updates = (self.swept - started.2).saturating_mul(self.updates_per_chain());
        let parameters = Value::map([
            ("chains", self.group.value.clone()),
            ("temperature", Value::Number(dynamics.temperature)),
            ("measure", Value::Integer(self.point.measure as i64)),
        ]);
        let mut provenance = program::provenance(parameters, self.threads);
        provenance.seed = Some(dynamics.seed);
        provenance.streams = Some(program::streams());
        provenance.plugins = dynamics.identities();
        provenance.started = started.1.clone();
        provenance.finished = spinledger_ledger::now();
        provenance.seconds = seconds;
        provenance.updates = updates;
        provenance.pipeline = job.pipeline;
        provenance.notes = std::mem::take(&mut self.notes);
        let facts = SeriesNote { sites: self.problem.graph.sites as u64, observed: self.columns.clone() };
        provenance.facts = facts.to_value();
        let place = ChainPlace { chain: self.group.key, block: block.number, number: lane, rows: block.rows };
        let draft = Draft::new(&preimage, "block", provenance).table("main", Payload::Block(data)).chain(place);
        let key = draft.key;
        let published = self.ledger.publish(draft).map_err(|e| chain_text(&e))?;
        Ok(Entry {
            key,
            kind: "block".into(),
            chain: Some(place),
            content: published.content,
            seconds,
            updates,
            note: String::new(),
        })
    }
}
