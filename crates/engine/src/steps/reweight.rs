//! `reweight`: curves over temperature from all chains of a size, by multiple histograms.

use super::averages::family::{Facts, Member, families, power};
use super::settled::{self, Chains};
use super::{Checked, Output, Split, StepError, StepKind, Task, as_is, flags_text};
use crate::job::SeriesInput;
use spinledger_stats::autocorrelation::{AutocorrelationParams, autocorrelation};
use spinledger_stats::jackknife::replicate_error;
use spinledger_stats::reweight::{Histograms, Reweighted};
use spinledger_terms::{Column, ColumnSpec, Field, Kind, Problem, StepSpec, Table, Value};

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "reweight", revision: 2, split: Split::Groups, spec, check, complete: as_is, analyse };

/// A place is covered where at least this many times the root of n independent measurements contribute, n being those of the run nearest to it, and
/// where at least its square do.
///
/// Where the tails of histograms must do, what they have not visited is missing, and neither value nor error knows of it. A Gaussian tail of n
/// measurements would hold out to (2 ln n)^1/2 widths; energies near a transition are skewed and hold out less. On tori with exact heat capacities
/// (n of 10^3 to 10^4) deviations are 1.4 times their errors at this bound, and 2 to 3 times at a tenth of it.
const LEAST_COVERAGE: f64 = 10.0;

/// Quantities whose replicates are given to later steps: those that curves of several sizes cross in.
pub(super) const CROSSED: [&str; 1] = ["binder"];

/// Blocks of the jackknife: more make the error of the error smaller (1/sqrt(2 blocks), a tenth for 50) and cost time.
const MOST_BLOCKS: usize = 64;

/// Fewer are flagged: an error from 10 blocks is uncertain by a quarter.
const FEW_BLOCKS: usize = 10;

fn spec() -> StepSpec {
    StepSpec {
        does: "reweight".into(),
        about: "curves over temperature by multiple histograms, one for each size".into(),
        fields: vec![
            Field::new("of", Kind::Step {}, "the sample step").required(),
            Field::new("temperature", Kind::Numbers {}, "where the curves are evaluated")
                .unit("temperature")
                .required(),
        ],
        scan: None,
    }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    super::must_be_of(step, "of", &["sample"], problems);
    super::must_not_follow(step, "of", problems);
    let Some(point) = step.points.first() else { return };
    let temperatures = point.get("temperature");
    let temperatures = temperatures.as_ref().and_then(|list| list.as_list()).unwrap_or_default();
    if temperatures.iter().any(|t| t.as_f64().is_some_and(|t| t <= 0.0)) {
        let problem = Problem::at_value(&point.place("temperature"), "a curve has no value at this temperature");
        problems.push(problem.expected("temperatures above 0"));
    }
}

/// A mean that curves are made of: a power of a column, or of its invariant.
#[derive(Clone, Copy, PartialEq)]
struct Moment {
    column: usize,
    signed: bool,
    power: u32,
}

/// Makes a column invariant under the symmetries.
type Invariant = fn(f64) -> f64;

/// What is derived from the observed columns, and the means it takes.
struct Plan {
    columns: Vec<(String, Option<Invariant>)>,
    moments: Vec<Moment>,
    members: Vec<(Member, Vec<usize>)>,
}

impl Plan {
    fn of(observed: &[ColumnSpec]) -> Self {
        let mut plan = Plan { columns: Vec::new(), moments: Vec::new(), members: Vec::new() };
        for family in families(observed) {
            let column = plan.columns.len();
            plan.columns.push((family.column.clone(), family.invariant));
            for member in &family.members {
                let moment = |power: &u32| Moment { column, signed: member.signed, power: *power };
                let taken = member.powers.iter().map(moment).map(|moment| {
                    plan.moments.iter().position(|known| *known == moment).unwrap_or_else(|| {
                        plan.moments.push(moment);
                        plan.moments.len() - 1
                    })
                });
                let taken = taken.collect();
                plan.members.push((member.clone(), taken));
            }
        }
        plan.members.sort_by_key(|(member, _)| member.rank);
        plan
    }

    /// Fills the moments of one measurement.
    fn fill(&self, values: &[Vec<f64>], row: usize, out: &mut [f64]) {
        for (out, moment) in out.iter_mut().zip(&self.moments) {
            let value = values[moment.column][row];
            let invariant = self.columns[moment.column].1.filter(|_| !moment.signed);
            *out = power(invariant.map_or(value, |invariant| invariant(value)), moment.power);
        }
    }
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let first = task.series.first().ok_or_else(|| StepError("there is no series".into()))?;
    let temperatures: Vec<f64> = task
        .parameters
        .get("temperature")
        .and_then(Value::as_list)
        .map(|list| list.iter().filter_map(Value::as_f64).collect())
        .unwrap_or_default();
    let warm = task.series.iter().find_map(|s| Some(s.facts.thermal_energy? / s.facts.temperature?));
    let boltzmann = warm.ok_or_else(|| StepError("a series at a finite temperature is needed".into()))?;
    let inverse: Vec<f64> = temperatures.iter().map(|t| 1.0 / (t * boltzmann)).collect();
    let plan = Plan::of(&first.facts.observed);
    let energy = plan.columns.iter().position(|(name, _)| name == "energy");
    let energy = energy.ok_or_else(|| StepError("reweighting needs `energy` observed".into()))?;

    let mut flags = Vec::new();
    let mut runs = Vec::with_capacity(task.series.len());
    for series in task.series {
        runs.push(Run::judge(task, series, &plan, &mut flags)?);
        (task.progress)();
    }
    // The same number for all runs, and long ones for the slowest.
    let allowed = runs.iter().map(|run| (run.rows as f64 / (20.0 * run.tau)) as usize).min().unwrap_or(0);
    if allowed < FEW_BLOCKS {
        flags.push("few-samples");
    }
    let blocks = allowed.clamp(2, MOST_BLOCKS);
    let sites = first.facts.sites as f64;
    let mut histograms = Histograms::new(plan.moments.len(), blocks);
    for (series, run) in task.series.iter().zip(&runs) {
        let values = run.read(task, series, &plan)?;
        let total: Vec<f64> = values[energy].iter().map(|e| sites * e).collect();
        let inverse = series.facts.thermal_energy.map_or(0.0, |t| 1.0 / t);
        let added = histograms.add(inverse, run.tau, &total, |row, out| plan.fill(&values, row, out));
        added.map_err(|e| StepError(crate::chain_text(&e)))?;
        (task.progress)();
    }
    let found = histograms.reweight(&inverse).map_err(|e| StepError(crate::chain_text(&e)))?;
    let unit = first.facts.temperature_unit.as_str();
    let independent = |(series, run): (&SeriesInput, &Run)| {
        (series.facts.thermal_energy.map_or(0.0, |t| 1.0 / t), run.rows as f64 / (2.0 * run.tau))
    };
    let runs: Vec<(f64, f64)> = task.series.iter().zip(&runs).map(independent).collect();
    let curves =
        Curves { plan: &plan, found: &found, temperatures: &temperatures, inverse: &inverse, runs: &runs, sites, unit };
    Ok(vec![("main".into(), curves.main(&flags)), ("replicates".into(), curves.replicates(&flags))].into())
}

/// What is known of a series before it is binned.
struct Run {
    discarded: usize,
    rows: usize,
    /// Largest integrated time of the invariants that decide, in measurements.
    tau: f64,
}

impl Run {
    fn judge(
        task: &Task<'_>,
        series: &SeriesInput,
        plan: &Plan,
        flags: &mut Vec<&'static str>,
    ) -> Result<Self, StepError> {
        let reader = task.read(series);
        let discarded = settled::discarded(&reader)?;
        flags.extend(settled::flags(&reader, discarded, task.series.len())?);
        let mut run = Run { discarded: discarded.rows, rows: 0, tau: 0.5 };
        let decides = |name: &str| families(&series.facts.observed).iter().any(|f| f.column == name && f.decides);
        for (column, invariant) in plan.columns.iter().filter(|(name, _)| decides(name)) {
            let mut chains = Chains::read(&reader, column, run.discarded)?;
            if let Some(invariant) = invariant {
                chains.apply(*invariant);
            }
            run.rows = chains.values.iter().map(Vec::len).sum();
            if let Ok(found) = autocorrelation(&chains.slices(), &AutocorrelationParams::default()) {
                run.tau = run.tau.max(found.tau);
            }
        }
        Ok(run)
    }

    /// All columns, chains one after the other.
    fn read(&self, task: &Task<'_>, series: &SeriesInput, plan: &Plan) -> Result<Vec<Vec<f64>>, StepError> {
        let reader = task.read(series);
        let column = |(name, _): &(String, _)| Ok(Chains::read(&reader, name, self.discarded)?.values.concat());
        plan.columns.iter().map(column).collect()
    }
}

/// Curves on their way to tables.
struct Curves<'a> {
    plan: &'a Plan,
    found: &'a Reweighted,
    temperatures: &'a [f64],
    inverse: &'a [f64],
    /// 1/T and number of independent measurements of each run.
    runs: &'a [(f64, f64)],
    sites: f64,
    unit: &'a str,
}

impl Curves<'_> {
    /// A quantity at a temperature, from the means at all temperatures.
    fn value(&self, (member, taken): &(Member, Vec<usize>), at: usize, means: &[Vec<f64>]) -> f64 {
        let facts = Facts { sites: self.sites, inverse: self.inverse[at], every: 1.0 };
        let means: Vec<f64> = taken.iter().map(|moment| means[at][*moment]).collect();
        (member.function)(&means, &facts).0
    }

    /// Whether enough measurements contribute at a temperature.
    fn covered(&self, at: usize) -> bool {
        let distance = |run: &&(f64, f64)| (run.0 - self.inverse[at]).abs();
        let nearest = self.runs.iter().min_by(|a, b| distance(a).total_cmp(&distance(b)));
        let independent = nearest.map_or(0.0, |run| run.1);
        self.found.coverage[at] >= LEAST_COVERAGE * independent.sqrt().max(LEAST_COVERAGE)
    }

    fn main(&self, flags: &[&'static str]) -> Table {
        let (mut temperature, mut quantity, mut value, mut error) = (Vec::new(), Vec::new(), Vec::new(), Vec::new());
        let (mut coverage, mut texts) = (Vec::new(), Vec::new());
        for (at, t) in self.temperatures.iter().enumerate() {
            for member in &self.plan.members {
                let mut flags = flags.to_vec();
                let own = self.value(member, at, &self.found.means);
                let replicates: Vec<f64> =
                    self.found.replicates.iter().map(|means| self.value(member, at, means)).collect();
                let spread = replicate_error(&replicates);
                if !own.is_finite() || !spread.is_finite() {
                    flags.push("not-finite");
                }
                if !self.covered(at) {
                    flags.push("poor-overlap");
                }
                temperature.push(Some(*t));
                quantity.push(Some(member.0.name.clone()));
                value.push(Some(own).filter(|x| x.is_finite()));
                error.push(Some(spread).filter(|x| x.is_finite()));
                coverage.push(Some(self.found.coverage[at]).filter(|x| x.is_finite()));
                texts.push(Some(flags_text(&flags)));
            }
        }
        Table {
            columns: vec![
                Column::numbers("temperature", self.unit, temperature),
                Column::texts("quantity", quantity),
                Column::numbers("value", "", value),
                Column::numbers("error", "", error),
                Column::numbers("coverage", "", coverage),
                Column::texts("flags", texts),
            ],
        }
    }

    /// The jackknife, for steps whose errors go through it.
    fn replicates(&self, flags: &[&'static str]) -> Table {
        let blocks = self.found.replicates.len();
        let rows = || (0..blocks).flat_map(|block| (0..self.temperatures.len()).map(move |at| (block, at)));
        let mut columns = vec![
            Column::integers("block", "", rows().map(|(block, _)| Some(block as i64)).collect()),
            Column::numbers("temperature", self.unit, rows().map(|(_, at)| Some(self.temperatures[at])).collect()),
        ];
        for member in self.plan.members.iter().filter(|(member, _)| CROSSED.contains(&member.name.as_str())) {
            let value = |(block, at): (usize, usize)| {
                Some(self.value(member, at, &self.found.replicates[block])).filter(|x| x.is_finite())
            };
            columns.push(Column::numbers(&member.0.name, "", rows().map(value).collect()));
        }
        columns.push(Column::texts("flags", rows().map(|_| Some(flags_text(flags))).collect()));
        Table { columns }
    }
}
