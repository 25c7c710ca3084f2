//! `spinledger run`: compute what is due, tell how it goes, close with what came out.

mod progress;

use crate::args::RunArgs;
use crate::commands::{BROKEN, WRONG, closing, open, results, workers};
use crate::screen::{Screen, Style};
use crate::signals;
use anyhow::Context;
use progress::Progress;
use serde_json::json;
use spinledger_engine::run::{RunOptions, run as run_pipeline};
use spinledger_engine::{PoolOptions, Study};
use spinledger_ledger::Ledger;
use std::time::Duration;

/// Runs a pipeline.
pub(crate) fn run(args: &RunArgs) -> anyhow::Result<u8> {
    let style = match (args.json, args.quiet) {
        (true, _) => Style::Json,
        (_, true) => Style::Quiet,
        _ => Style::Person,
    };
    let mut screen = Screen::new(style);
    let Some(study) = open(&args.pipeline, &mut screen)? else { return Ok(WRONG) };
    let ledger = Ledger::open(&args.ledger.ledger)
        .with_context(|| format!("cannot open the ledger {}", args.ledger.ledger.display()))?;
    let asked = signals::heed().context("cannot heed signals")?;
    let out = results(args.out.as_deref(), &study);
    let options = RunOptions {
        pool: PoolOptions {
            program: std::env::current_exe().context("cannot tell which program this is")?,
            ledger: args.ledger.ledger.clone(),
            workers: workers(args.workers),
            threads: usize::from(args.threads),
            stall: args.stall.map(Duration::from_secs_f64),
            stop: asked.stop.clone(),
        },
        out: out.clone(),
        only: args.only.clone(),
    };
    let pipeline = &study.pipeline;
    screen.tell(&pipeline.title.as_ref().map_or(pipeline.name.clone(), |title| format!("{}: {title}", pipeline.name)));
    tell_foreign(&study, &mut screen);
    let mut progress = Progress::new(&study, args.only.as_deref());
    let outcome = run_pipeline(&study, &ledger, &options, &mut |notice| progress.tell(&notice, &mut screen));
    // Here nothing ran: what fails on the way is in the outcome.
    let outcome = outcome?;
    let spent = closing::Spent { seconds: progress.seconds(), updates: progress.updates() };
    if outcome.asked {
        closing::tell_stopped(&study, &ledger, &outcome, &out, &spent, &mut screen)?;
        return Ok(asked.status().unwrap_or(BROKEN));
    }
    Ok(closing::close(&study, &ledger, &outcome, &out, spent, &mut screen))
}

/// Plugins that did not come with the program run with the user's rights: which do is said before they are loaded.
fn tell_foreign(study: &Study, screen: &mut Screen) {
    let mut files: Vec<String> = Vec::new();
    for step in &study.pipeline.steps {
        for file in spinledger_engine::planning::foreign_files(study, step) {
            if !files.contains(&file) {
                files.push(file);
            }
        }
    }
    for file in files {
        screen.event(&json!({ "event": "foreign", "file": file }));
        screen.tell(&format!("note: this run loads a plugin that did not come with spinledger: {file}"));
    }
}
