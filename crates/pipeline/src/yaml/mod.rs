//! YAML to a tree that remembers the order of keys and the way to each node.
//!
//! The only module that touches serde_yaml, which is archived upstream. There is no second parser: a place is found by
//! running serde_yaml again with a seed that descends to the node and fails there (see [`place`]), so that reading and locating cannot
//! disagree about a document.

mod place;
mod read;
#[cfg(test)]
mod tests;

use spinledger_terms::{Mark, Path, Segment, Value};
use std::collections::BTreeMap;

pub(crate) use place::offset;
pub(crate) use read::read;

/// Largest text that is read, in bytes.
pub(crate) const LONGEST: usize = 4 << 20;

/// A document that could be read.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Document {
    /// Its top.
    pub(crate) root: Node,
}

/// A node of a document, aliases and merge keys resolved.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Node {
    /// A value without parts.
    Leaf(Value),
    /// A list.
    List(Vec<Node>),
    /// A mapping, in the order written; merged entries follow.
    Map(Vec<Entry>),
}

/// An entry of a mapping.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Entry {
    /// The key.
    pub(crate) key: String,
    /// Its value.
    pub(crate) value: Node,
    /// The way from the mapping to the entry as it stands in the text, by child numbers: one, or several where the entry came
    /// through a merge key.
    pub(crate) route: Vec<usize>,
}

/// Where a path leads in a document.
pub(crate) struct Found<'a> {
    /// The way there in the text, by child numbers.
    pub(crate) route: Vec<usize>,
    /// The node there.
    pub(crate) node: &'a Node,
    /// Whether the node is the value of a key.
    pub(crate) keyed: bool,
    /// The key, or the value: a key where one was asked for and the path leads all the way.
    pub(crate) mark: Mark,
}

impl Node {
    /// As a plain value.
    pub(crate) fn value(&self) -> Value {
        match self {
            Node::Leaf(value) => value.clone(),
            Node::List(items) => Value::List(items.iter().map(Node::value).collect()),
            Node::Map(entries) => {
                Value::Map(entries.iter().map(|e| (e.key.clone(), e.value.value())).collect::<BTreeMap<_, _>>())
            }
        }
    }

    /// The entries, if this is a mapping.
    pub(crate) fn entries(&self) -> &[Entry] {
        match self {
            Node::Map(entries) => entries,
            _ => &[],
        }
    }

    /// The value of a key.
    pub(crate) fn get(&self, key: &str) -> Option<&Node> {
        self.entries().iter().find(|e| e.key == key).map(|e| &e.value)
    }

    /// Follows a path as far as it leads: defaults and short forms have no place of their own, so the nearest node above stands
    /// for them. Keys that contain dots are found in dotted paths, too.
    pub(crate) fn find(&self, path: &Path, mark: Mark) -> Found<'_> {
        let mut found = Found { route: Vec::new(), node: self, keyed: false, mark: Mark::Value };
        let mut rest = path.0.as_slice();
        while !rest.is_empty() {
            match found.node {
                Node::List(items) => {
                    let index = match &rest[0] {
                        Segment::Index(index) => Some(*index),
                        Segment::Key(key) => key.parse().ok(),
                        Segment::At { .. } => None,
                    };
                    let Some((index, item)) = index.and_then(|i| Some((i, items.get(i)?))) else { return found };
                    found.route.push(index);
                    (found.node, found.keyed) = (item, false);
                    rest = &rest[1..];
                }
                Node::Map(entries) => {
                    let Some((entry, used)) = entry(entries, rest) else { return found };
                    found.route.extend(&entry.route);
                    (found.node, found.keyed) = (&entry.value, true);
                    rest = &rest[used..];
                }
                Node::Leaf(_) => return found,
            }
        }
        if found.keyed {
            found.mark = mark;
        }
        found
    }
}

/// The entry that the beginning of `rest` names, and how many segments of it that takes.
fn entry<'a>(entries: &'a [Entry], rest: &[Segment]) -> Option<(&'a Entry, usize)> {
    let mut joined = String::new();
    for (i, segment) in rest.iter().enumerate() {
        if i > 0 {
            joined.push('.');
        }
        match segment {
            Segment::Key(key) => joined.push_str(key),
            Segment::Index(index) => joined.push_str(&index.to_string()),
            Segment::At { .. } => return None,
        }
        if let Some(entry) = entries.iter().find(|e| e.key == joined) {
            return Some((entry, i + 1));
        }
    }
    None
}
