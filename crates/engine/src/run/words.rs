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

/// A group of chains of a point: `size 32, temperature 2.26, random chain 0`; along a sequence without what is different from position to position.
pub(super) fn parcel<'a>(mut groups: impl Iterator<Item = (&'a Point, &'a Group)>, followed: &[String]) -> String {
    let Some((point, group)) = groups.next() else { return String::new() };
    let differs = |name: &String| !followed.is_empty() && (name == "position" || followed.contains(name));
    let columns = point.columns.iter().filter(|(name, _)| !differs(name));
    let mut text = self::point(columns.map(|(name, value)| (name, value)));
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
