//! Neighbours with the pair energy over each bond.

use spinledger_sdk::{Neighbours, Problem};
use std::collections::HashMap;

/// Most kinds of bonds that get rows of precomputed thresholds.
const MOST_TIES: usize = 1024;

/// What is special about a bond: its pair table, rows by own state, and the factor on its energy.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Tie {
    pub(crate) table: u16,
    pub(crate) strength: f64,
}

impl From<(u16, f64)> for Tie {
    fn from((table, strength): (u16, f64)) -> Self {
        Tie { table, strength }
    }
}

/// Neighbours of all free sites, with their bonds sorted into kinds. Bonds of a site with itself are left out: no symmetry changes their
/// energy.
pub(crate) struct Adjacency<'a> {
    pub(crate) neighbours: Neighbours<'a>,
    /// The kinds of bonds; empty where there are too many of them.
    pub(crate) ties: Vec<Tie>,
    /// Kind of each neighbour's bond; empty where there is one kind or too many.
    pub(crate) tie: Vec<u16>,
}

impl<'a> Adjacency<'a> {
    /// Cost: one pass over the adjacency.
    pub(crate) fn new(problem: &Problem<'a>) -> Self {
        let neighbours = Neighbours::new(problem);
        let (ties, tie) = kinds(neighbours.sites.len(), |entry| neighbours.tie(entry).into());
        Adjacency { neighbours, ties, tie }
    }

    /// Whether every bond has its own threshold computed when it is looked at.
    pub(crate) fn is_varied(&self) -> bool {
        self.ties.is_empty() && !self.neighbours.sites.is_empty()
    }

    /// The bond behind an entry of the neighbours.
    pub(crate) fn tie_of(&self, entry: usize) -> Tie {
        self.neighbours.tie(entry).into()
    }
}

/// Sorts bonds into kinds: the kinds, and the kind of each. There are no kinds where they would be too many, and no kind is told of each where
/// there is only one.
pub(crate) fn kinds(count: usize, tie_of: impl Fn(usize) -> Tie) -> (Vec<Tie>, Vec<u16>) {
    // Looked up only, never walked: its order cannot show.
    let mut known = HashMap::new();
    let (mut ties, mut kind) = (Vec::new(), Vec::with_capacity(count));
    for entry in 0..count {
        let tie = tie_of(entry);
        let next = ties.len();
        let number = *known.entry((tie.table, tie.strength.to_bits())).or_insert(next as u16);
        if usize::from(number) == next {
            if next == MOST_TIES {
                return (Vec::new(), Vec::new());
            }
            ties.push(tie);
        }
        kind.push(number);
    }
    if ties.len() <= 1 {
        kind = Vec::new();
    }
    (ties, kind)
}
