//! How chains are cut into blocks.

/// Most rows of a block.
pub const MOST_ROWS: u64 = 65_536;
/// Fewest rows of a block.
pub const FEWEST_ROWS: u64 = 16;
/// Attempted spin updates that a block holds about: a fraction of a second of work for a plain rule, so that a kill costs little.
const UPDATES: u64 = 1 << 27;

/// Number of measurements of a block: the largest power of two for which a block takes at most 2^27 attempted updates, from 16 to 65536.
/// Frozen: rows are ordered by block, so that another length would make other tables.
///
/// `sites` is the nominal number of sites, known without loading the lattice; `every` the sweeps between measurements.
pub fn block_rows(sites: u64, every: u64) -> u64 {
    let per_row = sites.max(1).saturating_mul(every.max(1));
    let fits = (UPDATES / per_row).max(1);
    let power = 1u64 << fits.ilog2();
    power.clamp(FEWEST_ROWS, MOST_ROWS)
}

/// Most rows that a chain can have: blocks are numbered with 32 bits.
pub fn most_rows(length: u64) -> u64 {
    length.saturating_mul(1 << 32)
}

/// A block of a chain of `measure` rows: its number, its first row, how many rows it has.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Block {
    /// Number, from 0.
    pub number: u32,
    /// First row of the chain in it.
    pub first: u64,
    /// Rows; all blocks but the last are full.
    pub rows: u64,
}

/// The blocks of a chain of `measure` rows, at most [`most_rows`].
pub fn blocks(measure: u64, length: u64) -> impl Iterator<Item = Block> {
    (0..measure.div_ceil(length.max(1))).map(move |number| {
        let first = number * length;
        Block { number: number as u32, first, rows: length.min(measure - first) }
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn value_stability() {
        let cases =
            [(1, 1), (1024, 1), (2048, 1), (4096, 1), (65_536, 1), (65_536, 10), (1 << 24, 1), (u64::MAX, u64::MAX)];
        let rows: Vec<u64> = cases.iter().map(|&(sites, every)| block_rows(sites, every)).collect();
        assert_eq!(rows, [65_536, 65_536, 65_536, 32_768, 2048, 128, 16, 16]);
    }

    proptest::proptest! {
        /// Blocks tile the chain, and a longer chain only extends the last block of a shorter one.
        #[test]
        fn blocks_tile(measure in 1u64..10_000, more in 0u64..10_000, length in 1u64..300) {
            let short: Vec<Block> = blocks(measure, length).collect();
            let long: Vec<Block> = blocks(measure + more, length).collect();
            proptest::prop_assert_eq!(short.iter().map(|b| b.rows).sum::<u64>(), measure);
            for (a, b) in short.iter().zip(&long) {
                proptest::prop_assert_eq!((a.number, a.first), (b.number, b.first));
                proptest::prop_assert!(a.rows <= b.rows);
            }
        }
    }
}
