//! Probabilities of bonds, precomputed for the symmetry operation in use.
//!
//! A row belongs to a kind of bond and to the state of the site from which one looks. It has three parts of q lines, by the state of the
//! neighbour before the flip: neighbours outside the cluster, those waiting in the queue, and those already worked off. Only the first can
//! be added; the `change` of the three adds up to the change of energy when the cluster flips (see `README.md`).

use crate::adjacency::Tie;
use crate::symmetry::Symmetry;
use spinledger_numerics::elementary::exp_m1;
use spinledger_numerics::random::Threshold32;

/// A line of a row.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(crate) struct Line {
    /// The neighbour is added where a half word is below it; 0 to 2^32.
    pub(crate) limit: u64,
    /// Part of the change of energy.
    pub(crate) change: f64,
}

/// The line for a neighbour outside the cluster, if flipping one end alone costs `cost`: added with probability 1 - exp(-cost/T), and
/// never where the cost is not positive (Wolff 1989 Phys. Rev. Lett. 62 361).
pub(crate) fn line(inverse_temperature: f64, cost: f64) -> Line {
    let probability = if cost > 0.0 { -exp_m1(-inverse_temperature * cost) } else { 0.0 };
    Line { limit: Threshold32::new(probability).limit(), change: cost }
}

/// Rows of all kinds of bonds for one operation.
#[derive(Clone, Debug)]
pub(crate) struct Rows {
    /// Kind by kind, row by row, three times q lines.
    pub(crate) lines: Vec<Line>,
    /// Rows of a kind.
    rows: usize,
    /// Where the row of each state begins among the lines of a kind.
    row_of: [u32; 256],
    /// The operation.
    pub(crate) map: [u8; 256],
    /// Number of states.
    states: usize,
}

impl Rows {
    /// Rows of an involution. `pairs` has the pair tables, one after the other.
    pub(crate) fn of_involution(map: &[u8], ties: &[Tie], pairs: &[f64], inverse_temperature: f64) -> Self {
        let q = map.len();
        let mut rows = Rows::empty(q, q, ties.len());
        rows.map[..q].copy_from_slice(map);
        for (number, tie) in ties.iter().enumerate() {
            let pairs = &pairs[tie.table as usize * q * q..][..q * q];
            for (a, image) in map.iter().enumerate() {
                for b in 0..q {
                    let cost = tie.strength * (pairs[*image as usize * q + b] - pairs[a * q + b]);
                    rows.set(number, a, b, line(inverse_temperature, cost));
                }
            }
        }
        rows
    }

    /// Rows for exchanges of two states, none set yet.
    pub(crate) fn of_exchanges(states: usize, ties: usize) -> Self {
        Rows::empty(states, 2, ties)
    }

    fn empty(states: usize, rows: usize, ties: usize) -> Self {
        Rows {
            lines: vec![Line::default(); ties * rows * 3 * states],
            rows,
            row_of: std::array::from_fn(|s| if s < rows { (s * 3 * states) as u32 } else { 0 }),
            map: std::array::from_fn(|s| s as u8),
            states,
        }
    }

    /// Sets the rows for the exchange of two states. A permutation-invariant pair table has one energy on its diagonal and one off it, so
    /// that a bond costs `costs[tie]` where the neighbour is like the site, gains it where it is the other of the two, and nothing else.
    pub(crate) fn exchange(&mut self, one: u8, other: u8, costs: &[(Line, Line)]) {
        let changed: Vec<u8> = (0..self.states).map(|s| s as u8).filter(|s| self.map[*s as usize] != *s).collect();
        for (number, (alike, apart)) in costs.iter().enumerate() {
            for row in 0..2 {
                changed.iter().for_each(|s| self.set(number, row, *s as usize, Line::default()));
            }
            for (row, own, opposite) in [(0, one, other), (1, other, one)] {
                self.set(number, row, own as usize, *alike);
                self.set(number, row, opposite as usize, *apart);
            }
        }
        changed.iter().for_each(|s| self.map[*s as usize] = *s);
        self.map[one as usize] = other;
        self.map[other as usize] = one;
        self.row_of[one as usize] = 0;
        self.row_of[other as usize] = 3 * self.states as u32;
    }

    fn set(&mut self, tie: usize, row: usize, state: usize, line: Line) {
        let first = (tie * self.rows + row) * 3 * self.states + state;
        self.lines[first] = line;
        self.lines[first + self.states] = Line { limit: 0, change: line.change };
        self.lines[first + 2 * self.states] = Line { limit: 0, change: -line.change };
    }

    /// Lines of a kind of bond.
    #[inline]
    pub(crate) fn stride(&self) -> usize {
        self.rows * 3 * self.states
    }

    /// The row of a state, where there is one kind of bond.
    #[inline]
    pub(crate) fn of(&self, state: usize) -> &[Line] {
        &self.lines[self.row(state)..][..3 * self.states]
    }

    /// Where the row of a state begins among the lines of a kind.
    #[inline]
    pub(crate) fn row(&self, state: usize) -> usize {
        self.row_of[state] as usize
    }
}

/// What flipping one end of a bond costs under an exchange: where both ends are alike, and where the other end is the other state.
pub(crate) fn exchange_costs(
    symmetry: &Symmetry,
    ties: &[Tie],
    pairs: &[f64],
    inverse_temperature: f64,
) -> Vec<(Line, Line)> {
    let Symmetry::Exchanges(q) = symmetry else { return Vec::new() };
    ties.iter()
        .map(|tie| {
            let pairs = &pairs[tie.table as usize * q * q..];
            let cost = tie.strength * (pairs[1] - pairs[0]);
            (line(inverse_temperature, cost), line(inverse_temperature, -cost))
        })
        .collect()
}
