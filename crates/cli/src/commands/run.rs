//! `spinledger run`: compute what is due, tell how it goes, close with what came out.

use crate::args::RunArgs;
use crate::commands::{BROKEN, WRONG, closing, open, results, workers};
use crate::screen::{Screen, Style};
use crate::signals;
use crate::text::{amount, counted, duration};
use anyhow::Context;
use serde_json::json;
use spinledger_engine::run::{Notice, RunOptions, run as run_pipeline};
use spinledger_engine::{PoolOptions, Study};
use spinledger_ledger::Ledger;
use std::time::{Duration, Instant};

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
    screen.line(&pipeline.title.as_ref().map_or(pipeline.name.clone(), |title| format!("{}: {title}", pipeline.name)));
    tell_foreign(&study, &mut screen);
    let mut progress = Progress::new();
    let outcome = run_pipeline(&study, &ledger, &options, &mut |notice| progress.tell(&notice, &mut screen));
    // Here nothing ran: what fails on the way is in the outcome.
    let outcome = outcome?;
    let spent = closing::Spent { seconds: progress.started.elapsed().as_secs_f64(), updates: progress.updates };
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
        screen.line(&format!("note: this run loads a plugin that did not come with spinledger: {file}"));
    }
}

/// How the run goes.
struct Progress {
    started: Instant,
    due: f64,
    done: f64,
    parcels: (u64, u64),
    working: Vec<String>,
    updates: f64,
}

impl Progress {
    fn new() -> Self {
        Progress { started: Instant::now(), due: 0.0, done: 0.0, parcels: (0, 0), working: Vec::new(), updates: 0.0 }
    }

    fn tell(&mut self, notice: &Notice<'_>, screen: &mut Screen) {
        match notice {
            Notice::Planned { step, parcels, recorded, updates } => {
                self.due += updates;
                self.parcels.1 += parcels - recorded;
                screen.event(&json!({ "event": "planned", "step": step, "parcels": parcels, "recorded": recorded }));
                let due = parcels - recorded;
                let what = match (due, recorded) {
                    (0, _) => format!("{}, all on record", counted(*parcels, "parcel")),
                    (_, 0) => format!("{} due", counted(*parcels, "parcel")),
                    _ => format!("{}, {recorded} on record, {due} due", counted(*parcels, "parcel")),
                };
                screen.line(&format!("{step}: {what}"));
            }
            Notice::Started { step, parcel } => {
                self.working.push(format!("{step} {parcel}"));
                screen.event(&json!({ "event": "started", "step": step, "parcel": parcel }));
            }
            Notice::Progress { updates } => {
                self.done += *updates as f64;
                self.updates += *updates as f64;
            }
            Notice::Done { step, parcel, computed } => {
                self.leave(step, parcel);
                screen.event(&json!({ "event": "done", "step": step, "parcel": parcel, "computed": computed }));
            }
            Notice::Broken { step, parcel, message } => {
                self.leave(step, parcel);
                let event = json!({ "event": "broken", "step": step, "parcel": parcel, "message": message });
                screen.event(&event);
                let place = if parcel.is_empty() { (*step).to_owned() } else { format!("{step}, {parcel}") };
                screen.trouble(&format!("broken: {place}:\n  {}", message.replace('\n', "\n  ")));
            }
            Notice::Complete { step, counts } => {
                screen.event(&json!({ "event": "complete", "step": step, "counts": counts }));
            }
            Notice::Left { step } => {
                screen.event(&json!({ "event": "left", "step": step }));
                screen.line(&format!("{step}: left due, since something that it needs is broken"));
            }
            Notice::Stopping => {
                self.working.clear();
                screen.event(&json!({ "event": "stopping" }));
                screen.line("stopping: blocks in flight are being put on record (once more ends at once)");
            }
            Notice::Warning(text) => {
                screen.event(&json!({ "event": "warning", "text": text }));
                if !screen.is_json() {
                    screen.trouble(&format!("warning: {text}"));
                }
            }
        }
        screen.bottom(|| self.words());
    }

    fn leave(&mut self, step: &str, parcel: &str) {
        self.parcels.0 += 1;
        let words = format!("{step} {parcel}");
        if let Some(at) = self.working.iter().position(|w| *w == words) {
            self.working.remove(at);
        }
    }

    /// The line at the bottom: parcels, rate, what is left, what is being worked on.
    fn words(&self) -> String {
        let seconds = self.started.elapsed().as_secs_f64();
        let mut text = format!("{} of {} parcels", self.parcels.0, self.parcels.1);
        if self.done > 0.0 && seconds > 1.0 {
            let rate = self.done / seconds;
            text.push_str(&format!(", {} updates/s", amount(rate)));
            if self.due > self.done {
                text.push_str(&format!(", about {} left", duration((self.due - self.done) / rate)));
            }
        }
        if let Some(working) = self.working.first() {
            text.push_str(&format!(" | {working}"));
        }
        text
    }
}
