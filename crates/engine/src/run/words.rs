//! Parcels in words, for people.

use spinledger_plan::sample::{Group, Point};
use spinledger_terms::Value;

fn words_of(value: &Value) -> String {
    value.as_str().map_or_else(|| value.canonical(), str::to_owned)
}

/// A point: `size 32, temperature 2.26`.
pub(super) fn point<'a>(columns: impl IntoIterator<Item = (&'a String, &'a Value)>) -> String {
    let words: Vec<String> = columns
        .into_iter()
        .filter(|(name, _)| *name != "sites")
        .map(|(name, value)| format!("{name} {}", words_of(value)))
        .collect();
    words.join(", ")
}

/// A group of chains of a point: `size 32, temperature 2.26, random chain 0`.
pub(super) fn group(point: &Point, group: &Group) -> String {
    let mut text = self::point(point.columns.iter().map(|(name, value)| (name, value)));
    if !text.is_empty() {
        text.push_str(", ");
    }
    let first = group.number * point.dynamics.lanes;
    text.push_str(&group.start);
    if point.dynamics.lanes == 1 {
        text.push_str(&format!(" chain {first}"));
    } else {
        text.push_str(&format!(" chains {first}-{}", first + group.asked - 1));
    }
    text
}
