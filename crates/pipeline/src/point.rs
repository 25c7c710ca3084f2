//! One point of a scan.

use crate::address;
use spinledger_terms::{Path, Value};
use std::sync::Arc;

/// A point of a scan: what all points of its block share, and what is its own.
#[derive(Clone, Debug)]
pub struct Point {
    step: Path,
    base: Arc<Value>,
    changes: Vec<Change>,
    /// The scan columns, in their order, with this point's cells.
    pub columns: Vec<(String, Value)>,
}

/// A value that a scan sets.
#[derive(Clone, Debug)]
pub(crate) struct Change {
    pub(crate) address: Arc<[String]>,
    pub(crate) value: Value,
    /// The place of the axis, shared by the points of its block.
    pub(crate) place: Arc<Path>,
    /// Its number, where it is an element of a list in the text.
    pub(crate) element: Option<usize>,
}

impl Point {
    pub(crate) fn new(step: Path, base: Arc<Value>, changes: Vec<Change>, columns: Vec<(String, Value)>) -> Self {
        Point { step, base, changes, columns }
    }

    pub(crate) fn alone(step: Path, base: Arc<Value>) -> Self {
        Point::new(step, base, Vec::new(), Vec::new())
    }

    /// The complete canonical parameters of the step at this point.
    ///
    /// Cost: a copy of them all.
    pub fn body(&self) -> Value {
        let mut body = Value::clone(&self.base);
        for change in &self.changes {
            address::set(&mut body, &change.address, change.value.clone());
        }
        body
    }

    /// The parameter at a dotted path (`lattice.size`), without building the whole body where that can be avoided.
    pub fn get(&self, dotted: &str) -> Option<Value> {
        let words: Vec<String> = dotted.split('.').map(str::to_owned).collect();
        for change in &self.changes {
            if let Some(rest) = words.strip_prefix(&*change.address) {
                return address::get(&change.value, rest).cloned();
            }
        }
        let deeper = self.changes.iter().any(|change| change.address.starts_with(&words));
        if deeper { self.body().at(dotted).cloned() } else { self.base.at(dotted).cloned() }
    }

    /// A scan column's cell.
    pub fn column(&self, name: &str) -> Option<&Value> {
        self.columns.iter().find(|(column, _)| column == name).map(|(_, cell)| cell)
    }

    /// Where in the document the parameter at a dotted path comes from: a value of the scan, or the body of the step.
    pub fn place(&self, dotted: &str) -> Path {
        for change in &self.changes {
            let address = change.address.join(".");
            let rest = match dotted.strip_prefix(&address) {
                Some("") => None,
                Some(rest) if rest.starts_with('.') => Some(&rest[1..]),
                _ => continue,
            };
            let place = match change.element {
                Some(index) => change.place.index(index),
                None => Path::clone(&change.place),
            };
            return rest.map_or(place.clone(), |rest| place.dotted(rest));
        }
        self.step.dotted(dotted)
    }
}
