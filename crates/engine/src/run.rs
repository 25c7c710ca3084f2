//! Running a pipeline: plan what can be planned, do what is due, close, and go on until nothing is left.

use crate::job::{CloseJob, Entry, Job, Layout, SampleJob};
use crate::planning::{
    AnalysisPlan, Parcel, Product, Products, Series, Unplanned, analysis_parcels, closed_series, kind_of,
    point_columns, sample_points,
};
use crate::pool::{Event, Pool, PoolOptions};
use crate::results::{Results, series_file};
use crate::steps::Split;
use crate::study::Study;
use crate::{gather, program};
use spinledger_ledger::{Index, Ledger, Line};
use spinledger_pipeline::Step;
use spinledger_plan::sample::{Point, State};
use spinledger_terms::{ContentHash, Key, Problem, Value};
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

/// Counts of parcels.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, serde::Serialize)]
pub struct Counts {
    /// Computed by this run.
    pub computed: u64,
    /// On record before, or computed by another run meanwhile.
    pub reused: u64,
    /// Broken.
    pub broken: u64,
}

/// What goes on, for a person or a program to read.
#[derive(Debug)]
pub enum Notice<'a> {
    /// A step was planned.
    Planned {
        /// The step.
        step: &'a str,
        /// Parcels in all.
        parcels: u64,
        /// Of these on record.
        recorded: u64,
        /// Attempted spin updates due, as far as known.
        updates: f64,
    },
    /// A parcel was taken up.
    Started {
        /// The step.
        step: &'a str,
        /// Which parcel, in words.
        parcel: &'a str,
    },
    /// Work goes on.
    Progress {
        /// Attempted spin updates since the last notice.
        updates: u64,
    },
    /// A parcel is done.
    Done {
        /// The step.
        step: &'a str,
        /// Which parcel, in words.
        parcel: &'a str,
        /// Whether this run computed it.
        computed: bool,
    },
    /// A parcel is broken.
    Broken {
        /// The step.
        step: &'a str,
        /// Which parcel, in words.
        parcel: &'a str,
        /// Why.
        message: &'a str,
    },
    /// A step is complete.
    Complete {
        /// The step.
        step: &'a str,
        /// What it counted.
        counts: Counts,
    },
    /// A step is left due, since something that it needs is broken.
    Left {
        /// The step.
        step: &'a str,
    },
    /// Something to be told.
    Warning(&'a str),
}

/// What came of a run.
#[derive(Clone, Debug, Default)]
pub struct Outcome {
    /// In all.
    pub counts: Counts,
    /// By step.
    pub steps: BTreeMap<String, Counts>,
    /// What each step gave.
    pub products: Products,
    /// Steps left due.
    pub left: Vec<String>,
}

/// Why a run came to nothing.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RunError {
    /// Values that a scan takes from an earlier step are wrong.
    #[error("a scan takes wrong values from an earlier step")]
    Problems(Vec<Problem>),
    /// The ledger or the results cannot be read or written.
    #[error("the ledger or the folder of results failed")]
    Ledger(#[from] spinledger_ledger::LedgerError),
    /// No worker can be started.
    #[error("no worker can be started")]
    Workers(#[source] std::io::Error),
    /// There is no such step.
    #[error("there is no step `{0}` in the pipeline")]
    NoStep(String),
}

/// A job with what it is for.
struct Item {
    step: usize,
    point: usize,
    words: String,
    job: Job,
    cost: f64,
}

/// Runs a pipeline.
///
/// # Errors
/// See [`RunError`]. Broken parcels are no error: they are counted in the outcome.
pub fn run(
    study: &Study,
    ledger: &Ledger,
    options: &RunOptions,
    tell: &mut dyn FnMut(Notice<'_>),
) -> Result<Outcome, RunError> {
    let wanted = wanted(study, options.only.as_deref())?;
    let mut run = Run {
        study,
        ledger,
        index: ledger.index()?,
        pool: Pool::new(options.pool.clone()),
        results: Results::open(&options.out, ledger.writes()),
        outcome: Outcome::default(),
        text: None,
        samples: BTreeMap::new(),
        tell,
    };
    let warnings: Vec<String> = run.index.warnings().map(str::to_owned).collect();
    for warning in warnings {
        (run.tell)(Notice::Warning(&warning));
    }
    let mut open: Vec<usize> = (0..study.pipeline.steps.len()).filter(|i| wanted.contains(i)).collect();
    while !open.is_empty() {
        let ready: Vec<usize> = open.iter().copied().filter(|i| run.is_ready(&study.pipeline.steps[*i])).collect();
        if ready.is_empty() {
            // Checked pipelines have no circles, so every step becomes ready; this is the end all the same.
            break;
        }
        open.retain(|i| !ready.contains(i));
        run.wave(&ready)?;
    }
    run.finish(options)
}

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
    fn is_ready(&self, step: &Step) -> bool {
        step.needs.iter().all(|name| self.outcome.products.contains_key(name))
    }

    fn name(&self, step: usize) -> String {
        self.study.pipeline.steps[step].name.clone()
    }

    /// Plans the steps that are ready, does what is due, and closes them.
    fn wave(&mut self, ready: &[usize]) -> Result<(), RunError> {
        let mut items = Vec::new();
        let mut analyses: BTreeMap<usize, AnalysisPlan> = BTreeMap::new();
        self.samples.clear();
        for &number in ready {
            let step = &self.study.pipeline.steps[number];
            if kind_of(step).split == Split::Chains {
                self.plan_sample(number, &mut items)?;
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

    fn plan_sample(&mut self, number: usize, items: &mut Vec<Item>) -> Result<(), RunError> {
        let step = &self.study.pipeline.steps[number];
        let points = match sample_points(self.study, step, &self.outcome.products, Some(self.ledger), &self.index) {
            Ok(points) => points,
            Err(Unplanned::Problems(problems)) => return Err(RunError::Problems(problems)),
            Err(Unplanned::Waits(_)) => {
                self.leave(number);
                return Ok(());
            }
            Err(Unplanned::Failed(message)) => {
                self.break_step(number, &message);
                return Ok(());
            }
        };
        let mut parcels = 0;
        let mut recorded = 0;
        let mut due = 0.0;
        for (at, point) in points.iter().enumerate() {
            let words = point_words(point);
            for group in &point.groups {
                parcels += 1;
                if group.state(point.measure) == State::Recorded {
                    recorded += 1;
                    continue;
                }
                let mut one = point.clone();
                one.groups = vec![group.clone()];
                let cost = one.updates_due();
                due += cost;
                let job = Job::Sample(Box::new(SampleJob { point: one, pipeline: None }));
                let words =
                    format!("{words}{} {}", group.start, chains_words(group.number, point.dynamics.lanes, group.asked));
                items.push(Item { step: number, point: at, words, job, cost });
            }
        }
        let counts = self.outcome.steps.entry(step.name.clone()).or_default();
        counts.reused += recorded;
        self.outcome.counts.reused += recorded;
        (self.tell)(Notice::Planned { step: &step.name, parcels, recorded, updates: due });
        self.samples.insert(number, points);
        Ok(())
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
            let words = columns_words(&parcel.columns);
            let rows = |p: &crate::job::SeriesInput| p.pieces.iter().map(|piece| piece.rows).sum::<u64>();
            let cost = parcel.job.series.iter().map(rows).sum::<u64>() as f64;
            items.push(Item { step: number, point: at, words, job: Job::Analyse(parcel.job.clone()), cost });
        }
        let counts = self.outcome.steps.entry(step.name.clone()).or_default();
        counts.reused += recorded;
        self.outcome.counts.reused += recorded;
        (self.tell)(Notice::Planned { step: &step.name, parcels, recorded, updates: 0.0 });
        Some(plan)
    }

    /// Does jobs; returns the numbers of steps and points whose parcels broke.
    fn execute(&mut self, items: &[Item], counted: bool) -> Result<BTreeSet<(usize, usize)>, RunError> {
        let mut jobs: Vec<Job> = items.iter().map(|item| item.job.clone()).collect();
        for job in &mut jobs {
            match job {
                Job::Sample(job) => job.pipeline = self.text,
                Job::Close(job) => job.pipeline = self.text,
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
                Event::Broken(message) => {
                    broken.insert((item.step, item.point));
                    count(outcome, step, |c| &mut c.broken);
                    tell(Notice::Broken { step, parcel: &item.words, message: &message });
                }
            }
        };
        self.pool.execute(&jobs, &mut on_event).map_err(RunError::Workers)?;
        Ok(broken)
    }

    /// Closes the complete points of a sample step: series on record, files in place.
    fn close_sample(&mut self, number: usize) -> Result<(), RunError> {
        let study = self.study;
        let step = &study.pipeline.steps[number];
        let points = self.samples.remove(&number).unwrap_or_default();
        let mut items = Vec::new();
        let mut files = Vec::new();
        for (at, point) in points.iter().enumerate() {
            let columns = point_columns(study, step, point);
            let preimage = point.series_preimage(&columns);
            let key = Key::of(&preimage);
            let file = format!("{}/{}", step.name, series_file(&point.columns, &key));
            let known = self.index.get(&key).map(|line| line.content);
            let kept = known.is_some_and(|content| self.results.keep(&step.name, &file, &key, &content));
            files.push((key, file.clone(), kept));
            if known.is_some() && kept {
                continue;
            }
            let Some(pieces) = point.pieces(&self.index) else { continue };
            self.results.make_room(&file)?;
            let layout = Layout { path: self.results.path(&file), columns };
            let parameters = Value::map([
                ("columns", Value::Map(point.columns.iter().cloned().collect())),
                ("measure", Value::Integer(point.measure as i64)),
            ]);
            let job = CloseJob {
                preimage,
                publish: known.is_none(),
                pieces,
                starts: point.starts(),
                layout: Some(layout),
                parameters,
                pipeline: None,
            };
            items.push(Item { step: number, point: at, words: point_words(point), job: Job::Close(job), cost: 0.0 });
        }
        let broken = self.execute(&items, false)?;
        let mut series: Vec<Option<Series>> = Vec::new();
        for (at, (point, (key, file, kept))) in points.iter().zip(files).enumerate() {
            let closed =
                if broken.contains(&(number, at)) { None } else { closed_series(study, step, point, &self.index) };
            if let (Some(closed), false) = (&closed, kept) {
                self.results.wrote(&step.name, &file, &key, &closed.content);
            }
            series.push(closed);
        }
        let complete = series.iter().all(Option::is_some);
        self.outcome.products.insert(step.name.clone(), Product::Series(series));
        self.complete(number, complete);
        Ok(())
    }

    fn close_analysis(
        &mut self,
        number: usize,
        plan: AnalysisPlan,
        broken: &BTreeSet<(usize, usize)>,
    ) -> Result<(), RunError> {
        let step = &self.study.pipeline.steps[number];
        let kind = kind_of(step);
        let whole = plan.parcels.iter().all(Option::is_some) && broken.iter().all(|(s, _)| *s != number);
        let parcels: Vec<Parcel> = plan.parcels.into_iter().flatten().collect();
        let on_record = parcels.iter().all(|parcel| self.index.get(&parcel.key).is_some());
        if !whole || !on_record || parcels.is_empty() {
            self.outcome.products.insert(step.name.clone(), Product::Incomplete);
            self.complete(number, false);
            return Ok(());
        }
        let (key, content) = if kind.split == Split::Points {
            match gather::gather(kind, &parcels, self.ledger, &mut self.index, self.text) {
                Ok(found) => found,
                Err(message) => {
                    self.break_step(number, &message);
                    return Ok(());
                }
            }
        } else {
            let line = self.index.get(&parcels[0].key);
            line.map_or((parcels[0].key, ContentHash([0; 32])), |line| (line.key, line.content))
        };
        let record = self.ledger.read_record(&key)?;
        for table in &record.tables {
            let file = match table.name.as_str() {
                "main" => format!("{}.parquet", step.name),
                other => format!("{}.{other}.parquet", step.name),
            };
            let from = self.ledger.table_path(&key, &table.name);
            self.results.copy(&step.name, &file, &key, &content, &from)?;
        }
        self.outcome.products.insert(step.name.clone(), Product::Tables { key, content });
        self.complete(number, true);
        Ok(())
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

    fn finish(self, options: &RunOptions) -> Result<Outcome, RunError> {
        let pipeline = &self.study.pipeline;
        let mut about = serde_json::Map::new();
        let mut steps = serde_json::Map::new();
        for step in &pipeline.steps {
            let key = match self.outcome.products.get(&step.name) {
                Some(Product::Tables { key, .. }) => serde_json::json!(key),
                Some(Product::Series(series)) => {
                    serde_json::json!(series.iter().map(|s| s.as_ref().map(|s| s.key)).collect::<Vec<_>>())
                }
                _ => serde_json::Value::Null,
            };
            let entry = serde_json::json!({ "does": step.does, "needs": step.needs, "entry": key });
            steps.insert(step.name.clone(), entry);
        }
        about.insert("record".into(), 1.into());
        about.insert("pipeline".into(), pipeline.name.clone().into());
        about.insert("title".into(), serde_json::json!(pipeline.title));
        about.insert("seed".into(), pipeline.seed.into());
        about.insert("units".into(), pipeline.units.word().into());
        about.insert("program".into(), serde_json::json!(program::program()));
        about.insert("only".into(), serde_json::json!(options.only));
        about.insert("steps".into(), steps.into());
        about.insert("text".into(), pipeline.text.clone().into());
        self.results.finish(about)?;
        Ok(self.outcome)
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

fn chains_words(number: u32, lanes: u32, asked: u32) -> String {
    if lanes == 1 {
        format!("chain {number}")
    } else {
        format!("chains {}-{}", number * lanes, number * lanes + asked - 1)
    }
}

/// A point in words, for people: `size 32, temperature 2.26, `.
pub fn point_words(point: &Point) -> String {
    let mut words = String::new();
    for (name, value) in &point.columns {
        let value = value.as_str().map_or_else(|| value.canonical(), str::to_owned);
        words.push_str(&format!("{name} {value}, "));
    }
    words
}

fn columns_words(columns: &[(String, String, Value)]) -> String {
    let words: Vec<String> = columns
        .iter()
        .filter(|(name, _, _)| name != "sites")
        .map(|(name, _, value)| format!("{name} {}", value.as_str().map_or_else(|| value.canonical(), str::to_owned)))
        .collect();
    words.join(", ")
}
