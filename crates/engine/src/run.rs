//! Running a pipeline: plan what can be planned, do what is due, close, and go on until nothing is left.

mod closing;
mod notice;
mod words;

pub use notice::{Counts, Notice, Outcome, RunError};

use crate::failure::Failure;
use crate::job::{Entry, Job, SampleJob};
use crate::planning::{AnalysisPlan, Product, Unplanned, analysis_parcels, kind_of, sample_points};
use crate::pool::{Event, Pool, PoolError, PoolOptions};
use crate::results::Results;
use crate::steps::Split;
use crate::study::Study;
use spinledger_ledger::{Index, Ledger, LedgerError, Line};
use spinledger_pipeline::Step;
use spinledger_plan::sample::{Point, State};
use spinledger_plan::sequence::parcels;
use spinledger_terms::ContentHash;
use std::collections::{BTreeMap, BTreeSet};
use std::path::PathBuf;

/// How to run.
#[derive(Clone, Debug)]
pub struct RunOptions {
    /// The workers.
    pub pool: PoolOptions,
    /// The folder of results.
    pub out: PathBuf,
    /// Only this step and what it needs.
    pub only: Option<String>,
}

/// A job with what it is for.
struct Item {
    step: usize,
    point: usize,
    /// Which parcel, for people.
    words: String,
    job: Job,
    cost: f64,
}

/// Why a run comes to an early end.
enum Stop {
    /// Something is in the way.
    Failed(String),
    /// It was asked for.
    Asked,
}

impl From<LedgerError> for Stop {
    fn from(error: LedgerError) -> Self {
        let (Failure::Broken(text) | Failure::Disk(text)) = Failure::from(error);
        Stop::Failed(text)
    }
}

impl From<PoolError> for Stop {
    fn from(error: PoolError) -> Self {
        match error {
            PoolError::Asked => Stop::Asked,
            error => Stop::Failed(crate::chain_text(&error)),
        }
    }
}

/// Runs a pipeline.
///
/// # Errors
/// Where nothing was done: see [`RunError`]. Broken parcels are no error, they are counted in the outcome; nor is a disk that fails on the way, which
/// the outcome names.
pub fn run(
    study: &Study,
    ledger: &Ledger,
    options: &RunOptions,
    tell: &mut dyn FnMut(Notice<'_>),
) -> Result<Outcome, RunError> {
    let wanted = wanted(study, options.only.as_deref())?;
    let index = ledger.index()?;
    let results = Results::open(&options.out, ledger.writes());
    results.check().map_err(|source| RunError::Results { path: options.out.clone(), source })?;
    for warning in index.warnings().chain(results.warning()) {
        tell(Notice::Warning(warning));
    }
    let mut run = Run {
        study,
        ledger,
        index,
        pool: Pool::new(options.pool.clone()),
        results,
        outcome: Outcome::default(),
        text: None,
        samples: BTreeMap::new(),
        tell,
    };
    match run.steps(&wanted).and_then(|()| run.finish(options, &wanted)) {
        Ok(()) => {}
        Err(Stop::Failed(why)) => run.outcome.stopped = Some(why),
        Err(Stop::Asked) => run.outcome.asked = true,
    }
    Ok(run.outcome)
}

/// The numbers of the steps that are to run: all, or one and those that it needs.
fn wanted(study: &Study, only: Option<&str>) -> Result<BTreeSet<usize>, RunError> {
    let steps = &study.pipeline.steps;
    let Some(only) = only else { return Ok((0..steps.len()).collect()) };
    let of = |name: &str| steps.iter().position(|step| step.name == name);
    let mut wanted = BTreeSet::new();
    let mut open = vec![of(only).ok_or_else(|| RunError::NoStep(only.to_owned()))?];
    while let Some(step) = open.pop() {
        if wanted.insert(step) {
            open.extend(steps[step].needs.iter().filter_map(|name| of(name)));
        }
    }
    Ok(wanted)
}

struct Run<'a> {
    study: &'a Study,
    ledger: &'a Ledger,
    index: Index,
    pool: Pool,
    results: Results,
    outcome: Outcome,
    /// Hash of the pipeline's text, once it is kept in the ledger.
    text: Option<ContentHash>,
    /// Points of the sample steps of this wave.
    samples: BTreeMap<usize, Vec<Point>>,
    tell: &'a mut dyn FnMut(Notice<'_>),
}

impl Run<'_> {
    /// All steps, in waves.
    fn steps(&mut self, wanted: &BTreeSet<usize>) -> Result<(), Stop> {
        let steps = &self.study.pipeline.steps;
        let mut open: Vec<usize> = wanted.iter().copied().collect();
        while !open.is_empty() {
            let ready: Vec<usize> = open.iter().copied().filter(|i| self.is_ready(&steps[*i])).collect();
            if ready.is_empty() {
                // Checked pipelines have no circles, so every step becomes ready; this is the end all the same.
                break;
            }
            if self.pool.is_stopping() {
                return Err(Stop::Asked);
            }
            open.retain(|i| !ready.contains(i));
            self.wave(&ready)?;
        }
        Ok(())
    }

    fn is_ready(&self, step: &Step) -> bool {
        step.needs.iter().all(|name| self.outcome.products.contains_key(name))
    }

    fn name(&self, step: usize) -> String {
        self.study.pipeline.steps[step].name.clone()
    }

    /// Plans the steps that are ready, does what is due, and closes them.
    fn wave(&mut self, ready: &[usize]) -> Result<(), Stop> {
        let mut items = Vec::new();
        let mut analyses: BTreeMap<usize, AnalysisPlan> = BTreeMap::new();
        self.samples.clear();
        for &number in ready {
            let step = &self.study.pipeline.steps[number];
            if kind_of(step).split == Split::Chains {
                self.plan_sample(number, &mut items);
            } else if let Some(plan) = self.plan_analysis(number, &mut items) {
                analyses.insert(number, plan);
            }
        }
        if !items.is_empty() && self.text.is_none() {
            self.text = Some(self.ledger.save_text(&self.study.pipeline.text)?);
        }
        // The longest first, so that no worker is left alone with a long one; ties in order.
        items.sort_by(|a, b| b.cost.total_cmp(&a.cost));
        let broken = self.execute(&items, true)?;
        for &number in ready {
            if self.samples.contains_key(&number) {
                self.close_sample(number)?;
            } else if let Some(plan) = analyses.remove(&number) {
                self.close_analysis(number, plan, &broken)?;
            }
        }
        Ok(())
    }

    fn plan_sample(&mut self, number: usize, items: &mut Vec<Item>) {
        let step = &self.study.pipeline.steps[number];
        let points = match sample_points(self.study, step, &self.outcome.products, Some(self.ledger), &self.index) {
            Ok(points) => points,
            Err(Unplanned::Problems(problems)) => {
                let text = spinledger_pipeline::render(&self.study.source, &problems);
                return self.break_step(number, &format!("a scan takes wrong values from an earlier step\n{text}"));
            }
            Err(Unplanned::Waits(_)) => return self.leave(number),
            Err(Unplanned::Failed(message)) => return self.break_step(number, &message),
        };
        let mut recorded = 0;
        let mut due = 0.0;
        let parcels = parcels(&points);
        let followed = step.followed();
        for parcel in &parcels {
            if parcel.state(&points) == State::Recorded {
                recorded += 1;
                continue;
            }
            let along: Vec<Point> = parcel
                .groups(&points)
                .map(|(point, group)| Point { groups: vec![group.clone()], ..point.clone() })
                .collect();
            let cost = parcel.updates_due(&points);
            due += cost;
            let Some((point, _)) = parcel.parts.first() else { continue };
            let words = words::parcel(parcel.groups(&points), &followed);
            let job = Job::Sample(Box::new(SampleJob { points: along, pipeline: None }));
            items.push(Item { step: number, point: *point, words, job, cost });
        }
        let parcels = parcels.len() as u64;
        let counts = self.outcome.steps.entry(step.name.clone()).or_default();
        counts.reused += recorded;
        self.outcome.counts.reused += recorded;
        (self.tell)(Notice::Planned { step: &step.name, parcels, recorded, updates: due });
        self.samples.insert(number, points);
    }

    fn plan_analysis(&mut self, number: usize, items: &mut Vec<Item>) -> Option<AnalysisPlan> {
        let step = &self.study.pipeline.steps[number];
        let Some(plan) = analysis_parcels(self.study, step, kind_of(step), &self.outcome.products) else {
            self.leave(number);
            return None;
        };
        let mut recorded = 0;
        let mut parcels = 0;
        for (at, parcel) in plan.parcels.iter().enumerate() {
            let Some(parcel) = parcel else { continue };
            parcels += 1;
            if self.index.get(&parcel.key).is_some() {
                recorded += 1;
                continue;
            }
            let words = words::point(parcel.columns.iter().map(|(name, _, value)| (name, value)));
            let rows = |p: &crate::job::SeriesInput| p.pieces.iter().map(|piece| piece.rows).sum::<u64>();
            let cost = parcel.job.series.iter().map(rows).sum::<u64>() as f64;
            items.push(Item { step: number, point: at, words, job: Job::Analyse(Box::new(parcel.job.clone())), cost });
        }
        let counts = self.outcome.steps.entry(step.name.clone()).or_default();
        counts.reused += recorded;
        self.outcome.counts.reused += recorded;
        (self.tell)(Notice::Planned { step: &step.name, parcels, recorded, updates: 0.0 });
        Some(plan)
    }

    /// Does jobs; returns the numbers of steps and points whose parcels broke.
    fn execute(&mut self, items: &[Item], counted: bool) -> Result<BTreeSet<(usize, usize)>, Stop> {
        let mut jobs: Vec<Job> = items.iter().map(|item| item.job.clone()).collect();
        for job in &mut jobs {
            match job {
                Job::Sample(job) => job.pipeline = self.text,
                Job::Close(job) => job.pipeline = self.text,
                Job::States(job) => job.pipeline = self.text,
                Job::Analyse(job) => job.pipeline = self.text,
            }
        }
        let mut broken = BTreeSet::new();
        let steps: Vec<String> = items.iter().map(|item| self.name(item.step)).collect();
        let (index, outcome, tell) = (&mut self.index, &mut self.outcome, &mut self.tell);
        let mut on_event = |number: usize, event: Event| {
            let (item, step) = (&items[number], &steps[number]);
            match event {
                Event::Started if counted => tell(Notice::Started { step, parcel: &item.words }),
                Event::Started => {}
                Event::Progress { updates } => tell(Notice::Progress { updates }),
                Event::Log(text) => tell(Notice::Warning(&text)),
                Event::Done { computed, updates, entries } => {
                    entries.into_iter().for_each(|entry| index.add(line_of(entry)));
                    if updates > 0 {
                        tell(Notice::Progress { updates });
                    }
                    if counted {
                        count(outcome, step, |c| if computed { &mut c.computed } else { &mut c.reused });
                        tell(Notice::Done { step, parcel: &item.words, computed });
                    }
                }
                Event::Stopping => tell(Notice::Stopping),
                Event::Stopped { updates, entries } => {
                    entries.into_iter().for_each(|entry| index.add(line_of(entry)));
                    tell(Notice::Progress { updates });
                }
                Event::Broken(message) => {
                    broken.insert((item.step, item.point));
                    count(outcome, step, |c| &mut c.broken);
                    tell(Notice::Broken { step, parcel: &item.words, message: &message });
                }
            }
        };
        self.pool.execute(&jobs, &mut on_event)?;
        Ok(broken)
    }

    fn complete(&mut self, number: usize, complete: bool) {
        let name = self.name(number);
        let counts = *self.outcome.steps.entry(name.clone()).or_default();
        if complete {
            (self.tell)(Notice::Complete { step: &name, counts });
        } else if counts.broken == 0 {
            self.outcome.left.push(name.clone());
            (self.tell)(Notice::Left { step: &name });
        }
    }

    /// A step that stays due, since what it needs is broken.
    fn leave(&mut self, number: usize) {
        let name = self.name(number);
        self.outcome.steps.entry(name.clone()).or_default();
        self.outcome.products.insert(name, Product::Incomplete);
        self.complete(number, false);
    }

    fn break_step(&mut self, number: usize, message: &str) {
        let name = self.name(number);
        count(&mut self.outcome, &name, |c| &mut c.broken);
        self.outcome.products.insert(name.clone(), Product::Incomplete);
        (self.tell)(Notice::Broken { step: &name, parcel: "", message });
    }
}

fn count(outcome: &mut Outcome, step: &str, which: impl Fn(&mut Counts) -> &mut u64) {
    *which(&mut outcome.counts) += 1;
    *which(outcome.steps.entry(step.to_owned()).or_default()) += 1;
}

fn line_of(entry: Entry) -> Line {
    Line {
        key: entry.key,
        kind: entry.kind,
        chain: entry.chain,
        content: entry.content,
        seconds: entry.seconds,
        updates: entry.updates,
        note: entry.note,
    }
}
