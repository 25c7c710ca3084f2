//! From a raw value to a canonical one, collecting every mistake.

use crate::{Field, Kind, Path, Problem, Range, Value, Vocabulary, nearest};
use std::collections::BTreeMap;

/// What admission needs and where it reports to.
pub struct Admission<'a> {
    /// The items that exist.
    pub vocabulary: &'a Vocabulary,
    /// Problems found so far.
    pub problems: &'a mut Vec<Problem>,
    /// Names of steps found so far, with their places.
    pub references: &'a mut Vec<(Path, String)>,
}

/// The canonical form of `raw` as a `kind`: whole numbers become doubles where a number is declared, ranges become lists, plugin
/// items become complete mappings. None where it is not one; the reasons are in `admission.problems`.
pub fn admit(kind: &Kind, raw: &Value, path: &Path, admission: &mut Admission<'_>) -> Option<Value> {
    match (kind, raw) {
        (Kind::Any {}, raw) => Some(raw.clone()),
        (Kind::Number { .. }, Value::Integer(_) | Value::Number(_)) => number(kind, raw, path, admission),
        (Kind::Integer { min, max }, Value::Integer(i)) => {
            if min.is_some_and(|m| *i < m) || max.is_some_and(|m| *i > m) {
                return refuse(kind, format!("{i} is out of range"), path, admission);
            }
            Some(raw.clone())
        }
        // People write 1e6 where a whole number stands: a whole double that is exact is taken as one.
        (Kind::Integer { .. }, Value::Number(x)) if x.fract() == 0.0 && x.abs() <= 9_007_199_254_740_992.0 => {
            admit(kind, &Value::Integer(*x as i64), path, admission)
        }
        (Kind::Boolean {}, Value::Bool(_)) | (Kind::Text {}, Value::Text(_)) => Some(raw.clone()),
        (Kind::Step {}, Value::Text(name)) => {
            admission.references.push((path.clone(), name.clone()));
            Some(raw.clone())
        }
        (Kind::Word { of }, Value::Text(word)) => {
            if of.contains(word) {
                return Some(raw.clone());
            }
            let near = nearest(word, of.iter().map(String::as_str));
            let problem =
                Problem::at_value(path, format!("`{word}` is not known here")).expected(kind.what()).nearest(near);
            admission.problems.push(problem);
            None
        }
        (Kind::List { of, min, max }, Value::List(list)) => {
            if list.len() < *min || max.is_some_and(|m| list.len() > m) {
                let how_many = match max {
                    Some(max) if max == min => format!("{min}"),
                    Some(max) => format!("{min} to {max}"),
                    None => format!("at least {min}"),
                };
                let message = format!("a list of {} where {how_many} must stand", list.len());
                return refuse(kind, message, path, admission);
            }
            all(list.iter().enumerate().map(|(i, item)| admit(of, item, &path.index(i), admission))).map(Value::List)
        }
        (Kind::Map { of }, Value::Map(map)) => {
            let items = map.iter().map(|(k, v)| Some((k.clone(), admit(of, v, &path.key(k), admission)?)));
            all(items).map(|pairs: Vec<_>| Value::Map(pairs.into_iter().collect()))
        }
        (Kind::Tree { fields }, Value::Map(map)) => {
            admit_fields(fields, map, path, "this mapping", admission).map(Value::Map)
        }
        (Kind::Either { of }, raw) => either(kind, of, raw, path, admission),
        (Kind::Plugin { of }, Value::Text(name)) => plugin(*of, name, &BTreeMap::new(), path, path, admission),
        (Kind::Plugin { of }, Value::Map(map)) => match map.get("plugin") {
            Some(Value::Text(name)) => plugin(*of, name, map, path, &path.key("plugin"), admission),
            Some(other) => {
                let message = format!("`plugin` is {}, not a name", other.what());
                refuse(kind, message, &path.key("plugin"), admission)
            }
            None => refuse(kind, format!("{} without `plugin`", of.article()), path, admission),
        },
        (Kind::Numbers {}, Value::List(list)) if !list.is_empty() => {
            all(list.iter().enumerate().map(|(i, x)| number(&Kind::NUMBER, x, &path.index(i), admission)))
                .map(Value::List)
        }
        (Kind::Numbers {}, Value::Map(map)) => range(map, path, admission),
        _ => refuse(kind, format!("{} stands where something else is expected", raw.what()), path, admission),
    }
}

/// Admits the keys of a mapping: every key must be known, required ones present; defaults are filled in. `owner` is named in
/// messages ("a sample step").
pub fn admit_fields(
    fields: &[Field],
    raw: &BTreeMap<String, Value>,
    path: &Path,
    owner: &str,
    admission: &mut Admission<'_>,
) -> Option<BTreeMap<String, Value>> {
    let before = admission.problems.len();
    let names = || fields.iter().map(|f| f.name.as_str());
    let mut meant = Vec::new();
    for key in raw.keys().filter(|key| names().all(|n| n != key.as_str())) {
        let mut sorted: Vec<&str> = names().collect();
        sorted.sort_unstable();
        let expected = if sorted.is_empty() { "no keys".to_owned() } else { format!("one of: {}", sorted.join(", ")) };
        let problem = Problem::at_key(&path.key(key), format!("`{key}` is not a key of {owner}"));
        let near = nearest(key, names());
        meant.extend(near);
        admission.problems.push(problem.expected(expected).nearest(near));
    }
    let mut out = BTreeMap::new();
    for field in fields {
        match raw.get(&field.name) {
            Some(value) => {
                if let Some(value) = admit(&field.kind, value, &path.key(&field.name), admission) {
                    out.insert(field.name.clone(), value);
                }
            }
            // A misspelt key has been named already, and is not missing as well.
            None if field.required && meant.contains(&field.name.as_str()) => {}
            None if field.required => {
                let problem = Problem::at_value(path, format!("{owner} needs `{}`", field.name));
                admission.problems.push(problem.expected(format!("{}: {}", field.name, field.kind.what())));
            }
            None => {
                if let Some(default) = &field.default {
                    // Defaults go through the same admission, so that a default and the same value written are one.
                    if let Some(value) = admit(&field.kind, default, &path.key(&field.name), admission) {
                        out.insert(field.name.clone(), value);
                    }
                }
            }
        }
    }
    (admission.problems.len() == before).then_some(out)
}

/// All of them, or none; runs through to the end either way, so that every problem is found.
fn all<T>(items: impl Iterator<Item = Option<T>>) -> Option<Vec<T>> {
    let mut good = true;
    let mut out = Vec::new();
    for item in items {
        match item {
            Some(item) => out.push(item),
            None => good = false,
        }
    }
    good.then_some(out)
}

fn refuse(kind: &Kind, message: String, path: &Path, admission: &mut Admission<'_>) -> Option<Value> {
    admission.problems.push(Problem::at_value(path, message).expected(kind.what()));
    None
}

fn number(kind: &Kind, raw: &Value, path: &Path, admission: &mut Admission<'_>) -> Option<Value> {
    let Some(x) = raw.as_f64() else {
        return refuse(kind, format!("{} stands where a number is expected", raw.what()), path, admission);
    };
    let Kind::Number { min, max, above, below } = kind else { return Some(Value::Number(x)) };
    let inside = min.is_none_or(|m| x >= m)
        && max.is_none_or(|m| x <= m)
        && above.is_none_or(|m| x > m)
        && below.is_none_or(|m| x < m);
    if !x.is_finite() {
        refuse(kind, format!("{x} is not a finite number"), path, admission)
    } else if !inside {
        refuse(kind, format!("{x} is out of range"), path, admission)
    } else {
        Some(Value::Number(if x == 0.0 { 0.0 } else { x }))
    }
}

fn either(whole: &Kind, of: &[Kind], raw: &Value, path: &Path, admission: &mut Admission<'_>) -> Option<Value> {
    let mut best: Option<Vec<Problem>> = None;
    for kind in of {
        let (mut problems, mut references) = (Vec::new(), Vec::new());
        let mut attempt =
            Admission { vocabulary: admission.vocabulary, problems: &mut problems, references: &mut references };
        if let Some(value) = admit(kind, raw, path, &mut attempt) {
            admission.references.append(&mut references);
            return Some(value);
        }
        // The alternative of the same shape knows best what is wrong; of several, the one with the deepest complaint.
        let depth = |problems: &[Problem]| problems.iter().map(|p| p.path.0.len()).max().unwrap_or(0);
        if same_shape(kind, raw) && best.as_ref().is_none_or(|b| depth(&problems) > depth(b)) {
            best = Some(problems);
        }
    }
    match best {
        Some(problems) => {
            admission.problems.extend(problems);
            None
        }
        None => refuse(whole, format!("{} stands where something else is expected", raw.what()), path, admission),
    }
}

fn same_shape(kind: &Kind, raw: &Value) -> bool {
    match raw {
        Value::Integer(_) | Value::Number(_) => matches!(kind, Kind::Number { .. } | Kind::Integer { .. }),
        Value::Text(_) => matches!(kind, Kind::Text {} | Kind::Word { .. } | Kind::Step {} | Kind::Plugin { .. }),
        Value::List(_) => matches!(kind, Kind::List { .. } | Kind::Numbers {}),
        Value::Map(_) => matches!(kind, Kind::Map { .. } | Kind::Tree { .. } | Kind::Numbers {} | Kind::Plugin { .. }),
        Value::Bool(_) => matches!(kind, Kind::Boolean {}),
        Value::Null => false,
    }
}

fn plugin(
    kind: crate::ItemKind,
    name: &str,
    map: &BTreeMap<String, Value>,
    path: &Path,
    name_path: &Path,
    admission: &mut Admission<'_>,
) -> Option<Value> {
    let vocabulary = admission.vocabulary;
    let Some((_, item)) = vocabulary.item(kind, name) else {
        let mut known: Vec<&str> = vocabulary.names(kind).collect();
        known.sort_unstable();
        known.dedup();
        let expected = if known.is_empty() {
            format!("{}, but no plugin has any", kind.article())
        } else {
            format!("one of: {}", known.join(", "))
        };
        let near = nearest(name, known.iter().copied());
        let problem =
            Problem::at_value(name_path, format!("there is no {kind} `{name}`")).expected(expected).nearest(near);
        admission.problems.push(problem);
        return None;
    };
    let given: BTreeMap<String, Value> =
        map.iter().filter(|(k, _)| *k != "plugin").map(|(k, v)| (k.clone(), v.clone())).collect();
    let owner = format!("the {kind} `{name}`");
    let mut fields = item.parameters.clone();
    if kind == crate::ItemKind::Update {
        // Any rule may be repeated within a sweep; the engine does the repeating.
        fields.push(Field::new("times", Kind::COUNT, "how often within a sweep").default(Value::Integer(1)));
    }
    let mut out = admit_fields(&fields, &given, path, &owner, admission)?;
    out.insert("plugin".to_owned(), Value::text(name));
    Some(Value::Map(out))
}

fn range(map: &BTreeMap<String, Value>, path: &Path, admission: &mut Admission<'_>) -> Option<Value> {
    let fields = [
        Field::new("from", Kind::NUMBER, "first value").required(),
        Field::new("to", Kind::NUMBER, "last value").required(),
        Field::new("count", Kind::Integer { min: Some(1), max: Some(Range::MOST) }, "how many").required(),
    ];
    let map = admit_fields(&fields, map, path, "a range", admission)?;
    let of = |name: &str| map.get(name).and_then(Value::as_f64).unwrap_or(0.0);
    let count = map.get("count").and_then(Value::as_i64).unwrap_or(0);
    match (Range { from: of("from"), to: of("to"), count }).values() {
        Ok(values) => Some(Value::List(values.into_iter().map(Value::Number).collect())),
        Err(error) => refuse(&Kind::Numbers {}, error.to_string(), path, admission),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::{ContentHash, Identity, Item, ItemKind};

    fn vocabulary() -> Vocabulary {
        let coupling = Kind::Either { of: vec![Kind::NUMBER, Kind::Map { of: Box::new(Kind::NUMBER) }] };
        let item = Item {
            kind: ItemKind::Model,
            name: "ising".into(),
            revision: 1,
            about: String::new(),
            formula: String::new(),
            source: String::new(),
            parameters: vec![
                Field::new("coupling", coupling, "").default(Value::Integer(1)),
                Field::new("field", Kind::NUMBER, "").default(Value::Integer(0)),
            ],
            lattice: None,
            model: None,
            update: None,
            observable: None,
        };
        let identity = Identity {
            library: "models".into(),
            version: "0".into(),
            item: "ising".into(),
            revision: 1,
            standard: true,
            file: String::new(),
            file_hash: ContentHash([0; 32]),
        };
        Vocabulary { steps: Vec::new(), items: vec![(identity, item)] }
    }

    fn run(kind: &Kind, raw: Value) -> (Option<Value>, Vec<Problem>) {
        let mut problems = Vec::new();
        let vocabulary = vocabulary();
        let mut references = Vec::new();
        let mut admission = Admission { vocabulary: &vocabulary, problems: &mut problems, references: &mut references };
        let value = admit(kind, &raw, &Path::top(), &mut admission);
        (value, problems)
    }

    #[test]
    fn numbers_are_canonical_by_declared_type() {
        assert_eq!(run(&Kind::NUMBER, Value::Integer(1)).0, Some(Value::Number(1.0)));
        assert_eq!(run(&Kind::COUNT, Value::Number(1e6)).0, Some(Value::Integer(1_000_000)));
        assert_eq!(run(&Kind::COUNT, Value::Number(1.5)).1.len(), 1);
        assert_eq!(run(&Kind::POSITIVE, Value::Integer(0)).1[0].expected.as_deref(), Some("a number above 0"));
        assert_eq!(run(&Kind::NUMBER, Value::Number(f64::NAN)).1.len(), 1);
        assert_eq!(run(&Kind::NUMBER, Value::Number(-0.0)).0.unwrap().canonical(), "0.0");
    }

    /// A plugin by name and the same plugin with its defaults written out are one value, hence one key.
    #[test]
    fn plugin_names_and_mappings_meet() {
        let kind = Kind::Plugin { of: ItemKind::Model };
        let by_name = run(&kind, Value::text("ising")).0.unwrap();
        let written = Value::map([("plugin", Value::text("ising")), ("coupling", Value::Number(1.0))]);
        assert_eq!(Some(&by_name), run(&kind, written).0.as_ref());
        assert_eq!(by_name.canonical(), r#"{"coupling":1.0,"field":0.0,"plugin":"ising"}"#);
    }

    #[test]
    fn every_problem_is_found() {
        let kind = Kind::Plugin { of: ItemKind::Model };
        let wrong = Value::map([
            ("plugin", Value::text("ising")),
            ("copling", Value::Integer(1)),
            ("field", Value::text("up")),
            ("coupling", Value::map([("first", Value::text("x"))])),
        ]);
        let (value, problems) = run(&kind, wrong);
        assert_eq!(value, None);
        let places: Vec<String> = problems.iter().map(|p| p.path.to_string()).collect();
        assert_eq!(places, ["copling", "coupling.first", "field"]);
        assert_eq!(problems[0].nearest.as_deref(), Some("coupling"));
        assert_eq!(run(&kind, Value::text("icing")).1[0].nearest.as_deref(), Some("ising"));
    }
}
