//! What a run would do: the same planning, with nothing done.

use crate::gather;
use crate::planning::{Product, Products, Unplanned, analysis_parcels, closed_series, kind_of, sample_points};
use crate::steps::Split;
use crate::study::Study;
use spinledger_ledger::{Index, Ledger, LedgerError};
use spinledger_pipeline::Step;
use spinledger_plan::sample::State;
use spinledger_plan::sequence::parcels;

/// The forecast of a pipeline.
#[derive(Clone, Debug, serde::Serialize)]
pub struct Forecast {
    /// By step, in the order in which they run.
    pub steps: Vec<StepForecast>,
    /// Seconds of sampling on one worker, by the rates on record; None where there are none.
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
}

/// Forecasts a pipeline against a ledger, or against none.
///
/// # Errors
/// Where the ledger cannot be read.
pub fn forecast(study: &Study, ledger: Option<&Ledger>) -> Result<Forecast, LedgerError> {
    let index = ledger.map_or_else(|| Ok(Index::default()), Ledger::index)?;
    let mut products = Products::new();
    let mut steps = Vec::new();
    for step in &study.pipeline.steps {
        let mut forecast = StepForecast { step: step.name.clone(), does: step.does.clone(), ..StepForecast::default() };
        let waits = step.needs.iter().filter(|name| !products.contains_key(*name));
        forecast.waits = waits.cloned().collect();
        if forecast.waits.is_empty() {
            if kind_of(step).split == Split::Chains {
                sample(study, step, ledger, &index, &mut products, &mut forecast);
            } else {
                analysis(study, step, &index, &mut products, &mut forecast);
            }
        }
        steps.push(forecast);
    }
    let (seconds, updates) = index
        .lines()
        .filter(|line| line.kind == "block" && line.updates > 0)
        .fold((0.0, 0.0), |(seconds, updates), line| (seconds + line.seconds, updates + line.updates as f64));
    let due: f64 = steps.iter().map(|step| step.updates).sum();
    Ok(Forecast { steps, seconds: (updates > 0.0).then(|| due * seconds / updates) })
}

fn sample(
    study: &Study,
    step: &Step,
    ledger: Option<&Ledger>,
    index: &Index,
    products: &mut Products,
    forecast: &mut StepForecast,
) {
    let points = match sample_points(study, step, products, ledger, index) {
        Ok(points) => points,
        Err(Unplanned::Waits(steps)) => {
            forecast.waits = steps;
            return;
        }
        Err(Unplanned::Problems(problems)) => {
            forecast.problem = Some(spinledger_pipeline::render(&study.source, &problems));
            return;
        }
        Err(Unplanned::Failed(message)) => {
            forecast.problem = Some(message);
            return;
        }
    };
    let mut due = 0;
    let all = parcels(&points);
    for parcel in &all {
        match parcel.state(&points) {
            State::Recorded => forecast.recorded += 1,
            State::Partial => forecast.partial += 1,
            State::Due => due += 1,
        }
        forecast.updates += parcel.updates_due(&points);
    }
    let parcels = all.len() as u64;
    forecast.parcels = Some(parcels);
    forecast.due = Some(due);
    let series: Vec<_> = points.iter().map(|point| closed_series(study, step, point, index)).collect();
    if series.iter().all(Option::is_some) {
        products.insert(step.name.clone(), Product::Series(series));
    }
}

fn analysis(study: &Study, step: &Step, index: &Index, products: &mut Products, forecast: &mut StepForecast) {
    let kind = kind_of(step);
    let Some(plan) = analysis_parcels(study, step, kind, products) else { return };
    let parcels: Vec<_> = plan.parcels.into_iter().flatten().collect();
    forecast.recorded = parcels.iter().filter(|parcel| index.get(&parcel.key).is_some()).count() as u64;
    forecast.parcels = Some(parcels.len() as u64);
    forecast.due = Some(parcels.len() as u64 - forecast.recorded);
    if forecast.due != Some(0) {
        return;
    }
    let line = if matches!(kind.split, Split::Points | Split::Groups) {
        gather::preimage(kind, &parcels, index).and_then(|preimage| index.get(&spinledger_terms::Key::of(&preimage)))
    } else {
        parcels.first().and_then(|parcel| index.get(&parcel.key))
    };
    if let Some(line) = line {
        products.insert(step.name.clone(), Product::Tables { key: line.key, content: line.content });
    }
}
