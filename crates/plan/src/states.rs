//! What chains begin from, and which of their configurations are kept.

use serde::{Deserialize, Serialize};
use spinledger_terms::{ContentHash, Key, Value};

/// A recorded configuration.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct StateRef {
    /// Its entry; in no key.
    pub key: Key,
    /// Its content, which is what keys see of it.
    pub content: ContentHash,
}

/// What the chains of a point begin from.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Start {
    /// Every spin drawn independently.
    Random,
    /// Every spin alike.
    Ordered,
    /// Recorded configurations, of which chain c takes number c modulo how many there are; at least one.
    States(Vec<StateRef>),
}

impl Start {
    /// The word for it in tables and messages.
    pub fn word(&self) -> &'static str {
        match self {
            Start::Random => "random",
            Start::Ordered => "ordered",
            Start::States(_) => "kept",
        }
    }

    /// What keys and streams of a group see of it: a word, or the content of the configurations, never the step that they are from.
    pub fn value(&self, group: u32, lanes: u32) -> Value {
        let content = |state: &StateRef| Value::text(state.content.to_string());
        match self {
            Start::States(_) => {
                let states = self.of_group(group, lanes).iter().map(content).collect();
                Value::map([("states", Value::List(states))])
            }
            word => Value::text(word.word()),
        }
    }

    /// The configurations of a group's chains; empty where it begins from none.
    pub fn of_group(&self, group: u32, lanes: u32) -> Vec<StateRef> {
        let Start::States(states) = self else { return Vec::new() };
        let first = u64::from(group) * u64::from(lanes);
        let count = states.len().max(1) as u64;
        let of = |lane: u32| states.get(((first + u64::from(lane)) % count) as usize).copied();
        (0..lanes).filter_map(of).collect()
    }
}

/// Where the chains of a group begin, for who advances them.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Begin {
    /// Every spin drawn independently.
    Random,
    /// Every spin alike.
    Ordered,
    /// The configurations in these entries, one for each chain that is advanced.
    States(Vec<Key>),
}

/// Which configurations are kept. They move no spins, and are in no key of chains or blocks.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Keep {
    /// That of the last measurement.
    Last,
    /// That of every n-th measurement: rows n - 1, 2 n - 1 ...
    Every(u64),
}

impl Keep {
    /// The rows that are kept of a chain of `measure` rows: the first, the distance, how many.
    pub fn rows(self, measure: u64) -> (u64, u64, u64) {
        match self {
            Keep::Last => (measure.saturating_sub(1), 1, u64::from(measure > 0)),
            Keep::Every(n) => {
                let n = n.max(1);
                (n - 1, n, measure / n)
            }
        }
    }
}

/// The rows of a first, a distance and a number.
pub fn each_row((first, step, count): (u64, u64, u64)) -> impl Iterator<Item = u64> + Clone {
    (0..count).map(move |k| first + k * step)
}

/// A recorded configuration of a point.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Kept {
    /// Which start, as an index into the point's starts.
    pub start: usize,
    /// Number of the chain within its start.
    pub chain: u32,
    /// The sweep of the measurement.
    pub sweep: u64,
    /// Its entry.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
}

/// The preimage of the key of a configuration, from the canonical text of the group's value: put together by hand, since there may be very many.
pub fn state_preimage(chains: &str, lane: u32, row: u64) -> String {
    format!(r#"{{"chains":{chains},"kind":"state","lane":{lane},"row":{row}}}"#)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What keys of kept configurations are made of, and that this is the canonical form.
    #[test]
    fn value_stability() {
        let chains = Value::map([("seed", Value::Integer(7))]);
        let text = state_preimage(&chains.canonical(), 3, 99);
        assert_eq!(text, r#"{"chains":{"seed":7},"kind":"state","lane":3,"row":99}"#);
        let value = Value::map([
            ("chains", chains),
            ("kind", Value::text("state")),
            ("lane", Value::Integer(3)),
            ("row", Value::Integer(99)),
        ]);
        assert_eq!(text, value.canonical());
    }

    #[test]
    fn rows_that_are_kept() {
        let rows = |keep: Keep, measure| each_row(keep.rows(measure)).collect::<Vec<_>>();
        assert_eq!(rows(Keep::Last, 10), [9]);
        assert_eq!(rows(Keep::Last, 1), [0]);
        assert_eq!(rows(Keep::Every(3), 10), [2, 5, 8]);
        assert_eq!(rows(Keep::Every(5), 10), [4, 9]);
        assert_eq!(rows(Keep::Every(11), 10), [0u64; 0]);
        assert_eq!(rows(Keep::Every(1), 3), [0, 1, 2]);
    }

    /// Chain c begins from number c modulo how many there are, whatever group it is in; only contents are seen.
    #[test]
    fn chains_share_out_what_there_is() {
        let state = |n: u8| StateRef { key: Key([n + 100; 32]), content: ContentHash([n; 32]) };
        let start = Start::States(vec![state(0), state(1), state(2)]);
        let of = |group, lanes| start.of_group(group, lanes).iter().map(|s| s.content.0[0]).collect::<Vec<_>>();
        assert_eq!((of(0, 1), of(4, 1)), (vec![0], vec![1]));
        assert_eq!((of(0, 4), of(1, 4)), (vec![0, 1, 2, 0], vec![1, 2, 0, 1]));
        let expected = r#"{"states":[""#.to_owned() + &"01".repeat(32) + r#""]}"#;
        assert_eq!(start.value(4, 1).canonical(), expected);
        assert_eq!(Start::Ordered.value(0, 64).canonical(), r#""ordered""#);
        assert!(Start::Random.of_group(0, 2).is_empty());
    }
}
