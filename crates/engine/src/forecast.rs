//! What a run would do and why: the same planning, with nothing done.

mod disk;
mod nearest;
mod past;
mod reasons;

pub use disk::Disk;
pub use reasons::Reason;

use crate::gather;
use crate::planning::{
    AnalysisPlan, Parcel, Product, Products, Unplanned, analysis_parcels, closed_series, inputs_of, kind_of,
    point_columns, sample_points,
};
use crate::steps::{Split, StepKind, WITHIN_GROUP};
use crate::study::Study;
use nearest::{Leaves, nearest};
use past::{Past, analysis_leaves, chain_leaves};
use reasons::{Words, gather as gather_reasons, of_analysis, of_chains};
use spinledger_ledger::{Index, Ledger, LedgerError};
use spinledger_pipeline::Step;
use spinledger_plan::sample::{Group, Point, State};
use spinledger_plan::sequence::parcels;
use spinledger_terms::Value;
use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

/// The forecast of a pipeline.
#[derive(Clone, Debug, serde::Serialize)]
pub struct Forecast {
    /// By step, in the order in which they run.
    pub steps: Vec<StepForecast>,
    /// Seconds of work on one worker, by the times on record; None where something is due of which no time is on record.
    pub seconds: Option<f64>,
}

/// The forecast of a step.
#[derive(Clone, Debug, Default, serde::Serialize)]
pub struct StepForecast {
    /// Its name.
    pub step: String,
    /// Its kind.
    pub does: String,
    /// Parcels; None where that depends on what is not there yet.
    pub parcels: Option<u64>,
    /// Parcels on record.
    pub recorded: u64,
    /// Parcels of which some blocks are on record.
    pub partial: u64,
    /// Parcels of which nothing is; None where that is not known.
    pub due: Option<u64>,
    /// Attempted spin updates to be done, by nominal numbers of sites.
    pub updates: f64,
    /// Steps that must run first before more can be said.
    pub waits: Vec<String>,
    /// What will break it, in words: values that its scan takes from an earlier step are wrong, or cannot be read.
    pub problem: Option<String>,
    /// Why parcels are due.
    pub reasons: Vec<Reason>,
    /// Seconds of work on one worker, by the times on record; None where there are none.
    pub seconds: Option<f64>,
    /// Bytes of new rows for the ledger, about.
    pub ledger_bytes: f64,
    /// Bytes of files among the results that are written anew, about.
    pub results_bytes: f64,
    /// Into how many pieces of work it falls: more workers than these do not make it faster.
    #[serde(skip)]
    pub pieces: u64,
}

impl Forecast {
    /// Seconds that so many workers take; None where that is not known.
    pub fn elapsed(&self, workers: usize) -> Option<f64> {
        let of = |step: &StepForecast| {
            let at_once = (step.pieces.max(1) as f64).min(workers.max(1) as f64);
            step.seconds.map(|seconds| seconds / at_once)
        };
        self.seconds?;
        Some(self.steps.iter().filter_map(of).sum())
    }

    /// What is to be written, and whether there is room.
    pub fn disks(&self, ledger: &Path, results: &Path) -> Vec<Disk> {
        let sum = |of: fn(&StepForecast) -> f64| self.steps.iter().map(of).sum::<f64>();
        disk::disks(&[(ledger, sum(|step| step.ledger_bytes)), (results, sum(|step| step.results_bytes))])
    }
}

/// Forecasts a pipeline against a ledger, or against none.
///
/// Takes some microseconds for each parcel, and where something is due about twenty for each group of chains and each analysis parcel
/// of the same kind on record, whose preimages are read for comparison.
///
/// # Errors
/// Where the ledger cannot be read.
pub fn forecast(study: &Study, ledger: Option<&Ledger>) -> Result<Forecast, LedgerError> {
    let index = ledger.map_or_else(|| Ok(Index::default()), Ledger::index)?;
    let mut ahead = Ahead::new(study, ledger, &index);
    let steps: Vec<StepForecast> = study.pipeline.steps.iter().map(|step| ahead.step(step)).collect();
    let unknown = |step: &StepForecast| step.seconds.is_none() && (step.updates > 0.0 || step.does == "sample");
    let due = |step: &StepForecast| step.due != Some(0) || step.partial > 0;
    let known = !steps.iter().any(|step| due(step) && unknown(step));
    let seconds = known.then(|| steps.iter().filter_map(|step| step.seconds).sum());
    Ok(Forecast { steps, seconds })
}

/// How the steps of a pipeline stand: as [`forecast`], without reasons, times and sizes, and as quick as planning.
///
/// # Errors
/// Where the ledger cannot be read.
pub fn standing(study: &Study, ledger: &Ledger) -> Result<Vec<StepForecast>, LedgerError> {
    let index = ledger.index()?;
    let mut ahead = Ahead::new(study, Some(ledger), &index);
    ahead.brief = true;
    Ok(study.pipeline.steps.iter().map(|step| ahead.step(step)).collect())
}

/// Looking ahead along the steps.
struct Ahead<'a> {
    /// Whether only the states of parcels are wanted.
    brief: bool,
    study: &'a Study,
    ledger: Option<&'a Ledger>,
    index: &'a Index,
    past: Past<'a>,
    products: Products,
    /// Products of which a part is not there yet.
    parts: Products,
    /// How many points and groups of points the sample steps have.
    points: BTreeMap<String, (u64, u64)>,
}

impl<'a> Ahead<'a> {
    fn new(study: &'a Study, ledger: Option<&'a Ledger>, index: &'a Index) -> Self {
        Ahead {
            brief: false,
            study,
            ledger,
            index,
            past: Past::new(ledger, index),
            products: Products::new(),
            parts: Products::new(),
            points: BTreeMap::new(),
        }
    }

    fn step(&mut self, step: &Step) -> StepForecast {
        let mut forecast = StepForecast { step: step.name.clone(), does: step.does.clone(), ..StepForecast::default() };
        let waits = step.needs.iter().filter(|name| !self.products.contains_key(*name));
        forecast.waits = waits.cloned().collect();
        let kind = kind_of(step);
        if kind.split == Split::Chains {
            if forecast.waits.is_empty() {
                self.sample(step, &mut forecast);
            }
        } else if forecast.waits.is_empty() {
            if let Some(plan) = analysis_parcels(self.study, step, kind, &self.products) {
                self.analysis(step, kind, plan, &mut forecast);
            }
        } else {
            self.waiting(step, kind, &mut forecast);
        }
        if forecast.reasons.is_empty() && !forecast.waits.is_empty() {
            let waits = forecast.waits.join(", ");
            forecast
                .reasons
                .push(Reason { parcels: 0, ..Reason::new("input", "", format!("not there before {waits} has run")) });
        }
        forecast
    }

    fn sample(&mut self, step: &Step, forecast: &mut StepForecast) {
        let points = match sample_points(self.study, step, &self.products, self.ledger, self.index) {
            Ok(points) => points,
            Err(Unplanned::Waits(steps)) => {
                forecast.waits = steps;
                return;
            }
            Err(Unplanned::Problems(problems)) => {
                forecast.problem = Some(spinledger_pipeline::render(&self.study.source, &problems));
                return;
            }
            Err(Unplanned::Failed(message)) => {
                forecast.problem = Some(message);
                return;
            }
        };
        let mut due = 0;
        let mut open: Vec<(&Point, &Group)> = Vec::new();
        let all = parcels(&points);
        for parcel in &all {
            match parcel.state(&points) {
                State::Recorded => forecast.recorded += 1,
                State::Partial => forecast.partial += 1,
                State::Due => due += 1,
            }
            forecast.updates += parcel.updates_due(&points);
            // Of a sequence the first that is not complete says why: the others follow from it.
            open.extend(parcel.groups(&points).find(|(point, group)| group.state(point.measure) != State::Recorded));
        }
        forecast.parcels = Some(all.len() as u64);
        forecast.due = Some(due);
        forecast.pieces = open.len() as u64;
        if open.is_empty() {
            forecast.seconds = Some(0.0);
        } else if !self.brief {
            forecast.reasons = self.chain_reasons(step, &open);
            self.costs(&points, forecast);
        }
        let series: Vec<_> = points.iter().map(|point| closed_series(self.study, step, point, self.index)).collect();
        self.points.insert(step.name.clone(), self.sizes(step, &points));
        let product = if series.iter().all(Option::is_some) { &mut self.products } else { &mut self.parts };
        product.insert(step.name.clone(), Product::Series(series));
    }

    /// How many points there are, and how many groups of points that differ in temperature only.
    fn sizes(&self, step: &Step, points: &[Point]) -> (u64, u64) {
        let own = |point: &Point| {
            let columns = point_columns(self.study, step, point).into_iter();
            let columns = columns.filter(|(name, _, _)| !WITHIN_GROUP.contains(&name.as_str()));
            Value::Map(columns.map(|(name, _, value)| (name, value)).collect()).canonical()
        };
        (points.len() as u64, points.iter().map(own).collect::<BTreeSet<_>>().len() as u64)
    }

    /// Why groups of chains are not complete.
    fn chain_reasons(&mut self, step: &Step, open: &[(&Point, &Group)]) -> Vec<Reason> {
        let axes = step.scan.iter().flat_map(|block| &block.axes);
        let scanned: Vec<String> =
            axes.map(|axis| axis.address.join(".").replace("inverse_temperature", "temperature")).collect();
        let mut reasons: Vec<Option<Vec<Reason>>> =
            open.iter().map(|(point, group)| known_reason(point, group)).collect();
        let unknown: Vec<usize> = (0..open.len()).filter(|at| reasons[*at].is_none()).collect();
        if !unknown.is_empty() {
            self.past.chains();
            let due: Vec<Leaves> =
                unknown.iter().map(|at| self.past.names.leaves(chain_leaves(&open[*at].1.value))).collect();
            // Read above: what follows only borrows.
            let recorded = self.past.chains().to_vec();
            let names = &self.past.names;
            let found = nearest(&due, &recorded, names, &["lattice.", "model.", "update."]);
            for ((at, due), found) in unknown.into_iter().zip(&due).zip(found) {
                let point = open[at].0;
                let words = Words {
                    scanned: &scanned,
                    point: point_words(point),
                    boltzmann: point.dynamics.boltzmann,
                    inputs: &[],
                };
                reasons[at] = Some(match found {
                    Some(found) => of_chains(due, &recorded[found], names, &words),
                    None => vec![nothing_on_record()],
                });
            }
        }
        gather_reasons(reasons.into_iter().flatten().flatten())
    }

    /// Time and room that sampling takes.
    fn costs(&mut self, points: &[Point], forecast: &mut StepForecast) {
        self.past.chains();
        let costs = &self.past.costs;
        let mut seconds = Some(0.0);
        for point in points {
            let Some(first) = point.groups.first() else { continue };
            let updates = point.updates_due();
            if updates > 0.0 {
                let more = costs.seconds(&first.value, updates);
                seconds = seconds.zip(more).map(|(sum, more)| sum + more);
            }
            let due: u64 = point.groups.iter().map(|group| rows_due(point, group)).sum();
            let row = costs.bytes(&first.value).unwrap_or_else(|| 8.0 * self.columns(point) as f64);
            forecast.ledger_bytes += due as f64 * row;
            if due > 0 {
                let chains: u64 = point.groups.iter().map(|group| u64::from(group.asked)).sum();
                forecast.results_bytes += (chains * point.measure) as f64 * row;
            }
        }
        forecast.seconds = seconds;
    }

    /// Columns of a block, as far as manifests tell: `sweep` and those of the observables.
    fn columns(&self, point: &Point) -> usize {
        let of = |item: &spinledger_plan::dynamics::ItemRef| {
            let found = self.study.vocabulary.item(spinledger_terms::ItemKind::Observable, &item.identity.item);
            found.and_then(|(_, item)| item.observable.as_ref()).map_or(1, |traits| traits.columns.len().max(1))
        };
        1 + point.dynamics.observe.iter().map(of).sum::<usize>()
    }

    fn analysis(&mut self, step: &Step, kind: &StepKind, plan: AnalysisPlan, forecast: &mut StepForecast) {
        let parcels: Vec<Parcel> = plan.parcels.into_iter().flatten().collect();
        let due: Vec<&Parcel> = parcels.iter().filter(|parcel| self.index.get(&parcel.key).is_none()).collect();
        forecast.recorded = (parcels.len() - due.len()) as u64;
        forecast.parcels = Some(parcels.len() as u64);
        forecast.due = Some(due.len() as u64);
        forecast.pieces = due.len() as u64;
        forecast.seconds = match due.len() {
            0 => Some(0.0),
            due => self.past.seconds_of(kind.does).map(|seconds| seconds * due as f64),
        };
        if !due.is_empty() {
            forecast.reasons = self.analysis_reasons(step, kind, &parcels, &due);
            return;
        }
        let line = if matches!(kind.split, Split::Points | Split::Groups) {
            let preimage = gather::preimage(kind, &parcels, self.index);
            preimage.and_then(|preimage| self.index.get(&spinledger_terms::Key::of(&preimage)))
        } else {
            parcels.first().and_then(|parcel| self.index.get(&parcel.key))
        };
        if let Some(line) = line {
            self.products.insert(step.name.clone(), Product::Tables { key: line.key, content: line.content });
        }
    }

    fn analysis_reasons(&mut self, step: &Step, kind: &StepKind, all: &[Parcel], due: &[&Parcel]) -> Vec<Reason> {
        if self.brief {
            return Vec::new();
        }
        self.past.analyses(kind.does);
        let leaves: Vec<Leaves> =
            due.iter().map(|parcel| self.past.names.leaves(analysis_leaves(&parcel.job.preimage))).collect();
        let recorded = self.past.analyses(kind.does).to_vec();
        let names = &self.past.names;
        let inputs = inputs_of(self.study, step);
        let found = nearest(&leaves, &recorded, names, &["parameters."]);
        let reasons = due.iter().zip(&leaves).zip(found).map(|((parcel, leaves), found)| {
            let Some(found) = found else { return vec![nothing_on_record()] };
            let words = Words { scanned: &[], point: parcel_words(parcel, all), boltzmann: 1.0, inputs: &inputs };
            of_analysis(kind.does, leaves, &recorded[found], names, &words)
        });
        gather_reasons(reasons.flatten())
    }

    /// What can be said of an analysis whose input is not complete: its time by the number of its parcels, and where each point has a parcel of
    /// its own, which of them are there.
    fn waiting(&mut self, step: &Step, kind: &'static StepKind, forecast: &mut StepForecast) {
        let source = inputs_of(self.study, step).into_iter().next().map(|(_, name)| name).unwrap_or_default();
        let (points, groups) = self.points.get(&source).copied().unwrap_or((1, 1));
        let parcels = match kind.split {
            Split::Points => points,
            Split::Groups => groups,
            _ => 1,
        };
        let mut open = parcels;
        if kind.split == Split::Points
            && self.parts.contains_key(&source)
            && let Some(plan) = analysis_parcels(self.study, step, kind, &self.parts)
        {
            let there: Vec<Parcel> = plan.parcels.iter().flatten().cloned().collect();
            let due: Vec<&Parcel> = there.iter().filter(|parcel| self.index.get(&parcel.key).is_none()).collect();
            let missing = (plan.parcels.len() - there.len()) as u64;
            forecast.parcels = Some(plan.parcels.len() as u64);
            forecast.recorded = (there.len() - due.len()) as u64;
            open = missing + due.len() as u64;
            forecast.due = Some(open);
            if !due.is_empty() {
                forecast.reasons = self.analysis_reasons(step, kind, &there, &due);
            }
            let missing =
                Reason { parcels: missing, ..Reason::new("input \"of\"", "", format!("{source} is not complete")) };
            forecast.reasons.push(missing);
        }
        forecast.pieces = open;
        forecast.seconds = self.past.seconds_of(kind.does).map(|seconds| seconds * open as f64);
    }
}

/// Why a group is not complete, where that can be told without looking further: chains that go on, and chains beside others.
fn known_reason(point: &Point, group: &Group) -> Option<Vec<Reason>> {
    if group.covered.iter().all(|rows| *rows >= point.measure) {
        return Some(vec![Reason::new("keep", "", "configurations that are not on record")]);
    }
    if group.state(point.measure) == State::Partial {
        let have = group.covered.iter().copied().min().unwrap_or(0);
        let begun = group.covered.iter().filter(|rows| **rows > 0).count();
        if have == 0 {
            return Some(vec![Reason::new("chains", begun.to_string(), group.asked.to_string())]);
        }
        let reason = Reason::new("measure", have.to_string(), point.measure.to_string());
        return Some(vec![Reason { continues: true, ..reason }]);
    }
    let same = || point.groups.iter().filter(|other| other.start == group.start);
    let there: u32 = same().filter(|other| other.state(point.measure) != State::Due).map(|other| other.asked).sum();
    let asked: u32 = same().map(|other| other.asked).sum();
    (there > 0).then(|| vec![Reason::new("chains", there.to_string(), asked.to_string())])
}

fn nothing_on_record() -> Reason {
    Reason::new("nothing of this kind is on record", "", "")
}

fn rows_due(point: &Point, group: &Group) -> u64 {
    group.covered.iter().map(|rows| point.measure.saturating_sub(*rows)).sum()
}

fn value_words(value: &Value) -> String {
    value.as_str().map_or_else(|| reasons::plain(&value.canonical()), str::to_owned)
}

/// The scan columns of a point, and its temperature: `size 32, temperature 2.26`.
fn point_words(point: &Point) -> String {
    let columns = point.columns.iter().filter(|(name, _)| name != "sites");
    columns.map(|(name, value)| format!("{name} {}", value_words(value))).collect::<Vec<_>>().join(", ")
}

/// The columns that tell a parcel from the others of its step.
fn parcel_words(parcel: &Parcel, all: &[Parcel]) -> String {
    let differs = |name: &str, value: &Value| {
        all.iter().any(|other| other.columns.iter().any(|(known, _, other)| known == name && other != value))
    };
    let columns = parcel.columns.iter().filter(|(name, _, value)| name != "sites" && differs(name, value));
    let words: Vec<String> = columns.map(|(name, _, value)| format!("{name} {}", value_words(value))).collect();
    if words.is_empty() { "another size or temperature".into() } else { words.join(", ") }
}
