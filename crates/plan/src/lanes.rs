//! How many chains a rule advances together: given, or chosen by the size of the lattice.

use spinledger_terms::{Item, Value};
use std::collections::BTreeMap;

/// Why one lattice cannot be packed by sites.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Misfit {
    /// The manifest of the lattice tells no cells, or a number of directions that the rule does not pack.
    Cells,
    /// A direction that is not periodic.
    Boundary,
    /// The number of cells in some direction. For each direction: that number, and the nearest that fit, below (if any) and above.
    Size(Vec<(u64, Option<u64>, u64)>),
}

/// Chains that a rule advances together: the value of the parameter that its manifest names, or by size where it is left out and the manifest says so.
pub fn rule_lanes(parameters: &Value, rule: &Item, lattice: &Value, lattice_item: &Item) -> u32 {
    let Some(traits) = rule.update.as_ref().filter(|traits| !traits.lanes.is_empty()) else { return 1 };
    match parameters.get(&traits.lanes).and_then(Value::as_i64) {
        Some(lanes) => u32::try_from(lanes).unwrap_or(1).max(1),
        None => match traits.together {
            Some(_) if misfit(rule, lattice, lattice_item).is_none() => 1,
            Some(together) => together.max(1),
            None => 1,
        },
    }
}

/// Writes down how many chains that is, where it was left out: it is part of what a chain is.
pub(crate) fn complete(parameters: &mut BTreeMap<String, Value>, rule: &Item, lanes: u32) {
    let Some(traits) = rule.update.as_ref().filter(|traits| traits.together.is_some()) else { return };
    if parameters.get(&traits.lanes).is_none_or(|value| *value == Value::Null) {
        parameters.insert(traits.lanes.clone(), Value::Integer(lanes.into()));
    }
}

/// Why a rule that packs by sites cannot pack a lattice with these parameters; None where it can, or does not say that it packs.
pub fn misfit(rule: &Item, lattice: &Value, lattice_item: &Item) -> Option<Misfit> {
    let packing = &rule.update.as_ref().filter(|traits| traits.together.is_some())?.packing;
    let Some(traits) = &lattice_item.lattice else { return Some(Misfit::Cells) };
    let directions = traits.dimension as usize;
    let grid = packing.iter().find(|grid| grid.len() == directions);
    let (Some(grid), false) = (grid, traits.size.is_empty()) else { return Some(Misfit::Cells) };
    if let Some(boundaries) = &traits.boundaries {
        let periodic = |word: &Value| word.as_str() == Some("periodic");
        let every = match lattice.at(&boundaries.parameter) {
            Some(Value::List(words)) => words.iter().all(periodic),
            Some(word) => periodic(word),
            None => true,
        };
        if !every {
            return Some(Misfit::Boundary);
        }
    }
    let size = |value: &Value| value.as_i64().and_then(|n| u64::try_from(n).ok());
    let (sizes, numbers): (Option<Vec<u64>>, Vec<u64>) = match lattice.at(&traits.size) {
        Some(Value::List(list)) => (list.iter().map(size).collect(), grid.clone()),
        // One size for all directions has to fit in each.
        Some(value) => (size(value).map(|n| vec![n]), vec![grid.iter().copied().fold(1, common_multiple)]),
        None => (None, Vec::new()),
    };
    let sizes = sizes.filter(|sizes| sizes.len() == numbers.len())?;
    let fits = |(n, number): (&u64, &u64)| n.is_multiple_of(*number) && *n >= 2 * number;
    if sizes.iter().zip(&numbers).all(fits) {
        return None;
    }
    let nearest = |(n, number): (u64, u64)| {
        let below = n / number * number;
        let above = if below == n { n } else { below.saturating_add(number) };
        (n, Some(below).filter(|below| *below >= 2 * number), above.max(2 * number))
    };
    Some(Misfit::Size(sizes.into_iter().zip(numbers).map(nearest).collect()))
}

fn common_multiple(a: u64, b: u64) -> u64 {
    let (mut x, mut y) = (a.max(1), b.max(1));
    while y > 0 {
        (x, y) = (y, x % y);
    }
    (a.max(1) / x).saturating_mul(b.max(1))
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_terms::{Boundaries, ItemKind, LatticeTraits, UpdateTraits};

    fn item(kind: ItemKind) -> Item {
        Item {
            kind,
            name: "it".into(),
            revision: 1,
            about: String::new(),
            formula: String::new(),
            source: String::new(),
            parameters: Vec::new(),
            lattice: None,
            model: None,
            update: None,
            observable: None,
        }
    }

    fn rule() -> Item {
        let update = UpdateTraits {
            forms: vec!["pair".into()],
            needs: Vec::new(),
            most_states: Some(2),
            lanes: "lanes".into(),
            together: Some(512),
            packing: vec![vec![512], vec![16, 32]],
        };
        Item { update: Some(update), ..item(ItemKind::Update) }
    }

    fn lattice(dimension: u32) -> Item {
        let traits = LatticeTraits {
            dimension,
            size: "size".into(),
            sites_per_cell: 1,
            sites: String::new(),
            classes: Vec::new(),
            boundaries: Some(Boundaries { parameter: "boundary".into(), antiperiodic_minimum: 2 }),
        };
        Item { lattice: Some(traits), ..item(ItemKind::Lattice) }
    }

    fn parameters(size: Value, boundary: Value) -> Value {
        Value::map([("size", size), ("boundary", boundary)])
    }

    #[test]
    fn lanes_are_chosen_by_size() {
        let periodic = || Value::text("periodic");
        let none = Value::Map(BTreeMap::new());
        let lanes = |size: Value, boundary: Value| rule_lanes(&none, &rule(), &parameters(size, boundary), &lattice(2));
        let list = |sizes: [i64; 2]| Value::List(sizes.map(Value::Integer).to_vec());
        for (size, expected) in [(32, 512), (48, 512), (63, 512), (64, 1), (96, 1), (2048, 1)] {
            assert_eq!(lanes(Value::Integer(size), periodic()), expected, "{size}");
        }
        assert_eq!(lanes(list([32, 64]), periodic()), 1);
        assert_eq!(lanes(list([64, 32]), periodic()), 512);
        let words = |words: [&str; 2]| Value::List(words.map(Value::text).to_vec());
        assert_eq!(lanes(Value::Integer(64), words(["periodic", "periodic"])), 1);
        assert_eq!(lanes(Value::Integer(64), words(["periodic", "free"])), 512);
        assert_eq!(rule_lanes(&none, &rule(), &parameters(Value::Integer(64), periodic()), &lattice(3)), 512);
        // What is given stays.
        let given = Value::map([("lanes", Value::Integer(512))]);
        assert_eq!(rule_lanes(&given, &rule(), &parameters(Value::Integer(64), periodic()), &lattice(2)), 512);
    }

    #[test]
    fn what_was_chosen_is_written_down() {
        let mut parameters = BTreeMap::new();
        complete(&mut parameters, &rule(), 512);
        assert_eq!(parameters["lanes"], Value::Integer(512));
        complete(&mut parameters, &rule(), 1);
        assert_eq!(parameters["lanes"], Value::Integer(512), "only where it was left out");
        let mut plain = rule();
        plain.update.as_mut().expect("a rule").together = None;
        let mut parameters = BTreeMap::new();
        complete(&mut parameters, &plain, 1);
        assert!(parameters.is_empty(), "other rules keep the keys that they have");
    }

    #[test]
    fn nearest_sizes_are_told() {
        let misfit = |size: Value| misfit(&rule(), &parameters(size, Value::text("periodic")), &lattice(2));
        assert_eq!(misfit(Value::Integer(48)), Some(Misfit::Size(vec![(48, None, 64)])));
        assert_eq!(misfit(Value::Integer(100)), Some(Misfit::Size(vec![(100, Some(96), 128)])));
        let list = Value::List(vec![Value::Integer(40), Value::Integer(64)]);
        assert_eq!(misfit(list), Some(Misfit::Size(vec![(40, Some(32), 48), (64, Some(64), 64)])));
    }
}
