//! Records in words.

use crate::screen::{Width, put};
use crate::text::{amount, duration, range, wrap};
use spinledger_ledger::Record;
use spinledger_terms::Value;
use std::collections::BTreeSet;

/// So many numbers of a list are told one by one.
const FEW: usize = 8;
/// Digits of a content that are shown.
const DIGITS: usize = 12;

/// Prints a text behind what leads to it in the tree, in as many lines as it needs.
pub(super) fn print(lead: &str, text: &str) {
    let width = Width::now().columns().unwrap_or(usize::MAX);
    let room = width.saturating_sub(lead.chars().count()).max(12);
    // Further lines hang below the first.
    let below = lead.replace("+- ", "|  ").replace("`- ", "   ");
    for (at, line) in wrap(text, room).iter().enumerate() {
        put(&format!("{}{line}\n", if at == 0 { lead } else { &below }));
    }
}

/// Programs and machines, told once each.
#[derive(Default)]
pub(super) struct Makers(BTreeSet<(String, String)>);

impl Makers {
    /// Takes note of the maker of an entry.
    pub(super) fn add(&mut self, record: &Record) {
        let p = &record.provenance;
        let (commit, changes) = p.program.commit.split_once(' ').unwrap_or((&p.program.commit, ""));
        let commit = format!("{} {changes}", commit.get(..12).unwrap_or(commit));
        let compiler = p.program.compiler.split(" (").next().unwrap_or_default();
        let program = format!("{} {}, commit {}, {compiler}", p.program.name, p.program.version, commit.trim_end());
        self.0.insert((program, format!("{} ({})", p.host, p.processor.model)));
    }

    /// Prints them.
    pub(super) fn print(&self) {
        for (program, host) in &self.0 {
            print("", &format!("made by {program}"));
            print("    ", &format!("on {host}"));
        }
    }
}

/// What an entry is and when it was made.
pub(super) fn headline(record: &Record) -> String {
    let p = &record.provenance;
    let place = record.chain.map_or(String::new(), |place| format!(" {} of chain {}", place.block, place.number));
    format!("{}{place}  {}  {}, {}", record.kind, record.key.short(), moment(&p.finished), duration(p.seconds))
}

/// A time to the second: `2026-12-01 14:50:12 UTC`.
fn moment(time: &str) -> String {
    let (day, time) = time.split_once('T').unwrap_or((time, ""));
    format!("{day} {} UTC", time.split('.').next().unwrap_or_default().trim_end_matches('Z'))
}

/// The first digits of a content.
pub(super) fn digits(content: &impl std::fmt::Display) -> String {
    content.to_string().chars().take(DIGITS).collect()
}

/// What matters of a record, in lines.
pub(super) fn details(record: &Record) -> Vec<String> {
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
            } else if says_something(value) {
                lines.push(format!("{name} {}", value_words(value)));
            }
        }
    }
    if p.updates > 0 {
        let streams =
            p.streams.as_ref().map_or(String::new(), |s| format!(", streams {} version {}", s.generator, s.version));
        lines.push(format!("{} spin updates{streams}", amount(p.updates as f64)));
    }
    lines.extend(tables(record));
    for identity in p.plugins.iter().filter(|i| !i.standard) {
        let hash = digits(&identity.file_hash);
        lines.push(format!("foreign plugin {} from {}, file hash {hash}", identity.item, identity.file));
    }
    lines.extend(p.notes.iter().map(|note| format!("note: {note}")));
    lines
}

/// Tables and files of an entry with their contents; the content of an entry without any.
pub(super) fn tables(record: &Record) -> Vec<String> {
    let table = |table: &spinledger_ledger::TableRecord| {
        format!("{} ({}, content {})", table.name, crate::text::counted(table.rows, "row"), digits(&table.content))
    };
    let tables: Vec<String> = record.tables.iter().map(table).collect();
    let file = |file: &spinledger_ledger::OtherFile| format!("{} (content {})", file.name, digits(&file.content));
    let files: Vec<String> = record.files.iter().map(file).collect();
    let lines = [("tables", tables), ("files", files)].into_iter().filter(|(_, list)| !list.is_empty());
    let lines: Vec<String> = lines.map(|(word, list)| format!("{word} {}", list.join(", "))).collect();
    if lines.is_empty() { vec![format!("content {}", digits(&record.content))] } else { lines }
}

fn says_something(value: &Value) -> bool {
    match value {
        Value::Null => false,
        Value::List(list) => list.iter().any(says_something),
        Value::Map(map) => map.values().any(says_something),
        _ => true,
    }
}

/// A value as words: `quantity binder, within 3`.
pub(super) fn value_words(value: &Value) -> String {
    let inner = |value: &Value| match value {
        Value::Map(_) => format!("({})", value_words(value)),
        other => value_words(other),
    };
    match value {
        Value::Map(map) => {
            let pairs = map.iter().filter(|(_, value)| says_something(value));
            pairs.map(|(name, value)| format!("{name} {}", inner(value))).collect::<Vec<_>>().join(", ")
        }
        Value::List(list) if list.len() > FEW && list.iter().all(|value| value.as_f64().is_some()) => {
            let texts: Vec<String> = list.iter().map(value_words).collect();
            range(texts.iter().map(String::as_str))
        }
        Value::List(list) => {
            list.iter().filter(|value| says_something(value)).map(inner).collect::<Vec<_>>().join(", ")
        }
        Value::Text(text) => text.clone(),
        Value::Number(x) => format!("{x}"),
        other => other.canonical(),
    }
}

/// A plugin item with its parameters, or several; other values as they are.
fn item_words(value: &Value) -> String {
    if let Some(list) = value.as_list() {
        return list.iter().map(item_words).collect::<Vec<_>>().join(", ");
    }
    let Some(item) = value.get("item").and_then(Value::as_str) else { return value_words(value) };
    let mut text = item.to_owned();
    if let Some(parameters) = value.get("parameters").filter(|p| says_something(p)) {
        text.push_str(&format!(" ({})", value_words(parameters)));
    }
    if let Some(times) = value.get("times").and_then(Value::as_i64).filter(|times| *times != 1) {
        text.push_str(&format!(" {times} times"));
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_words() {
        let value = Value::map([
            ("against", Value::map([("value", Value::Number(2.5)), ("lower", Value::Null)])),
            ("empty", Value::map([("x", Value::Null)])),
            ("list", Value::List(vec![Value::Integer(1), Value::map([("a", Value::Bool(true))])])),
        ]);
        assert_eq!(value_words(&value), "against (value 2.5), list 1, (a true)");
        let many = Value::List((0..20).map(|i| Value::Number(f64::from(i) / 8.0)).collect());
        assert_eq!(value_words(&many), "0 to 2.375 (20)");
        assert_eq!(moment("2026-12-01T14:50:12.123Z"), "2026-12-01 14:50:12 UTC");
        assert_eq!(moment("2026-12-01T14:50:12Z"), "2026-12-01 14:50:12 UTC");
    }
}
