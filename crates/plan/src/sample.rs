//! Parcels of a `sample` step.

use crate::blocks::{Block, blocks};
use crate::dynamics::Dynamics;
use crate::sequence::{Follows, Place};
use crate::states::{Begin, Keep, Kept, Start, each_row, state_preimage};
use serde::{Deserialize, Serialize};
use spinledger_ledger::Index;
use spinledger_terms::{ContentHash, Key, Value};

/// Revision of the way in which blocks make a series.
const SERIES_REVISION: i64 = 1;
/// Revision of the way in which kept configurations make a table.
const STATES_REVISION: i64 = 1;

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
    /// `random`, `ordered` or `kept`.
    pub start: String,
    /// Where its chains begin.
    pub begin: Begin,
    /// Number of the group within its start.
    pub number: u32,
    /// How many chains of the group are asked for: lanes 0 to `asked` - 1.
    pub asked: u32,
    /// Rows on record of each lane asked for, from the first on without gaps.
    pub covered: Vec<u64>,
    /// Rows whose configurations are to be kept and are not all on record, ascending.
    pub owed: Vec<u64>,
}

impl Group {
    /// Where the parcel stands when `measure` rows are asked for.
    pub fn state(&self, measure: u64) -> State {
        if self.covered.iter().all(|rows| *rows >= measure) && self.owed.is_empty() {
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

    /// Preimage of the key of the configuration of a chain at a row.
    pub fn state_preimage(&self, lane: u32, row: u64) -> String {
        state_preimage(&self.value.canonical(), lane, row)
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
    /// Which configurations are kept, if any.
    pub keep: Option<Keep>,
    /// Where it stands, if it is one of a sequence.
    pub place: Option<Place>,
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
    /// What the chains begin from; in a sequence, at its first position.
    pub starts: Vec<Start>,
    /// Whether analyses choose what to leave out at the beginning.
    pub discard: bool,
    /// Which configurations are kept, if any.
    pub keep: Option<Keep>,
}

/// Plans a point against the index. In a sequence, `before` is the point at the position before, which has the same chains.
pub fn plan_point(
    columns: Vec<(String, Value)>,
    dynamics: Dynamics,
    ask: &Ask,
    place: Option<Place>,
    before: Option<&Point>,
    index: &Index,
) -> Point {
    let rows = dynamics.block_rows();
    let lanes = dynamics.lanes;
    let mut groups: Vec<Group> = Vec::new();
    for start in &ask.starts {
        for number in 0..ask.chains.div_ceil(lanes) {
            let asked = lanes.min(ask.chains - number * lanes);
            let previous = before.and_then(|point| Some((point, point.groups.get(groups.len())?)));
            let follows = place.map(|place| Follows {
                position: place.position,
                before: previous.map(|(point, group)| (group.key, point.measure)),
            });
            let begin = match (previous, start) {
                (Some((point, group)), _) => Begin::States(point.last_states(group)),
                (None, Start::Random) => Begin::Random,
                (None, Start::Ordered) => Begin::Ordered,
                (None, start) => Begin::States(start.of_group(number, lanes).iter().map(|s| s.key).collect()),
            };
            let value = dynamics.group_value(start, number, follows.as_ref());
            let text = value.canonical();
            let key = Key::of(&text);
            let covered = covered(index, &key, asked, rows);
            let stream = dynamics.stream_preimage(start, number, follows.as_ref());
            let start = start.word().to_owned();
            let owed = owed(index, &text, ask, (asked, lanes), place.is_some());
            groups.push(Group { key, value, stream, start, begin, number, asked, covered, owed });
        }
    }
    let Ask { measure, discard, keep, .. } = *ask;
    Point { columns, dynamics, measure, discard, block_rows: rows, keep, place, groups }
}

/// Rows whose configurations are to be kept and are not on record: of the chains asked for, and in a sequence the last one of all chains that are
/// advanced, since the next position begins from it.
fn owed(index: &Index, chains: &str, ask: &Ask, (asked, lanes): (u32, u32), sequence: bool) -> Vec<u64> {
    let on_record =
        |row: u64, lanes: u32| (0..lanes).all(|lane| index.get(&Key::of(&state_preimage(chains, lane, row))).is_some());
    let last = ask.measure.saturating_sub(1);
    let kept = each_row(ask.keep.map_or((0, 1, 0), |keep| keep.rows(ask.measure)));
    let mut owed: Vec<u64> =
        kept.filter(|row| !(sequence && *row == last)).filter(|row| !on_record(*row, asked)).collect();
    if sequence && !on_record(last, lanes) {
        owed.push(last);
    }
    owed
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

    /// How many chains of a group have their configuration kept at a row: in a sequence all that are advanced at the last one.
    pub fn chains_kept(&self, group: &Group, row: u64) -> u32 {
        if self.place.is_some() && row + 1 == self.measure { self.dynamics.lanes } else { group.asked }
    }

    /// The entries of a group's last configurations, one for each chain that is advanced, whether they are on record or not.
    fn last_states(&self, group: &Group) -> Vec<Key> {
        let text = group.value.canonical();
        let last = self.measure.saturating_sub(1);
        (0..self.dynamics.lanes).map(|lane| Key::of(&state_preimage(&text, lane, last))).collect()
    }

    /// The sweep of a row, as tables have it.
    pub fn sweep_of(&self, row: u64) -> u64 {
        self.dynamics.equilibrate + row * self.dynamics.every
    }

    /// The kept configurations of the point in order: start, chain, sweep. None where one is missing.
    pub fn kept(&self, index: &Index) -> Option<Vec<Kept>> {
        let Some(keep) = self.keep else { return Some(Vec::new()) };
        let starts = self.starts();
        let mut kept = Vec::new();
        for group in &self.groups {
            let start = starts.iter().position(|s| *s == group.start)?;
            let text = group.value.canonical();
            for lane in 0..group.asked {
                for row in each_row(keep.rows(self.measure)) {
                    let line = index.get(&Key::of(&state_preimage(&text, lane, row)))?;
                    let chain = group.number * self.dynamics.lanes + lane;
                    let (key, content) = (line.key, line.content);
                    kept.push(Kept { start, chain, sweep: self.sweep_of(row), key, content });
                }
            }
        }
        Some(kept)
    }

    /// What the key of a step's table of configurations sees of the point; None where none is kept. Chains with their length and rows, by which it
    /// does not matter how the same rows are asked for, and constant columns with units.
    pub fn states_value(&self, columns: &[(String, String, Value)]) -> Option<Value> {
        let (first, step, count) = self.keep?.rows(self.measure);
        let columns = columns
            .iter()
            .map(|(name, unit, value)| Value::List(vec![Value::text(name), Value::text(unit), value.clone()]));
        let groups = self.groups.iter().map(|group| {
            Value::map([("asked", Value::Integer(group.asked.into())), ("key", Value::text(group.key.to_string()))])
        });
        let step = if count > 1 { step } else { 0 };
        let rows = [first, step, count].map(|n| Value::Integer(n as i64)).to_vec();
        Some(Value::map([
            ("chains", Value::List(groups.collect())),
            ("columns", Value::List(columns.collect())),
            ("rows", Value::List(rows)),
        ]))
    }

    /// Attempted spin updates that are still to be done, by the nominal number of sites.
    pub fn updates_due(&self) -> f64 {
        self.groups.iter().map(|group| self.updates_due_of(group)).sum()
    }

    /// The same of one group. Where a configuration is owed from before the end of what is on record, the chains are run again from their beginning.
    pub fn updates_due_of(&self, group: &Group) -> f64 {
        let d = &self.dynamics;
        let per_sweep = d.nominal_sites as f64 * d.passes() as f64 * f64::from(d.lanes);
        let warm = d.equilibrate as f64 + d.settle as f64;
        let covered = group.covered.iter().copied().min().unwrap_or(0);
        let end = if covered < self.measure { self.measure } else { group.owed.last().map_or(0, |row| row + 1) };
        let again = group.owed.first().is_some_and(|row| row + 1 < covered);
        let have = if again { 0 } else { covered };
        let rows = end.saturating_sub(have) as f64;
        let warm = if have == 0 { warm } else { 0.0 };
        if rows > 0.0 { per_sweep * (rows * d.every as f64 + warm) } else { 0.0 }
    }
}

/// Preimage of the key of a step's table of configurations, from what it sees of each point.
pub fn states_preimage(points: Vec<Value>) -> String {
    Value::map([
        ("kind", Value::text("states")),
        ("points", Value::List(points)),
        ("revision", Value::Integer(STATES_REVISION)),
    ])
    .canonical()
}

#[cfg(test)]
mod tests;
