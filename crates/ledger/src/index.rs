//! What the journals say: the entries, by key and by chain.

use serde::{Deserialize, Serialize};
use spinledger_terms::{ContentHash, Key};
use std::collections::{BTreeMap, BTreeSet};

/// An entry, as far as planning needs it.
#[derive(Clone, Debug, PartialEq)]
pub struct Line {
    /// Its key.
    pub key: Key,
    /// What it is: `block`, `series`, `averages` ...
    pub kind: String,
    /// Its place in a chain, for blocks.
    pub chain: Option<ChainPlace>,
    /// Hash over schema and values of all its tables.
    pub content: ContentHash,
    /// How long it took, in seconds.
    pub seconds: f64,
    /// Number of attempted spin updates.
    pub updates: u64,
    /// Facts of an entry without tables as canonical text, which planning needs without opening its record; mostly empty.
    pub note: String,
}

/// A place in a chain.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub struct ChainPlace {
    /// The group of chains that advance together.
    pub chain: Key,
    /// Which block, from 0.
    pub block: u32,
    /// Which chain of the group, from 0.
    pub number: u32,
    /// Number of rows recorded, at most a block's length.
    pub rows: u64,
}

/// All entries that the journals name. Equal whatever the order in which they were read.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Index {
    lines: BTreeMap<Key, Line>,
    chains: BTreeSet<(ChainPlace, Key)>,
    warnings: BTreeSet<String>,
}

impl Index {
    /// The line of a key.
    pub fn get(&self, key: &Key) -> Option<&Line> {
        self.lines.get(key)
    }

    /// Number of entries.
    pub fn len(&self) -> usize {
        self.lines.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.lines.is_empty()
    }

    /// All lines, by key.
    pub fn lines(&self) -> impl Iterator<Item = &Line> {
        self.lines.values()
    }

    /// Everything recorded of a group of chains, by block, chain and rows: a block that was first recorded short and then
    /// longer stands there several times.
    pub fn blocks<'a>(&'a self, chain: &Key) -> impl Iterator<Item = (&'a ChainPlace, &'a Line)> + use<'a> {
        let from = ChainPlace { chain: *chain, block: 0, number: 0, rows: 0 };
        let to = ChainPlace { chain: *chain, block: u32::MAX, number: u32::MAX, rows: u64::MAX };
        self.chains
            .range((from, Key([0; 32]))..=(to, Key([0xff; 32])))
            .filter_map(|(place, key)| Some((place, self.lines.get(key)?)))
    }

    /// The longest recording of each block of a group of chains, by block and chain.
    pub fn longest_blocks(&self, chain: &Key) -> Vec<(&ChainPlace, &Line)> {
        let mut longest: Vec<(&ChainPlace, &Line)> = Vec::new();
        for (place, line) in self.blocks(chain) {
            match longest.last_mut() {
                Some(last) if (last.0.block, last.0.number) == (place.block, place.number) => *last = (place, line),
                _ => longest.push((place, line)),
            }
        }
        longest
    }

    /// Adds an entry. Of two lines for a key the one that is smaller in content, then time, is kept, so that the order does
    /// not matter; two contents for a key are a warning.
    pub fn add(&mut self, line: Line) {
        if let Some(known) = self.lines.get(&line.key) {
            if known.content != line.content {
                let warning = format!("the journals name more than one content of entry {}", line.key);
                self.warnings.insert(warning);
            }
            if rank(known) <= rank(&line) {
                return;
            }
            if let Some(place) = known.chain {
                self.chains.remove(&(place, line.key));
            }
        }
        if let Some(place) = line.chain {
            self.chains.insert((place, line.key));
        }
        self.lines.insert(line.key, line);
    }

    /// What was wrong with the journals, in words: damaged lines, contradictions.
    pub fn warnings(&self) -> impl Iterator<Item = &str> {
        self.warnings.iter().map(String::as_str)
    }

    pub(crate) fn warn(&mut self, warning: String) {
        self.warnings.insert(warning);
    }
}

/// A total order of lines for one key.
fn rank(line: &Line) -> (ContentHash, u64, u64, &str, Option<ChainPlace>, &str) {
    (line.content, line.seconds.to_bits(), line.updates, &line.kind, line.chain, &line.note)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(key: u8, block: u32, rows: u64) -> Line {
        Line {
            key: Key([key; 32]),
            kind: "block".into(),
            note: String::new(),
            chain: Some(ChainPlace { chain: Key([9; 32]), block, number: 0, rows }),
            content: ContentHash([key; 32]),
            seconds: 1.0,
            updates: 5,
        }
    }

    #[test]
    fn blocks_of_a_chain_come_in_order_and_the_longest_counts() {
        let mut index = Index::default();
        for line in [line(3, 1, 10), line(1, 0, 64), line(4, 1, 64), line(2, 0, 64)] {
            index.add(line);
        }
        index.add(Line { chain: None, ..line(5, 0, 0) });
        index.add(Line {
            chain: Some(ChainPlace { chain: Key([8; 32]), block: 0, number: 0, rows: 1 }),
            ..line(6, 0, 0)
        });
        let blocks: Vec<_> = index.blocks(&Key([9; 32])).map(|(p, l)| (p.block, p.rows, l.key.0[0])).collect();
        assert_eq!(blocks, [(0, 64, 1), (0, 64, 2), (1, 10, 3), (1, 64, 4)]);
        let longest: Vec<_> = index.longest_blocks(&Key([9; 32])).iter().map(|(p, _)| (p.block, p.rows)).collect();
        assert_eq!(longest, [(0, 64), (1, 64)]);
        assert_eq!(index.len(), 6);
    }

    #[test]
    fn contradicting_lines_warn_in_either_order() {
        let (a, b) = (line(1, 0, 64), Line { content: ContentHash([7; 32]), ..line(1, 0, 32) });
        let (mut one, mut two) = (Index::default(), Index::default());
        one.add(a.clone());
        one.add(b.clone());
        two.add(b);
        two.add(a);
        assert_eq!(one, two);
        assert_eq!(one.warnings().count(), 1);
        assert_eq!(one.blocks(&Key([9; 32])).count(), 1, "the line that lost is not found by its chain");
    }
}
