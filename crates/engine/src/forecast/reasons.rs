//! Why something is due, in words: what differs from the nearest on record.

use super::nearest::{Leaves, Names};
use spinledger_terms::Value;
use std::collections::BTreeMap;

/// Why parcels are due. Equal reasons are one; a parcel with several has a part in each.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, serde::Serialize)]
pub struct Reason {
    /// What differs, by its name in the pipeline: `seed`, `model.coupling`, `new point`, `input "of"` ...
    pub what: String,
    /// What is on record; empty where that says nothing.
    pub before: String,
    /// What is asked for.
    pub now: String,
    /// Whether chains go on from where they stand.
    pub continues: bool,
    /// How many parcels.
    pub parcels: u64,
}

impl Reason {
    pub(super) fn new(what: impl Into<String>, before: impl Into<String>, now: impl Into<String>) -> Self {
        Reason { what: what.into(), before: before.into(), now: now.into(), continues: false, parcels: 1 }
    }
}

/// Counts equal reasons, in the order in which they came first.
pub(super) fn gather(reasons: impl IntoIterator<Item = Reason>) -> Vec<Reason> {
    let mut places: BTreeMap<Reason, usize> = BTreeMap::new();
    let mut out: Vec<Reason> = Vec::new();
    for reason in reasons {
        let place = *places.entry(reason.clone()).or_insert(out.len());
        match out.get_mut(place) {
            Some(known) => known.parcels += reason.parcels,
            None => out.push(reason),
        }
    }
    out
}

/// What a step's wording needs.
pub(super) struct Words<'a> {
    /// Parameters that are scanned, by their path in the pipeline.
    pub(super) scanned: &'a [String],
    /// The point, in words: scan columns.
    pub(super) point: String,
    /// k_B in energy units per temperature unit.
    pub(super) boltzmann: f64,
    /// Names of the steps that inputs come from, by role.
    pub(super) inputs: &'a [(String, String)],
}

/// The reasons for a group of chains, from what it differs in from the nearest on record.
pub(super) fn of_chains(due: &Leaves, nearest: &Leaves, names: &Names, words: &Words<'_>) -> Vec<Reason> {
    let differences = texts(due, nearest, names);
    let single = rules(due, names) == 1;
    // Where an item is another its parameters are, too.
    let replaced: Vec<&str> = differences
        .iter()
        .filter(|(path, now, before)| path.ends_with(".item") && name_of(now) != name_of(before))
        .filter_map(|(path, _, _)| path.strip_suffix(".item"))
        .collect();
    let mut out = Vec::new();
    let mut is_new = false;
    for (path, now, before) in &differences {
        let under = |item: &str| path.strip_prefix(item).is_some_and(|rest| rest.starts_with('.'));
        if replaced.iter().any(|item| under(item) && !path.ends_with(".item")) {
            continue;
        }
        let what = said(path, single);
        if words.scanned.contains(&what) {
            is_new = true;
            continue;
        }
        out.push(match path.as_str() {
            "inverse_temperature" => {
                Reason::new("temperature", temperature(before, words.boltzmann), temperature(now, words.boltzmann))
            }
            "revision" => Reason::new("revision of sampling", *before, *now),
            // Another chain is a reason of its own only where nothing else is.
            "group" if differences.len() > 1 => continue,
            "group" => Reason::new("chains", "", "more than are on record"),
            // Its key changes with all that changes before it.
            "follows.group" if differences.len() > 1 => continue,
            "follows.group" => Reason::new("the point before it", "", "changed"),
            "start" => Reason::new("start", start(before), start(now)),
            "observe" => Reason::new("observe", items(before), items(now)),
            _ if path.ends_with(".item") => item(&what, before, now),
            _ => Reason::new(what, plain(before), plain(now)),
        });
    }
    if is_new {
        out.insert(0, Reason::new("new point", "", &words.point));
    }
    if out.is_empty() {
        // Everything is the same, and yet the key is not: a later release cuts blocks in another way.
        out.push(Reason::new("rows of a block", "", "another number"));
    }
    out
}

/// The reasons for an analysis parcel.
pub(super) fn of_analysis(does: &str, due: &Leaves, nearest: &Leaves, names: &Names, words: &Words<'_>) -> Vec<Reason> {
    let differences = texts(due, nearest, names);
    let new = differences.iter().any(|(path, _, _)| matches!(path.as_str(), "point.sites" | "point.thermal_energy"));
    if new && !words.point.is_empty() {
        return vec![Reason::new("new point", "", &words.point)];
    }
    let inputs = differences.iter().any(|(path, _, _)| path.starts_with("input "));
    let mut out = Vec::new();
    for (path, now, before) in &differences {
        let reason = if let Some(role) = path.strip_prefix("input ") {
            let step = words.inputs.iter().find(|(known, _)| known == role).map_or("", |(_, step)| step.as_str());
            let count = |text: &str| text.split(' ').next().unwrap_or_default().to_owned();
            let what = if step.is_empty() { format!("input \"{role}\"") } else { format!("input \"{role}\" ({step})") };
            match (count(before), count(now)) {
                (one, two) if one == two || one.is_empty() || two.is_empty() => Reason::new(what, "", "changed"),
                (one, two) => Reason::new(what, format!("{one} parts"), format!("{two} parts")),
            }
        } else if let Some(parameter) = path.strip_prefix("parameters.") {
            Reason::new(parameter, plain(before), plain(now))
        } else if path == "revision" {
            Reason::new(format!("revision of {does}"), *before, *now)
        } else if path == "point.observed" {
            Reason::new("observe", columns(before), columns(now))
        } else if inputs {
            // What else is said of inputs has changed with them.
            continue;
        } else {
            let what = path.strip_prefix("point.").unwrap_or(path).replace('_', " ");
            match path.as_str() {
                "series" => Reason::new("what is known of its input", "", "changed"),
                _ => Reason::new(what, plain(before), plain(now)),
            }
        };
        out.push(reason);
    }
    if out.is_empty() {
        out.push(Reason::new("its record", "", "was removed"));
    }
    out
}

/// Path, text now, text before; empty where a path is missing.
fn texts<'a>(due: &Leaves, nearest: &Leaves, names: &'a Names) -> Vec<(String, &'a str, &'a str)> {
    let text = |number: Option<u32>| number.map_or("", |number| names.text(number));
    let mut differences: Vec<_> = due
        .differences(nearest)
        .into_iter()
        .map(|(path, now, before)| (names.text(path).to_owned(), text(now), text(before)))
        .collect();
    differences.sort();
    differences
}

/// How many rules a sweep does.
fn rules(leaves: &Leaves, names: &Names) -> u64 {
    leaves.text_at("update.length", names).and_then(|text| text.parse().ok()).unwrap_or(1)
}

/// A path of a preimage as the pipeline has it.
fn said(path: &str, single: bool) -> String {
    let path = path.replace(".parameters.", ".");
    let path = path.strip_suffix(".item").unwrap_or(&path);
    match path.strip_prefix("update.0") {
        Some(rest) if single => format!("update{rest}"),
        _ if path == "inverse_temperature" => "temperature".into(),
        _ => path.to_owned(),
    }
}

/// What chains begin from: a word, or recorded configurations.
fn start(text: &str) -> &str {
    if text.starts_with(['{', '[']) { "recorded configurations" } else { text }
}

/// Library and name of an item without revision and hash.
fn name_of(item: &str) -> &str {
    item.split(['@', '#']).next().unwrap_or_default()
}

fn item(what: &str, before: &str, now: &str) -> Reason {
    let short = |item: &str| name_of(item).rsplit('/').next().unwrap_or_default().to_owned();
    if name_of(before) != name_of(now) {
        return Reason::new(what, short(before), short(now));
    }
    let revision = |item: &str| {
        let rest = item.split_once('@').map_or("", |(_, rest)| rest);
        rest.split('#').next().unwrap_or_default().to_owned()
    };
    if revision(before) == revision(now) {
        return Reason::new(format!("library file of {}", short(now)), "", "changed");
    }
    Reason::new(format!("revision of {}", short(now)), revision(before), revision(now))
}

/// What is observed: names, with parameters where there are any.
fn items(text: &str) -> String {
    let Ok(Value::List(list)) = serde_json::from_str::<Value>(text) else { return text.to_owned() };
    let one = |value: &Value| {
        let item = value.get("item").and_then(Value::as_str).unwrap_or_default();
        let name = item.rsplit('/').next().unwrap_or_default().to_owned();
        let name = name.strip_suffix("@1").map_or(name.clone(), str::to_owned);
        match value.get("parameters").filter(|p| p.as_map().is_some_and(|map| !map.is_empty())) {
            Some(parameters) => format!("{name} {}", parameters.canonical()),
            None => name,
        }
    };
    list.iter().map(one).collect::<Vec<_>>().join(", ")
}

/// The names of observed columns.
fn columns(text: &str) -> String {
    let Ok(Value::List(list)) = serde_json::from_str::<Value>(text) else { return text.to_owned() };
    let name = |value: &Value| value.as_list()?.first()?.as_str().map(str::to_owned);
    list.iter().filter_map(name).collect::<Vec<_>>().join(", ")
}

/// A text as a person writes it: `1` for `1.0`.
pub(super) fn plain(text: &str) -> String {
    match text.strip_suffix(".0") {
        Some(whole) if whole.parse::<i64>().is_ok() => whole.to_owned(),
        _ => text.to_owned(),
    }
}

/// A temperature from its reciprocal: the digits that survive the division.
fn temperature(text: &str, boltzmann: f64) -> String {
    let Ok(inverse) = text.parse::<f64>() else { return text.to_owned() };
    short(1.0 / (boltzmann * inverse))
}

/// A number to twelve digits, without zeros at the end.
pub(super) fn short(x: f64) -> String {
    format!("{x:.11e}").parse::<f64>().map_or_else(|_| format!("{x}"), |x| format!("{x}"))
}

#[cfg(test)]
mod tests {
    use super::super::past::{analysis_leaves, chain_leaves};
    use super::*;

    const CHAINS: &str = r#"{"block_rows":65536,"energy_unit":"","equilibrate":1000,"every":1,"group":0,"inverse_temperature":0.5,"kind":"chains","lanes":1,"lattice":{"item":"lattices/square@1","parameters":{"boundary":"periodic","size":12}},"model":{"item":"models/ising@1","parameters":{"coupling":1.0}},"observe":[{"item":"observables/energy@1","parameters":{}}],"revision":1,"seed":1,"settle":0,"start":"random","update":[{"item":"local/metropolis@1","parameters":{"lanes":1},"times":1}]}"#;

    fn compare(changes: &[(&str, &str)], scanned: &[&str]) -> Vec<(String, String, String)> {
        let now = changes.iter().fold(CHAINS.to_owned(), |text, (from, to)| {
            assert!(text.contains(from), "{from}");
            text.replace(from, to)
        });
        let mut names = Names::default();
        let mut leaves = |text: &str| names.leaves(chain_leaves(&serde_json::from_str::<Value>(text).unwrap()));
        let (before, now) = (leaves(CHAINS), leaves(&now));
        let scanned: Vec<String> = scanned.iter().map(|s| (*s).to_owned()).collect();
        let words = Words { scanned: &scanned, point: "size 16, temperature 2.5".into(), boltzmann: 1.0, inputs: &[] };
        let reasons = of_chains(&now, &before, &names, &words);
        reasons.into_iter().map(|r| (r.what, r.before, r.now)).collect()
    }

    fn one(what: &str, before: &str, now: &str) -> Vec<(String, String, String)> {
        vec![(what.into(), before.into(), now.into())]
    }

    #[test]
    fn chains_are_due_for_a_reason_in_words() {
        assert_eq!(compare(&[("\"seed\":1", "\"seed\":2")], &[]), one("seed", "1", "2"));
        assert_eq!(compare(&[("1.0", "1.1")], &[]), one("model.coupling", "1", "1.1"));
        assert_eq!(compare(&[("metropolis@1", "metropolis@2")], &[]), one("revision of metropolis", "1", "2"));
        assert_eq!(
            compare(
                &[("metropolis@1\",\"parameters\":{\"lanes\":1}", "wolff@1\",\"parameters\":{\"clusters\":4}")],
                &[]
            ),
            one("update", "metropolis", "wolff")
        );
        assert_eq!(
            compare(&[("\"lanes\":1},\"times\"", "\"lanes\":64},\"times\"")], &[]),
            one("update.lanes", "1", "64")
        );
        assert_eq!(compare(&[("0.5", "0.4")], &[]), one("temperature", "2", "2.5"));
        assert_eq!(
            compare(&[("0.5", "0.4"), (":12", ":16")], &["lattice.size", "temperature"]),
            one("new point", "", "size 16, temperature 2.5")
        );
        assert_eq!(
            compare(&[("\"equilibrate\":1000", "\"equilibrate\":2000")], &[]),
            one("equilibrate", "1000", "2000")
        );
        assert_eq!(compare(&[("65536", "32768")], &[]), one("rows of a block", "", "another number"));
    }

    #[test]
    fn analyses_are_due_for_a_reason_in_words() {
        let text = |content: &str, sites: u32, revision: u32| {
            format!(
                r#"{{"facts":{{"series":[{{"sites":{sites},"thermal_energy":2.0}}]}},"inputs":[{{"content":"{content}","role":"of"}}],"kind":"averages","parameters":{{"over":["a"]}},"revision":{revision}}}"#
            )
        };
        let mut names = Names::default();
        let before = names.leaves(analysis_leaves(&text("aa", 16, 1)));
        let inputs = [("of".to_owned(), "chains".to_owned())];
        let words = Words { scanned: &[], point: "size 4".into(), boltzmann: 1.0, inputs: &inputs };
        let mut of = |text: &str| {
            let now = names.leaves(analysis_leaves(text));
            let reasons = of_analysis("averages", &now, &before, &names, &words);
            reasons.into_iter().map(|r| (r.what, r.before, r.now)).collect::<Vec<_>>()
        };
        assert_eq!(of(&text("bb", 16, 1)), one("input \"of\" (chains)", "", "changed"));
        assert_eq!(of(&text("bb", 9, 1)), one("new point", "", "size 4"));
        assert_eq!(of(&text("aa", 16, 2)), one("revision of averages", "1", "2"));
    }

    #[test]
    fn equal_reasons_are_counted() {
        let reasons =
            [Reason::new("seed", "1", "2"), Reason::new("new point", "", "size 4"), Reason::new("seed", "1", "2")];
        let gathered = gather(reasons);
        assert_eq!(
            gathered.iter().map(|r| (r.what.as_str(), r.parcels)).collect::<Vec<_>>(),
            [("seed", 2), ("new point", 1)]
        );
    }
}
