//! The first pass: text to tree, with what YAML itself can get wrong.

use super::place::second_document;
use super::{Document, Entry, LONGEST, Node, offset};
use crate::source::Lines;
use serde::de::{DeserializeSeed, Deserializer, EnumAccess, Error as _, MapAccess, SeqAccess, VariantAccess, Visitor};
use spinledger_terms::{Mark, Path, Problem, Value};
use std::cell::{Cell, RefCell};
use std::fmt;

/// Most nodes after aliases are expanded.
const MOST_NODES: usize = 1_000_000;

/// Most mistakes that are placed, and most bytes parsed for that: each place costs a run of the parser.
const MOST_SLIPS: usize = 200;
const MOST_BYTES: usize = 20 << 20;

/// The tree of a text, if there is one, and what is wrong with its YAML. Repeated keys, keys that are not text, and tags leave a
/// tree: the rest of it can still be checked.
pub(crate) fn read(text: &str) -> (Option<Document>, Vec<Problem>) {
    let lines = Lines::new(text);
    if let Some(problem) = unreadable(text, &lines) {
        return (None, vec![problem]);
    }
    let reading = Reading::default();
    let mut documents = serde_yaml::Deserializer::from_str(text);
    let root = match documents.next() {
        Some(document) => (&reading).deserialize(document),
        None => Ok(Node::Leaf(Value::Null)),
    };
    let root = match root {
        Ok(root) => root,
        Err(error) => return (None, vec![broken(&error, &reading, text, &lines)]),
    };
    let mut problems = Vec::new();
    if let Some(place) = second_document(text) {
        let message = "a second document begins here, and a pipeline is one";
        return (
            None,
            vec![Problem::at_value(&lines.path(place), message).expected("nothing after the first document")],
        );
    }
    let most = (MOST_BYTES / text.len().max(1)).clamp(1, MOST_SLIPS);
    for slip in reading.slips.into_inner().into_iter().take(most) {
        let at = |route: &[usize], mark| lines.path(offset(text, route, mark).unwrap_or(0));
        let mut problem = Problem::at_value(&at(&slip.route, slip.mark), slip.message);
        if let Some(expected) = slip.expected {
            problem = problem.expected(expected);
        }
        if let Some(first) = slip.first {
            problem = problem.other(at(&first, Mark::Key), "first here");
        }
        // What an anchor holds is met again at every alias.
        if !problems.contains(&problem) {
            problems.push(problem);
        }
    }
    (Some(Document { root }), problems)
}

/// What the parser would refuse without saying where; and the old line break U+0085, after which it counts bytes wrongly.
fn unreadable(text: &str, lines: &Lines<'_>) -> Option<Problem> {
    if text.len() > LONGEST {
        let message = format!("the file has {} bytes, and a pipeline has at most {LONGEST}", text.len());
        return Some(Problem::at_value(&Path::at(1, 1), message));
    }
    let allowed = |c: char| {
        matches!(c, '\t' | '\n' | '\r' | ' '..='~' | '\u{a0}'..='\u{fefe}' | '\u{ff00}'..='\u{fffd}')
            || c >= '\u{10000}'
    };
    let (index, c) = text.char_indices().find(|(_, c)| !allowed(*c))?;
    let message = format!("the character U+{:04X} cannot stand in YAML", u32::from(c));
    Some(Problem::at_value(&lines.path(index), message))
}

/// What is shared by the visitors of one document.
#[derive(Default)]
struct Reading {
    slips: RefCell<Vec<Slip>>,
    /// The way to the node being read; left as it is by a failure.
    route: RefCell<Vec<usize>>,
    nodes: Cell<usize>,
}

/// A mistake that does not stop the reading.
struct Slip {
    route: Vec<usize>,
    mark: Mark,
    message: String,
    expected: Option<&'static str>,
    first: Option<Vec<usize>>,
}

impl Reading {
    fn slip(&self, below: Option<usize>, mark: Mark, message: String) {
        self.slip_of(below, mark, message, None, None);
    }

    fn slip_of(
        &self,
        below: Option<usize>,
        mark: Mark,
        message: String,
        expected: Option<&'static str>,
        first: Option<Vec<usize>>,
    ) {
        let mut route = self.route.borrow().clone();
        let first = first.map(|first| [route.as_slice(), &first].concat());
        route.extend(below);
        self.slips.borrow_mut().push(Slip { route, mark, message, expected, first });
    }

    fn enter(&self, index: usize) {
        self.route.borrow_mut().push(index);
    }

    fn leave(&self) {
        self.route.borrow_mut().pop();
    }
}

impl<'de> DeserializeSeed<'de> for &Reading {
    type Value = Node;

    fn deserialize<D: Deserializer<'de>>(self, deserializer: D) -> Result<Node, D::Error> {
        self.nodes.set(self.nodes.get() + 1);
        if self.nodes.get() > MOST_NODES {
            return Err(D::Error::custom("too many nodes"));
        }
        deserializer.deserialize_any(self)
    }
}

impl<'de> Visitor<'de> for &Reading {
    type Value = Node;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a value")
    }
    fn visit_bool<E>(self, b: bool) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Bool(b)))
    }
    fn visit_i64<E>(self, i: i64) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Integer(i)))
    }
    // Whole numbers beyond 64 bits go on as doubles, as their decimal texts would; where a whole number is needed, they are
    // refused for what they are.
    fn visit_u64<E>(self, u: u64) -> Result<Node, E> {
        Ok(Node::Leaf(i64::try_from(u).map_or(Value::Number(u as f64), Value::Integer)))
    }
    fn visit_i128<E>(self, i: i128) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Number(i as f64)))
    }
    fn visit_u128<E>(self, u: u128) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Number(u as f64)))
    }
    fn visit_f64<E>(self, x: f64) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Number(x)))
    }
    fn visit_str<E>(self, t: &str) -> Result<Node, E> {
        Ok(Node::Leaf(Value::text(t)))
    }
    fn visit_unit<E>(self) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Null))
    }
    fn visit_none<E>(self) -> Result<Node, E> {
        Ok(Node::Leaf(Value::Null))
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut items: A) -> Result<Node, A::Error> {
        let mut list = Vec::new();
        loop {
            self.enter(list.len());
            let item = items.next_element_seed(self)?;
            self.leave();
            match item {
                Some(item) => list.push(item),
                None => return Ok(Node::List(list)),
            }
        }
    }

    fn visit_map<A: MapAccess<'de>>(self, mut access: A) -> Result<Node, A::Error> {
        let mut entries: Vec<Entry> = Vec::new();
        let mut merged: Vec<Entry> = Vec::new();
        let mut place = std::collections::BTreeMap::new();
        for index in 0.. {
            self.enter(index);
            let Some(key) = access.next_key_seed(self)? else {
                self.leave();
                break;
            };
            let value = access.next_value_seed(self)?;
            self.leave();
            let Node::Leaf(Value::Text(key)) = key else {
                let message = match &key {
                    Node::Leaf(value) => format!("a key is {}, but keys are text", value.what()),
                    _ => "a key is a list or a mapping, but keys are text".to_owned(),
                };
                self.slip_of(
                    Some(index),
                    Mark::Key,
                    message,
                    Some("text, in quotes where YAML reads it otherwise"),
                    None,
                );
                continue;
            };
            if let Some(first) = place.insert(key.clone(), index) {
                place.insert(key.clone(), first);
                let message = format!("`{key}` is here twice");
                self.slip_of(Some(index), Mark::Key, message, Some("each key once"), Some(vec![first]));
            } else if key == "<<" {
                self.merge(value, index, &mut merged);
            } else {
                entries.push(Entry { key, value, route: vec![index] });
            }
        }
        // Keys written out win over merged ones, earlier merged ones over later.
        for entry in merged {
            if place.insert(entry.key.clone(), 0).is_none() {
                entries.push(entry);
            }
        }
        Ok(Node::Map(entries))
    }

    fn visit_enum<A: EnumAccess<'de>>(self, tagged: A) -> Result<Node, A::Error> {
        let (tag, content) = tagged.variant::<String>()?;
        let tag = tag.trim_start_matches('!');
        self.slip_of(
            None,
            Mark::Value,
            format!("the tag `!{tag}` means nothing here"),
            Some("the value without a tag"),
            None,
        );
        content.newtype_variant_seed(self)
    }
}

impl Reading {
    /// Entries that `<<` brings in, with their way through it.
    fn merge(&self, value: Node, index: usize, merged: &mut Vec<Entry>) {
        let mut bring = |entries: Vec<Entry>, way: &[usize]| {
            merged.extend(entries.into_iter().map(|e| Entry { route: [way, &e.route].concat(), ..e }));
        };
        match value {
            Node::Map(entries) => bring(entries, &[index]),
            Node::List(items) if items.iter().all(|item| matches!(item, Node::Map(_))) => {
                for (i, item) in items.into_iter().enumerate() {
                    if let Node::Map(entries) = item {
                        bring(entries, &[index, i]);
                    }
                }
            }
            _ => self.slip(Some(index), Mark::Value, "`<<` takes a mapping, or a list of mappings".to_owned()),
        }
    }
}

/// The problem behind an error of the parser.
fn broken(error: &serde_yaml::Error, reading: &Reading, text: &str, lines: &Lines<'_>) -> Problem {
    let words = error.to_string();
    if reading.nodes.get() > MOST_NODES || words.starts_with("repetition limit") {
        let place = alias_on_the_way(text, &reading.route.borrow());
        let message = "too many values here, counting aliases as often as they are used";
        let problem = Problem::at_value(&lines.path(place), message);
        return problem.expected("at most a million values in all");
    }
    let place = error.location().map(|location| location.index());
    let path = lines.path(place.unwrap_or(0));
    if words.starts_with("recursion limit") {
        let problem = Problem::at_value(&path, "values are nested too deeply here, or an alias contains itself");
        return problem.expected("at most 128 levels");
    }
    if words.starts_with("unknown anchor") {
        return Problem::at_value(&path, "there is no anchor of this name above").expected("`&name` before `*name`");
    }
    let mut parts = words.splitn(2, ", while ");
    let what = without_place(parts.next().unwrap_or_default());
    let tab = place.is_some_and(|place| text.as_bytes().get(place) == Some(&b'\t'));
    if tab {
        let problem = Problem::at_value(&path, "broken YAML: a tab where only spaces may stand");
        return problem.expected("spaces");
    }
    let context = parts.next();
    let mut problem = Problem::at_value(&path, format!("broken YAML: {what}"));
    if let Some(context) = context {
        let how = format!("while {}", without_place(context));
        match context.split_once(" at line ").and_then(|(_, rest)| numbers(rest)) {
            Some((line, column)) => problem = problem.other(Path::at(line, column), how),
            None => problem.message = format!("{}, {how}", problem.message),
        }
    }
    problem
}

/// The text of an error without its places.
fn without_place(words: &str) -> &str {
    let end = words.find(" at line ").or_else(|| words.find(" at position ")).unwrap_or(words.len());
    &words[..end]
}

/// `3 column 5` as numbers.
fn numbers(text: &str) -> Option<(usize, usize)> {
    let (line, rest) = text.split_once(" column ")?;
    let digits = rest.find(|c: char| !c.is_ascii_digit()).unwrap_or(rest.len());
    Some((line.parse().ok()?, rest[..digits].parse().ok()?))
}

/// The place of the first alias on a way, or of the key above it: the way leads through an alias where it goes back in the text, since
/// anchors stand before their aliases.
fn alias_on_the_way(text: &str, route: &[usize]) -> usize {
    let mut last = 0;
    for depth in 1..=route.len() {
        let (above, here) = (&route[..depth - 1], route[depth - 1]);
        if let Some(key) = offset(text, &route[..depth], Mark::Key).filter(|key| *key >= last) {
            last = key;
        } else if here > 0
            && let Some(before) = offset(text, &[above, &[here - 1]].concat(), Mark::Value).filter(|b| *b > last)
        {
            last = before;
        }
        match offset(text, &route[..depth], Mark::Value) {
            Some(place) if place >= last => last = place,
            _ => break,
        }
    }
    last
}
