//! Columns of a scan: names, cells, orders. None depends on the order of anything in the YAML.

use spinledger_terms::{Admission, ItemKind, Kind, Path, Value, Vocabulary, admit};
use std::cmp::Ordering;
use std::collections::BTreeMap;

/// Names of columns for scanned addresses: the last word; where several end in the same word, the whole path with `_`.
pub(crate) fn names(addresses: &[Vec<String>]) -> Vec<String> {
    let short: Vec<String> = addresses.iter().map(|address| last(address)).collect();
    let mut count: BTreeMap<&str, usize> = BTreeMap::new();
    for name in &short {
        *count.entry(name).or_default() += 1;
    }
    addresses
        .iter()
        .zip(&short)
        .map(|(address, name)| if count[name.as_str()] > 1 { tidy(&address.join("_")) } else { name.clone() })
        .collect()
}

/// The last word; of a list's element, with the list's name before it.
fn last(address: &[String]) -> String {
    let number = |word: &String| word.bytes().all(|b| b.is_ascii_digit());
    let from = address.iter().rposition(|word| !number(word)).unwrap_or(0);
    tidy(&address[from..].join("_"))
}

/// Bond classes have dots in their names, columns have not.
fn tidy(name: &str) -> String {
    name.replace('.', "_")
}

/// What a column is ordered by among others: size first, temperature last, the rest by name.
pub(crate) fn rank(name: &str) -> (usize, usize, &str) {
    if name == "size" {
        return (0, 0, "");
    }
    match name.strip_prefix("size_") {
        Some("x") => (0, 1, ""),
        Some("y") => (0, 2, ""),
        Some("z") => (0, 3, ""),
        Some(number) if number.parse::<usize>().is_ok_and(|n| n > 3) => (0, number.parse().unwrap_or(4), ""),
        _ if name == "temperature" => (2, 0, ""),
        _ if name == "inverse_temperature" => (2, 1, ""),
        _ => (1, 0, name),
    }
}

/// The name of a size's part, by direction from 0: `x`, `y`, `z`, then `4` ...
pub(crate) fn part(direction: usize) -> String {
    match direction {
        0 => "x".to_owned(),
        1 => "y".to_owned(),
        2 => "z".to_owned(),
        more => (more + 1).to_string(),
    }
}

/// The order of cells: nothing, then false and true, then numbers by size, then text by bytes.
pub(crate) fn compare(a: &Value, b: &Value) -> Ordering {
    fn class(v: &Value) -> u8 {
        match v {
            Value::Null => 0,
            Value::Bool(_) => 1,
            Value::Integer(_) | Value::Number(_) => 2,
            Value::Text(_) => 3,
            Value::List(_) | Value::Map(_) => 4,
        }
    }
    match (a, b) {
        (Value::Bool(a), Value::Bool(b)) => a.cmp(b),
        (Value::Integer(a), Value::Integer(b)) => a.cmp(b),
        (Value::Text(a), Value::Text(b)) => a.as_bytes().cmp(b.as_bytes()),
        (Value::Integer(_) | Value::Number(_), Value::Integer(_) | Value::Number(_)) => {
            let of = |v: &Value| v.as_f64().map_or(0.0, |x| if x == 0.0 { 0.0 } else { x });
            of(a).total_cmp(&of(b))
        }
        _ => class(a).cmp(&class(b)),
    }
}

/// A value as a cell: what is not a scalar becomes text. A plugin item is its name, followed by those parameters that are not at their
/// defaults.
pub(crate) fn cell(value: &Value, kind: Option<&Kind>, vocabulary: &Vocabulary) -> Value {
    match value {
        Value::List(_) | Value::Map(_) => Value::Text(words(value, kind.and_then(item_kind), vocabulary)),
        scalar => scalar.clone(),
    }
}

fn words(value: &Value, of: Option<ItemKind>, vocabulary: &Vocabulary) -> String {
    match value {
        Value::Text(text) => text.clone(),
        Value::List(items) => items.iter().map(|v| words(v, of, vocabulary)).collect::<Vec<_>>().join(","),
        Value::Map(map) => match (map.get("plugin").and_then(Value::as_str), of) {
            (Some(name), Some(of)) => item_words(name, map, of, vocabulary),
            _ => value.canonical(),
        },
        other => other.canonical(),
    }
}

fn item_words(name: &str, map: &BTreeMap<String, Value>, of: ItemKind, vocabulary: &Vocabulary) -> String {
    let mut text = name.to_owned();
    let parameters = vocabulary.item(of, name).map_or(&[][..], |(_, item)| item.parameters.as_slice());
    for (key, value) in map.iter().filter(|(key, _)| *key != "plugin") {
        let usual = match parameters.iter().find(|f| f.name == *key) {
            Some(field) => {
                let (mut problems, mut references) = (Vec::new(), Vec::new());
                let mut admission = Admission { vocabulary, problems: &mut problems, references: &mut references };
                field.default.as_ref().and_then(|d| admit(&field.kind, d, &Path::top(), &mut admission))
            }
            None if key == "times" => Some(Value::Integer(1)),
            None => None,
        };
        if usual.as_ref() != Some(value) {
            text.push_str(&format!(" {key}={}", words(value, None, vocabulary)));
        }
    }
    text
}

fn item_kind(kind: &Kind) -> Option<ItemKind> {
    match kind {
        Kind::Plugin { of } => Some(*of),
        Kind::List { of, .. } | Kind::Map { of } => item_kind(of),
        Kind::Either { of } => of.iter().find_map(item_kind),
        _ => None,
    }
}

/// Makes the cells of one column of one type: all numbers doubles where any is, all text where any is.
pub(crate) fn unify(cells: &mut [Value]) {
    let any = |test: fn(&Value) -> bool, cells: &[Value]| cells.iter().any(test);
    let text = any(|v| matches!(v, Value::Text(_)), cells);
    let truth = any(|v| matches!(v, Value::Bool(_)), cells);
    let number = any(|v| matches!(v, Value::Integer(_) | Value::Number(_)), cells);
    let double = any(|v| matches!(v, Value::Number(_)), cells);
    for cell in cells {
        let new = match &*cell {
            Value::Null | Value::Text(_) => continue,
            other if text || (truth && number) => Value::Text(other.canonical()),
            Value::Integer(i) if double => Value::Number(*i as f64),
            _ => continue,
        };
        *cell = new;
    }
}

/// A size as text and by direction: `[12, 8]` is `12x8`. A single number stands for every direction.
///
/// `dimension` is the number of directions where it is known; without it a single number stays alone.
pub fn size_parts(size: &Value, dimension: Option<usize>) -> Option<(String, Vec<i64>)> {
    let parts: Vec<i64> = match size {
        Value::List(list) => list.iter().map(Value::as_i64).collect::<Option<_>>()?,
        single => vec![single.as_i64()?; dimension.unwrap_or(1)],
    };
    let text = parts.iter().map(i64::to_string).collect::<Vec<_>>().join("x");
    Some((text, parts))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn address(path: &str) -> Vec<String> {
        path.split('.').map(str::to_owned).collect()
    }

    #[test]
    fn last_words_unless_two_are_alike() {
        let of = |paths: &[&str]| names(&paths.iter().map(|p| address(p)).collect::<Vec<_>>());
        assert_eq!(of(&["lattice.size", "temperature"]), ["size", "temperature"]);
        assert_eq!(of(&["lattice.size", "model.size", "x"]), ["lattice_size", "model_size", "x"]);
        assert_eq!(of(&["lattice.size.0", "update.1.clusters"]), ["size_0", "clusters"]);
        assert_eq!(names(&[vec!["model".into(), "coupling".into(), "first.x".into()]]), ["first_x"]);
    }

    #[test]
    fn size_comes_first_and_temperature_last() {
        let mut names =
            ["temperature", "field", "size_4", "size_x", "size", "size_y", "anisotropy", "size_z", "size_10"];
        names.sort_by_key(|name| rank(name));
        let sorted = ["size", "size_x", "size_y", "size_z", "size_4", "size_10", "anisotropy", "field", "temperature"];
        assert_eq!(names, sorted);
    }

    #[test]
    fn cells_have_one_type_and_an_order() {
        let mut cells = [Value::Integer(2), Value::Null, Value::Number(1.5)];
        unify(&mut cells);
        assert_eq!(cells, [Value::Number(2.0), Value::Null, Value::Number(1.5)]);
        cells.sort_by(compare);
        assert_eq!(cells, [Value::Null, Value::Number(1.5), Value::Number(2.0)]);
        let mut cells = [Value::Integer(2), Value::text("auto"), Value::Bool(true)];
        unify(&mut cells);
        assert_eq!(cells, [Value::text("2"), Value::text("auto"), Value::text("true")]);
        assert_eq!(compare(&Value::Number(-0.0), &Value::Integer(0)), Ordering::Equal);
        assert_eq!(compare(&Value::text("B"), &Value::text("a")), Ordering::Less);
    }

    #[test]
    fn sizes_by_direction() {
        let list = Value::List(vec![Value::Integer(12), Value::Integer(8)]);
        assert_eq!(size_parts(&list, Some(2)), Some(("12x8".into(), vec![12, 8])));
        assert_eq!(size_parts(&Value::Integer(6), Some(3)), Some(("6x6x6".into(), vec![6, 6, 6])));
        assert_eq!(size_parts(&Value::Integer(6), None), Some(("6".into(), vec![6])));
        assert_eq!(size_parts(&Value::text("6"), None), None);
    }
}
