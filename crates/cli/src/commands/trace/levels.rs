//! The short tree: a step a level, what is alike in one line, whatever the number of points.

use super::words::{Makers, digits, headline, print, tables, value_words};
use crate::text::{amount, duration, range};
use spinledger_engine::chain_text;
use spinledger_ledger::{Index, Ledger, Record};
use spinledger_terms::{Key, Value};
use std::collections::{BTreeMap, BTreeSet};

/// Prints what made an entry. Returns how many records are missing.
pub(super) fn tree(ledger: &Ledger, key: &Key) -> anyhow::Result<u64> {
    let index = ledger.index()?;
    let mut tree = Tree {
        ledger,
        index: &index,
        seen: BTreeMap::new(),
        missing: 0,
        makers: Makers::default(),
        pipelines: BTreeSet::new(),
    };
    tree.level("", &[*key], "");
    tree.makers.print();
    for pipeline in &tree.pipelines {
        print("", &format!("pipeline {pipeline}"));
    }
    Ok(tree.missing)
}

struct Tree<'a> {
    ledger: &'a Ledger,
    index: &'a Index,
    /// What was told, with its line.
    seen: BTreeMap<Vec<Key>, String>,
    missing: u64,
    makers: Makers,
    /// Texts of pipelines, by their hashes in the ledger.
    pipelines: BTreeSet<String>,
}

/// Entries of one kind that serve as one thing.
struct Alike {
    kind: String,
    /// How many.
    count: u64,
    seconds: f64,
    /// The first of them, which speaks for all in what they share.
    first: Record,
    parameters: Ranges,
    /// What they were made from: role and keys.
    inputs: Vec<(String, Vec<Key>)>,
    sampling: Sampling,
    notes: BTreeSet<String>,
}

/// Values by name, in the order in which names came first.
#[derive(Default)]
struct Ranges {
    names: Vec<String>,
    values: BTreeMap<String, Vec<String>>,
}

impl Ranges {
    fn add(&mut self, name: &str, value: String) {
        if !self.values.contains_key(name) {
            self.names.push(name.to_owned());
        }
        let values = self.values.entry(name.to_owned()).or_default();
        if values.last() != Some(&value) {
            values.push(value);
        }
    }

    /// Adds what is below a value, by path.
    fn add_below(&mut self, path: &str, value: &Value) {
        match value {
            Value::Map(map) => {
                for (name, value) in map {
                    let path = if path.is_empty() { name.clone() } else { format!("{path}.{name}") };
                    self.add_below(&path, value);
                }
            }
            Value::Null => {}
            other => {
                let words = value_words(other);
                if !words.is_empty() {
                    self.add(path, words);
                }
            }
        }
    }

    fn words(&self) -> String {
        let of = |name: &String| format!("{name} {}", range(self.values[name].iter().map(String::as_str)));
        self.names.iter().map(of).collect::<Vec<_>>().join(", ")
    }

    fn is_empty(&self) -> bool {
        self.names.is_empty()
    }
}

/// What the series of a level are made of.
#[derive(Default)]
struct Sampling {
    columns: Ranges,
    /// Chains of each, rows of each.
    chains: Ranges,
    blocks: BTreeSet<Key>,
    seconds: f64,
    updates: f64,
    /// Lattice, model, observables ... with their parameters.
    parts: BTreeMap<String, Ranges>,
    /// Items of these parts.
    items: BTreeMap<String, Vec<String>>,
    plugins: BTreeSet<String>,
    foreign: BTreeSet<String>,
}

impl Tree<'_> {
    /// A level below a branch, and those below it.
    fn level(&mut self, role: &str, keys: &[Key], lead: &str) {
        // `items.0.take.step` is the parameter in which the step stands.
        let role = role.replace(".step", "");
        let role = if role.is_empty() { role } else { format!("{role}: ") };
        // Steps take the same entries in different orders.
        let mut sorted = keys.to_vec();
        sorted.sort_unstable();
        if let Some(known) = self.seen.get(&sorted) {
            print(lead, &format!("{role}{known} (above)"));
            return;
        }
        let (kinds, lost) = self.read(keys);
        for (at, (key, text)) in lost.iter().enumerate() {
            // One stands for all that are missing of a level.
            if at == 0 {
                let more = if lost.len() > 1 { format!(" and {} more like it", lost.len() - 1) } else { String::new() };
                print(lead, &format!("{role}{}: {text}{more}", key.short()));
            }
        }
        self.missing += lost.len() as u64;
        let below = lead.replace("+- ", "|  ").replace("`- ", "   ");
        for alike in kinds {
            let head = head_of(&alike);
            self.seen.insert(sorted.clone(), head.clone());
            print(lead, &format!("{role}{head}"));
            let inputs = merged(&alike.inputs);
            let bar = if inputs.is_empty() { " " } else { "|" };
            self.details(&alike).iter().for_each(|line| print(&format!("{below}{bar}  "), line));
            for (at, (role, keys)) in inputs.iter().enumerate() {
                let branch = if at + 1 == inputs.len() { "`- " } else { "+- " };
                self.level(role, keys, &format!("{below}{branch}"));
            }
        }
    }

    /// Reads entries, kind by kind; and those that are missing, with why.
    fn read(&mut self, keys: &[Key]) -> (Vec<Alike>, Vec<(Key, String)>) {
        let mut kinds: Vec<Alike> = Vec::new();
        let mut lost = Vec::new();
        for key in keys {
            let record = match self.ledger.read_record(key) {
                Ok(record) => record,
                Err(error) => {
                    lost.push((*key, chain_text(&error)));
                    continue;
                }
            };
            self.makers.add(&record);
            if let Some(hash) = record.provenance.pipeline {
                self.pipelines.insert(format!("texts/{} in the ledger", digits(&hash)));
            }
            let at = kinds.iter().position(|alike| alike.kind == record.kind).unwrap_or_else(|| {
                kinds.push(Alike {
                    kind: record.kind.clone(),
                    count: 0,
                    seconds: 0.0,
                    first: record.clone(),
                    parameters: Ranges::default(),
                    inputs: Vec::new(),
                    sampling: Sampling::default(),
                    notes: BTreeSet::new(),
                });
                kinds.len() - 1
            });
            self.take(&mut kinds[at], &record);
        }
        (kinds, lost)
    }

    fn take(&mut self, alike: &mut Alike, record: &Record) {
        alike.count += 1;
        alike.seconds += record.provenance.seconds;
        alike.notes.extend(record.provenance.notes.iter().cloned());
        match record.kind.as_str() {
            "series" => self.take_series(alike, record),
            // What a configuration was begun from is told by `--all`: in a sequence that goes back to its first point.
            "block" | "state" => {
                alike.sampling.updates += record.provenance.updates as f64;
                take_chains(&mut alike.sampling, record);
            }
            _ => {
                alike.parameters.add_below("", &record.provenance.parameters);
                for input in &record.provenance.inputs {
                    take_input(&mut alike.inputs, &input.name, input.key);
                }
            }
        }
    }

    /// A series and its blocks, of which the journals know most; the first says what was sampled.
    fn take_series(&mut self, alike: &mut Alike, record: &Record) {
        let sampling = &mut alike.sampling;
        let p = &record.provenance;
        if let Some(columns) = p.parameters.get("columns") {
            sampling.columns.add_below("", columns);
        }
        let chain = |name: &str| name.rsplit_once(" block ").map_or(name.to_owned(), |(chain, _)| chain.to_owned());
        let chains: BTreeSet<String> = p.inputs.iter().map(|input| chain(&input.name)).collect();
        sampling.chains.add("chains", chains.len().to_string());
        if let Some(measure) = p.parameters.get("measure") {
            sampling.chains.add("rows", value_words(measure));
        }
        let mut begun = false;
        for (at, input) in p.inputs.iter().enumerate() {
            if !sampling.blocks.insert(input.key) {
                continue;
            }
            // Chains that began from configurations name theirs in their first blocks.
            if at == 0 || (begun && input.name.ends_with(" block 0")) {
                match self.ledger.read_record(&input.key) {
                    Ok(block) => {
                        if at == 0 {
                            take_chains(sampling, &block);
                            begun = !block.provenance.inputs.is_empty();
                        }
                        for begin in &block.provenance.inputs {
                            take_input(&mut alike.inputs, "begun from", begin.key);
                        }
                        self.makers.add(&block);
                    }
                    Err(_) => {
                        self.missing += 1;
                        continue;
                    }
                }
            } else if !self.ledger.entry(&input.key).join("record.json").is_file() {
                self.missing += 1;
                continue;
            }
            if let Some(line) = self.index.get(&input.key) {
                sampling.seconds += line.seconds;
                sampling.updates += line.updates as f64;
            }
        }
    }

    fn details(&self, alike: &Alike) -> Vec<String> {
        let mut lines = Vec::new();
        if !alike.parameters.is_empty() {
            lines.push(alike.parameters.words());
        }
        let sampling = &alike.sampling;
        for part in ["lattice", "model", "update", "observe"] {
            if let Some(items) = sampling.items.get(part) {
                let parameters = sampling.parts.get(part).filter(|ranges| !ranges.is_empty());
                let parameters = parameters.map_or(String::new(), |ranges| format!(": {}", ranges.words()));
                lines.push(format!("{part} {}{parameters}", items.join(", ")));
            }
        }
        if let Some(rest) = sampling.parts.get("") {
            lines.push(rest.words());
        }
        if !sampling.plugins.is_empty() {
            let plugins: Vec<&str> = sampling.plugins.iter().map(String::as_str).collect();
            lines.push(format!("plugins {}", plugins.join(", ")));
        }
        lines.extend(sampling.foreign.iter().cloned());
        if alike.count == 1 {
            lines.extend(tables(&alike.first));
            lines.extend(self.flags(&alike.first));
        }
        lines.extend(alike.notes.iter().map(|note| format!("note: {note}")));
        lines
    }

    /// How many rows of an entry's table are flagged, and with what.
    fn flags(&self, record: &Record) -> Option<String> {
        record.tables.iter().find(|table| table.name == "main")?;
        let table = self.ledger.read_table(&record.key, "main").ok()?;
        table.column("flags")?;
        let mut flags: BTreeSet<&str> = BTreeSet::new();
        let mut rows = 0;
        for row in 0..table.rows() {
            let text = table.text("flags", row).unwrap_or_default();
            rows += u64::from(!text.is_empty());
            flags.extend(text.split(';').filter(|flag| !flag.is_empty()));
        }
        let of = table.rows();
        let flags = flags.into_iter().collect::<Vec<_>>().join(", ");
        (rows > 0).then(|| format!("not settled: {rows} of {of} rows: {flags}"))
    }
}

fn take_input(inputs: &mut Vec<(String, Vec<Key>)>, role: &str, key: Key) {
    match inputs.iter_mut().find(|(known, _)| known == role) {
        Some((_, keys)) => keys.push(key),
        None => inputs.push((role.to_owned(), vec![key])),
    }
}

/// What was sampled, from the record of a block.
fn take_chains(sampling: &mut Sampling, block: &Record) {
    let p = &block.provenance;
    let Some(chains) = p.parameters.get("chains").and_then(Value::as_map) else { return };
    for (name, value) in chains {
        let items: Vec<&Value> = match value {
            Value::List(list) => list.iter().collect(),
            one => vec![one],
        };
        if items.iter().all(|item| item.get("item").is_some()) && !items.is_empty() {
            let known = sampling.items.entry(name.clone()).or_default();
            for item in &items {
                let short = item.get("item").and_then(Value::as_str).unwrap_or_default();
                let short = short.split(['@', '#']).next().unwrap_or_default().rsplit('/').next().unwrap_or_default();
                if known.iter().all(|known| known != short) {
                    known.push(short.to_owned());
                }
                if let Some(parameters) = item.get("parameters") {
                    sampling.parts.entry(name.clone()).or_default().add_below("", parameters);
                }
                if let Some(times) = item.get("times").and_then(Value::as_i64).filter(|times| *times != 1) {
                    sampling.parts.entry(name.clone()).or_default().add("times", times.to_string());
                }
            }
        } else if matches!(name.as_str(), "seed" | "start" | "equilibrate" | "every" | "settle") {
            sampling.parts.entry(String::new()).or_default().add(name, value_words(value));
        }
    }
    if let Some(streams) = &p.streams {
        let words = format!("{} version {}", streams.generator, streams.version);
        sampling.parts.entry(String::new()).or_default().add("streams", words);
    }
    for identity in &p.plugins {
        let (item, revision) = (&identity.item, identity.revision);
        if identity.standard {
            sampling.plugins.insert(format!("{}/{item} revision {revision}", identity.library));
        } else {
            let (file, hash) = (&identity.file, digits(&identity.file_hash));
            sampling
                .foreign
                .insert(format!("foreign plugin {item} from {file}, revision {revision}, file hash {hash}"));
        }
    }
}

/// The line of a level.
fn head_of(alike: &Alike) -> String {
    let sampling = &alike.sampling;
    match (alike.kind.as_str(), alike.count) {
        ("series", count) => {
            let one =
                if count == 1 { format!("series  {}", alike.first.key.short()) } else { format!("{count} series") };
            let chains = |name: &str| {
                let values = sampling.chains.values.get(name).map(Vec::as_slice).unwrap_or_default();
                range(values.iter().map(String::as_str))
            };
            let columns =
                if sampling.columns.is_empty() { String::new() } else { format!("{}, ", sampling.columns.words()) };
            format!(
                "{one}: {columns}{} chains x {} rows, {} spin updates, {}",
                chains("chains"),
                chains("rows"),
                amount(sampling.updates),
                duration(sampling.seconds)
            )
        }
        (_, 1) => headline(&alike.first),
        ("block", count) => {
            format!("{count} blocks, {} spin updates, {}", amount(sampling.updates), duration(alike.seconds))
        }
        ("state", count) => format!("{count} configurations"),
        (kind, count) => format!("{} {kind}, {}", count, duration(alike.seconds)),
    }
}

/// Roles that are served by the same entries, as one.
fn merged(inputs: &[(String, Vec<Key>)]) -> Vec<(String, Vec<Key>)> {
    let mut out: Vec<(String, Vec<Key>)> = Vec::new();
    for (role, keys) in inputs {
        let mut unique: Vec<Key> = Vec::with_capacity(keys.len());
        let mut seen = BTreeSet::new();
        unique.extend(keys.iter().filter(|key| seen.insert(**key)));
        match out.iter_mut().find(|(_, known)| *known == unique) {
            Some((roles, _)) => *roles = format!("{roles}, {role}"),
            None => out.push((role.clone(), unique)),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn roles_of_the_same_entries_are_one() {
        let key = |n: u8| Key([n; 32]);
        let inputs =
            [("a".to_owned(), vec![key(1), key(1)]), ("b".to_owned(), vec![key(2)]), ("c".to_owned(), vec![key(1)])];
        assert_eq!(merged(&inputs), [("a, c".to_owned(), vec![key(1)]), ("b".to_owned(), vec![key(2)])]);
    }

    #[test]
    fn values_of_many_are_ranges() {
        let mut ranges = Ranges::default();
        for size in [8, 8, 12, 16, 32] {
            ranges.add_below(
                "",
                &Value::map([("boundary", Value::text("free")), ("size", Value::Integer(size)), ("no", Value::Null)]),
            );
        }
        assert_eq!(ranges.words(), "boundary free, size 8 to 32 (4)");
    }
}
