//! What is on record, as far as a forecast compares with it: preimages of the same kind, seconds, sizes.

use super::nearest::{Leaves, Names, flatten};
use spinledger_ledger::{Index, Ledger};
use spinledger_terms::{Key, Value};
use std::collections::BTreeMap;

/// Most preimages of a kind that are read: beyond, what was found by then has to do.
const MOST: usize = 20_000;

/// What is on record, read when it is asked for.
pub(super) struct Past<'a> {
    ledger: Option<&'a Ledger>,
    index: &'a Index,
    pub(super) names: Names,
    chains: Option<Vec<Leaves>>,
    analyses: BTreeMap<String, Vec<Leaves>>,
    pub(super) costs: Costs,
}

/// What sampling took: by what was sampled, more and more of which is left out.
#[derive(Default)]
pub(super) struct Costs(BTreeMap<String, Cost>);

/// Sums over blocks.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Cost {
    seconds: f64,
    updates: f64,
    bytes: f64,
    rows: f64,
}

impl Cost {
    fn add(&mut self, other: Cost) {
        self.seconds += other.seconds;
        self.updates += other.updates;
        self.bytes += other.bytes;
        self.rows += other.rows;
    }
}

impl Costs {
    fn add(&mut self, chains: &Value, cost: Cost) {
        for class in classes(chains) {
            self.0.entry(class).or_default().add(cost);
        }
    }

    /// The nearest cost that is known.
    fn find(&self, chains: &Value, known: impl Fn(&Cost) -> bool) -> Option<&Cost> {
        classes(chains).into_iter().find_map(|class| self.0.get(&class).filter(|cost| known(cost)))
    }

    /// Seconds for attempted updates of chains with this preimage, by the nearest that is on record; None where nothing is.
    pub(super) fn seconds(&self, chains: &Value, updates: f64) -> Option<f64> {
        let cost = self.find(chains, |cost| cost.updates > 0.0)?;
        Some(updates * cost.seconds / cost.updates)
    }

    /// Bytes of a row of a block with the same observables as this preimage; None where none is on record.
    pub(super) fn bytes(&self, chains: &Value) -> Option<f64> {
        let class = classes(chains).into_iter().take(3).find(|class| self.0.get(class).is_some_and(|c| c.rows > 0.0));
        let cost = self.0.get(&class?)?;
        Some(cost.bytes / cost.rows)
    }
}

/// What an update and a row cost depends on, from all of it to nothing: with all parameters, with those of the rules, by items alone.
fn classes(chains: &Value) -> [String; 4] {
    let part = |path: &str| chains.at(path).map_or(String::new(), Value::canonical);
    let rules = chains.get("update").and_then(Value::as_list).unwrap_or_default();
    let rules: Vec<&str> = rules.iter().filter_map(|rule| rule.get("item")?.as_str()).collect();
    let items = format!("{} {} {}", part("lattice.item"), part("model.item"), part("observe"));
    [
        ["all", &part("lattice"), &part("model"), &part("update"), &part("observe")].join(" "),
        ["rules", &items, &part("update")].join(" "),
        ["items", &items, &rules.join(" ")].join(" "),
        String::new(),
    ]
}

impl<'a> Past<'a> {
    pub(super) fn new(ledger: Option<&'a Ledger>, index: &'a Index) -> Self {
        let (names, costs) = (Names::default(), Costs::default());
        Past { ledger, index, names, chains: None, analyses: BTreeMap::new(), costs }
    }

    /// The chains on record, one preimage for each group.
    pub(super) fn chains(&mut self) -> &[Leaves] {
        if self.chains.is_none() {
            let chains = self.read_chains();
            self.chains = Some(chains);
        }
        self.chains.as_deref().unwrap_or_default()
    }

    fn read_chains(&mut self) -> Vec<Leaves> {
        // Of each group any one block says what it is.
        let mut groups: BTreeMap<Key, (Key, Cost)> = BTreeMap::new();
        for line in self.index.lines() {
            if let Some(place) = line.chain {
                let group = groups.entry(place.chain).or_insert((line.key, Cost::default()));
                let cost = Cost { seconds: line.seconds, updates: line.updates as f64, ..Cost::default() };
                group.1.add(cost);
            }
        }
        let mut chains = Vec::with_capacity(groups.len().min(MOST));
        for (_, (key, mut cost)) in groups.into_iter().take(MOST) {
            // What was removed since is no reason for anything.
            let Some(brief) = self.ledger.and_then(|ledger| ledger.read_brief(&key).ok()) else { continue };
            let Ok(preimage) = serde_json::from_str::<Value>(&brief.preimage) else { continue };
            let Some(group) = preimage.get("chains") else { continue };
            for table in &brief.tables {
                cost.add(Cost { bytes: table.size as f64, rows: table.rows as f64, ..Cost::default() });
            }
            self.costs.add(group, cost);
            chains.push(self.names.leaves(chain_leaves(group)));
        }
        chains
    }

    /// The analysis parcels of a kind on record.
    pub(super) fn analyses(&mut self, does: &str) -> &[Leaves] {
        if !self.analyses.contains_key(does) {
            let mut found = Vec::new();
            for line in self.index.lines().filter(|line| line.kind == does).take(MOST) {
                let brief = self.ledger.and_then(|ledger| ledger.read_brief(&line.key).ok());
                if let Some(brief) = brief {
                    found.push(self.names.leaves(analysis_leaves(&brief.preimage)));
                }
            }
            self.analyses.insert(does.to_owned(), found);
        }
        self.analyses.get(does).map(Vec::as_slice).unwrap_or_default()
    }

    /// Mean seconds of the parcels of a kind on record.
    pub(super) fn seconds_of(&self, does: &str) -> Option<f64> {
        let lines = self.index.lines().filter(|line| line.kind == does);
        let (count, seconds) = lines.fold((0u32, 0.0), |(n, sum), line| (n + 1, sum + line.seconds));
        (count > 0).then(|| seconds / f64::from(count))
    }
}

/// The leaves of the preimage of a group of chains. How rows are cut into blocks follows from the rest.
pub(super) fn chain_leaves(group: &Value) -> Vec<(String, String)> {
    let mut out = Vec::new();
    flatten(group, "", &|path| matches!(path, "observe" | "start"), &mut out);
    out.retain(|(path, _)| !matches!(path.as_str(), "block_rows" | "kind"));
    out
}

/// The leaves of the preimage of an analysis parcel: lists of inputs are one leaf for each role, with their number.
pub(super) fn analysis_leaves(preimage: &str) -> Vec<(String, String)> {
    let mut out = Vec::new();
    let Ok(value) = serde_json::from_str::<Value>(preimage) else { return out };
    if let Some(parameters) = value.get("parameters") {
        flatten(parameters, "parameters", &|_| false, &mut out);
    }
    if let Some(revision) = value.get("revision") {
        out.push(("revision".into(), revision.canonical()));
    }
    match value.at("facts.series").and_then(Value::as_list) {
        Some([one]) => flatten(one, "point", &|path| matches!(path, "point.observed" | "point.columns"), &mut out),
        Some(several) => out.push(("series".into(), counted(several))),
        None => {}
    }
    for unit in ["energy_unit", "temperature_unit"] {
        if let Some(word) = value.get("facts").and_then(|facts| facts.get(unit)) {
            out.push((unit.into(), word.as_str().unwrap_or_default().to_owned()));
        }
    }
    let mut roles: BTreeMap<&str, Vec<Value>> = BTreeMap::new();
    for input in value.get("inputs").and_then(Value::as_list).unwrap_or_default() {
        let role = input.get("role").and_then(Value::as_str).unwrap_or_default();
        roles.entry(role).or_default().push(input.get("content").cloned().unwrap_or(Value::Null));
    }
    out.extend(roles.into_iter().map(|(role, contents)| (format!("input {role}"), counted(&contents))));
    out
}

/// How many there are, and a hash of them.
fn counted(list: &[Value]) -> String {
    let text = Value::List(list.to_vec()).canonical();
    format!("{} {}", list.len(), blake3::hash(text.as_bytes()).to_hex())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn inputs_are_one_leaf_for_each_role() {
        let preimage = r#"{"facts":{"energy_unit":"","series":[{"every":1,"sites":16}],"temperature_unit":""},"inputs":[{"content":"aa","role":"of"},{"content":"bb","role":"of"}],"kind":"averages","parameters":{"over":[]},"revision":2}"#;
        let leaves = analysis_leaves(preimage);
        let at = |path: &str| leaves.iter().find(|(p, _)| p == path).map(|(_, text)| text.as_str());
        assert_eq!(
            (at("revision"), at("point.sites"), at("parameters.over.length")),
            (Some("2"), Some("16"), Some("0"))
        );
        assert!(at("input of").is_some_and(|text| text.starts_with("2 ")), "{leaves:?}");
    }

    #[test]
    fn costs_fall_back_to_what_is_like_it() {
        let chains = |size: i64, model: &str| {
            Value::map([
                ("lattice", Value::map([("item", Value::text("square")), ("parameters", Value::Integer(size))])),
                ("model", Value::map([("item", Value::text(model))])),
                ("update", Value::Null),
            ])
        };
        let mut costs = Costs::default();
        assert_eq!(costs.seconds(&chains(8, "ising"), 1.0), None);
        for (size, seconds) in [(8, 1.0), (16, 3.0)] {
            let cost = Cost { seconds, updates: 10.0, bytes: 80.0, rows: 10.0 };
            costs.add(&chains(size, "ising"), cost);
        }
        assert_eq!(costs.seconds(&chains(8, "ising"), 100.0), Some(10.0));
        assert_eq!(costs.seconds(&chains(32, "ising"), 100.0), Some(20.0), "scaled by updates from other sizes");
        assert_eq!(costs.seconds(&chains(32, "xy"), 100.0), Some(20.0));
        assert_eq!((costs.bytes(&chains(32, "ising")), costs.bytes(&chains(32, "xy"))), (Some(8.0), None));
    }
}
