//! One parcel of sampling: a group of chains, from where its record ends to the number of rows asked for.
//!
//! Row r is measured when `settle + equilibrate + r every` sweeps are done. The state of the group is saved, by the clock, with the number of
//! sweeps done; a later run goes on from it and skips what is on record. Where the state was saved cannot be seen in the results.
//!
//! Configurations that are to be kept are put on record while their row is passed. Where the blocks are on record and a configuration is not, the
//! chains are run again from the latest place before it that there is. In a sequence each position begins from the last configurations of the one
//! before, read from the ledger.

mod check;
mod course;

use crate::failure::Failure;
use crate::job::{Entry, Report, SampleJob, SeriesNote};
use crate::kept;
use crate::line::Line;
use crate::loaded::{Loaded, Problem};
use crate::program;
use course::Course;
use spinledger_host::{Observer, measure_all};
use spinledger_ledger::{BlockData, ChainPlace, Claim, ColumnData, Draft, Input, Ledger, Payload, Provenance};
use spinledger_numerics::random::StreamKey;
use spinledger_plan::blocks::{Block, blocks};
use spinledger_plan::sample::{Group, Point};
use spinledger_plan::states::Begin;
use spinledger_terms::{ColumnSpec, ContentHash, Key, Value};
use std::time::Instant;

/// Does the parcel.
///
/// # Errors
/// Why it was not done.
pub(crate) fn sample(job: &SampleJob, ledger: &Ledger, loaded: &mut Loaded, line: &Line) -> Result<Report, Failure> {
    let mut entries = Vec::new();
    let mut computed = false;
    // Each position of a sequence begins from what the one before has put on record, whoever did that.
    for (point, group) in job.groups() {
        let work = Work { point, group, pipeline: job.pipeline, ledger, line };
        match work.run(loaded, &mut entries)? {
            Done::Held(by) => return Ok(Report::Held { by }),
            Done::Stopped => return Ok(Report::Stopped { updates: line.untold(), entries }),
            Done::Found => {}
            Done::Computed => computed = true,
        }
    }
    Ok(Report::Done { computed, updates: line.untold(), entries })
}

/// What came of a group at a point.
enum Done {
    /// All was on record.
    Found,
    /// Something was computed.
    Computed,
    /// It was stopped on the way; what was measured is on record.
    Stopped,
    /// Another process is at it.
    Held(String),
}

/// A group of chains at a point.
struct Work<'a> {
    point: &'a Point,
    group: &'a Group,
    pipeline: Option<ContentHash>,
    ledger: &'a Ledger,
    line: &'a Line,
}

impl Work<'_> {
    fn run(&self, loaded: &mut Loaded, entries: &mut Vec<Entry>) -> Result<Done, Failure> {
        let Work { point, group, ledger, .. } = *self;
        let on_record = |covered: &[u64], owed: &[u64]| owed.is_empty() && covered.iter().all(|n| *n >= point.measure);
        if on_record(&group.covered, &group.owed) {
            return Ok(Done::Found);
        }
        let claim = match ledger.claim(&group.key, "sample")? {
            Claim::Mine(guard) => guard,
            Claim::Theirs { host, pid, .. } => return Ok(Done::Held(format!("process {pid} on {host}"))),
        };
        let covered = refresh(ledger, point, group, entries)?;
        let owed = still_owed(ledger, point, group, entries)?;
        if on_record(&covered, &owed) {
            return Ok(Done::Found);
        }
        let dynamics = &point.dynamics;
        let problem = loaded.problem(dynamics)?;
        let (observers, columns) = loaded.observers(dynamics, &problem)?;
        let stream = StreamKey::from_text(&group.stream);
        let rules = loaded.rules(dynamics, &problem, &stream)?;
        let mut course = Course::new(point, group, problem.clone(), rules, ledger, claim, self.line);
        let rows = covered.iter().copied().min().unwrap_or(0);
        let first = owed.first().map_or(rows, |row| rows.min(*row));
        let end = if rows < point.measure { point.measure } else { owed.last().map_or(0, |row| row + 1) };
        let (first, last) = (course.sweeps_at(first), course.sweeps_at(end.saturating_sub(1)));
        if let Err(reason) = course.take_up(first, last, &stream)? {
            course.note(format!("{reason}: started anew"));
            // What a state has half changed is of no use: a rule that goes on must be as if nothing had happened.
            course.begin_with(loaded.rules(dynamics, &problem, &stream)?, &stream)?;
        }
        let threads = loaded.threads();
        let recorder = Recorder { work: self, problem: &problem, columns, threads, inputs: self.begins_from() };
        let finished = recorder.record(&mut course, observers, (&covered, &owed), entries)?;
        if !finished {
            return Ok(Done::Stopped);
        }
        course.save()?;
        Ok(Done::Computed)
    }

    /// The configurations that the chains began from, for records.
    fn begins_from(&self) -> Vec<Input> {
        let Begin::States(keys) = &self.group.begin else { return Vec::new() };
        // Read where it was taken up; where that was long ago, it may be gone.
        let content = |key: &Key| self.ledger.read_record(key).map(|record| record.content).ok();
        keys.iter()
            .enumerate()
            .filter_map(|(lane, key)| {
                Some(Input { name: format!("start of lane {lane}"), key: *key, content: content(key)? })
            })
            .collect()
    }
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

/// Rows whose configurations are not on record by now.
fn still_owed(ledger: &Ledger, point: &Point, group: &Group, entries: &mut Vec<Entry>) -> Result<Vec<u64>, Failure> {
    let mut owed = Vec::new();
    for &row in &group.owed {
        let mut missing = false;
        for lane in 0..point.chains_kept(group, row) {
            match ledger.lookup(&Key::of(&group.state_preimage(lane, row)))? {
                Some(found) => entries.push(Entry::of(&found)),
                None => missing = true,
            }
        }
        if missing {
            owed.push(row);
        }
    }
    Ok(owed)
}

/// When a block was begun, for its record.
struct Begun {
    clock: Instant,
    time: String,
    swept: u64,
}

/// Measures along the course of the chains, and publishes blocks.
struct Recorder<'a> {
    work: &'a Work<'a>,
    problem: &'a Problem,
    columns: Vec<ColumnSpec>,
    /// Threads lent.
    threads: usize,
    /// What the chains began from, for records.
    inputs: Vec<Input>,
}

impl Recorder<'_> {
    fn point(&self) -> &Point {
        self.work.point
    }

    /// Measures and publishes all blocks that are due, and the configurations that are owed; false where it was stopped.
    fn record(
        &self,
        course: &mut Course<'_>,
        mut observers: Vec<Observer>,
        (covered, owed): (&[u64], &[u64]),
        entries: &mut Vec<Entry>,
    ) -> Result<bool, Failure> {
        let point = self.point();
        let first = covered.iter().chain(owed.first()).copied().min().unwrap_or(0) / point.block_rows;
        let due = blocks(point.measure, point.block_rows).skip(usize::try_from(first).unwrap_or(usize::MAX));
        let mut values = vec![0.0; self.columns.len()];
        let mut looked = false;
        for block in due {
            let end = block.first + block.rows;
            let (clock, time) = (Instant::now(), spinledger_ledger::now());
            // Lanes whose record ends in the block, by number.
            let mut lanes: Vec<(usize, BlockData)> = Vec::new();
            for (lane, rows) in covered.iter().enumerate().filter(|(_, rows)| **rows < end) {
                lanes.push((lane, self.begin_block(lane, block, *rows)?));
            }
            let next = |data: &BlockData| block.first + data.rows() as u64;
            let owed = &owed[owed.partition_point(|row| *row < block.first)..owed.partition_point(|row| *row < end)];
            let start = lanes.iter().map(|(_, data)| next(data)).chain(owed.first().copied()).min().unwrap_or(end);
            // A state that was saved between two rows has sweeps behind it that no record counts yet.
            let before = start.checked_sub(1).map_or(0, |row| course.sweeps_at(row));
            let begun = Begun { clock, time, swept: course.swept().min(before) };
            // Where blocks are on record, the chains are run no further than to what is owed.
            let stop = if lanes.is_empty() { owed.last().map_or(start, |row| row + 1) } else { end };
            for row in start..stop {
                if !course.sweep_to(course.sweeps_at(row))? {
                    self.stop(course, block, lanes, covered, &begun, entries)?;
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
                if owed.binary_search(&row).is_ok() {
                    self.keep(course, row, entries)?;
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

    /// Puts what was measured of a block on record, short as it is, and saves the state: a later run goes on from here as from a block that was
    /// asked for at this length.
    fn stop(
        &self,
        course: &mut Course<'_>,
        block: Block,
        lanes: Vec<(usize, BlockData)>,
        covered: &[u64],
        begun: &Begun,
        entries: &mut Vec<Entry>,
    ) -> Result<(), Failure> {
        for (lane, data) in lanes {
            let rows = data.rows() as u64;
            if block.first + rows > covered[lane].max(block.first) {
                check::tracked(course, self.problem, lane)?;
                entries.push(self.publish(course, lane as u32, Block { rows, ..block }, data, begun)?);
            }
        }
        course.tell();
        // Not past the first row that is due, since that was not measured.
        course.save()
    }

    /// A block to be filled, with the rows that are on record of it.
    fn begin_block(&self, lane: usize, block: Block, covered: u64) -> Result<BlockData, Failure> {
        if covered > block.first {
            let partial = Block { rows: covered - block.first, ..block };
            let key = Key::of(&self.work.group.block_preimage(lane as u32, partial));
            return Ok(self.work.ledger.read_block(&key, "main", None, None)?);
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
        let preimage = self.work.group.block_preimage(lane, block);
        // The time of a block is shared by the chains that were advanced together.
        let seconds = begun.clock.elapsed().as_secs_f64() / f64::from(dynamics.lanes);
        // Up to the last row: what was swept behind it belongs to the next.
        let last = (block.first + block.rows).saturating_sub(1);
        let swept = course.swept().min(course.sweeps_at(last));
        let updates = swept.saturating_sub(begun.swept).saturating_mul(course.updates_per_chain());
        let mut provenance = self.provenance(&begun.time);
        provenance.seconds = seconds;
        provenance.updates = updates;
        provenance.notes = course.take_notes();
        let facts = SeriesNote { sites: self.problem.graph.sites as u64, observed: self.columns.clone() };
        provenance.facts = facts.to_value();
        let place = ChainPlace { chain: self.work.group.key, block: block.number, number: lane, rows: block.rows };
        let draft = Draft::new(&preimage, "block", provenance).table("main", Payload::Block(data)).chain(place);
        let key = draft.key;
        let published = self.work.ledger.publish(draft)?;
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

    /// Publishes the configurations at a row.
    fn keep(&self, course: &mut Course<'_>, row: u64, entries: &mut Vec<Entry>) -> Result<(), Failure> {
        let (point, group) = (self.point(), self.work.group);
        for lane in 0..point.chains_kept(group, row) {
            let configuration = course.holder().export(lane as usize)?;
            let mut provenance = self.provenance(&spinledger_ledger::now());
            provenance.facts = Value::map([
                ("lane", Value::Integer(lane.into())),
                ("sites", Value::Integer(self.problem.graph.sites as i64)),
                ("sweep", Value::Integer(point.sweep_of(row) as i64)),
            ]);
            let table = Payload::Table(kept::table(&configuration, self.problem));
            let draft = Draft::new(&group.state_preimage(lane, row), "state", provenance).table("main", table);
            let key = draft.key;
            let content = self.work.ledger.publish(draft)?.content;
            let kind = "state".to_owned();
            entries.push(Entry { key, kind, chain: None, content, seconds: 0.0, updates: 0, note: String::new() });
        }
        Ok(())
    }

    /// How what is published now was made.
    fn provenance(&self, started: &str) -> Provenance {
        let (point, dynamics) = (self.point(), &self.point().dynamics);
        let parameters = Value::map([
            ("chains", self.work.group.value.clone()),
            ("temperature", Value::Number(dynamics.temperature)),
            ("measure", Value::Integer(point.measure as i64)),
        ]);
        let mut provenance = program::provenance(parameters, self.threads);
        provenance.seed = Some(dynamics.seed);
        provenance.streams = Some(program::streams());
        provenance.plugins = dynamics.identities();
        provenance.inputs.clone_from(&self.inputs);
        provenance.started = started.to_owned();
        provenance.finished = spinledger_ledger::now();
        provenance.pipeline = self.work.pipeline;
        provenance
    }
}
