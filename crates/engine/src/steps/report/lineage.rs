//! The record behind a number, short enough for a page: parameters, and what it was made from, down to the chains.

use super::Part;
use spinledger_ledger::{Input, Ledger, Record};
use spinledger_terms::{Key, Value};
use std::cell::RefCell;
use std::collections::{BTreeMap, BTreeSet};

/// Records on the way from results to chains. Of inputs that serve alike (the points of a scan, the blocks of a chain) the first is followed and all are
/// counted.
pub(super) struct Lineage<'a> {
    ledger: &'a Ledger,
    known: RefCell<BTreeMap<Key, Value>>,
}

/// Deeper than any chain of records; a circle cannot be published, but a damaged ledger could hold one.
const DEEPEST: usize = 24;

impl<'a> Lineage<'a> {
    pub(super) fn new(ledger: &'a Ledger) -> Self {
        Lineage { ledger, known: RefCell::default() }
    }

    /// The record of an entry. What is not on record any more is said so.
    pub(super) fn of(&self, key: &Key) -> Value {
        self.below(key, 0)
    }

    fn below(&self, key: &Key, depth: usize) -> Value {
        if let Some(value) = self.known.borrow().get(key) {
            return value.clone();
        }
        let value = match self.ledger.read_record(key) {
            Ok(record) if depth < DEEPEST => self.value(&record, depth),
            _ => Value::map([("key", Value::text(key.to_string())), ("record", Value::text("not on record any more"))]),
        };
        self.known.borrow_mut().insert(*key, value.clone());
        value
    }

    fn value(&self, record: &Record, depth: usize) -> Value {
        let p = &record.provenance;
        let mut value = Value::map([
            ("content", Value::text(record.content.to_string())),
            ("key", Value::text(record.key.to_string())),
            ("kind", Value::text(&record.kind)),
        ]);
        let mut parameters = p.parameters.clone();
        // The chains' own description goes up a level: it is what people look for.
        if let Value::Map(map) = &mut parameters {
            if let Some(chains) = map.remove("chains") {
                value.set("chains", chains);
            }
            if !map.is_empty() {
                value.set("parameters", parameters);
            }
        }
        if p.updates > 0 {
            value.set("spin_updates", Value::Integer(i64::try_from(p.updates).unwrap_or(i64::MAX)));
        }
        if let Some(streams) = &p.streams {
            value.set("streams", Value::text(format!("{} version {}", streams.generator, streams.version)));
        }
        let made: Vec<Value> = alike(&p.inputs)
            .into_iter()
            .map(|(word, first, count)| {
                let mut from = self.below(&first.key, depth + 1);
                if count > 1 {
                    from = Value::map([("of", Value::Integer(count as i64)), ("first", from)]);
                }
                Value::map([(word.as_str(), from)])
            })
            .collect();
        if !made.is_empty() {
            value.set("made_from", Value::List(made));
        }
        value
    }

    /// The plugin items that took part in the first chain of each part, by name and revision; of foreign ones the file's hash.
    pub(super) fn plugins(&self, parts: &[Part]) -> Value {
        let mut found: BTreeSet<String> = BTreeSet::new();
        let mut open: Vec<Key> = parts.iter().map(|part| part.record.key).collect();
        let mut seen: BTreeSet<Key> = BTreeSet::new();
        while let Some(key) = open.pop() {
            if !seen.insert(key) {
                continue;
            }
            let Ok(record) = self.ledger.read_record(&key) else { continue };
            found.extend(record.provenance.plugins.iter().map(|identity| identity.canonical()));
            open.extend(alike(&record.provenance.inputs).into_iter().map(|(_, first, _)| first.key));
        }
        Value::List(found.into_iter().map(Value::Text).collect())
    }
}

/// Inputs that serve alike: their name without numbers, the first, and how many.
fn alike(inputs: &[Input]) -> Vec<(String, &Input, usize)> {
    let mut groups: Vec<(String, &Input, usize)> = Vec::new();
    for input in inputs {
        let words = input.name.split([' ', '.']).filter(|word| word.parse::<u64>().is_err());
        let word = words.collect::<Vec<_>>().join(" ");
        // Items of a comparison are of different steps: each is followed.
        let single = input.name.contains('.');
        match groups.iter_mut().find(|(known, _, _)| *known == word && !single) {
            Some((_, _, count)) => *count += 1,
            None => groups.push((word, input, 1)),
        }
    }
    groups
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_terms::ContentHash;

    #[test]
    fn inputs_that_serve_alike_are_counted() {
        let input = |name: &str| Input { name: name.into(), key: Key::of(name), content: ContentHash([0; 32]) };
        let inputs = ["point", "point", "chain 0 block 1", "chain 2 block 0", "items.0.take.step", "items.1.take.step"];
        let inputs: Vec<Input> = inputs.iter().map(|name| input(name)).collect();
        let found: Vec<(String, usize)> = alike(&inputs).into_iter().map(|(word, _, count)| (word, count)).collect();
        let expected = [("point", 2), ("chain block", 2), ("items take step", 1), ("items take step", 1)];
        assert_eq!(found, expected.map(|(word, count)| (word.to_owned(), count)));
    }
}
