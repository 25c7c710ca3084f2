//! Tables of decisions for sites whose surroundings are alike.
//!
//! The neighbours' states are coded as a number, to which each neighbour adds what its state stands for ([`Kind::keys`]). Neighbours over
//! the same pair table and strength are counted by state, or spelt out as digits, whichever gives fewer numbers: on a square lattice with
//! two states the code is the number of neighbours in state 1.

use crate::landscape::Landscape;
use crate::rule::{Entry, Rule};

/// Largest table, in lines: 2^14 lines of 16 bytes stay in a second-level cache.
const MOST_LINES: usize = 1 << 14;
/// Largest sum of all tables.
const MOST_LINES_IN_ALL: usize = 1 << 17;

/// Room left for tables.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Budget {
    lines: usize,
}

impl Budget {
    /// As much as caches hold.
    pub(crate) const STANDARD: Budget = Budget { lines: MOST_LINES_IN_ALL };
    /// No tables: every site is computed directly.
    #[cfg(test)]
    pub(crate) const NOTHING: Budget = Budget { lines: 0 };
}

/// A table of decisions.
pub(crate) struct Kind {
    /// Sites of a star: the site and its neighbours.
    pub(crate) width: usize,
    /// What neighbour k adds to the code in state t: `keys[k * states + t]`.
    pub(crate) keys: Vec<u32>,
    /// Two states, and the code is the number of neighbours in state 1.
    pub(crate) plain: bool,
    /// Lines for each surrounding.
    pub(crate) lines: usize,
    /// The table: `lines` for each code.
    pub(crate) table: Vec<Entry>,
}

/// Neighbours over one pair table with one strength.
struct Group {
    table: u16,
    strength: f64,
    members: usize,
}

impl Group {
    /// Codes if neighbours are counted: a digit for each state but 0, each up to the number of members.
    fn counted(&self, states: usize) -> Option<usize> {
        (self.members + 1).checked_pow(states as u32 - 1)
    }

    /// Codes if they are spelt out: a digit for each member.
    fn spelt(&self, states: usize) -> Option<usize> {
        states.checked_pow(self.members as u32)
    }

    /// Number of codes, and whether neighbours are counted.
    fn codes(&self, states: usize) -> (usize, bool) {
        let (counted, spelt) = (self.counted(states).unwrap_or(usize::MAX), self.spelt(states).unwrap_or(usize::MAX));
        (counted.min(spelt), counted <= spelt)
    }

    /// What a member adds in a state, within the group.
    fn key(&self, states: usize, member: usize, state: usize) -> usize {
        match (self.codes(states).1, state) {
            (true, 0) => 0,
            (true, _) => (self.members + 1).pow(state as u32 - 1),
            (false, _) => state * states.pow(member as u32),
        }
    }

    /// How many members are in each state, for a code; none where no configuration has this code.
    fn occupation(&self, states: usize, mut code: usize) -> Option<Vec<usize>> {
        let mut occupation = vec![0; states];
        if self.codes(states).1 {
            for count in &mut occupation[1..] {
                *count = code % (self.members + 1);
                code /= self.members + 1;
            }
            occupation[0] = self.members.checked_sub(occupation.iter().sum())?;
        } else {
            for _ in 0..self.members {
                occupation[code % states] += 1;
                code /= states;
            }
        }
        Some(occupation)
    }
}

impl Kind {
    /// The table of a site (and of all like it), if there is room for it.
    pub(crate) fn new<R: Rule>(
        landscape: &Landscape<'_>,
        site: usize,
        rule: &R,
        soft: bool,
        budget: &mut Budget,
    ) -> Option<Self> {
        let q = landscape.states();
        let mut groups: Vec<Group> = Vec::new();
        // For each neighbour its group, and which member of it it is.
        let mut places = Vec::new();
        for (table, strength) in landscape.ties(site) {
            let same = |g: &Group| g.table == table && g.strength.to_bits() == strength.to_bits();
            let group = groups.iter().position(same).unwrap_or_else(|| {
                groups.push(Group { table, strength, members: 0 });
                groups.len() - 1
            });
            places.push((group, groups[group].members));
            groups[group].members += 1;
        }
        let lines = R::lines(q);
        let codes = groups.iter().try_fold(1_usize, |codes, group| codes.checked_mul(group.codes(q).0))?;
        let size = codes.checked_mul(lines).filter(|size| *size <= MOST_LINES.min(budget.lines))?;
        budget.lines -= size;

        let mut units = Vec::new();
        let mut unit = 1;
        for group in &groups {
            units.push(unit);
            unit *= group.codes(q).0;
        }
        let keys: Vec<u32> = places
            .iter()
            .flat_map(|&(group, member)| (0..q).map(move |state| (group, member, state)))
            .map(|(group, member, state)| (units[group] * groups[group].key(q, member, state)) as u32)
            .collect();
        let mut table = vec![Entry::default(); size];
        let mut energies = vec![0.0; q];
        'codes: for (code, lines) in table.chunks_exact_mut(lines).enumerate() {
            for (state, energy) in energies.iter_mut().enumerate() {
                *energy = landscape.own(site, state);
            }
            for (group, unit) in groups.iter().zip(&units) {
                let Some(occupation) = group.occupation(q, code / unit % group.codes(q).0) else { continue 'codes };
                let pairs = landscape.table(group.table);
                for (state, energy) in energies.iter_mut().enumerate() {
                    for (other, count) in occupation.iter().enumerate() {
                        *energy += group.strength * (*count as f64 * pairs[state * q + other]);
                    }
                }
            }
            rule.tabulate(&energies, soft, lines);
        }
        let plain = q == 2 && keys.chunks_exact(2).all(|key| key == [0, 1]);
        Some(Kind { width: places.len() + 1, keys, plain, lines, table })
    }

    /// The code of a surrounding, given the state of each neighbour.
    #[inline]
    pub(crate) fn code(&self, states: usize, neighbours: impl Iterator<Item = u8>) -> usize {
        let rows = self.keys.chunks_exact(states);
        rows.zip(neighbours).map(|(row, state)| row[state as usize] as usize).sum()
    }
}
