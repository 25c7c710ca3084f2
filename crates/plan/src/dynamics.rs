//! What moves the spins: the part of a sample point that decides a chain's course, in the form that keys and streams are made of.

use crate::blocks::block_rows;
use crate::lanes::{complete, rule_lanes};
use crate::sequence::Follows;
use crate::states::Start;
use serde::{Deserialize, Serialize};
use spinledger_pipeline::Units;
use spinledger_terms::{Identity, Item, ItemKind, Value, Vocabulary};
use std::collections::BTreeMap;

/// Counts changes of the engine's own part in what is recorded: start configurations, order of rules within a sweep, when rows are
/// measured, streams. A change makes new keys of all chains.
pub const REVISION: i64 = 1;

/// A plugin item with its parameters.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ItemRef {
    /// Which code.
    pub identity: Identity,
    /// Its parameters: a complete mapping, without `plugin` and `times`.
    pub parameters: Value,
}

impl ItemRef {
    /// As keys see it: which code with which parameters.
    pub fn key_value(&self) -> Value {
        Value::map([("item", Value::text(self.identity.canonical())), ("parameters", self.parameters.clone())])
    }

    /// Without fingerprints and revisions: what the physics is called.
    fn stream_value(&self) -> Value {
        let name = format!("{}/{}", self.identity.library, self.identity.item);
        Value::map([("item", Value::text(name)), ("parameters", self.parameters.clone())])
    }
}

/// One point of a sample step, as far as one chain's course depends on it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Dynamics {
    /// Seed of the pipeline.
    pub seed: u64,
    /// The lattice.
    pub lattice: ItemRef,
    /// The Hamiltonian.
    pub model: ItemRef,
    /// The rules of one sweep, in order, with how often each is done.
    pub update: Vec<(ItemRef, u64)>,
    /// What is measured.
    pub observe: Vec<ItemRef>,
    /// 1/(k_B T) in 1/energy: the one canonical form of temperature.
    pub inverse_temperature: f64,
    /// Temperature in the pipeline's unit; infinite at inverse temperature 0.
    #[serde(with = "infinite_as_null")]
    pub temperature: f64,
    /// k_B in energy units per temperature unit.
    pub boltzmann: f64,
    /// Name of the energy unit, empty for reduced units.
    pub energy_unit: String,
    /// Sweeps before the first measurement (0 under `auto`).
    pub equilibrate: u64,
    /// Sweeps between measurements.
    pub every: u64,
    /// Sweeps of adapting step widths before everything.
    pub settle: u64,
    /// Chains that the rules advance together.
    pub lanes: u32,
    /// Number of sites as far as it is known without loading the lattice.
    pub nominal_sites: u64,
}

impl Dynamics {
    /// From the canonical parameters of a sample point. None where they are not those of a sample step, which checking rules out.
    pub fn of(body: &Value, seed: u64, units: &Units, vocabulary: &Vocabulary) -> Option<Dynamics> {
        let item = |kind: ItemKind, value: &Value| -> Option<(ItemRef, Item, u64)> {
            let (identity, item) = vocabulary.item(kind, value.get("plugin")?.as_str()?)?;
            let mut parameters = value.as_map()?.clone();
            parameters.remove("plugin");
            let times = parameters.remove("times").and_then(|t| t.as_i64()).unwrap_or(1);
            in_energy_units(&mut parameters, item, units);
            let reference = ItemRef { identity: identity.clone(), parameters: Value::Map(parameters) };
            Some((reference, item.clone(), u64::try_from(times).ok()?))
        };
        let (lattice, lattice_item, _) = item(ItemKind::Lattice, body.get("lattice")?)?;
        let (model, _, _) = item(ItemKind::Model, body.get("model")?)?;
        let update = body.get("update")?;
        let rules = update.as_list().unwrap_or(std::slice::from_ref(update));
        let mut rules: Vec<_> = rules.iter().map(|rule| item(ItemKind::Update, rule)).collect::<Option<_>>()?;
        let mut lanes = 1;
        for (rule, item, _) in &mut rules {
            let own = rule_lanes(&rule.parameters, item, &lattice.parameters, &lattice_item);
            if let Value::Map(parameters) = &mut rule.parameters {
                complete(parameters, item, own);
            }
            lanes = lanes.max(own);
        }
        let observe = body.get("observe")?.as_list()?;
        let observe = observe.iter().map(|o| Some(item(ItemKind::Observable, o)?.0)).collect::<Option<_>>()?;
        let boltzmann = units.boltzmann();
        let (temperature, inverse_temperature) = match (body.get("temperature"), body.get("inverse_temperature")) {
            (Some(t), None) => (t.as_f64()?, 1.0 / (boltzmann * t.as_f64()?)),
            (None, Some(b)) => (1.0 / (boltzmann * b.as_f64()?), b.as_f64()?),
            _ => return None,
        };
        let count = |name: &str| body.get(name).and_then(Value::as_i64).and_then(|n| u64::try_from(n).ok());
        let nominal_sites = nominal_sites(&lattice.parameters, &lattice_item);
        Some(Dynamics {
            seed,
            lattice,
            model,
            update: rules.into_iter().map(|(rule, _, times)| (rule, times)).collect(),
            observe,
            inverse_temperature,
            temperature,
            boltzmann,
            energy_unit: units.energy_unit().to_owned(),
            equilibrate: count("equilibrate").unwrap_or(0),
            every: count("every").unwrap_or(1),
            settle: count("settle").unwrap_or(0),
            lanes,
            nominal_sites,
        })
    }

    /// The preimage of the stream key of a group of chains: seed and physical identity, and nothing that could change while the physics
    /// stays: no revision, no fingerprint, no length, no observables. In a sequence also the position.
    pub fn stream_preimage(&self, start: &Start, group: u32, follows: Option<&Follows>) -> String {
        let update = self.update.iter().map(|(rule, times)| with_times(rule.stream_value(), *times)).collect();
        let mut value = Value::map([
            ("group", Value::Integer(group.into())),
            ("inverse_temperature", Value::Number(self.inverse_temperature)),
            ("lanes", Value::Integer(self.lanes.into())),
            ("lattice", self.lattice.stream_value()),
            ("model", self.model.stream_value()),
            ("seed", Value::Integer(self.seed as i64)),
            ("start", start.value(group, self.lanes)),
            ("update", Value::List(update)),
        ]);
        if let Some(follows) = follows {
            value.set("position", Value::Integer(follows.position as i64));
        }
        value.canonical()
    }

    /// What the data of a group of chains depend on, without length: the preimage of its key, and part of the preimages of its blocks. In a
    /// sequence also the position, and the group before with the length at which it was left.
    pub fn group_value(&self, start: &Start, group: u32, follows: Option<&Follows>) -> Value {
        let update = self.update.iter().map(|(rule, times)| with_times(rule.key_value(), *times)).collect();
        let mut value = Value::map([
            ("block_rows", Value::Integer(self.block_rows() as i64)),
            ("energy_unit", Value::text(&self.energy_unit)),
            ("equilibrate", Value::Integer(self.equilibrate as i64)),
            ("every", Value::Integer(self.every as i64)),
            ("group", Value::Integer(group.into())),
            ("inverse_temperature", Value::Number(self.inverse_temperature)),
            ("kind", Value::text("chains")),
            ("lanes", Value::Integer(self.lanes.into())),
            ("lattice", self.lattice.key_value()),
            ("model", self.model.key_value()),
            ("observe", Value::List(self.observe.iter().map(ItemRef::key_value).collect())),
            ("revision", Value::Integer(REVISION)),
            ("seed", Value::Integer(self.seed as i64)),
            ("settle", Value::Integer(self.settle as i64)),
            ("start", start.value(group, self.lanes)),
            ("update", Value::List(update)),
        ]);
        if let Some(follows) = follows {
            value.set("position", Value::Integer(follows.position as i64));
            if let Some(before) = follows.before_value() {
                value.set("follows", before);
            }
        }
        value
    }

    /// Rows of a block. Part of the key of a group, since the order of rows follows from it.
    pub fn block_rows(&self) -> u64 {
        block_rows(self.nominal_sites, self.every)
    }

    /// How many rules a sweep does, each counted as often as it is done.
    pub fn passes(&self) -> u64 {
        self.update.iter().fold(0, |sum, (_, times)| sum.saturating_add(*times))
    }

    /// All items that take part.
    pub fn identities(&self) -> Vec<Identity> {
        let items = [&self.lattice, &self.model].into_iter().chain(self.update.iter().map(|(rule, _)| rule));
        items.chain(&self.observe).map(|item| item.identity.clone()).collect()
    }

    /// Whether code that did not come with the program takes part.
    pub fn is_foreign(&self) -> bool {
        self.identities().iter().any(|identity| !identity.standard)
    }
}

/// JSON has no infinity, and an infinite temperature is a temperature.
mod infinite_as_null {
    use serde::{Deserialize, Deserializer, Serialize, Serializer};

    pub(super) fn serialize<S: Serializer>(x: &f64, s: S) -> Result<S::Ok, S::Error> {
        Some(*x).filter(|x| x.is_finite()).serialize(s)
    }

    pub(super) fn deserialize<'de, D: Deserializer<'de>>(d: D) -> Result<f64, D::Error> {
        Ok(Option::<f64>::deserialize(d)?.unwrap_or(f64::INFINITY))
    }
}

/// Fields that a pipeline gives in tesla become energies, which is all that plugins and keys know.
fn in_energy_units(parameters: &mut BTreeMap<String, Value>, item: &Item, units: &Units) {
    fn scale(value: &mut Value, factor: f64) {
        match value {
            Value::Number(x) => *x *= factor,
            Value::List(list) => list.iter_mut().for_each(|value| scale(value, factor)),
            Value::Map(map) => map.values_mut().for_each(|value| scale(value, factor)),
            _ => {}
        }
    }
    if units.moment.is_none() {
        return;
    }
    for field in item.parameters.iter().filter(|field| field.unit == "field") {
        if let Some(value) = parameters.get_mut(&field.name) {
            scale(value, units.field_energy());
        }
    }
}

fn with_times(mut value: Value, times: u64) -> Value {
    value.set("times", Value::Integer(times as i64));
    value
}

/// Number of sites as far as the lattice's manifest and parameters tell; 4096 where they do not.
pub fn nominal_sites(parameters: &Value, item: &Item) -> u64 {
    const UNKNOWN: u64 = 4096;
    let Some(traits) = &item.lattice else { return UNKNOWN };
    let count = |value: &Value| value.as_i64().and_then(|n| u64::try_from(n).ok());
    if !traits.size.is_empty() {
        let cells = match parameters.at(&traits.size) {
            Some(Value::List(list)) => list.iter().try_fold(1u64, |n, size| n.checked_mul(count(size)?)),
            Some(value) => count(value).and_then(|n| n.checked_pow(traits.dimension)),
            None => None,
        };
        return cells.and_then(|n| n.checked_mul(traits.sites_per_cell)).unwrap_or(UNKNOWN);
    }
    parameters.at(&traits.sites).and_then(count).unwrap_or(UNKNOWN)
}

#[cfg(test)]
pub(crate) mod tests;
