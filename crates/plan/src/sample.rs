//! Parcels of a `sample` step.

use crate::blocks::{Block, blocks};
use crate::dynamics::Dynamics;
use serde::{Deserialize, Serialize};
use spinledger_ledger::Index;
use spinledger_terms::{ContentHash, Key, Value};

/// Revision of the way in which blocks make a series.
const SERIES_REVISION: i64 = 1;

/// Where a parcel stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum State {
    /// All of it is on record.
    Recorded,
    /// Some blocks are.
    Partial,
    /// Nothing is.
    Due,
}

/// One parcel: the chains that are asked for of one group, at one point.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Group {
    /// Names the group: its saved state, its claim, its blocks.
    pub key: Key,
    /// The preimage of `key`, as a value.
    pub value: Value,
    /// Preimage of the stream key.
    pub stream: String,
    /// `random` or `ordered`.
    pub start: String,
    /// Number of the group within its start.
    pub number: u32,
    /// How many chains of the group are asked for: lanes 0 to `asked` - 1.
    pub asked: u32,
    /// Rows on record of each lane asked for, from the first on without gaps.
    pub covered: Vec<u64>,
}

impl Group {
    /// Where the parcel stands when `measure` rows are asked for.
    pub fn state(&self, measure: u64) -> State {
        if self.covered.iter().all(|rows| *rows >= measure) {
            State::Recorded
        } else if self.covered.iter().any(|rows| *rows > 0) {
            State::Partial
        } else {
            State::Due
        }
    }

    /// Preimage of the key of a block.
    pub fn block_preimage(&self, lane: u32, block: Block) -> String {
        Value::map([
            ("block", Value::Integer(block.number.into())),
            ("chains", self.value.clone()),
            ("kind", Value::text("block")),
            ("lane", Value::Integer(lane.into())),
            ("rows", Value::Integer(block.rows as i64)),
        ])
        .canonical()
    }
}

/// One point of a sample step.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Point {
    /// The scan columns, by name, in order.
    pub columns: Vec<(String, Value)>,
    /// What moves the spins.
    pub dynamics: Dynamics,
    /// Rows asked for of each chain.
    pub measure: u64,
    /// Whether analyses choose what to leave out at the beginning (`equilibrate: auto`). It moves no spins.
    pub discard: bool,
    /// Rows of a block.
    pub block_rows: u64,
    /// Its parcels, by start and number.
    pub groups: Vec<Group>,
}

/// A block that is on record, as far as a series takes rows from it.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Piece {
    /// Number of the chain within its start.
    pub chain: u32,
    /// Which start, as an index into [`Point::starts`].
    pub start: usize,
    /// Which block.
    pub block: u32,
    /// Its entry.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
    /// Rows on record.
    pub recorded: u64,
    /// Rows to take.
    pub rows: u64,
}

/// What a sample step asks for at a point, beside its dynamics.
#[derive(Clone, Debug, PartialEq)]
pub struct Ask {
    /// Rows of each chain.
    pub measure: u64,
    /// Chains from each start.
    pub chains: u32,
    /// Start configurations.
    pub starts: Vec<String>,
    /// Whether analyses choose what to leave out at the beginning.
    pub discard: bool,
}

/// Plans a point against the index.
pub fn plan_point(columns: Vec<(String, Value)>, dynamics: Dynamics, ask: &Ask, index: &Index) -> Point {
    let rows = dynamics.block_rows();
    let lanes = dynamics.lanes;
    let mut groups = Vec::new();
    for start in &ask.starts {
        for number in 0..ask.chains.div_ceil(lanes) {
            let asked = lanes.min(ask.chains - number * lanes);
            let value = dynamics.group_value(start, number);
            let key = Key::of(&value.canonical());
            let covered = covered(index, &key, asked, rows);
            let stream = dynamics.stream_preimage(start, number);
            groups.push(Group { key, value, stream, start: start.clone(), number, asked, covered });
        }
    }
    Point { columns, dynamics, measure: ask.measure, discard: ask.discard, block_rows: rows, groups }
}

/// Rows on record of each lane, from the first on without gaps.
pub fn covered(index: &Index, group: &Key, asked: u32, block_rows: u64) -> Vec<u64> {
    let mut covered = vec![0; asked as usize];
    for (place, _) in index.longest_blocks(group) {
        if let Some(rows) = covered.get_mut(place.number as usize) {
            // Blocks come in order of their numbers: one counts only if all before it are there and full.
            if *rows == u64::from(place.block) * block_rows {
                *rows += place.rows;
            }
        }
    }
    covered
}

impl Point {
    /// The start configurations, in order.
    pub fn starts(&self) -> Vec<String> {
        let mut starts: Vec<String> = Vec::new();
        for group in &self.groups {
            if starts.last() != Some(&group.start) {
                starts.push(group.start.clone());
            }
        }
        starts
    }

    /// Whether every parcel is recorded.
    pub fn is_recorded(&self) -> bool {
        self.groups.iter().all(|group| group.state(self.measure) == State::Recorded)
    }

    /// The blocks of the point in order of rows: block, start, chain. None where something is missing.
    pub fn pieces(&self, index: &Index) -> Option<Vec<Piece>> {
        let starts = self.starts();
        let lanes = self.dynamics.lanes;
        let mut pieces = Vec::new();
        for group in &self.groups {
            let start = starts.iter().position(|s| *s == group.start)?;
            let longest = index.longest_blocks(&group.key);
            for block in blocks(self.measure, self.block_rows) {
                for lane in 0..group.asked {
                    let at = longest
                        .binary_search_by_key(&(block.number, lane), |(place, _)| (place.block, place.number))
                        .ok()?;
                    let (place, line) = longest[at];
                    if place.rows < block.rows {
                        return None;
                    }
                    pieces.push(Piece {
                        chain: group.number * lanes + lane,
                        start,
                        block: block.number,
                        key: line.key,
                        content: line.content,
                        recorded: place.rows,
                        rows: block.rows,
                    });
                }
            }
        }
        pieces.sort_by_key(|piece| (piece.block, piece.start, piece.chain));
        Some(pieces)
    }

    /// Preimage of the key of the point's series: the chains, their length, and the constant columns that stand in its file, each with
    /// its unit.
    pub fn series_preimage(&self, columns: &[(String, String, Value)]) -> String {
        let columns = columns
            .iter()
            .map(|(name, unit, value)| Value::List(vec![Value::text(name), Value::text(unit), value.clone()]));
        let groups = self.groups.iter().map(|group| {
            Value::map([("asked", Value::Integer(group.asked.into())), ("key", Value::text(group.key.to_string()))])
        });
        Value::map([
            ("chains", Value::List(groups.collect())),
            ("columns", Value::List(columns.collect())),
            ("kind", Value::text("series")),
            ("measure", Value::Integer(self.measure as i64)),
            ("revision", Value::Integer(SERIES_REVISION)),
        ])
        .canonical()
    }

    /// Attempted spin updates that are still to be done, by the nominal number of sites.
    pub fn updates_due(&self) -> f64 {
        let d = &self.dynamics;
        let per_sweep = d.nominal_sites as f64 * d.passes() as f64 * f64::from(d.lanes);
        let warm = d.equilibrate as f64 + d.settle as f64;
        let of_group = |group: &Group| {
            let have = group.covered.iter().copied().min().unwrap_or(0);
            let rows = self.measure.saturating_sub(have) as f64;
            let warm = if have == 0 { warm } else { 0.0 };
            if rows > 0.0 { per_sweep * (rows * d.every as f64 + warm) } else { 0.0 }
        };
        self.groups.iter().map(of_group).sum()
    }
}

#[cfg(test)]
mod tests;
