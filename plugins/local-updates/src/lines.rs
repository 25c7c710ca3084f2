//! Tables of decisions for 64 visits at once, and when their energies may be added in any order.

use crate::bytes::WIDTH;
use crate::kind::Kind;
use crate::rule::Entry;

/// Most lines of such a table.
pub(crate) const MOST: usize = 32;

/// Largest power of two, up or down, that a unit may be: far from where doubles end.
const REACH: i32 = 200;

/// A table of two states, by columns. The number of a line is twice the number of neighbours in state 1, plus the state.
#[derive(Clone, Debug)]
pub(crate) struct Lines {
    /// Number of lines.
    pub(crate) count: usize,
    /// The last word below the limit; 0 where there is none.
    pub(crate) last: [u32; MOST],
    /// 1 where there is one.
    pub(crate) possible: [u8; WIDTH],
    /// Whether there is a line without one.
    pub(crate) some_never: bool,
    limits: [u32; MOST],
    different: usize,
    /// A word is below the limit where fewer limits than this, of [`Lines::sorted`], are at or below it.
    pub(crate) rank: [u8; WIDTH],
    /// Change of energy in units, plus what makes all of them positive or 0, so that bytes hold sums of several.
    pub(crate) small: [u8; WIDTH],
    /// What is added there.
    pub(crate) small_bias: i64,
    /// Of how many sums of `small` bytes hold the sum; at least 1.
    pub(crate) room: usize,
}

impl Lines {
    /// The table of a kind; none where it does not fit.
    pub(crate) fn new(kind: &Kind, unit: f64) -> Option<Self> {
        let table = &kind.table;
        if !kind.plain || kind.lines != 2 || table.len() > MOST {
            return None;
        }
        let mut sorted: Vec<u32> = table.iter().filter_map(|line| u32::try_from(line.limit).ok()).collect();
        sorted.retain(|limit| *limit > 0);
        sorted.sort_unstable();
        sorted.dedup();
        let mut lines = Lines {
            count: table.len(),
            last: [0; MOST],
            possible: [0; WIDTH],
            some_never: table.iter().any(|line| line.limit == 0),
            limits: [0; MOST],
            different: sorted.len(),
            rank: [0; WIDTH],
            small: [0; WIDTH],
            small_bias: 0,
            room: 255,
        };
        let units = table.iter().map(|line| line.change / unit);
        let least = units.clone().fold(0.0, f64::min);
        if units.fold(0.0, f64::max) - least > 255.0 {
            return None;
        }
        lines.small_bias = -least as i64;
        lines.limits[..sorted.len()].copy_from_slice(&sorted);
        for (number, Entry { limit, change }) in table.iter().enumerate() {
            lines.last[number] = limit.saturating_sub(1) as u32;
            lines.possible[number] = u8::from(*limit > 0);
            lines.rank[number] = match *limit {
                0 => 0,
                // Limits that 32 bits do not hold are above every word.
                limit => 1 + sorted.iter().filter(|other| u64::from(**other) < limit).count() as u8,
            };
            lines.small[number] = (change / unit - least) as u8;
        }
        lines.find_room();
        Some(lines)
    }

    /// Adds more to the changes, for tables that are summed together; none where bytes do not hold that.
    pub(crate) fn biased(mut self, bias: i64) -> Option<Self> {
        let more = u8::try_from(bias - self.small_bias).ok()?;
        for small in &mut self.small[..self.count] {
            *small = small.checked_add(more)?;
        }
        self.small_bias = bias;
        self.find_room();
        Some(self)
    }

    fn find_room(&mut self) {
        let most = self.small.iter().copied().max().unwrap_or(0);
        self.room = 255 / usize::from(most.max(1));
    }

    /// Different limits between 0 and 2^32, ascending.
    #[inline(always)]
    pub(crate) fn sorted(&self) -> &[u32] {
        &self.limits[..self.different.min(MOST)]
    }
}

/// The largest power of two of which all these changes of energy are multiples, so that sums of them are exact in any order. None where there
/// is none within reach.
pub(crate) fn unit<'t>(tables: impl Iterator<Item = &'t Entry>) -> Option<f64> {
    let mut lowest = REACH;
    for change in tables.map(|line| line.change).filter(|change| *change != 0.0) {
        if !change.is_normal() {
            return None;
        }
        let bits = change.to_bits();
        let exponent = (bits >> 52 & 0x7ff) as i32 - 1023;
        // The mantissa has a one above its 52 bits.
        let zeros = (bits | 1 << 52).trailing_zeros().min(52).cast_signed();
        lowest = lowest.min(exponent - 52 + zeros);
    }
    (lowest >= -REACH).then(|| f64::from_bits(((lowest + 1023) as u64) << 52))
}

/// Whether an energy is a multiple of the unit that so many visits, each changing it by at most `most`, cannot lead to where doubles leave out
/// multiples.
pub(crate) fn is_exact(energy: f64, unit: f64, visits: usize, most: f64) -> bool {
    let reach = (energy.abs() + visits as f64 * most) / unit;
    (energy / unit).fract() == 0.0 && reach < (1_u64 << 52) as f64
}

#[cfg(test)]
mod tests {
    use super::*;

    fn unit_of(changes: &[f64]) -> Option<f64> {
        let entries: Vec<Entry> = changes.iter().map(|change| Entry { limit: 0, change: *change }).collect();
        unit(entries.iter())
    }

    #[test]
    fn units_divide_all_changes() {
        assert_eq!(unit_of(&[-8.0, 4.0, 0.0, 12.0]), Some(4.0));
        assert_eq!(unit_of(&[1.0, 0.75]), Some(0.25));
        assert_eq!(unit_of(&[3.0]), Some(1.0));
        assert_eq!(unit_of(&[0.3]), Some(2_f64.powi(-54)));
        assert_eq!(unit_of(&[f64::INFINITY]), None);
        assert_eq!(unit_of(&[1e-100]), None);
    }

    #[test]
    fn energies_are_exact_or_not() {
        assert!(is_exact(-12.0, 4.0, 100, 8.0));
        assert!(!is_exact(-11.0, 4.0, 100, 8.0));
        assert!(!is_exact(4.0, 4.0, 1 << 52, 8.0));
        assert!(!is_exact(f64::NAN, 4.0, 1, 8.0));
    }
}
