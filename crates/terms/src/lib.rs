//! Canonical values, parameter specifications, keys, tables and located problems: the plain data that crates which
//! do not know each other hand around.
//!
//! - [`Value`] is what a pipeline says, after reading; its [canonical text](Value::canonical) is what keys are made of.
//! - [`Kind`] and [`Field`] say what a parameter may be; [`admit`] turns a raw value into a canonical one and collects
//!   every [`Problem`] on the way.
//! - [`LibraryManifest`] is what a plugin library says of itself, readable without loading it.
//! - [`Key`] names a ledger entry; [`ContentHash`] names what is in it.
//! - [`Table`] is a small table in memory: what analysis steps take and give.
//!
//! ```
//! use spinledger_terms::{Key, Value};
//! let temperature = Value::map([("temperature", Value::Number(2.26))]);
//! assert_eq!(temperature.canonical(), r#"{"temperature":2.26}"#);
//! assert_eq!(Key::of(&temperature.canonical()), Key::of(r#"{"temperature":2.26}"#));
//! ```
//!
//! Left to others: reading YAML (`pipeline`), bytes on disk (`ledger`), anything that knows a file.
#![forbid(unsafe_code)]

mod admit;
mod decimal;
mod key;
mod manifest;
mod nearest;
mod problem;
mod spec;
mod table;
mod value;

pub use admit::{Admission, admit, admit_fields};
pub use decimal::{Range, RangeError};
pub use key::{ContentHash, Key, ParseKeyError};
pub use manifest::{
    Boundaries, ColumnSpec, Condition, Identity, Item, ItemKind, LatticeTraits, LibraryManifest, ModelTraits,
    ObservableTraits, ScanSpec, StepSpec, Trait, UpdateTraits, Vocabulary,
};
pub use nearest::nearest;
pub use problem::{Mark, Path, Problem, Segment};
pub use spec::{Field, Kind};
pub use table::{Cells, Column, Table, TableError};
pub use value::{Value, number_text};
