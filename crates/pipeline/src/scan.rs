//! What `scan` says: blocks of axes over which a step is repeated.

use crate::address::{self, resolve};
use crate::step::Reader;
use spinledger_terms::{Admission, Field, Kind, Path, Problem, Value, admit, admit_fields, nearest};
use std::collections::BTreeMap;
use std::sync::Arc;

/// One grid: every combination of the values of its axes.
#[derive(Clone, Debug)]
pub struct Block {
    /// The axes, in byte order of their paths. A key with a single value is an axis of one.
    pub axes: Vec<Axis>,
    /// Canonical parameters, complete with defaults; at the axes' places stands one of their values.
    pub(crate) base: Arc<Value>,
}

/// One scanned parameter.
#[derive(Clone, Debug)]
pub struct Axis {
    /// The path, dotted.
    pub path: String,
    /// Its words as they stand in values: names of bond classes contain dots themselves.
    pub address: Vec<String>,
    /// What the parameter may be.
    pub kind: Kind,
    /// Where its values come from.
    pub values: AxisValues,
    /// Where it stands.
    pub place: Path,
    /// Whether each value stands in the text as an element of a list.
    pub(crate) each: bool,
}

/// The values of an axis.
#[derive(Clone, Debug, PartialEq)]
pub enum AxisValues {
    /// Canonical values, in the order given.
    Listed(Vec<Value>),
    /// Taken from an earlier step's table.
    FromStep(FromStep),
}

/// Values to be taken from the table of an earlier step: those of `column` in the rows that match `filter`, and that match `beside` in
/// those of its columns that the table has.
#[derive(Clone, Debug, PartialEq)]
pub struct FromStep {
    /// The step.
    pub step: String,
    /// The column.
    pub column: String,
    /// Which of its tables; none: the main one.
    pub table: Option<String>,
    /// Columns and values that rows must have (`where`).
    pub filter: BTreeMap<String, Value>,
    /// Columns of the point beside this axis: a table that has, say, temperatures for each size gives each size its own. Filled in
    /// when points are expanded.
    pub beside: BTreeMap<String, Value>,
}

impl Axis {
    /// Where its value number `index` stands.
    pub fn value_place(&self, index: usize) -> Path {
        if self.each { self.place.index(index) } else { self.place.clone() }
    }
}

/// Reads `scan`.
pub(crate) fn read(
    reader: &Reader<'_>,
    raw: &Value,
    problems: &mut Vec<Problem>,
    references: &mut Vec<(Path, String)>,
) -> Vec<Block> {
    let path = reader.path.key("scan");
    let expected = "a mapping from parameters to their values, or a list of such blocks";
    let blocks: Vec<(Path, &Value)> = match raw {
        Value::Map(_) => vec![(path, raw)],
        Value::List(list) if !list.is_empty() => list.iter().enumerate().map(|(i, b)| (path.index(i), b)).collect(),
        other => {
            let message = match other {
                Value::List(_) => "a scan without blocks".to_owned(),
                other => format!("{} stands where a scan is expected", other.what()),
            };
            problems.push(Problem::at_value(&path, message).expected(expected));
            // The rest of the step is checked all the same.
            base(reader, &[], true, problems, references);
            return Vec::new();
        }
    };
    let mut out = Vec::new();
    for (path, raw) in blocks {
        match raw {
            Value::Map(map) if !map.is_empty() => {
                out.extend(block(reader, &path, map, problems, references));
            }
            Value::Map(_) => problems.push(Problem::at_value(&path, "a scan over nothing").expected(expected)),
            other => {
                let problem = Problem::at_value(&path, format!("{} stands where a block is expected", other.what()));
                problems.push(problem.expected("a mapping from parameters to their values"));
            }
        }
    }
    out
}

/// A value for the base: as written, so that it goes through the same admission as the rest.
struct Raw(Value);

fn block(
    reader: &Reader<'_>,
    path: &Path,
    map: &BTreeMap<String, Value>,
    problems: &mut Vec<Problem>,
    references: &mut Vec<(Path, String)>,
) -> Option<Block> {
    let before = problems.len();
    let mut axes: Vec<(Axis, Raw)> = Vec::new();
    for (key, raw) in map {
        let place = path.key(key);
        let (address, kind) = match resolve(&reader.spec.fields, reader.body, reader.owner, key, reader.vocabulary) {
            Ok(found) => found,
            Err(lost) => {
                if let Some(message) = lost.message {
                    let mut problem = Problem::at_key(&place, message).nearest(lost.nearest.as_deref());
                    problem.expected = lost.expected;
                    problems.push(problem);
                }
                continue;
            }
        };
        overridden(reader, &address, &kind, problems);
        axes.extend(axis(reader, key, address, kind, raw, place, problems, references));
    }
    overlaps(&axes, problems);
    let base = base(reader, &axes, axes.len() < map.len(), problems, references);
    let mut axes: Vec<Axis> = axes.into_iter().map(|(axis, _)| axis).collect();
    axes.sort_by(|a, b| a.path.cmp(&b.path));
    let base = base?;
    (problems.len() == before).then_some(Block { axes, base: Arc::new(base) })
}

/// The body with a value of each axis put in, admitted as a whole. `lenient` where an axis could not be read: what it would have set is
/// not missed a second time.
fn base(
    reader: &Reader<'_>,
    axes: &[(Axis, Raw)],
    lenient: bool,
    problems: &mut Vec<Problem>,
    references: &mut Vec<(Path, String)>,
) -> Option<Value> {
    let mut body = reader.body.clone();
    for (axis, _) in axes {
        let field = reader.spec.fields.iter().find(|f| f.name == axis.address[0]);
        if let Some(default) = field.and_then(|f| f.default.as_ref())
            && axis.address.len() > 1
        {
            body.entry(axis.address[0].clone()).or_insert_with(|| default.clone());
        }
    }
    let mut body = Value::Map(body);
    for (axis, raw) in axes {
        address::set(&mut body, &axis.address, raw.0.clone());
    }
    let Value::Map(body) = body else { return None };
    let (mut found, mut named) = (Vec::new(), Vec::new());
    let base = reader.admit(&body, &mut found, &mut named);
    // What is wrong with the values put in has been said where they stand.
    let elsewhere = |path: &Path| !axes.iter().any(|(axis, _)| below(path, reader.path, &axis.address));
    let told = |p: &Problem| !(lenient && p.message.contains(" needs `"));
    problems.extend(found.into_iter().filter(|p| elsewhere(&p.path) && told(p)));
    references.extend(named.into_iter().filter(|(path, _)| elsewhere(path)));
    base
}

/// Whether a path leads to an address of the step at `top`, or deeper.
fn below(path: &Path, top: &Path, address: &[String]) -> bool {
    use spinledger_terms::Segment::{At, Index, Key};
    let Some(rest) = path.0.strip_prefix(top.0.as_slice()) else { return false };
    rest.len() >= address.len()
        && rest.iter().zip(address).all(|(segment, word)| match segment {
            Key(key) => key == word,
            Index(index) => index.to_string() == *word,
            At { .. } => false,
        })
}

/// A value of the body that the scan replaces must be a good one, too.
fn overridden(reader: &Reader<'_>, address: &[String], kind: &Kind, problems: &mut Vec<Problem>) {
    let Some((first, rest)) = address.split_first() else { return };
    let Some(value) = reader.body.get(first).and_then(|value| address::get(value, rest)) else { return };
    let place = address.iter().fold(reader.path.clone(), |path, word| match word.parse() {
        Ok(index) => path.index(index),
        Err(_) => path.key(word),
    });
    let mut admission = Admission { vocabulary: reader.vocabulary, problems, references: &mut Vec::new() };
    admit(kind, value, &place, &mut admission);
}

/// In one block no path may lead into another: their values would be set over each other.
fn overlaps(axes: &[(Axis, Raw)], problems: &mut Vec<Problem>) {
    for (i, (a, _)) in axes.iter().enumerate() {
        for (b, _) in &axes[i + 1..] {
            let (short, long) = if a.address.len() <= b.address.len() { (a, b) } else { (b, a) };
            if long.address.starts_with(&short.address) {
                let message = format!("`{}` is part of `{}`, which this block sets as a whole", long.path, short.path);
                let problem = Problem::at_key(&long.place, message).other(short.place.clone(), "set here");
                problems.push(problem.expected("one of the two, or blocks of their own"));
            }
        }
    }
}

#[expect(clippy::too_many_arguments, reason = "one call, from the loop over a block's keys")]
fn axis(
    reader: &Reader<'_>,
    key: &str,
    address: Vec<String>,
    kind: Kind,
    raw: &Value,
    place: Path,
    problems: &mut Vec<Problem>,
    references: &mut Vec<(Path, String)>,
) -> Option<(Axis, Raw)> {
    let mut admission = Admission { vocabulary: reader.vocabulary, problems, references };
    let path = address.join(".");
    let build = |kind, values, each, first| {
        Some((Axis { path, address, kind, values, place: place.clone(), each }, Raw(first)))
    };
    match raw {
        Value::Null => {
            let problem = Problem::at_value(&place, format!("`{key}` has no values")).expected(values_of(&kind));
            admission.problems.push(problem);
            None
        }
        Value::Map(map) if is_range(map) && takes(&kind, &is_numeric) => {
            let values = range(key, &kind, raw, &place, &mut admission)?;
            let first = values[0].clone();
            build(kind, AxisValues::Listed(values), false, first)
        }
        Value::Map(map) if map.contains_key("step") && from_table(&kind) => {
            let last = address_word(key);
            let from = from_step(map, last, &place, &mut admission)?;
            let first = stand_in(&kind)?;
            build(kind, AxisValues::FromStep(from), false, first)
        }
        Value::List(list) if list.is_empty() => {
            let problem = Problem::at_value(&place, format!("`{key}` has no values")).expected(values_of(&kind));
            admission.problems.push(problem);
            None
        }
        Value::List(list) if !whole_list(&kind, list) => {
            let mut values = Vec::with_capacity(list.len());
            for (i, item) in list.iter().enumerate() {
                values.extend(admit(&kind, item, &place.index(i), &mut admission));
            }
            // Also where none is good: the base must be complete, or its lack would be a second complaint.
            build(kind, AxisValues::Listed(values), true, list[0].clone())
        }
        single => {
            let values = admit(&kind, single, &place, &mut admission).into_iter().collect();
            build(kind, AxisValues::Listed(values), false, single.clone())
        }
    }
}

/// The last word of a path as typed.
fn address_word(key: &str) -> &str {
    key.rsplit('.').next().unwrap_or(key)
}

fn values_of(kind: &Kind) -> String {
    let range = if takes(kind, &is_numeric) { " or { from, to, count }," } else { "" };
    format!("a list of values,{range} each {}", kind.what())
}

/// Whether a list is one value: of a parameter that is nothing but a list, unless its elements are lists themselves.
fn whole_list(kind: &Kind, list: &[Value]) -> bool {
    matches!(kind, Kind::List { .. } | Kind::Numbers {}) && !matches!(list.first(), Some(Value::List(_)))
}

fn is_range(map: &BTreeMap<String, Value>) -> bool {
    ["from", "to", "count"].iter().any(|key| map.contains_key(*key))
}

fn takes(kind: &Kind, test: &dyn Fn(&Kind) -> bool) -> bool {
    match kind {
        Kind::Either { of } => of.iter().any(|kind| takes(kind, test)),
        other => test(other),
    }
}

fn is_numeric(kind: &Kind) -> bool {
    matches!(kind, Kind::Number { .. } | Kind::Integer { .. })
}

/// Whether `{ step: ... }` means values from a table: not where the parameter itself may be a mapping with `step`.
fn from_table(kind: &Kind) -> bool {
    let own = |kind: &Kind| matches!(kind, Kind::Tree { fields } if fields.iter().any(|f| f.name == "step"));
    stand_in(kind).is_some() && !takes(kind, &own)
}

/// Some value of a kind, to stand in the base until a table gives the values.
fn stand_in(kind: &Kind) -> Option<Value> {
    match kind {
        Kind::Number { min, max, above, below } => {
            let low = min.or(above.map(|a| a + a.abs().max(1.0) * 1e-3));
            let high = max.or(below.map(|b| b - b.abs().max(1.0) * 1e-3));
            Some(Value::Number(match (low, high) {
                (Some(low), Some(high)) => low + (high - low) / 2.0,
                (Some(x), None) | (None, Some(x)) => x,
                (None, None) => 1.0,
            }))
        }
        Kind::Integer { min, max } => Some(Value::Integer(min.or(*max).unwrap_or(1))),
        Kind::Word { of } => of.first().map(Value::text),
        Kind::Either { of } => of.iter().find_map(stand_in),
        _ => None,
    }
}

fn range(key: &str, kind: &Kind, raw: &Value, place: &Path, admission: &mut Admission<'_>) -> Option<Vec<Value>> {
    let numbers = admit(&Kind::Numbers {}, raw, place, admission)?;
    let whole = takes(kind, &|kind| matches!(kind, Kind::Integer { .. }));
    let mut values = Vec::new();
    for number in numbers.as_list().unwrap_or(&[]) {
        let x = number.as_f64().unwrap_or(f64::NAN);
        // Beyond 2^53 whole numbers and doubles part.
        let value = match whole && x.fract() == 0.0 && x.abs() <= 9_007_199_254_740_992.0 {
            true => Value::Integer(x as i64),
            false => number.clone(),
        };
        let mut found = Vec::new();
        let mut one = Admission { vocabulary: admission.vocabulary, problems: &mut found, references: &mut Vec::new() };
        match admit(kind, &value, place, &mut one) {
            Some(value) => values.push(value),
            None => {
                let text = value.canonical();
                let problem = Problem::at_value(place, format!("the range gives `{key}` the value {text}"));
                admission.problems.push(problem.expected(kind.what()));
                return None;
            }
        }
    }
    (!values.is_empty()).then_some(values)
}

fn from_step(
    map: &BTreeMap<String, Value>,
    column: &str,
    place: &Path,
    admission: &mut Admission<'_>,
) -> Option<FromStep> {
    let scalar = Kind::Either {
        of: vec![Kind::Integer { min: None, max: None }, Kind::NUMBER, Kind::Text {}, Kind::Boolean {}],
    };
    let fields = [
        Field::new("step", Kind::Step {}, "the step").required(),
        Field::new("column", Kind::Text {}, "the column").default(Value::text(column)),
        Field::new("table", Kind::Text {}, "a further table of the step"),
        Field::new("where", Kind::Map { of: Box::new(scalar) }, "which rows").default(Value::Map(BTreeMap::new())),
    ];
    let mut out = admit_fields(&fields, map, place, "values from a step", admission)?;
    let mut text = |key: &str| match out.remove(key) {
        Some(Value::Text(text)) => Some(text),
        _ => None,
    };
    let (step, column, table) = (text("step")?, text("column")?, text("table"));
    let filter = match out.remove("where") {
        Some(Value::Map(filter)) => filter,
        _ => BTreeMap::new(),
    };
    Some(FromStep { step, column, table, filter, beside: BTreeMap::new() })
}

/// The axis that a word names: by its whole path, or by its last word.
pub(crate) fn named<'a>(axes: &'a [Axis], word: &str) -> Option<(usize, &'a Axis)> {
    let whole = axes.iter().enumerate().find(|(_, axis)| axis.path == word);
    whole.or_else(|| axes.iter().enumerate().find(|(_, axis)| axis.address.last().is_some_and(|last| last == word)))
}

/// The scanned path nearest to a word.
pub(crate) fn nearest_axis<'a>(blocks: &'a [Block], word: &str) -> Option<&'a str> {
    nearest(word, blocks.iter().flat_map(|b| &b.axes).map(|axis| axis.path.as_str()))
}
