//! What a parameter may be.

use crate::{ItemKind, Value};
use serde::{Deserialize, Serialize};

/// One parameter: of a step kind, of a plugin item, or of a tree inside either.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Field {
    /// The key that people write.
    pub name: String,
    /// What it may be.
    pub kind: Kind,
    /// Unit: `energy`, `temperature`, `sweeps` ...; empty for pure numbers.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub unit: String,
    /// The value when it is not given. Absent and not `required`: the parameter may be missing.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub default: Option<Value>,
    /// It must be given.
    #[serde(default, skip_serializing_if = "std::ops::Not::not")]
    pub required: bool,
    /// One line of explanation.
    pub about: String,
}

impl Field {
    /// An optional parameter without a default.
    pub fn new(name: &str, kind: Kind, about: &str) -> Self {
        Field { name: name.into(), kind, unit: String::new(), default: None, required: false, about: about.into() }
    }

    /// Makes it required.
    pub fn required(mut self) -> Self {
        self.required = true;
        self
    }

    /// Gives it a default.
    pub fn default(mut self, value: Value) -> Self {
        self.default = Some(value);
        self
    }

    /// Gives it a unit.
    pub fn unit(mut self, unit: &str) -> Self {
        self.unit = unit.into();
        self
    }
}

/// What a value may be. In a manifest: `{"number": {"above": 0}}`, `{"word": {"of": ["a", "b"]}}` ...
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case", deny_unknown_fields)]
pub enum Kind {
    /// A finite number; whole numbers are taken as doubles.
    Number {
        /// Smallest allowed.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        min: Option<f64>,
        /// Largest allowed.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        max: Option<f64>,
        /// Must be larger than this.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        above: Option<f64>,
        /// Must be smaller than this.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        below: Option<f64>,
    },
    /// A whole number.
    Integer {
        /// Smallest allowed.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        min: Option<i64>,
        /// Largest allowed.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        max: Option<i64>,
    },
    /// True or false.
    Boolean {},
    /// Any text.
    Text {},
    /// One of some words.
    Word {
        /// The words.
        of: Vec<String>,
    },
    /// A list.
    List {
        /// What each element may be.
        of: Box<Kind>,
        /// Fewest elements.
        #[serde(default)]
        min: usize,
        /// Most elements.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        max: Option<usize>,
    },
    /// A mapping with free keys.
    Map {
        /// What each value may be.
        of: Box<Kind>,
    },
    /// A mapping with known keys.
    Tree {
        /// The keys.
        fields: Vec<Field>,
    },
    /// The first of several kinds that takes the value.
    Either {
        /// The alternatives; where none takes it, the one of the same shape tells what is wrong.
        of: Vec<Kind>,
    },
    /// A plugin item: its name, or a mapping with `plugin` and its parameters. Canonical form: the mapping, complete with defaults.
    Plugin {
        /// Of which kind.
        of: ItemKind,
    },
    /// The name of a step.
    Step {},
    /// Numbers: a list, or `{ from, to, count }`. Canonical form: the list, evaluated in decimal.
    Numbers {},
    /// Anything (checked by the step kind itself).
    Any {},
}

impl Kind {
    /// Any finite number.
    pub const NUMBER: Kind = Kind::Number { min: None, max: None, above: None, below: None };
    /// A number of at least zero.
    pub const NOT_NEGATIVE: Kind = Kind::Number { min: Some(0.0), max: None, above: None, below: None };
    /// A number above zero.
    pub const POSITIVE: Kind = Kind::Number { min: None, max: None, above: Some(0.0), below: None };
    /// A whole number of at least one.
    pub const COUNT: Kind = Kind::Integer { min: Some(1), max: None };
    /// A whole number of at least zero.
    pub const COUNT_FROM_ZERO: Kind = Kind::Integer { min: Some(0), max: None };

    /// One of some words.
    pub fn words(of: &[&str]) -> Kind {
        Kind::Word { of: of.iter().map(|w| (*w).to_owned()).collect() }
    }

    /// A list of at least one.
    pub fn list(of: Kind) -> Kind {
        Kind::List { of: Box::new(of), min: 1, max: None }
    }

    /// What is expected, in words.
    pub fn what(&self) -> String {
        match self {
            Kind::Number { min, max, above, below } => {
                let mut text = "a number".to_owned();
                let mut join = " ";
                let bounds = [("of at least", min), ("above", above), ("of at most", max), ("below", below)];
                for (word, bound) in bounds {
                    if let Some(bound) = bound {
                        text.push_str(&format!("{join}{word} {bound}"));
                        join = " and ";
                    }
                }
                text
            }
            Kind::Integer { min, max } => match (min, max) {
                (None, None) => "a whole number".into(),
                (Some(min), None) => format!("a whole number of at least {min}"),
                (None, Some(max)) => format!("a whole number of at most {max}"),
                (Some(min), Some(max)) => format!("a whole number from {min} to {max}"),
            },
            Kind::Boolean {} => "true or false".into(),
            Kind::Text {} => "text".into(),
            Kind::Word { of } => format!("one of: {}", of.join(", ")),
            Kind::List { of, .. } => format!("a list, each {}", of.what()),
            Kind::Map { of } => format!("a mapping from names to {}", of.what()),
            Kind::Tree { fields } => {
                let names: Vec<&str> = fields.iter().map(|f| f.name.as_str()).collect();
                format!("a mapping with: {}", names.join(", "))
            }
            Kind::Either { of } => of.iter().map(Kind::what).collect::<Vec<_>>().join(", or "),
            Kind::Plugin { of } => format!("the name of {}, or {{ plugin: name, parameters }}", of.article()),
            Kind::Step {} => "the name of a step".into(),
            Kind::Numbers {} => "a list of numbers or { from, to, count }".into(),
            Kind::Any {} => "any value".into(),
        }
    }
}
