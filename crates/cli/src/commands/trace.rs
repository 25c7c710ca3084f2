//! `spinledger trace`: what made a result, from record to record back to the inputs.

use crate::args::TraceArgs;
use crate::commands::{BROKEN, WELL, WRONG};
use crate::screen::{Screen, Style, complain, put};
use crate::text::{amount, counted, duration};
use anyhow::{Context, bail};
use spinledger_ledger::{Ledger, Record, file_key};
use spinledger_terms::{Key, Value};
use std::collections::BTreeSet;
use std::path::Path;

/// Inputs of one entry that are shown one by one; of more, the first, and how many there are.
const SHOWN: usize = 4;

/// Traces a file or a key.
pub(crate) fn trace(args: &TraceArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    if !Ledger::is_at(&args.ledger.ledger) {
        bail!("there is no ledger at {}; name it with --ledger", args.ledger.ledger.display());
    }
    let ledger = Ledger::open(&args.ledger.ledger)?;
    let key = match find(&args.what, &ledger)? {
        Found::Key(key) => key,
        Found::Several(keys) => {
            complain(&format!("spinledger: {} entries begin with {}:", keys.len(), args.what));
            keys.iter().take(10).for_each(|key| complain(&format!("  {key}")));
            return Ok(WRONG);
        }
    };
    let mut trace = Trace { ledger: &ledger, seen: BTreeSet::new(), missing: 0, makers: BTreeSet::new() };
    if args.json {
        trace.dump(&key, &mut screen);
    } else {
        trace.tree(&key, "", "");
        trace.makers.iter().for_each(|maker| put(&format!("made by {maker}\n")));
    }
    if trace.missing > 0 {
        let missing = counted(trace.missing, "record");
        complain(&format!("spinledger: {missing} not in the ledger {}", args.ledger.ledger.display()));
        return Ok(BROKEN);
    }
    Ok(WELL)
}

enum Found {
    Key(Key),
    Several(Vec<Key>),
}

fn find(what: &str, ledger: &Ledger) -> anyhow::Result<Found> {
    let path = Path::new(what);
    if path.is_file() {
        let key = file_key(path).with_context(|| format!("cannot read {what} as a Parquet file"))?;
        return Ok(Found::Key(
            key.with_context(|| format!("{what} carries no key: it was not written by spinledger"))?,
        ));
    }
    let hexadecimal = what.len() >= 4 && what.len() <= 64 && what.bytes().all(|b| b.is_ascii_hexdigit());
    if !hexadecimal {
        bail!("`{what}` is neither a file nor the first digits (four at least) of a key");
    }
    let mut keys = ledger.find(&what.to_ascii_lowercase())?;
    match keys.len() {
        0 => bail!("no entry of the ledger begins with {what}"),
        1 => Ok(Found::Key(keys.remove(0))),
        _ => Ok(Found::Several(keys)),
    }
}

/// Records on the way from a result to its inputs.
struct Trace<'a> {
    ledger: &'a Ledger,
    seen: BTreeSet<Key>,
    missing: u64,
    /// Programs and machines, told once each.
    makers: BTreeSet<String>,
}

impl Trace<'_> {
    /// All records below a key, each once, inputs first.
    fn dump(&mut self, key: &Key, screen: &mut Screen) {
        if !self.seen.insert(*key) {
            return;
        }
        match self.ledger.read_record(key) {
            Ok(record) => {
                for input in &record.provenance.inputs {
                    self.dump(&input.key, screen);
                }
                screen.event(&serde_json::json!(record));
            }
            Err(_) => self.missing += 1,
        }
    }

    fn tree(&mut self, key: &Key, lead: &str, name: &str) {
        let name = if name.is_empty() { String::new() } else { format!("{name}: ") };
        let record = match self.ledger.read_record(key) {
            Ok(record) => record,
            Err(error) => {
                self.missing += 1;
                put(&format!("{lead}{name}{}: {}\n", key.short(), spinledger_engine::chain_text(&error)));
                return;
            }
        };
        let again = !self.seen.insert(*key);
        put(&format!("{lead}{name}{}{}\n", headline(&record), if again { " (above)" } else { "" }));
        if again {
            return;
        }
        self.makers.insert(maker(&record));
        // What hangs below a branch is indented by it.
        let below = lead.replace("+- ", "|  ").replace("`- ", "   ");
        let inputs = &record.provenance.inputs;
        let bar = if inputs.is_empty() { " " } else { "|" };
        details(&record).iter().for_each(|line| put(&format!("{below}{bar}  {line}\n")));
        let shown = if inputs.len() > SHOWN { SHOWN - 1 } else { inputs.len() };
        for (at, input) in inputs.iter().take(shown).enumerate() {
            let branch = if at + 1 == inputs.len() { "`- " } else { "+- " };
            self.tree(&input.key, &format!("{below}{branch}"), &input.name);
        }
        if inputs.len() > shown {
            put(&format!("{below}`- and {} more like these (--json lists all)\n", inputs.len() - shown));
        }
    }
}

/// The program and the machine that made an entry.
fn maker(record: &Record) -> String {
    let p = &record.provenance;
    let (commit, changes) = p.program.commit.split_once(' ').unwrap_or((&p.program.commit, ""));
    let commit = format!("{} {changes}", commit.get(..12).unwrap_or(commit));
    let compiler = p.program.compiler.split(" (").next().unwrap_or_default();
    let program = format!("{} {}, commit {}, {compiler}", p.program.name, p.program.version, commit.trim_end());
    format!("{program}\n    on {} ({})", p.host, p.processor.model)
}

fn headline(record: &Record) -> String {
    let p = &record.provenance;
    let place = record.chain.map_or(String::new(), |place| format!(" {} of chain {}", place.block, place.number));
    format!("{}{place}  {}  {} in {}", record.kind, record.key.short(), p.finished, duration(p.seconds))
}

/// What matters of a record, in lines.
fn details(record: &Record) -> Vec<String> {
    let p = &record.provenance;
    let mut lines = Vec::new();
    if let Value::Map(map) = &p.parameters {
        for (name, value) in map {
            if let (Some(chains), "chains") = (value.as_map(), name.as_str()) {
                for part in ["lattice", "model", "update", "observe", "start", "seed"] {
                    if let Some(value) = chains.get(part) {
                        lines.push(format!("{part} {}", item_words(value)));
                    }
                }
            } else if *value != Value::Map(Default::default()) {
                lines.push(format!("{name} {}", value.canonical()));
            }
        }
    }
    if p.updates > 0 {
        lines.push(format!(
            "{} spin updates, streams {} version {}",
            amount(p.updates as f64),
            p.streams.as_ref().map_or("", |s| s.generator.as_str()),
            p.streams.as_ref().map_or(0, |s| s.version)
        ));
    }
    for table in &record.tables {
        lines.push(format!("table {}: {} rows, content {}", table.name, table.rows, &table.content.to_string()[..12]));
    }
    if record.tables.is_empty() {
        lines.push(format!("content {}", &record.content.to_string()[..12]));
    }
    for identity in p.plugins.iter().filter(|i| !i.standard) {
        lines.push(format!(
            "foreign plugin {} from {}, file hash {}",
            identity.item,
            identity.file,
            &identity.file_hash.to_string()[..12]
        ));
    }
    lines.extend(p.notes.iter().map(|note| format!("note: {note}")));
    lines
}

/// A plugin item with its parameters, or several; other values as they are.
fn item_words(value: &Value) -> String {
    if let Some(list) = value.as_list() {
        return list.iter().map(item_words).collect::<Vec<_>>().join(", ");
    }
    let Some(item) = value.get("item").and_then(Value::as_str) else {
        return value.as_str().map_or_else(|| value.canonical(), str::to_owned);
    };
    let mut text = item.to_owned();
    if let Some(parameters) = value.get("parameters").filter(|p| p.as_map().is_some_and(|map| !map.is_empty())) {
        text.push_str(&format!(" {}", parameters.canonical()));
    }
    if let Some(times) = value.get("times").and_then(Value::as_i64).filter(|times| *times != 1) {
        text.push_str(&format!(" {times} times"));
    }
    text
}
