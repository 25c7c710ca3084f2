//! Neighbours with the pair energy over each bond.

use spinledger_sdk::Problem;
use std::borrow::Cow;
use std::collections::HashMap;

/// Most kinds of bonds that get rows of precomputed thresholds.
const MOST_TIES: usize = 1024;

/// What is special about a bond: its pair table, rows by own state, and the factor on its energy.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Tie {
    pub(crate) table: u16,
    pub(crate) strength: f64,
}

/// Neighbours of all free sites. Bonds of a site with itself are left out: no symmetry changes their energy.
pub(crate) struct Adjacency<'a> {
    /// Where the neighbours of each free site begin.
    pub(crate) offsets: Cow<'a, [u32]>,
    pub(crate) neighbours: Cow<'a, [u32]>,
    /// The kinds of bonds; empty where there are too many of them.
    pub(crate) ties: Vec<Tie>,
    /// Kind of each neighbour's bond; empty where there is one kind or too many.
    pub(crate) tie: Vec<u16>,
    /// Table of each neighbour's bond.
    tables: Cow<'a, [u16]>,
    /// Factor on each neighbour's energy; empty where all are 1.
    strengths: Cow<'a, [f64]>,
}

impl<'a> Adjacency<'a> {
    /// Cost: one pass over the adjacency.
    pub(crate) fn new(problem: &Problem<'a>) -> Self {
        let (graph, energy) = (&problem.graph, &problem.energy);
        let mut adjacency = Adjacency {
            offsets: Cow::Borrowed(graph.offsets),
            neighbours: Cow::Borrowed(graph.neighbours),
            ties: Vec::new(),
            tie: Vec::new(),
            tables: Cow::Borrowed(energy.neighbour_tables),
            strengths: Cow::Borrowed(energy.neighbour_strengths),
        };
        if energy.pair_tables.is_empty() {
            adjacency.offsets = Cow::Owned(vec![0; graph.sites + 1]);
            adjacency.neighbours = Cow::Borrowed(&[]);
        } else if graph.bonds.iter().any(|b| b.i == b.j) {
            adjacency.take_out_selves(problem);
        }
        adjacency.sort_out_ties();
        adjacency
    }

    fn take_out_selves(&mut self, problem: &Problem<'a>) {
        let (graph, energy) = (&problem.graph, &problem.energy);
        let mut offsets = vec![0];
        let (mut neighbours, mut tables, mut strengths) = (Vec::new(), Vec::new(), Vec::new());
        for site in 0..graph.sites {
            for entry in graph.range(site).filter(|&e| graph.neighbours[e] as usize != site) {
                neighbours.push(graph.neighbours[entry]);
                tables.push(energy.neighbour_tables[entry]);
                strengths.extend(energy.neighbour_strengths.get(entry));
            }
            offsets.push(neighbours.len() as u32);
        }
        self.offsets = Cow::Owned(offsets);
        self.neighbours = Cow::Owned(neighbours);
        self.tables = Cow::Owned(tables);
        self.strengths = Cow::Owned(strengths);
    }

    fn sort_out_ties(&mut self) {
        (self.ties, self.tie) = kinds(self.neighbours.len(), |entry| self.tie_of(entry));
    }

    /// Whether every bond has its own threshold computed when it is looked at.
    pub(crate) fn is_varied(&self) -> bool {
        self.ties.is_empty() && !self.neighbours.is_empty()
    }

    /// The bond behind an entry of `neighbours`.
    pub(crate) fn tie_of(&self, entry: usize) -> Tie {
        Tie { table: self.tables[entry], strength: self.strengths.get(entry).copied().unwrap_or(1.0) }
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
