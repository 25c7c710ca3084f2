//! One lattice in vectors: the box of cells is cut into 512 equal blocks, and a lane is a block.
//!
//! A vector holds the sites that stand at the same place of their blocks. Neighbours of these stand at one place too, so that they are another
//! vector; beyond the edge of a block they are that vector with its lanes turned around by one.

use crate::coupling::Coupling;
use crate::decision::MOST_NEIGHBOURS;
use crate::layout::{Draft, too_many};
use crate::turn::{Copy, Turn};
use crate::word::LANES;
use spinledger_sdk::{Error, Graph, PositionList, Result};
use std::collections::BTreeMap;

/// Blocks in each direction, for lattices of one, two, three and four directions. In the last direction they fill the lowest bits of a lane's
/// number. Stands in the manifest too.
pub(crate) const GRIDS: &[&[u64]] = &[&[512], &[16, 32], &[8, 8, 8], &[4, 4, 4, 8]];

/// How the sites of a lattice are packed.
pub(crate) struct Packing {
    /// Cells of a block in each direction.
    block: Vec<usize>,
    /// Blocks in each direction.
    grid: Vec<usize>,
    /// Cells in each direction.
    cells: Vec<usize>,
    /// Sites of a cell.
    basis: usize,
}

/// From a site of a cell to a site of another.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
struct Step {
    from: usize,
    to: usize,
    offset: Vec<i64>,
    turned: bool,
}

impl Packing {
    /// The packing of a lattice.
    ///
    /// # Errors
    /// Where it cannot be packed, with what can be done.
    pub(crate) fn new(graph: &Graph<'_>) -> Result<Self> {
        let cells: Vec<usize> = graph.cells.iter().map(|n| usize::try_from(*n).unwrap_or(0)).collect();
        let count = cells.iter().product::<usize>();
        let refuse = |what: String| {
            let instead = "`lanes: 512` and the rules `metropolis` and `heat-bath` serve any lattice";
            Err(Error::new(format!(
                "`multi-spin` cannot pack one such lattice by sites (`lanes: 1`): {what}; {instead}"
            )))
        };
        let Some(grid) = GRIDS.iter().find(|grid| grid.len() == cells.len()) else {
            return refuse(format!("it has {} directions", cells.len()));
        };
        let grid: Vec<usize> = grid.iter().map(|n| *n as usize).collect();
        if graph.total != graph.sites || graph.periods.contains(&0) {
            return refuse("it is not periodic in every direction".into());
        }
        if count == 0 || !graph.sites.is_multiple_of(count) {
            return refuse("its sites are not those of equal cells".into());
        }
        let fits = |(n, m): (&usize, &usize)| n.is_multiple_of(*m) && *n >= 2 * m;
        if !cells.iter().zip(&grid).all(fits) {
            let wanted: Vec<String> = grid.iter().map(|m| format!("a multiple of {m}, at least {}", 2 * m)).collect();
            return refuse(format!("its sizes {cells:?} are not {}", wanted.join(" and ")));
        }
        let block = cells.iter().zip(&grid).map(|(n, m)| n / m).collect();
        Ok(Packing { block, grid, basis: graph.sites / count, cells })
    }

    /// Coordinates of the cell of a number, last direction fastest, in a box.
    fn cell(sizes: &[usize], mut number: usize) -> Vec<usize> {
        let mut cell = vec![0; sizes.len()];
        for (place, size) in cell.iter_mut().zip(sizes).rev() {
            *place = number % size;
            number /= size;
        }
        cell
    }

    fn number(sizes: &[usize], cell: &[usize]) -> usize {
        cell.iter().zip(sizes).fold(0, |number, (place, size)| number * size + place)
    }

    /// Vector and lane of a site.
    pub(crate) fn place(&self, site: usize) -> (usize, usize) {
        let cell = Self::cell(&self.cells, site / self.basis);
        let within: Vec<usize> = cell.iter().zip(&self.block).map(|(x, b)| x % b).collect();
        let block: Vec<usize> = cell.iter().zip(&self.block).map(|(x, b)| x / b).collect();
        (Self::number(&self.block, &within) * self.basis + site % self.basis, Self::number(&self.grid, &block))
    }

    /// The bit of each site.
    pub(crate) fn positions(&self, sites: usize) -> PositionList {
        let bit = |site| {
            let (vector, lane) = self.place(site);
            (vector * LANES + lane) as u32
        };
        PositionList::new((0..sites).map(bit).collect())
    }

    /// The vectors.
    ///
    /// # Errors
    /// Where bonds are not the same at every cell, or too many.
    pub(crate) fn draft(&self, graph: &Graph<'_>, coupling: &Coupling) -> Result<Draft> {
        let mut steps: BTreeMap<Step, usize> = BTreeMap::new();
        for tie in &coupling.bonds {
            let wraps = &graph.wraps[tie.number * graph.dimension..][..graph.dimension];
            let (from, to) = (tie.from as usize, tie.to.site as usize);
            let ends = [from, to].map(|site| Self::cell(&self.cells, site / self.basis));
            let offset = (0..graph.dimension)
                .map(|d| ends[1][d] as i64 - ends[0][d] as i64 + i64::from(wraps[d]) * self.cells[d] as i64)
                .collect();
            let step = Step { from: from % self.basis, to: to % self.basis, offset, turned: tie.to.turned };
            *steps.entry(step).or_insert(0) += 1;
        }
        let cells = graph.sites / self.basis;
        let instead = "`lanes: 512` and the rules `metropolis` and `heat-bath` serve it";
        if steps.values().any(|count| count % cells != 0) {
            return Err(Error::new(format!(
                "`multi-spin` packs one lattice by sites where every cell has the same bonds; {instead}"
            )));
        }
        let free = graph.sites / LANES;
        let mut draft =
            Draft { free, total: free, colours: Vec::new(), neighbours: vec![Vec::new(); free], pairs: Vec::new() };
        for vector in 0..free {
            for (step, count) in &steps {
                for _ in 0..count / cells {
                    if vector % self.basis == step.from {
                        let there = self.seen(vector, step.to, &step.offset, 1, step.turned);
                        draft.pairs.push((vector as u32, there.clone()));
                        draft.neighbours[vector].push(there);
                    }
                    if vector % self.basis == step.to {
                        draft.neighbours[vector].push(self.seen(vector, step.from, &step.offset, -1, step.turned));
                    }
                }
            }
        }
        let most = draft.neighbours.iter().map(Vec::len).max().unwrap_or(0);
        if most > MOST_NEIGHBOURS {
            return Err(too_many(most));
        }
        if draft.neighbours.iter().enumerate().any(|(vector, near)| near.iter().any(|n| n.of as usize == vector)) {
            return Err(Error::new(format!(
                "bonds reach from block to block, which `lanes: 1` of `multi-spin` does not serve; {instead}"
            )));
        }
        draft.colours = self.colours(&draft.neighbours);
        Ok(draft)
    }

    /// What stands `sense` x `offset` cells from a vector, as seen from there.
    fn seen(&self, vector: usize, site: usize, offset: &[i64], sense: i64, inverted: bool) -> Copy {
        let mut cell = Self::cell(&self.block, vector / self.basis);
        let mut turns = Vec::new();
        let mut group = LANES.trailing_zeros();
        for (d, place) in cell.iter_mut().enumerate() {
            let (block, grid) = (self.block[d] as i64, self.grid[d] as i64);
            let target = *place as i64 + sense * offset[d];
            *place = target.rem_euclid(block) as usize;
            let blocks = target.div_euclid(block).rem_euclid(grid) as u32;
            let below = group - self.grid[d].trailing_zeros();
            if blocks > 0 {
                turns.push(Turn { group, shift: blocks << below });
            }
            group = below;
        }
        Copy { of: (Self::number(&self.block, &cell) * self.basis + site) as u32, inverted, turns }
    }

    /// Colours of vectors such that no neighbours have the same: two or three in stripes (a sum of coordinates, each times 0, 1 or 2, and of a
    /// number for each site of a cell) where that serves, otherwise the smallest colour that no earlier neighbour has.
    fn colours(&self, neighbours: &[Vec<Copy>]) -> Vec<u32> {
        let proper = |colours: &[u32]| {
            neighbours.iter().enumerate().all(|(v, near)| near.iter().all(|n| colours[v] != colours[n.of as usize]))
        };
        let terms = self.block.len() + self.basis;
        for modulus in 2..=3_usize {
            let Some(choices) = modulus.checked_pow(terms as u32).filter(|choices| *choices <= 1 << 12) else {
                continue;
            };
            for choice in 0..choices {
                let factors = Self::cell(&vec![modulus; terms], choice);
                let colours: Vec<u32> = (0..neighbours.len())
                    .map(|vector| {
                        let cell = Self::cell(&self.block, vector / self.basis);
                        let sum: usize = cell.iter().zip(&factors).map(|(x, f)| x * f).sum();
                        ((sum + factors[self.block.len() + vector % self.basis]) % modulus) as u32
                    })
                    .collect();
                if proper(&colours) {
                    return colours;
                }
            }
        }
        let mut colours: Vec<u32> = vec![u32::MAX; neighbours.len()];
        for vector in 0..neighbours.len() {
            let taken: Vec<u32> = neighbours[vector].iter().map(|n| colours[n.of as usize]).collect();
            colours[vector] = (0..).find(|colour| !taken.contains(colour)).unwrap_or(0);
        }
        colours
    }
}
