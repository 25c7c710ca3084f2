//! What a plugin library says of itself, and the vocabulary that a pipeline is checked against.

use crate::{ContentHash, Field, Value};
use serde::{Deserialize, Serialize};
use std::fmt;

/// The manifest of a plugin library: JSON in a section of the object file, readable without loading it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct LibraryManifest {
    /// Version of the plugin interface that the library was built for.
    pub interface: u32,
    /// Name of the library.
    pub library: String,
    /// Its version.
    pub version: String,
    /// Its licence, as an SPDX expression.
    pub licence: String,
    /// What it holds.
    pub items: Vec<Item>,
}

/// The four kinds of plugin items.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum ItemKind {
    /// Sites and bonds.
    Lattice,
    /// A Hamiltonian.
    Model,
    /// An update rule.
    Update,
    /// What is measured.
    Observable,
}

impl ItemKind {
    /// The word.
    pub fn word(self) -> &'static str {
        match self {
            ItemKind::Lattice => "lattice",
            ItemKind::Model => "model",
            ItemKind::Update => "update",
            ItemKind::Observable => "observable",
        }
    }

    /// The word with its article, for messages.
    pub fn article(self) -> &'static str {
        match self {
            ItemKind::Lattice => "a lattice",
            ItemKind::Model => "a model",
            ItemKind::Update => "an update rule",
            ItemKind::Observable => "an observable",
        }
    }
}

impl fmt::Display for ItemKind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.word())
    }
}

/// One item of a library.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Item {
    /// Its kind.
    pub kind: ItemKind,
    /// The name that people write.
    pub name: String,
    /// Counts changes of what the item computes: a new revision makes new keys.
    pub revision: u32,
    /// What it is, in a sentence or two.
    pub about: String,
    /// The formula or definition, as text; empty where there is none.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub formula: String,
    /// The published source; empty where there is none.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub source: String,
    /// Its parameters.
    #[serde(default)]
    pub parameters: Vec<Field>,
    /// What checking needs to know of a lattice.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lattice: Option<LatticeTraits>,
    /// What checking needs to know of a model.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub model: Option<ModelTraits>,
    /// What checking needs to know of an update rule.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub update: Option<UpdateTraits>,
    /// What checking needs to know of an observable.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub observable: Option<ObservableTraits>,
}

/// Of a lattice: enough to know, without loading it, how large it will be and what it cannot be.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct LatticeTraits {
    /// Number of directions.
    pub dimension: u32,
    /// The parameter that gives unit cells a direction (a number, or a list of `dimension`); empty where there is none.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub size: String,
    /// Sites of a unit cell; with `size` this gives the nominal number of sites.
    #[serde(default = "one")]
    pub sites_per_cell: u64,
    /// Where there is no `size`: the parameter that gives the number of sites.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub sites: String,
    /// Names of the bond classes, for checking couplings given by class; empty where they are not known beforehand.
    #[serde(default)]
    pub classes: Vec<String>,
    /// The boundaries and their rules.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub boundaries: Option<Boundaries>,
}

fn one() -> u64 {
    1
}

/// Rules of a lattice's boundaries.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Boundaries {
    /// The parameter that holds one word, or one a direction.
    pub parameter: String,
    /// Smallest period that may be `antiperiodic`.
    #[serde(default = "two")]
    pub antiperiodic_minimum: i64,
}

fn two() -> i64 {
    2
}

/// Of a model.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ModelTraits {
    /// Forms of energy that it uses: of `pair`, `factors`, `vectors`, `custom`.
    pub forms: Vec<String>,
    /// Number of states of a discrete spin, if fixed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub states: Option<u64>,
    /// The parameter that gives the number of states.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub states_parameter: String,
    /// What rules and observables may rely on.
    #[serde(default)]
    pub offers: Vec<Trait>,
    /// Parameters that may be mappings from bond class to number.
    #[serde(default)]
    pub by_class: Vec<String>,
}

/// Something that a model offers, unless its parameters spoil it. Words in use: `scalar` (states carry spin values), `negation` (-S is
/// a state), `directions` (states for pinned rims are known), `inversion` (S -> -S everywhere leaves H unchanged), `permutation` (so does
/// any permutation of colours), `ferromagnetic` (no coupling is negative), `uniform` (all couplings are equal), `colours` (states are Potts colours).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Trait {
    /// The word.
    pub name: String,
    /// Conditions, any of which takes it away.
    #[serde(default)]
    pub unless: Vec<Condition>,
}

/// A condition on a parameter; for lists and mappings it holds when it holds for any element.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Condition {
    /// The parameter, as a dotted path.
    pub parameter: String,
    /// `nonzero`, `negative`, `positive`, or `uneven`: elements that differ.
    pub is: String,
}

impl Condition {
    /// Whether it holds for these parameters. An absent parameter fulfils nothing; an unknown word is taken as fulfilled, on
    /// the side of refusing.
    pub fn holds(&self, parameters: &Value) -> bool {
        fn any(value: &Value, test: &dyn Fn(f64) -> bool) -> bool {
            match value {
                Value::List(list) => list.iter().any(|v| any(v, test)),
                Value::Map(map) => map.values().any(|v| any(v, test)),
                other => other.as_f64().is_some_and(test),
            }
        }
        parameters.at(&self.parameter).is_some_and(|value| match self.is.as_str() {
            "nonzero" => any(value, &|x| x != 0.0),
            "negative" => any(value, &|x| x < 0.0),
            "positive" => any(value, &|x| x > 0.0),
            "uneven" => {
                let first = std::cell::Cell::new(None);
                any(value, &|x| first.replace(Some(x)).is_some_and(|before| before != x))
            }
            _ => true,
        })
    }
}

/// Of an update rule.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct UpdateTraits {
    /// Forms of energy that it serves.
    pub forms: Vec<String>,
    /// Traits that it needs of the model; `a|b` means either.
    #[serde(default)]
    pub needs: Vec<String>,
    /// Most states of a discrete spin that it serves.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub most_states: Option<u64>,
    /// The parameter that gives the number of chains advanced together; empty: one.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub lanes: String,
    /// The value of that parameter where it is not given and the lattice does not fit `packing`; where it fits, it is 1. None: the parameter has
    /// a default of its own.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub together: Option<u32>,
    /// By number of directions: one chain is served where the number of cells in each direction is a multiple of the number here, and at least
    /// twice that, and every boundary is periodic.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub packing: Vec<Vec<u64>>,
}

/// Of an observable.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ObservableTraits {
    /// Traits that it needs of the model; `a|b` means either.
    #[serde(default)]
    pub needs: Vec<String>,
    /// Chains that it reads at once: 1 or 2.
    #[serde(default = "one")]
    pub chains: u64,
    /// Its columns, where they do not depend on parameters.
    #[serde(default)]
    pub columns: Vec<ColumnSpec>,
}

/// A column of an observable.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ColumnSpec {
    /// Its name.
    pub name: String,
    /// Its unit: `energy` or empty.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub unit: String,
    /// Whether it is unchanged by the symmetries of the Hamiltonian; signed magnetisation is not.
    #[serde(default = "yes")]
    pub invariant: bool,
    /// One line of explanation.
    #[serde(default)]
    pub about: String,
}

fn yes() -> bool {
    true
}

/// Which code an item is.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Identity {
    /// The library's name.
    pub library: String,
    /// The library's version.
    pub version: String,
    /// The item's name.
    pub item: String,
    /// The item's revision.
    pub revision: u32,
    /// Whether it comes with the program: then library, name and revision identify it.
    pub standard: bool,
    /// Where the file was found.
    pub file: String,
    /// BLAKE3 of the file: identifies a foreign item.
    pub file_hash: ContentHash,
}

impl Identity {
    /// The text that stands for the item in keys: `library/item@revision`, for foreign items with `#` and the file's hash.
    pub fn canonical(&self) -> String {
        let Identity { library, item, revision, .. } = self;
        if self.standard {
            format!("{library}/{item}@{revision}")
        } else {
            format!("{library}/{item}@{revision}#{}", self.file_hash)
        }
    }
}

/// The words that a pipeline may use: what step kinds there are is known to the engine, what items to the host.
#[derive(Clone, Debug, Default)]
pub struct Vocabulary {
    /// Step kinds.
    pub steps: Vec<StepSpec>,
    /// Items found, first found first; a later item of the same kind and name is hidden.
    pub items: Vec<(Identity, Item)>,
}

impl Vocabulary {
    /// The item of a kind and name.
    pub fn item(&self, kind: ItemKind, name: &str) -> Option<&(Identity, Item)> {
        self.items.iter().find(|(_, item)| item.kind == kind && item.name == name)
    }

    /// Names of the items of a kind, in order of discovery.
    pub fn names(&self, kind: ItemKind) -> impl Iterator<Item = &str> {
        self.items.iter().filter(move |(_, item)| item.kind == kind).map(|(_, item)| item.name.as_str())
    }

    /// The parameters of a step kind.
    pub fn step(&self, does: &str) -> Option<&StepSpec> {
        self.steps.iter().find(|spec| spec.does == does)
    }
}

/// A kind of step, as far as reading a pipeline goes.
#[derive(Clone, Debug)]
pub struct StepSpec {
    /// The word after `does:`.
    pub does: String,
    /// One line of explanation.
    pub about: String,
    /// Its parameters, without `does` and `scan`.
    pub fields: Vec<Field>,
    /// Whether and how it can be repeated over a scan.
    pub scan: Option<ScanSpec>,
}

/// How a step kind is scanned.
#[derive(Clone, Debug, Default)]
pub struct ScanSpec {
    /// Paths that make no column when scanned.
    pub no_column: Vec<String>,
    /// Of these, the paths that take the larger value where a point is named twice; others must then be equal.
    pub larger: Vec<String>,
    /// The parameter that names a scanned path whose values are visited in the given order (`follow`): repeated values then
    /// stay, and points carry a column `position`. Empty: none.
    pub follow: String,
}
