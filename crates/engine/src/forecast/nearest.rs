//! Which preimage on record is nearest to one that is due: the one that differs in the fewest places.
//!
//! A preimage is a set of leaves, pairs of a path and a text. The signature of a preimage is the sum (without carry) of hashes of its leaves,
//! so that the signature without some paths costs nothing. For one path after the other, then for pairs, then for triples, the signatures
//! without them are looked up among those on record: the first that is found differs in these places only. That takes a table of N + M entries
//! for each choice of paths, and not N M comparisons; only paths that differ at all are chosen from.

use spinledger_terms::Value;
use std::collections::HashMap;

/// Places and texts as numbers, the same for equal ones.
#[derive(Default)]
pub(super) struct Names {
    numbers: HashMap<String, u32>,
    texts: Vec<String>,
}

impl Names {
    fn number(&mut self, text: &str) -> u32 {
        if let Some(number) = self.numbers.get(text) {
            return *number;
        }
        let number = u32::try_from(self.texts.len()).unwrap_or(u32::MAX);
        self.numbers.insert(text.to_owned(), number);
        self.texts.push(text.to_owned());
        number
    }

    /// The text of a number.
    pub(super) fn text(&self, number: u32) -> &str {
        self.texts.get(number as usize).map_or("", String::as_str)
    }

    /// The leaves of pairs of path and text.
    pub(super) fn leaves(&mut self, pairs: impl IntoIterator<Item = (String, String)>) -> Leaves {
        let pairs = pairs.into_iter().map(|(path, text)| (self.number(&path), self.number(&text)));
        let mut leaves: Vec<(u32, u32)> = pairs.collect();
        leaves.sort_unstable();
        let signature = leaves.iter().fold(0, |sum, leaf| sum ^ hash(*leaf));
        Leaves { leaves, signature }
    }
}

/// The leaves of a value under a path, but for the subtrees that `whole` names: each of them is one leaf.
pub(super) fn flatten(value: &Value, path: &str, whole: &dyn Fn(&str) -> bool, out: &mut Vec<(String, String)>) {
    let under = |word: &str| if path.is_empty() { word.to_owned() } else { format!("{path}.{word}") };
    match value {
        Value::Map(map) if !whole(path) => map.iter().for_each(|(k, v)| flatten(v, &under(k), whole, out)),
        Value::List(list) if !whole(path) => {
            out.push((under("length"), list.len().to_string()));
            list.iter().enumerate().for_each(|(i, v)| flatten(v, &under(&i.to_string()), whole, out));
        }
        Value::Text(text) => out.push((path.to_owned(), text.clone())),
        other => out.push((path.to_owned(), other.canonical())),
    }
}

/// The leaves of a preimage.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Leaves {
    /// Path and text, by path.
    leaves: Vec<(u32, u32)>,
    signature: u64,
}

/// The last step of splitmix64 spreads every bit.
fn hash((path, text): (u32, u32)) -> u64 {
    let mut x = (u64::from(path) << 32 | u64::from(text)).wrapping_add(0x9e37_79b9_7f4a_7c15);
    x = (x ^ x >> 30).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    x = (x ^ x >> 27).wrapping_mul(0x94d0_49bb_1331_11eb);
    x ^ x >> 31
}

impl Leaves {
    fn at(&self, path: u32) -> Option<u32> {
        let place = self.leaves.binary_search_by_key(&path, |(path, _)| *path).ok()?;
        Some(self.leaves[place].1)
    }

    /// The text at a path.
    pub(super) fn text_at<'a>(&self, path: &str, names: &'a Names) -> Option<&'a str> {
        Some(names.text(self.at(*names.numbers.get(path)?)?))
    }

    fn without(&self, units: &[&Vec<u32>]) -> u64 {
        let paths = units.iter().flat_map(|unit| unit.iter());
        paths.fold(self.signature, |sum, path| sum ^ self.at(*path).map_or(0, |text| hash((*path, text))))
    }

    /// Paths with different texts, and the texts; none where the path is missing.
    pub(super) fn differences(&self, other: &Leaves) -> Vec<(u32, Option<u32>, Option<u32>)> {
        let mut paths: Vec<u32> = self.leaves.iter().chain(&other.leaves).map(|(path, _)| *path).collect();
        paths.sort_unstable();
        paths.dedup();
        let pairs = paths.into_iter().map(|path| (path, self.at(path), other.at(path)));
        pairs.filter(|(_, one, two)| one != two).collect()
    }
}

/// Most steps of the search for choices of paths; beyond, preimages are compared with some on record.
const MOST_STEPS: usize = 40_000_000;
/// So many on record, evenly chosen.
const SAMPLE: usize = 64;

/// For each that is due the place of the nearest on record; None where nothing is on record. `units` are prefixes of paths below which
/// everything counts as one difference.
pub(super) fn nearest(due: &[Leaves], recorded: &[Leaves], names: &Names, prefixes: &[&str]) -> Vec<Option<usize>> {
    let mut found = vec![None; due.len()];
    if recorded.is_empty() {
        return found;
    }
    let units = units(due, recorded, names, prefixes);
    let mut open: Vec<usize> = (0..due.len()).collect();
    let mut steps = 0;
    for size in 0..=3 {
        for choice in choices(units.len(), size) {
            let overlap = |a: &usize, b: &usize| a != b && units[*a].iter().any(|path| units[*b].contains(path));
            if open.is_empty() || choice.iter().any(|a| choice.iter().any(|b| overlap(a, b))) {
                continue;
            }
            steps += open.len() + recorded.len();
            if steps > MOST_STEPS {
                break;
            }
            let chosen: Vec<&Vec<u32>> = choice.iter().map(|unit| &units[*unit]).collect();
            let mut table: HashMap<u64, usize> = HashMap::with_capacity(recorded.len());
            for (place, leaves) in recorded.iter().enumerate() {
                table.entry(leaves.without(&chosen)).or_insert(place);
            }
            open.retain(|at| {
                found[*at] = table.get(&due[*at].without(&chosen)).copied();
                found[*at].is_none()
            });
        }
    }
    let stride = recorded.len().div_ceil(SAMPLE);
    for at in open {
        let sample = (0..recorded.len()).step_by(stride);
        found[at] = sample.min_by_key(|place| due[at].differences(&recorded[*place]).len());
    }
    found
}

/// What may differ as one: each path whose text is not the same everywhere, and the paths below each prefix.
fn units(due: &[Leaves], recorded: &[Leaves], names: &Names, prefixes: &[&str]) -> Vec<Vec<u32>> {
    // Path to its first text and how often it was seen; a path that is missing somewhere differs.
    let mut seen: HashMap<u32, (u32, usize, bool)> = HashMap::new();
    for leaves in due.iter().chain(recorded) {
        for (path, text) in &leaves.leaves {
            let known = seen.entry(*path).or_insert((*text, 0, false));
            known.1 += 1;
            known.2 |= known.0 != *text;
        }
    }
    let all = due.len() + recorded.len();
    let mut paths: Vec<u32> =
        seen.iter().filter(|(_, (_, count, differs))| *differs || *count < all).map(|(path, _)| *path).collect();
    // By name, so that what is found does not depend on the order in which texts were met.
    paths.sort_unstable_by_key(|path| names.text(*path));
    let below = |prefix: &str| -> Vec<u32> {
        paths.iter().copied().filter(|path| names.text(*path).starts_with(prefix)).collect()
    };
    let groups: Vec<Vec<u32>> = prefixes.iter().map(|prefix| below(prefix)).filter(|unit| unit.len() > 1).collect();
    paths.iter().map(|path| vec![*path]).chain(groups).collect()
}

/// All choices of so many of `count`.
fn choices(count: usize, size: usize) -> Box<dyn Iterator<Item = Vec<usize>>> {
    match size {
        0 => Box::new(std::iter::once(Vec::new())),
        1 => Box::new((0..count).map(|a| vec![a])),
        2 => Box::new((0..count).flat_map(move |b| (0..b).map(move |a| vec![a, b]))),
        _ => Box::new((0..count).flat_map(move |c| (0..c).flat_map(move |b| (0..b).map(move |a| vec![a, b, c])))),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::time::Instant;

    fn leaves(names: &mut Names, pairs: &[(&str, &str)]) -> Leaves {
        names.leaves(pairs.iter().map(|(path, text)| ((*path).to_owned(), (*text).to_owned())))
    }

    #[test]
    fn the_fewest_differences_win() {
        let mut names = Names::default();
        let n = &mut names;
        let recorded = [
            leaves(n, &[("t", "2.0"), ("seed", "1"), ("m.item", "ising"), ("m.j", "1")]),
            leaves(n, &[("t", "2.5"), ("seed", "1"), ("m.item", "ising"), ("m.j", "1")]),
            leaves(n, &[("t", "2.5"), ("seed", "2"), ("m.item", "xy")]),
        ];
        let due = [
            leaves(n, &[("t", "2.5"), ("seed", "3"), ("m.item", "ising"), ("m.j", "1")]),
            leaves(n, &[("t", "2.0"), ("seed", "1"), ("m.item", "potts"), ("m.q", "3"), ("m.j", "2"), ("m.k", "2")]),
            leaves(n, &[("t", "9"), ("seed", "9"), ("m.item", "xy"), ("u", "1")]),
            leaves(n, &[("a", "9"), ("b", "9"), ("c", "xy"), ("d", "1"), ("seed", "2")]),
            leaves(n, &[("t", "2.0"), ("seed", "1"), ("m.item", "ising"), ("m.j", "1")]),
        ];
        let found = nearest(&due, &recorded, &names, &["m."]);
        assert_eq!(found, [Some(1), Some(0), Some(2), Some(2), Some(0)]);
        assert_eq!(nearest(&due, &[], &names, &[]), [None; 5]);
        let differences = due[0].differences(&recorded[1]);
        let words: Vec<_> = differences
            .iter()
            .map(|(p, a, b)| (names.text(*p), a.map(|a| names.text(a)), b.map(|b| names.text(b))))
            .collect();
        assert_eq!(words, [("seed", Some("3"), Some("1"))]);
    }

    #[test]
    fn values_become_leaves() {
        let value = Value::map([
            ("a", Value::List(vec![Value::Number(1.0), Value::text("x")])),
            ("b", Value::map([("c", Value::Null), ("d", Value::List(vec![]))])),
        ]);
        let mut out = Vec::new();
        flatten(&value, "", &|path| path == "b.d", &mut out);
        let pairs: Vec<(&str, &str)> = out.iter().map(|(path, text)| (path.as_str(), text.as_str())).collect();
        assert_eq!(pairs, [("a.length", "2"), ("a.0", "1.0"), ("a.1", "x"), ("b.c", "null"), ("b.d", "[]")]);
    }

    /// Ten thousand against ten thousand, differing in two of six places that vary, in a fraction of what all pairs would take.
    #[test]
    fn many_are_quick() {
        let mut names = Names::default();
        let make = |names: &mut Names, seed: u32, i: u32| {
            let number = |n: u32| n.to_string();
            names.leaves([
                ("seed".to_owned(), number(seed)),
                ("size".to_owned(), number(i % 10)),
                ("t".to_owned(), number(i / 10 % 100 + if seed == 2 { 1000 } else { 0 })),
                ("group".to_owned(), number(i / 1000)),
                ("model".to_owned(), "ising".to_owned()),
                ("rows".to_owned(), "16".to_owned()),
            ])
        };
        let recorded: Vec<Leaves> = (0..10_000).map(|i| make(&mut names, 1, i)).collect();
        let due: Vec<Leaves> = (0..10_000).map(|i| make(&mut names, 2, i)).collect();
        let begun = Instant::now();
        let found = nearest(&due, &recorded, &names, &[]);
        assert!(begun.elapsed().as_secs_f64() < 2.0, "{:?}", begun.elapsed());
        for (at, place) in found.iter().enumerate() {
            assert_eq!(due[at].differences(&recorded[place.unwrap()]).len(), 2);
        }
    }
}
