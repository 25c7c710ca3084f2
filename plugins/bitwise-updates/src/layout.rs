//! Which vectors there are, which of them are neighbours, and in which order they are visited.

use crate::coupling::Coupling;
use crate::decision::MOST_NEIGHBOURS;
use crate::turn::Copy;
use spinledger_sdk::{Error, Result};
use std::collections::BTreeMap;

/// Vectors and their neighbourhoods. Numbers of vectors: free ones, pinned ones (which nothing changes), copies.
#[derive(Debug)]
pub(crate) struct Layout {
    /// Free vectors.
    pub(crate) free: usize,
    /// Free and pinned ones.
    pub(crate) total: usize,
    /// Copies, by what they are copies of: of colour 0, of colour 1, ... and of pinned vectors.
    pub(crate) copies: Vec<Copy>,
    /// Colours in order of visits.
    pub(crate) colours: Vec<Colour>,
    /// Runs of all colours.
    pub(crate) runs: Vec<Run>,
    /// Vectors in order of visits, each followed by its neighbours: vectors or copies.
    pub(crate) stars: Vec<u32>,
    /// Ends of bonds.
    pub(crate) pairs: Vec<[u32; 2]>,
}

/// Vectors that are visited together: none is a neighbour of another.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Colour {
    pub(crate) runs: std::ops::Range<usize>,
    /// The copies of its vectors.
    pub(crate) copies: std::ops::Range<usize>,
}

/// Vectors of a colour that have equally many neighbours.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Run {
    pub(crate) degree: usize,
    /// Where they stand in [`Layout::stars`].
    pub(crate) stars: std::ops::Range<usize>,
}

/// A layout before its copies have numbers.
#[derive(Debug)]
pub(crate) struct Draft {
    pub(crate) free: usize,
    pub(crate) total: usize,
    /// Colour of each free vector.
    pub(crate) colours: Vec<u32>,
    /// Neighbours of each free vector.
    pub(crate) neighbours: Vec<Vec<Copy>>,
    /// Bonds: each joins a vector to a vector as it is seen from there.
    pub(crate) pairs: Vec<(u32, Copy)>,
}

impl Draft {
    /// Numbers the copies and orders visits: colours in order, within them by number of neighbours, then ascending.
    pub(crate) fn finish(self) -> Layout {
        let plain = |copy: &Copy| !copy.inverted && copy.turns.is_empty();
        let number_of_colours = self.colours.iter().max().map_or(0, |c| *c as usize + 1);
        let colour = |vector: u32| self.colours.get(vector as usize).map_or(number_of_colours, |c| *c as usize);
        let mut numbers: BTreeMap<(usize, &Copy), u32> = BTreeMap::new();
        for copy in self.neighbours.iter().flatten().chain(self.pairs.iter().map(|(_, copy)| copy)) {
            if !plain(copy) {
                numbers.insert((colour(copy.of), copy), 0);
            }
        }
        let mut copies = Vec::new();
        let mut of_colour = vec![0; number_of_colours + 2];
        for ((colour, copy), number) in &mut numbers {
            *number = (self.total + copies.len()) as u32;
            copies.push((*copy).clone());
            of_colour[colour + 1] = copies.len();
        }
        for colour in 0..=number_of_colours {
            of_colour[colour + 1] = of_colour[colour + 1].max(of_colour[colour]);
        }
        let find = |copy: &Copy| if plain(copy) { copy.of } else { numbers[&(colour(copy.of), copy)] };

        let mut order: Vec<usize> = (0..self.free).collect();
        order.sort_by_key(|v| (self.colours[*v], self.neighbours[*v].len(), *v));
        let (mut colours, mut runs, mut stars) = (Vec::new(), Vec::<Run>::new(), Vec::new());
        for of_one in order.chunk_by(|a, b| self.colours[*a] == self.colours[*b]) {
            let first = runs.len();
            for alike in of_one.chunk_by(|a, b| self.neighbours[*a].len() == self.neighbours[*b].len()) {
                let begin = stars.len();
                for vector in alike {
                    stars.push(*vector as u32);
                    stars.extend(self.neighbours[*vector].iter().map(find));
                }
                runs.push(Run { degree: self.neighbours[alike[0]].len(), stars: begin..stars.len() });
            }
            let colour = self.colours[of_one[0]] as usize;
            colours.push(Colour { runs: first..runs.len(), copies: of_colour[colour]..of_colour[colour + 1] });
        }
        let pairs = self.pairs.iter().map(|(from, to)| [*from, find(to)]).collect();
        Layout { free: self.free, total: self.total, copies, colours, runs, stars, pairs }
    }
}

/// One vector a site, one chain a lane.
///
/// # Errors
/// Where a site has more neighbours than are served.
pub(crate) fn by_chains(
    coupling: &Coupling,
    total: usize,
    colour_offsets: &[u32],
    colour_sites: &[u32],
) -> Result<Draft> {
    let free = coupling.offsets.len() - 1;
    let mut colours = vec![0; free];
    for (colour, ends) in colour_offsets.windows(2).enumerate() {
        colour_sites[ends[0] as usize..ends[1] as usize].iter().for_each(|s| colours[*s as usize] = colour as u32);
    }
    let seen = |n: &super::coupling::Neighbour| Copy { of: n.site, inverted: n.turned, turns: Vec::new() };
    let neighbours: Vec<Vec<Copy>> =
        (0..free).map(|site| coupling.neighbours_of(site).iter().map(seen).collect()).collect();
    let most = neighbours.iter().map(Vec::len).max().unwrap_or(0);
    if most > MOST_NEIGHBOURS {
        return Err(too_many(most));
    }
    let pairs = coupling.bonds.iter().map(|tie| (tie.from, seen(&tie.to))).collect();
    Ok(Draft { free, total, colours, neighbours, pairs })
}

/// What to say of a site with too many neighbours.
pub(crate) fn too_many(most: usize) -> Error {
    Error::new(format!(
        "`multi-spin` serves sites of at most {MOST_NEIGHBOURS} neighbours, here are {most}; `metropolis` and `heat-bath` serve any number"
    ))
}
