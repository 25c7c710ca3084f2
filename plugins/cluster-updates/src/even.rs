//! Lattices that look alike from nearly everywhere.
//!
//! On a periodic lattice the numbers of a site's neighbours differ from its own by the same few steps except at the edges. A byte a site
//! that names its steps takes a sixteenth of the memory of four neighbours, so that lattices of some size stay in a fast cache.

use crate::adjacency::Adjacency;

/// Most neighbours that get a loop of known length.
const MOST: usize = 12;
/// Most different rows of steps: what a byte can name.
const MOST_ROWS: usize = 256;

/// Neighbours of sites that all have as many, over bonds of one kind, none twice.
#[derive(Debug)]
pub(crate) struct Even {
    /// Neighbours of each site.
    pub(crate) degree: usize,
    /// Rows of `degree` steps, to be added with wrapping.
    pub(crate) steps: Vec<u32>,
    /// Row of each free site.
    pub(crate) rows: Vec<u8>,
}

impl Even {
    /// The same neighbours in the same order, if they can be told so. Cost: one pass over the adjacency.
    pub(crate) fn new(adjacency: &Adjacency<'_>) -> Option<Self> {
        let degree = *adjacency.neighbours.offsets.get(1)? as usize;
        let one_kind = adjacency.tie.is_empty() && !adjacency.is_varied();
        let alike = adjacency.neighbours.offsets.windows(2).all(|pair| (pair[1] - pair[0]) as usize == degree);
        if !one_kind || !alike || !(1..=MOST).contains(&degree) {
            return None;
        }
        let mut even = Even { degree, steps: Vec::new(), rows: Vec::with_capacity(adjacency.neighbours.offsets.len()) };
        let mut last = 0;
        for (site, neighbours) in adjacency.neighbours.sites.chunks_exact(degree).enumerate() {
            // A neighbour twice would be looked at twice before it is added once.
            if (1..degree).any(|k| neighbours[..k].contains(&neighbours[k])) {
                return None;
            }
            let is = |row: usize| {
                let steps = even.steps.get(row * degree..(row + 1) * degree);
                steps.is_some_and(|steps| {
                    steps.iter().zip(neighbours).all(|(step, n)| (site as u32).wrapping_add(*step) == *n)
                })
            };
            // Mostly the row of the site before.
            if !is(last) {
                let count = even.steps.len() / degree;
                last = (0..count).find(|row| is(*row)).unwrap_or(count);
                if last == MOST_ROWS {
                    return None;
                }
                if last == count {
                    even.steps.extend(neighbours.iter().map(|n| n.wrapping_sub(site as u32)));
                }
            }
            even.rows.push(last as u8);
        }
        Some(even)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::tests::lattices::Square;
    use crate::tests::models::Ising;
    use spinledger_sdk::testing::{Bench, params};

    fn even(size: &str, model: &str) -> Option<Even> {
        let bench = Bench::new::<Square, Ising>(&params(size), &params(model));
        Even::new(&Adjacency::new(&bench.problem()))
    }

    #[test]
    fn a_torus_has_nine_rows() {
        let even = even(r#"{"size": [5, 7]}"#, "{}").expect("an even lattice");
        assert_eq!((even.degree, even.steps.len(), even.rows.len()), (4, 36, 35));
    }

    #[test]
    fn others_are_not_told_so() {
        assert!(even(r#"{"size": [2, 7]}"#, "{}").is_none(), "neighbours stand twice");
        assert!(even(r#"{"size": 5, "boundary": "free"}"#, "{}").is_none(), "fewer neighbours at the edge");
        assert!(even(r#"{"size": 5}"#, r#"{"coupling": {"first.x": 2}}"#).is_none(), "two kinds of bonds");
    }
}
