//! The end of a run: the closing table, verdicts, what is not settled, where the results are, the exit status.

use crate::commands::{BROKEN, WELL};
use crate::screen::{Screen, width};
use crate::text::{amount, columns, counted, duration, wide, with_error, wrap};
use serde_json::json;
use spinledger_engine::forecast::standing;
use spinledger_engine::planning::Product;
use spinledger_engine::run::Outcome;
use spinledger_engine::{Study, chain_text};
use spinledger_ledger::Ledger;
use spinledger_report::{flag_remedy, flag_words};
use spinledger_terms::Table;
use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

/// What a run took.
pub(crate) struct Spent {
    /// Seconds.
    pub(crate) seconds: f64,
    /// Attempted spin updates.
    pub(crate) updates: f64,
}

/// Flagged rows of a step: how many, of how many, and how often each flag stands there, with the quantities it stands at.
#[derive(Default)]
struct Flagged {
    rows: usize,
    of: usize,
    flags: BTreeMap<String, (usize, BTreeSet<String>)>,
}

/// Tells how a run ended; returns the exit status.
pub(crate) fn close(
    study: &Study,
    ledger: &Ledger,
    outcome: &Outcome,
    out: &Path,
    spent: Spent,
    screen: &mut Screen,
) -> u8 {
    tell_counts(study, outcome, screen);
    let mut well = outcome.counts.broken == 0 && outcome.left.is_empty() && outcome.stopped.is_none();
    let mut verdicts = Vec::new();
    let mut flagged = Vec::new();
    for step in &study.pipeline.steps {
        let Some(Product::Tables { key, .. }) = outcome.products.get(&step.name) else { continue };
        match ledger.read_table(key, "main") {
            Ok(table) => {
                verdicts.extend(verdicts_of(&table));
                // A page and a chart repeat the flags of what they show.
                let own = flagged_of(&table).filter(|_| !["chart", "report"].contains(&step.does.as_str()));
                flagged.extend(own.map(|flagged| (step.name.as_str(), flagged)));
            }
            Err(error) => {
                well = false;
                screen.trouble(&format!("spinledger: {}: {}", step.name, chain_text(&error)));
            }
        }
    }
    well &= !tell_verdicts(&verdicts, screen);
    tell_flags(&flagged, screen);
    let counts = outcome.counts;
    screen.line("");
    if let Some(why) = &outcome.stopped {
        screen.event(&json!({ "event": "warning", "text": format!("stopped early: {why}") }));
        screen.trouble(&format!(
            "stopped early: {why}\nwhat was computed so far is on record, and the same command goes on from there"
        ));
    } else {
        let out: PathBuf = out.components().collect();
        screen.tell(&format!("results in {} in {}", out.display(), duration(spent.seconds)));
        if spent.updates > 0.0 && spent.seconds > 0.0 {
            let rate = amount(spent.updates / spent.seconds);
            screen.tell(&format!("{} spin updates, {rate} a second", amount(spent.updates)));
        }
    }
    if counts.broken > 0 {
        let parcels = counted(counts.broken, "parcel");
        screen.tell(&format!("{parcels} broken; all else is on record, and the same command goes on from there"));
    }
    screen.event(&json!({ "event": "finished", "computed": counts.computed, "reused": counts.reused,
        "broken": counts.broken, "steps": outcome.steps, "out": out }));
    if well { WELL } else { BROKEN }
}

/// Tells what is on record of a run that was stopped, and how to go on.
pub(crate) fn tell_stopped(
    study: &Study,
    ledger: &Ledger,
    outcome: &Outcome,
    out: &Path,
    spent: &Spent,
    screen: &mut Screen,
) -> anyhow::Result<()> {
    let steps = standing(study, ledger)?;
    let mut rows = vec![["step", "on record", "partial", "due"].map(String::from).to_vec()];
    for step in &steps {
        let due = step.due.map_or("?".to_owned(), |due| due.to_string());
        rows.push(vec![step.step.clone(), step.recorded.to_string(), step.partial.to_string(), due]);
    }
    screen.line("");
    screen.table(&rows, &[1, 2, 3]);
    screen.line("");
    let updates = if spent.updates > 0.0 { format!(", {} spin updates", amount(spent.updates)) } else { String::new() };
    screen.tell(&format!("stopped after {}{updates}: what was computed is on record", duration(spent.seconds)));
    screen.tell("the same command goes on from here");
    let steps: Vec<_> = steps
        .iter()
        .map(|step| json!({ "step": step.step, "recorded": step.recorded, "partial": step.partial, "due": step.due }))
        .collect();
    screen.event(&json!({ "event": "stopped", "steps": steps }));
    let counts = outcome.counts;
    screen.event(&json!({ "event": "finished", "computed": counts.computed, "reused": counts.reused,
        "broken": counts.broken, "steps": outcome.steps, "out": out }));
    Ok(())
}

fn tell_counts(study: &Study, outcome: &Outcome, screen: &mut Screen) {
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
    screen.table(&rows, &[1, 2, 3]);
}

/// A row of a comparison.
struct Verdict {
    name: String,
    /// Value and error, reference and its error, deviation.
    numbers: [Option<f64>; 5],
    verdict: String,
    flags: String,
}

fn verdicts_of(table: &Table) -> Vec<Verdict> {
    if table.column("verdict").is_none() || table.column("name").is_none() {
        return Vec::new();
    }
    let verdict = |row: usize| {
        let number = |name: &str| table.column(name).and_then(|c| c.cells.number(row));
        let text = |name: &str| table.text(name, row).unwrap_or_default().to_owned();
        Verdict {
            name: text("name"),
            numbers: ["value", "error", "reference", "reference_error", "deviation"].map(number),
            verdict: text("verdict"),
            flags: text("flags"),
        }
    };
    (0..table.rows()).map(verdict).collect()
}

/// Returns whether anything disagrees.
fn tell_verdicts(verdicts: &[Verdict], screen: &mut Screen) -> bool {
    if verdicts.is_empty() {
        return false;
    }
    let mut rows = vec![["result", "value", "reference", "deviation", "verdict"].map(String::from).to_vec()];
    for Verdict { name, numbers, verdict, flags } in verdicts {
        let [value, error, reference, reference_error, deviation] = *numbers;
        screen.event(&json!({ "event": "verdict", "name": name, "value": value, "error": error,
            "reference": reference, "deviation": deviation, "verdict": verdict, "flags": flags }));
        rows.push(vec![
            name.clone(),
            value.map_or("unknown".to_owned(), |v| with_error(v, error)),
            reference.map_or(String::new(), |v| with_error(v, reference_error)),
            deviation.map_or(String::new(), |d| format!("{d:+.2}")),
            verdict.clone(),
        ]);
    }
    screen.line("");
    let mut disagrees = false;
    let lines = columns(&rows, &[3]);
    let fits = lines.iter().all(|line| wide(line) <= width());
    for (line, row) in lines.iter().zip(&rows) {
        // Where there is no room for columns, a paragraph a row.
        let words = format!("{}: {}, reference {}, deviation {}: {}", row[0], row[1], row[2], row[3], row[4]);
        let line = if fits { line.clone() } else { wrap(&words, width()).join("\n") };
        let line = &line;
        if !fits && row[4] == "verdict" {
            continue;
        }
        let code = match row[4].as_str() {
            "agrees" => "32",
            "disagrees" => "31",
            "undecided" => "33",
            _ => "1",
        };
        if row[4] == "disagrees" {
            disagrees = true;
            screen.wrong(line, code);
        } else {
            let line = screen.tint(line, code);
            screen.line(&line);
        }
    }
    disagrees
}

fn flagged_of(table: &Table) -> Option<Flagged> {
    let mut flagged = Flagged { of: table.rows(), ..Flagged::default() };
    for row in 0..table.rows() {
        let flags = table.text("flags", row).unwrap_or_default();
        flagged.rows += usize::from(!flags.is_empty());
        for flag in flags.split(';').filter(|flag| !flag.is_empty()) {
            let (count, quantities) = flagged.flags.entry(flag.to_owned()).or_default();
            *count += 1;
            quantities.extend(table.text("quantity", row).map(str::to_owned));
        }
    }
    (flagged.rows > 0).then_some(flagged)
}

/// More quantities than this are not named.
const MOST_NAMED: usize = 3;

/// What is not settled, in words.
fn tell_flags(flagged: &[(&str, Flagged)], screen: &mut Screen) {
    if !flagged.is_empty() {
        screen.line("");
    }
    for (step, Flagged { rows, of, flags }) in flagged {
        for line in wrap(&format!("not settled: {step}: {rows} of {of} rows"), width()) {
            let line = screen.tint(&line, "33");
            screen.line(&line);
        }
        for (flag, (count, quantities)) in flags {
            // Which one is worth a word where it is not most of them.
            let named = if rows < of && (1..=MOST_NAMED).contains(&quantities.len()) {
                format!(", {}", quantities.iter().map(String::as_str).collect::<Vec<_>>().join(", "))
            } else {
                String::new()
            };
            let words = flag_words(flag).map_or(String::new(), |words| format!(": {words}"));
            let remedy = flag_remedy(flag).map_or(String::new(), |remedy| format!(" (what helps: {remedy})"));
            screen.tell(&format!("  {count} {flag}{named}{words}{remedy}"));
        }
    }
}
