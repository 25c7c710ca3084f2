//! One parcel of sampling: a group of chains, from where its record ends to the number of rows asked for.
//!
//! Row r is measured when `settle + equilibrate + r every` sweeps are done. The state of the group is saved, by the clock, with the number of
//! sweeps done; a later run goes on from it and skips what is on record. Where the state was saved cannot be seen in the results.

mod check;
mod course;

use crate::failure::Failure;
use crate::job::{Entry, Report, SampleJob, SeriesNote};
use crate::line::Line;
use crate::loaded::{Loaded, Problem};
use crate::program;
use course::Course;
use spinledger_host::{Observer, measure_all};
use spinledger_ledger::{BlockData, ChainPlace, Claim, ColumnData, Draft, Ledger, Payload};
use spinledger_numerics::random::StreamKey;
use spinledger_plan::blocks::{Block, blocks};
use spinledger_plan::sample::{Group, Point};
use spinledger_terms::{ColumnSpec, Key, Value};
use std::time::Instant;

/// Does the parcel.
///
/// # Errors
/// Why it was not done.
pub(crate) fn sample(job: &SampleJob, ledger: &Ledger, loaded: &mut Loaded, line: &Line) -> Result<Report, Failure> {
    let group = job.group();
    let claim = match ledger.claim(&group.key, "sample")? {
        Claim::Mine(guard) => guard,
        Claim::Theirs { host, pid, .. } => return Ok(Report::Held { by: format!("process {pid} on {host}") }),
    };
    let mut entries = Vec::new();
    let covered = refresh(ledger, &job.point, group, &mut entries)?;
    if covered.iter().all(|rows| *rows >= job.point.measure) {
        return Ok(Report::Done { computed: false, updates: 0, entries });
    }
    let dynamics = &job.point.dynamics;
    let problem = loaded.problem(dynamics)?;
    let (observers, columns) = loaded.observers(dynamics, &problem)?;
    let stream = StreamKey::from_text(&group.stream);
    let rules = loaded.rules(dynamics, &problem, &stream)?;
    let mut course = Course::new(&job.point, group, problem.clone(), rules, ledger, claim, line);
    let first = course.sweeps_at(covered.iter().copied().min().unwrap_or(0));
    if let Err(reason) = course.take_up(first, &stream)? {
        course.note(format!("{reason}: started anew"));
        // What a state has half changed is of no use: a rule that goes on must be as if nothing had happened.
        course.begin_with(loaded.rules(dynamics, &problem, &stream)?, &stream)?;
    }
    let recorder = Recorder { job, group, ledger, problem: &problem, columns, threads: loaded.threads() };
    let finished = recorder.record(&mut course, observers, &covered, &mut entries)?;
    if !finished {
        return Err("stopped, since the runner is gone".into());
    }
    course.save()?;
    Ok(Report::Done { computed: true, updates: line.untold(), entries })
}

/// What is on record by now: another run may have gone on since the plan was made.
fn refresh(ledger: &Ledger, point: &Point, group: &Group, entries: &mut Vec<Entry>) -> Result<Vec<u64>, Failure> {
    let mut covered = group.covered.clone();
    for (lane, rows) in covered.iter_mut().enumerate() {
        // No block before this one is due: chains may have very many.
        let first = *rows / point.block_rows;
        let have = *rows;
        let due = blocks(point.measure, point.block_rows).skip(usize::try_from(first).unwrap_or(usize::MAX));
        for block in due.filter(|block| block.first + block.rows > have) {
            // Each block that is due may be there at the length asked for; the first that is not ends the search.
            let key = Key::of(&group.block_preimage(lane as u32, block));
            let Some(found) = ledger.lookup(&key)? else { break };
            *rows = block.first + block.rows;
            entries.push(Entry::of(&found));
        }
    }
    Ok(covered)
}

/// When a block was begun, for its record.
struct Begun {
    clock: Instant,
    time: String,
    swept: u64,
}

/// Measures along the course of the chains, and publishes blocks.
struct Recorder<'a> {
    job: &'a SampleJob,
    group: &'a Group,
    ledger: &'a Ledger,
    problem: &'a Problem,
    columns: Vec<ColumnSpec>,
    /// Threads lent.
    threads: usize,
}

impl Recorder<'_> {
    fn point(&self) -> &Point {
        &self.job.point
    }

    /// Measures and publishes all blocks that are due; false where it was stopped.
    fn record(
        &self,
        course: &mut Course<'_>,
        mut observers: Vec<Observer>,
        covered: &[u64],
        entries: &mut Vec<Entry>,
    ) -> Result<bool, Failure> {
        let point = self.point();
        let first = covered.iter().copied().min().unwrap_or(0) / point.block_rows;
        let due = blocks(point.measure, point.block_rows).skip(usize::try_from(first).unwrap_or(usize::MAX));
        let mut values = vec![0.0; self.columns.len()];
        let mut looked = false;
        for block in due {
            let end = block.first + block.rows;
            let begun = Begun { clock: Instant::now(), time: spinledger_ledger::now(), swept: course.swept() };
            // Lanes whose record ends in the block, by number.
            let mut lanes: Vec<(usize, BlockData)> = Vec::new();
            for (lane, rows) in covered.iter().enumerate().filter(|(_, rows)| **rows < end) {
                lanes.push((lane, self.begin_block(lane, block, *rows)?));
            }
            let next = |data: &BlockData| block.first + data.rows() as u64;
            let start = lanes.iter().map(|(_, data)| next(data)).min().unwrap_or(end);
            for row in start..end {
                if !course.sweep_to(course.sweeps_at(row))? {
                    return Ok(false);
                }
                if !looked {
                    // Observables trust the states that they are shown: a rule that makes others is found out before, and named.
                    course.look_at_states()?;
                    looked = true;
                }
                for (lane, data) in lanes.iter_mut().filter(|(_, data)| next(data) == row) {
                    measure_all(&mut observers, course.holder(), *lane, &mut values)?;
                    data.sweep.push((point.dynamics.equilibrate + row * point.dynamics.every) as i64);
                    for (column, value) in data.columns.iter_mut().zip(&values) {
                        column.values.push(*value);
                    }
                }
                course.look()?;
            }
            for (lane, data) in lanes {
                check::energy(course, self.problem, lane, &data)?;
                entries.push(self.publish(course, lane as u32, block, data, &begun)?);
            }
            course.save_when_due()?;
        }
        course.tell();
        Ok(true)
    }

    /// A block to be filled, with the rows that are on record of it.
    fn begin_block(&self, lane: usize, block: Block, covered: u64) -> Result<BlockData, Failure> {
        if covered > block.first {
            let partial = Block { rows: covered - block.first, ..block };
            let key = Key::of(&self.group.block_preimage(lane as u32, partial));
            return Ok(self.ledger.read_block(&key, "main", None, None)?);
        }
        let rows = block.rows as usize;
        let energy_unit = &self.point().dynamics.energy_unit;
        let column = |spec: &ColumnSpec| ColumnData {
            name: spec.name.clone(),
            unit: if spec.unit == "energy" { energy_unit.clone() } else { spec.unit.clone() },
            values: Vec::with_capacity(rows),
        };
        Ok(BlockData { sweep: Vec::with_capacity(rows), columns: self.columns.iter().map(column).collect() })
    }

    fn publish(
        &self,
        course: &mut Course<'_>,
        lane: u32,
        block: Block,
        data: BlockData,
        begun: &Begun,
    ) -> Result<Entry, Failure> {
        let point = self.point();
        let dynamics = &point.dynamics;
        let preimage = self.group.block_preimage(lane, block);
        // The time of a block is shared by the chains that were advanced together.
        let seconds = begun.clock.elapsed().as_secs_f64() / f64::from(dynamics.lanes);
        let updates = (course.swept() - begun.swept).saturating_mul(course.updates_per_chain());
        let parameters = Value::map([
            ("chains", self.group.value.clone()),
            ("temperature", Value::Number(dynamics.temperature)),
            ("measure", Value::Integer(point.measure as i64)),
        ]);
        let mut provenance = program::provenance(parameters, self.threads);
        provenance.seed = Some(dynamics.seed);
        provenance.streams = Some(program::streams());
        provenance.plugins = dynamics.identities();
        provenance.started = begun.time.clone();
        provenance.finished = spinledger_ledger::now();
        provenance.seconds = seconds;
        provenance.updates = updates;
        provenance.pipeline = self.job.pipeline;
        provenance.notes = course.take_notes();
        let facts = SeriesNote { sites: self.problem.graph.sites as u64, observed: self.columns.clone() };
        provenance.facts = facts.to_value();
        let place = ChainPlace { chain: self.group.key, block: block.number, number: lane, rows: block.rows };
        let draft = Draft::new(&preimage, "block", provenance).table("main", Payload::Block(data)).chain(place);
        let key = draft.key;
        let published = self.ledger.publish(draft)?;
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
