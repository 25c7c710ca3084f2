//! `spinledger forecast`: what would run, and about how long.

use crate::args::ForecastArgs;
use crate::commands::{WELL, WRONG, open, workers};
use crate::screen::{Screen, Style};
use crate::text::{amount, columns, duration};
use anyhow::Context;
use serde_json::json;
use spinledger_engine::forecast::forecast as forecast_pipeline;
use spinledger_ledger::Ledger;

/// Forecasts a pipeline. Nothing is written, not even an empty ledger.
pub(crate) fn forecast(args: &ForecastArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    let Some(study) = open(&args.pipeline, &mut screen)? else { return Ok(WRONG) };
    let path = &args.ledger.ledger;
    let ledger = if Ledger::is_at(path) {
        Some(Ledger::open(path).with_context(|| format!("cannot open the ledger {}", path.display()))?)
    } else {
        None
    };
    let forecast = forecast_pipeline(&study, ledger.as_ref())?;
    let workers = workers(args.workers);
    let header = ["step", "does", "parcels", "recorded", "partial", "due", "spin updates", "waits for"];
    let mut rows = vec![header.map(String::from).to_vec()];
    for step in &forecast.steps {
        let count = |n: Option<u64>| n.map_or("?".to_owned(), |n| n.to_string());
        let updates = if step.updates > 0.0 { amount(step.updates) } else { String::new() };
        rows.push(vec![
            step.step.clone(),
            step.does.clone(),
            count(step.parcels),
            step.recorded.to_string(),
            step.partial.to_string(),
            count(step.due),
            updates,
            step.waits.join(", "),
        ]);
    }
    columns(&rows, &[2, 3, 4, 5, 6]).iter().for_each(|line| screen.line(line));
    for step in &forecast.steps {
        if let Some(problem) = &step.problem {
            screen.trouble(&format!("{} will break:\n{problem}", step.step));
        }
    }
    let seconds = forecast.seconds.map(|seconds| seconds / workers as f64);
    screen.event(&json!({ "event": "forecast", "steps": forecast.steps, "workers": workers, "seconds": seconds }));
    if forecast.steps.iter().all(|step| step.due == Some(0) && step.partial == 0) {
        screen.line("nothing is due");
    } else if forecast.steps.iter().all(|step| step.updates == 0.0 && step.waits.is_empty()) {
        screen.line("no sampling is due");
    } else if let Some(seconds) = seconds {
        screen.line(&format!("about {} of sampling with {workers} workers, by the times on record", duration(seconds)));
    } else {
        screen.line("how long it takes is not known: no sampling is on record in this ledger");
    }
    Ok(WELL)
}
