//! Points that follow each other: each begins where the one before it was left (annealing, hysteresis).

use crate::sample::{Group, Point, State};
use serde::{Deserialize, Serialize};
use spinledger_terms::{Key, Value};
use std::collections::BTreeMap;

/// Where a point stands in a sequence.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub struct Place {
    /// Which sequence of the step.
    pub sequence: u32,
    /// The position in it, from 0.
    pub position: u64,
}

/// What a group of chains in a sequence follows, as its key sees it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Follows {
    /// Its position in the sequence.
    pub position: u64,
    /// The group at the position before, and its number of rows; None at the first.
    pub before: Option<(Key, u64)>,
}

impl Follows {
    /// The group before, in the form that keys are made of.
    pub(crate) fn before_value(&self) -> Option<Value> {
        let (group, rows) = self.before?;
        Some(Value::map([("group", Value::text(group.to_string())), ("rows", Value::Integer(rows as i64))]))
    }
}

/// A parcel of sampling: groups by the numbers of their points and their numbers in them. One, or those of a sequence in the order in which they
/// are visited.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Parcel {
    /// Point and group.
    pub parts: Vec<(usize, usize)>,
}

/// The parcels of a step's points: each group of chains at each point, or along each sequence. Points of a sequence have the same groups.
pub fn parcels(points: &[Point]) -> Vec<Parcel> {
    let mut parcels = Vec::new();
    let mut sequences: BTreeMap<u32, Vec<(u64, usize)>> = BTreeMap::new();
    for (at, point) in points.iter().enumerate() {
        match point.place {
            Some(place) => sequences.entry(place.sequence).or_default().push((place.position, at)),
            None => parcels.extend((0..point.groups.len()).map(|group| Parcel { parts: vec![(at, group)] })),
        }
    }
    for mut members in sequences.into_values() {
        members.sort_unstable();
        let groups = members.iter().map(|(_, at)| points[*at].groups.len()).min().unwrap_or(0);
        parcels.extend((0..groups).map(|group| Parcel { parts: members.iter().map(|(_, at)| (*at, group)).collect() }));
    }
    parcels
}

impl Parcel {
    /// Its groups with their points.
    pub fn groups<'a>(&'a self, points: &'a [Point]) -> impl Iterator<Item = (&'a Point, &'a Group)> {
        self.parts.iter().map(|(point, group)| (&points[*point], &points[*point].groups[*group]))
    }

    /// Where it stands.
    pub fn state(&self, points: &[Point]) -> State {
        let states: Vec<State> = self.groups(points).map(|(point, group)| group.state(point.measure)).collect();
        if states.iter().all(|state| *state == State::Recorded) {
            State::Recorded
        } else if states.iter().all(|state| *state == State::Due) {
            State::Due
        } else {
            State::Partial
        }
    }

    /// Attempted spin updates that are still to be done, by the nominal number of sites.
    pub fn updates_due(&self, points: &[Point]) -> f64 {
        self.groups(points).map(|(point, group)| point.updates_due_of(group)).sum()
    }
}
