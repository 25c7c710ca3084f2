//! `crossing`: where the curves of several sizes cross, and where that tends as sizes grow.

mod reweighted;
mod rows;

use super::settled::{self, Chains};
use super::{Checked, Output, Split, StepError, StepKind, Task, as_is};
use crate::job::SeriesInput;
use crate::series::SeriesReader;
use spinledger_numerics::sum::CompensatedSum;
use spinledger_stats::autocorrelation::{AutocorrelationParams, autocorrelation};
use spinledger_stats::crossing::{CrossingParams, Curve, Replicates, crossing};
use spinledger_stats::jackknife::{Blocks, blocks_per_chain};
use spinledger_terms::{Field, Kind, Problem, StepSpec, Value};
use std::collections::BTreeMap;

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "crossing", revision: 3, split: Split::Whole, spec, check, complete: as_is, analyse };

fn spec() -> StepSpec {
    StepSpec {
        does: "crossing".into(),
        about:
            "the ordering temperature from where the curves of several sizes cross, extrapolated with a correction term"
                .into(),
        fields: vec![
            Field::new("of", Kind::Step {}, "the sample step, or curves of a reweight step").required(),
            Field::new("quantity", Kind::words(&["binder"]), "what crosses").default(Value::text("binder")),
            Field::new("one_over_nu", Kind::POSITIVE, "1/nu, if it is known; from the slopes otherwise"),
            Field::new(
                "correction",
                Kind::POSITIVE,
                "exponent of the correction term, if it is known; averaged over 0.5 to 2.5 otherwise",
            ),
        ],
        scan: None,
    }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    super::must_be_of(step, "of", &["sample", "reweight"], problems);
    super::must_not_follow(step, "of", problems);
}

/// Columns that the step concludes over.
const CONCLUDED: [&str; 8] =
    ["size", "size_x", "size_y", "size_z", "temperature", "inverse_temperature", "sites", "start"];

/// Scan columns that tell one set of curves from another.
type Rest = Vec<(String, Value)>;

/// Curves of one set: by size, with what is doubtful about them.
#[derive(Default)]
struct Set {
    rest: Rest,
    curves: Vec<Curve>,
    /// For each curve: places that no histogram covers.
    uncovered: Vec<Vec<f64>>,
    flags: Vec<String>,
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let (sets, unit) = if task.series.is_empty() {
        reweighted::sets(task)?
    } else {
        (from_series(task)?, task.series[0].facts.temperature_unit.clone())
    };
    let mut out = rows::Tables::default();
    for mut set in sets {
        let number = |name: &str| task.parameters.get(name).and_then(Value::as_f64);
        let mut params = CrossingParams {
            inverse_nu: number("one_over_nu"),
            // <m^4> is never less than <m^2>^2.
            ceiling: Some(2.0 / 3.0),
            ..CrossingParams::default()
        };
        if let Some(exponent) = number("correction") {
            params.corrections = vec![exponent];
        }
        let found = crossing(&set.curves, &params).map_err(|e| StepError(crate::chain_text(&e)))?;
        if reweighted::overlap_is_poor(&set, &found) {
            set.flags.push("poor-overlap".to_owned());
        }
        out.add(&set.rest, &found, &set.flags);
        (task.progress)();
    }
    Ok(out.tables(&unit).into())
}

/// Curves whose points are series.
fn from_series(task: &Task<'_>) -> Result<Vec<Set>, StepError> {
    // Series that differ in anything else that is scanned (a field, a coupling) are curves of their own.
    let mut sets: BTreeMap<String, (Rest, Vec<&SeriesInput>)> = BTreeMap::new();
    for series in task.series {
        let rest: Vec<(String, Value)> =
            series.columns.iter().filter(|(name, _)| !CONCLUDED.contains(&name.as_str())).cloned().collect();
        let label = Value::Map(rest.iter().cloned().collect()).canonical();
        sets.entry(label).or_insert_with(|| (rest, Vec::new())).1.push(series);
    }
    let mut out = Vec::new();
    for (rest, series) in sets.into_values() {
        let mut flags = Vec::new();
        let points = series.len();
        let mut curves: BTreeMap<u64, Vec<(f64, Vec<f64>, f64)>> = BTreeMap::new();
        for input in series {
            let (size, temperature) = place(input)?;
            let reader = task.read(input);
            let discarded = settled::discarded(&reader)?;
            flags.extend(settled::flags(&reader, discarded, points)?.into_iter().map(str::to_owned));
            let (value, replicates) = cumulant(&reader, discarded.rows)?;
            curves.entry(size).or_default().push((temperature, replicates, value));
            (task.progress)();
        }
        let curves = curves.into_iter().map(|(size, points)| curve(size, points)).collect();
        out.push(Set { rest, curves, flags, uncovered: Vec::new() });
    }
    Ok(out)
}

/// Size and temperature of a series.
fn place(input: &SeriesInput) -> Result<(u64, f64), StepError> {
    let size = input.columns.iter().find(|(name, _)| name == "size").map(|(_, value)| value);
    let size = size.and_then(Value::as_i64).and_then(|n| u64::try_from(n).ok());
    let size = size.ok_or_else(|| StepError("a crossing needs sizes that are one number each".into()))?;
    let temperature =
        input.facts.temperature.ok_or_else(|| StepError("a crossing needs finite temperatures".into()))?;
    Ok((size, temperature))
}

/// The cumulant of a series and its jackknife replicates over blocks that are long against the autocorrelation time.
fn cumulant(reader: &SeriesReader<'_>, discarded: usize) -> Result<(f64, Vec<f64>), StepError> {
    let squared = reader.has("order_squared");
    let column = if squared { "order_squared" } else { "magnetisation" };
    if !reader.has(column) {
        return Err(StepError("the cumulant needs `magnetisation` or `order-parameter` observed".into()));
    }
    let mut chains = Chains::read(reader, column, discarded)?;
    chains.apply(if squared { |x| x } else { |x| x * x });
    let tau = autocorrelation(&chains.slices(), &AutocorrelationParams::default()).map_or(0.5, |found| found.tau);
    let mut blocks = Blocks::new(2);
    for chain in &chains.values {
        let count = blocks_per_chain(chain.len(), chains.values.len(), tau).min(chain.len());
        for block in 0..count {
            let rows = &chain[block * chain.len() / count..(block + 1) * chain.len() / count];
            let (mut second, mut fourth) = (CompensatedSum::new(), CompensatedSum::new());
            for square in rows {
                second.add(*square);
                fourth.add(square * square);
            }
            blocks.push(rows.len() as f64, &[second.value(), fourth.value()]);
        }
    }
    let found = blocks
        .jackknife(1, |means, out| out[0] = 1.0 - means[1] / (3.0 * means[0] * means[0]))
        .map_err(|e| StepError(format!("the cumulant of a series: {}", crate::chain_text(&e))))?;
    let replicates = (0..blocks.len()).map(|block| found.replicates[(block, 0)]).collect();
    Ok((found.estimates[0], replicates))
}

fn curve(size: u64, mut points: Vec<(f64, Vec<f64>, f64)>) -> Curve {
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    Curve {
        size: size as f64,
        x: points.iter().map(|p| p.0).collect(),
        y: points.iter().map(|p| p.2).collect(),
        replicates: Replicates::Separate(points.into_iter().map(|p| p.1).collect()),
    }
}
