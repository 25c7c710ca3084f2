//! What distinguishes one single-spin rule from another: how the next state is chosen.

/// The random numbers of one visit.
#[derive(Clone, Copy, Default)]
pub(crate) struct Draw {
    /// Which of the other states is proposed: 0 to q - 2, in order of states with the present one left out. 0 for rules that do not
    /// propose.
    pub(crate) proposal: u32,
    /// A uniform half word.
    pub(crate) word: u32,
}

/// A line of a precomputed table.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Entry {
    /// Half words below it decide one way, others the other way; 0 to 2^32.
    pub(crate) limit: u64,
    /// An energy; which one is the rule's affair.
    pub(crate) change: f64,
}

/// A rule at an inverse temperature. Its three ways of deciding (two states from a table, any states from a table, directly) choose the
/// same state from the same draw wherever they compute the same energies.
pub(crate) trait Rule: Copy + Send + Sync + 'static {
    /// Whether a visit draws a proposal.
    const PROPOSES: bool;

    /// Lines that a table holds for each surrounding of a site; 2 for two states.
    fn lines(states: usize) -> usize;

    /// Writes these lines, given the energy of each state in the surrounding.
    ///
    /// For two states, line a serves a site in state a: its limit is for [`Rule::toggled`], its `change` what leaving a costs.
    fn tabulate(&self, energies: &[f64], soft: bool, lines: &mut [Entry]);

    /// Two states: the next state, `hit` being 1 where the half word is below the limit.
    fn toggled(state: u8, hit: u8) -> u8;

    /// More states: the next one and the change of energy.
    fn chosen(lines: &[Entry], states: usize, state: u8, draw: Draw) -> (u8, f64);

    /// The same without a table; `change` gives the change of energy on going to a state.
    fn decided(&self, states: usize, soft: bool, state: u8, draw: Draw, change: impl FnMut(u8) -> f64) -> (u8, f64);

    /// 1/(k_B T).
    fn inverse_temperature(&self) -> f64;
}

/// The state that a proposal means.
#[inline]
pub(crate) fn proposed(state: u8, proposal: u32) -> u8 {
    let proposal = proposal as u8;
    proposal + u8::from(proposal >= state)
}

/// 1 where the word is below the limit, both at most 2^32: the sign of their difference. A comparison would do, but compilers make a branch
/// of what hangs on it, which would be mispredicted all the time.
#[inline(always)]
pub(crate) fn below(word: u32, limit: u64) -> u8 {
    (u64::from(word).wrapping_sub(limit) >> 63) as u8
}

/// The number where `one` is 1, else 0. No branch, as above.
#[inline(always)]
pub(crate) fn only_if(one: u8, number: f64) -> f64 {
    f64::from_bits(number.to_bits() & u64::from(one).wrapping_neg())
}
