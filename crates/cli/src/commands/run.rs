//! `spinledger run`: compute what is due, tell how it goes, close with what came out.

use crate::args::RunArgs;
use crate::commands::{BROKEN, WELL, WRONG, open, tell_problems, workers};
use crate::screen::{Screen, Style};
use crate::text::{amount, columns, counted, duration, with_error};
use anyhow::Context;
use serde_json::json;
use spinledger_engine::planning::Product;
use spinledger_engine::run::{Notice, Outcome, RunError, RunOptions, run as run_pipeline};
use spinledger_engine::{PoolOptions, Study};
use spinledger_ledger::Ledger;
use spinledger_terms::Table;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
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
    let out = args.out.clone().unwrap_or_else(|| Path::new("results").join(&study.pipeline.name));
    let options = RunOptions {
        pool: PoolOptions {
            program: std::env::current_exe().context("cannot tell which program this is")?,
            ledger: args.ledger.ledger.clone(),
            workers: workers(args.workers),
            threads: usize::from(args.threads),
            stall: args.stall.map(Duration::from_secs_f64),
        },
        out: out.clone(),
        only: args.only.clone(),
    };
    let pipeline = &study.pipeline;
    screen.line(&pipeline.title.as_ref().map_or(pipeline.name.clone(), |title| format!("{}: {title}", pipeline.name)));
    tell_foreign(&study, &mut screen);
    let mut progress = Progress::new();
    let outcome = run_pipeline(&study, &ledger, &options, &mut |notice| progress.tell(&notice, &mut screen));
    let outcome = match outcome {
        Ok(outcome) => outcome,
        Err(RunError::Problems(problems)) => {
            tell_problems(&study.source, &problems, &mut screen);
            return Ok(BROKEN);
        }
        Err(error @ RunError::NoStep(_)) => return Err(error.into()),
        Err(error) => {
            screen.trouble(&format!("spinledger: {}", spinledger_engine::chain_text(&error)));
            return Ok(BROKEN);
        }
    };
    close(&study, &ledger, &outcome, &out, &progress, &mut screen)
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
                screen.trouble(&format!("broken: {place}: {message}"));
            }
            Notice::Complete { step, counts } => {
                screen.event(&json!({ "event": "complete", "step": step, "counts": counts }));
            }
            Notice::Left { step } => {
                screen.event(&json!({ "event": "left", "step": step }));
                screen.line(&format!("{step}: left due, since something that it needs is broken"));
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
            text.push_str(&format!(", {}updates/s", amount(rate)));
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

/// The closing table, what is flagged, where the results are; the exit status.
fn close(
    study: &Study,
    ledger: &Ledger,
    outcome: &Outcome,
    out: &Path,
    progress: &Progress,
    screen: &mut Screen,
) -> anyhow::Result<u8> {
    let mut rows = vec![["step", "computed", "reused", "broken", ""].map(String::from).to_vec()];
    for step in &study.pipeline.steps {
        let Some(counts) = outcome.steps.get(&step.name) else { continue };
        let left = if outcome.left.contains(&step.name) { "left due" } else { "" };
        let numbers = [counts.computed, counts.reused, counts.broken].map(|n| n.to_string());
        let mut row = vec![step.name.clone()];
        row.extend(numbers);
        row.push(left.to_owned());
        rows.push(row);
    }
    screen.line("");
    columns(&rows, &[1, 2, 3]).iter().for_each(|line| screen.line(line));
    let mut disagrees = false;
    let mut verdicts = vec![["result", "value", "reference", "deviation", "verdict"].map(String::from).to_vec()];
    let mut flagged: BTreeMap<String, (usize, usize, BTreeMap<String, usize>)> = BTreeMap::new();
    for step in &study.pipeline.steps {
        let Some(Product::Tables { key, .. }) = outcome.products.get(&step.name) else { continue };
        let table = ledger.read_table(key, "main")?;
        count_flags(&step.name, &table, &mut flagged);
        if table.column("verdict").is_none() || table.column("name").is_none() {
            continue;
        }
        for row in 0..table.rows() {
            let number = |name: &str| table.column(name).and_then(|c| c.cells.number(row));
            let verdict = table.text("verdict", row).unwrap_or_default();
            disagrees |= verdict == "disagrees";
            let value = number("value").map_or("unknown".to_owned(), |v| with_error(v, number("error")));
            let reference = number("reference").map_or(String::new(), |v| with_error(v, number("reference_error")));
            let deviation = number("deviation").map_or(String::new(), |d| format!("{d:+.2}"));
            let name = table.text("name", row).unwrap_or_default().to_owned();
            let event = json!({ "event": "verdict", "name": name, "value": number("value"), "error": number("error"),
                "reference": number("reference"), "deviation": number("deviation"), "verdict": verdict,
                "flags": table.text("flags", row) });
            screen.event(&event);
            verdicts.push(vec![name, value, reference, deviation, verdict.to_owned()]);
        }
    }
    if verdicts.len() > 1 {
        screen.line("");
        for (line, row) in columns(&verdicts, &[3]).iter().zip(&verdicts) {
            let code = match row[4].as_str() {
                "agrees" => "32",
                "disagrees" => "31",
                "undecided" => "33",
                _ => "1",
            };
            let line = screen.tint(line, code);
            screen.line(&line);
        }
    }
    tell_flags(&flagged, screen);
    let counts = outcome.counts;
    screen.event(&json!({ "event": "finished", "computed": counts.computed, "reused": counts.reused,
        "broken": counts.broken, "steps": outcome.steps, "out": out }));
    screen.line("");
    let seconds = progress.started.elapsed().as_secs_f64();
    let rate = if progress.updates > 0.0 {
        format!(", {}spin updates at {}a second", amount(progress.updates), amount(progress.updates / seconds))
    } else {
        String::new()
    };
    screen.line(&format!("{} in {}{rate}", shown(out), duration(seconds)));
    if counts.broken > 0 {
        let parcels = counted(counts.broken, "parcel");
        screen.line(&format!("{parcels} broken; all else is on record, and the same command goes on from there"));
    }
    Ok(if counts.broken > 0 || disagrees || !outcome.left.is_empty() { BROKEN } else { WELL })
}

fn shown(out: &Path) -> String {
    let out: PathBuf = out.components().collect();
    format!("results in {}", out.display())
}

fn count_flags(step: &str, table: &Table, flagged: &mut BTreeMap<String, (usize, usize, BTreeMap<String, usize>)>) {
    for row in 0..table.rows() {
        let flags = table.text("flags", row).unwrap_or_default();
        if flags.is_empty() {
            continue;
        }
        let entry = flagged.entry(step.to_owned()).or_insert((0, table.rows(), BTreeMap::new()));
        entry.0 += 1;
        for flag in flags.split(';') {
            *entry.2.entry(flag.to_owned()).or_default() += 1;
        }
    }
}

/// What is not settled, in words.
fn tell_flags(flagged: &BTreeMap<String, (usize, usize, BTreeMap<String, usize>)>, screen: &mut Screen) {
    if flagged.is_empty() {
        return;
    }
    screen.line("");
    for (step, (rows, of, flags)) in flagged {
        let words: Vec<String> = flags.iter().map(|(flag, count)| format!("{count} {}", flag_words(flag))).collect();
        let text = format!("not settled: {step}: {rows} of {of} rows: {}", words.join("; "));
        let text = screen.tint(&text, "33");
        screen.line(&text);
    }
}

fn flag_words(flag: &str) -> String {
    let words = match flag {
        "not-equilibrated" => "not equilibrated (chains drift or disagree: equilibrate longer)",
        "few-samples" => "with too few independent measurements (measure longer)",
        "bad-fit" => "from a fit that does not fit",
        "few-sizes" => "from too few sizes to test a correction",
        "no-crossing" => "with sizes that do not cross in the range",
        "poor-overlap" => "where histograms do not overlap",
        "no-error" => "without an error",
        "imprecise" => "less precise than asked for",
        "not-finite" => "not finite",
        other => other,
    };
    words.to_owned()
}
