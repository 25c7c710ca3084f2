//! Vectors as they look from beyond the edge of a block.

use crate::word::Vector;

/// Lanes that turn around: in groups of 2^`group` lanes, lane l takes what lane l + `shift` has, counted around the group.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Turn {
    pub(crate) group: u32,
    pub(crate) shift: u32,
}

impl Turn {
    /// Turns a vector.
    #[inline(always)]
    pub(crate) fn of(self, vector: &Vector) -> Vector {
        if self.group <= 6 {
            let width = 1 << self.group;
            // The lanes of each group that take from within, without going around.
            let within = ((1_u128 << (width - self.shift)) - 1) as u64 * (u64::MAX / ((1_u128 << width) - 1) as u64);
            let (down, up) = (self.shift, width - self.shift);
            return vector.map(|word| (word.wrapping_shr(down) & within) | (word.wrapping_shl(up) & !within));
        }
        let words = 1 << (self.group - 6);
        let (far, near) = (self.shift as usize / 64, self.shift % 64);
        std::array::from_fn(|word| {
            let (first, place) = (word & !(words - 1), word & (words - 1));
            let at = |step: usize| vector[first | ((place + step) & (words - 1))];
            if near == 0 { at(far) } else { at(far) >> near | at(far + 1) << (64 - near) }
        })
    }
}

/// A copy of a vector, kept beside it: turned, or turned around, or both.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Copy {
    /// The vector.
    pub(crate) of: u32,
    /// All bits the other way.
    pub(crate) inverted: bool,
    /// Turns, one after the other.
    pub(crate) turns: Vec<Turn>,
}

impl Copy {
    /// The copy as of now.
    #[inline(always)]
    pub(crate) fn made(&self, vectors: &[Vector]) -> Vector {
        let mut vector = vectors[self.of as usize];
        for turn in &self.turns {
            vector = turn.of(&vector);
        }
        if self.inverted { vector.map(|word| !word) } else { vector }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn lane(vector: &Vector, lane: usize) -> u64 {
        vector[lane / 64] >> (lane % 64) & 1
    }

    #[test]
    fn lanes_take_what_others_have() {
        let mut stream = spinledger_sdk::numerics::random::SplitMix::new(1);
        let vector: Vector = std::array::from_fn(|_| stream.next());
        for group in 1..=9 {
            let lanes = 1 << group;
            for shift in (0..lanes).filter(|s| *s < 70 || s % 31 == 0) {
                let turned = Turn { group, shift }.of(&vector);
                for l in 0..512_usize {
                    let (first, place) = (l / lanes as usize * lanes as usize, l % lanes as usize);
                    let from = first + (place + shift as usize) % lanes as usize;
                    assert_eq!(lane(&turned, l), lane(&vector, from), "group {group}, shift {shift}, lane {l}");
                }
            }
        }
    }
}
