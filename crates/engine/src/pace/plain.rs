//! Plain versions to hold fast rules against: what one would write in an afternoon. The square Ising lattice, coupling 1, periodic, a byte a spin, one
//! generator (xoshiro256++). They are kept simple on purpose: a faster baseline would be another baseline.

use spinledger_numerics::elementary::exp;
use spinledger_numerics::random::{StreamKey, Xoshiro, unit_f64};

/// Spins +1 and -1 on a square lattice of side L, rows one after the other.
#[derive(Clone, Debug)]
pub struct Square {
    side: usize,
    spins: Vec<i8>,
    words: Xoshiro,
}

impl Square {
    /// All spins up.
    ///
    /// # Panics
    /// Where the side is 0.
    pub fn new(side: usize, key: &StreamKey) -> Self {
        assert!(side > 0, "a lattice has sites");
        Square { side, spins: vec![1; side * side], words: Xoshiro::from_key(key) }
    }

    /// Side in sites.
    pub fn side(&self) -> usize {
        self.side
    }

    /// Number of sites.
    pub fn sites(&self) -> usize {
        self.spins.len()
    }

    /// Energy, each bond once. Cost: a pass over the lattice.
    pub fn energy(&self) -> f64 {
        let sum = |site: usize| {
            let [right, down, ..] = self.neighbours(site);
            i64::from(self.spins[site]) * (i64::from(self.spins[right]) + i64::from(self.spins[down]))
        };
        -(0..self.spins.len()).map(sum).sum::<i64>() as f64
    }

    /// Right, down, left, up.
    #[inline]
    fn neighbours(&self, site: usize) -> [usize; 4] {
        let (l, sites) = (self.side, self.spins.len());
        let column = site % l;
        [
            if column + 1 == l { site + 1 - l } else { site + 1 },
            if site + l >= sites { site + l - sites } else { site + l },
            if column == 0 { site + l - 1 } else { site - 1 },
            if site < l { site + sites - l } else { site - l },
        ]
    }
}

/// Metropolis, one spin after the other in the order of the array, with a table of acceptance probabilities.
#[derive(Clone, Debug)]
pub struct Metropolis {
    /// The spins.
    pub square: Square,
    /// exp(-dE/T) by s times the sum of the neighbours, from -4 to 4.
    accept: [f64; 9],
}

impl Metropolis {
    /// At 1/T.
    pub fn new(square: Square, inverse_temperature: f64) -> Self {
        let accept = std::array::from_fn(|n| exp(-2.0 * (n as f64 - 4.0) * inverse_temperature));
        Metropolis { square, accept }
    }

    /// One visit to each site.
    pub fn sweep(&mut self) {
        let Square { side, spins, words } = &mut self.square;
        let l = *side;
        for row in 0..l {
            let above = if row == 0 { l - 1 } else { row - 1 } * l;
            let below = if row + 1 == l { 0 } else { row + 1 } * l;
            let here = row * l;
            for column in 0..l {
                let left = if column == 0 { l - 1 } else { column - 1 };
                let right = if column + 1 == l { 0 } else { column + 1 };
                let sum = spins[here + left] + spins[here + right] + spins[above + column] + spins[below + column];
                let aligned = spins[here + column] * sum;
                if aligned <= 0 || unit_f64(words.next()) < self.accept[(aligned + 4) as usize] {
                    spins[here + column] = -spins[here + column];
                }
            }
        }
    }
}

/// Wolff 1989, with a stack of sites to look around from.
#[derive(Clone, Debug)]
pub struct Wolff {
    /// The spins.
    pub square: Square,
    add: f64,
    stack: Vec<u32>,
}

impl Wolff {
    /// At 1/T.
    pub fn new(square: Square, inverse_temperature: f64) -> Self {
        Wolff { square, add: 1.0 - exp(-2.0 * inverse_temperature), stack: Vec::new() }
    }

    /// One cluster; the number of its sites.
    pub fn cluster(&mut self) -> usize {
        let sites = self.square.sites();
        let seed = (unit_f64(self.square.words.next()) * sites as f64) as usize;
        let state = self.square.spins[seed];
        self.square.spins[seed] = -state;
        self.stack.push(seed as u32);
        let mut flipped = 1;
        while let Some(site) = self.stack.pop() {
            for next in self.square.neighbours(site as usize) {
                if self.square.spins[next] == state && unit_f64(self.square.words.next()) < self.add {
                    self.square.spins[next] = -state;
                    self.stack.push(next as u32);
                    flipped += 1;
                }
            }
        }
        flipped
    }
}

/// Swendsen & Wang 1987, with union-find over sites.
#[derive(Clone, Debug)]
pub struct SwendsenWang {
    /// The spins.
    pub square: Square,
    join: f64,
    parents: Vec<u32>,
    signs: Vec<i8>,
}

impl SwendsenWang {
    /// At 1/T.
    pub fn new(square: Square, inverse_temperature: f64) -> Self {
        let sites = square.sites();
        let join = 1.0 - exp(-2.0 * inverse_temperature);
        SwendsenWang { square, join, parents: vec![0; sites], signs: vec![0; sites] }
    }

    /// All clusters, each turned over with probability 1/2.
    pub fn sweep(&mut self) {
        for (site, parent) in self.parents.iter_mut().enumerate() {
            *parent = site as u32;
        }
        for site in 0..self.square.sites() {
            let [right, down, ..] = self.square.neighbours(site);
            for next in [right, down] {
                let equal = self.square.spins[site] == self.square.spins[next];
                if equal && unit_f64(self.square.words.next()) < self.join {
                    let (a, b) = (root(&mut self.parents, site as u32), root(&mut self.parents, next as u32));
                    self.parents[a.max(b) as usize] = a.min(b);
                }
            }
        }
        for sign in &mut self.signs {
            *sign = if self.square.words.next() >> 63 == 0 { 1 } else { -1 };
        }
        for site in 0..self.square.sites() {
            self.square.spins[site] *= self.signs[root(&mut self.parents, site as u32) as usize];
        }
    }
}

/// The root of a site's tree; paths are halved on the way.
fn root(parents: &mut [u32], mut site: u32) -> u32 {
    while parents[site as usize] != site {
        let above = parents[parents[site as usize] as usize];
        parents[site as usize] = above;
        site = above;
    }
    site
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_exact::closed::torus;

    /// Mean energy per site over batches of sweeps against Kaufman 1949. Batches are long against autocorrelation times (some sweeps on 8 x 8), so that their
    /// means scatter independently; five standard errors of 64 batches: a false alarm in about 10^5 runs, and the seeds are fixed.
    fn agrees(side: usize, temperature: f64, mut energy_after: impl FnMut() -> f64) {
        let (batches, length) = (64, 1500);
        (0..500).for_each(|_| assert!(energy_after() <= 2.0 * (side * side) as f64));
        let sites = (side * side) as f64;
        let mut mean = || (0..length).map(|_| energy_after()).sum::<f64>() / (length as f64 * sites);
        let means: Vec<f64> = (0..batches).map(|_| mean()).collect();
        let centre = means.iter().sum::<f64>() / batches as f64;
        let variance = means.iter().map(|m| (m - centre) * (m - centre)).sum::<f64>() / (batches as f64 - 1.0);
        let (error, exact) = ((variance / batches as f64).sqrt(), torus(side, side, 1.0 / temperature).energy);
        assert!(error > 0.0 && error < 0.005, "{error}");
        assert!((centre - exact).abs() < 5.0 * error, "T {temperature}: {centre} +- {error}, exact {exact}");
    }

    fn square(side: usize, name: &str) -> Square {
        Square::new(side, &StreamKey::from_text(name))
    }

    const TEMPERATURES: [f64; 3] = [2.0, 2.27, 3.5];

    #[test]
    fn metropolis_has_exact_energies() {
        for temperature in TEMPERATURES {
            let mut rule = Metropolis::new(square(8, "plain metropolis"), 1.0 / temperature);
            agrees(8, temperature, || {
                rule.sweep();
                rule.square.energy()
            });
        }
    }

    #[test]
    fn wolff_has_exact_energies() {
        for temperature in TEMPERATURES {
            let mut rule = Wolff::new(square(8, "plain wolff"), 1.0 / temperature);
            agrees(8, temperature, || {
                let before = rule.square.spins.clone();
                let flipped = rule.cluster();
                assert_eq!(before.iter().zip(&rule.square.spins).filter(|(a, b)| a != b).count(), flipped);
                rule.square.energy()
            });
        }
    }

    #[test]
    fn swendsen_wang_has_exact_energies() {
        for temperature in TEMPERATURES {
            let mut rule = SwendsenWang::new(square(8, "plain swendsen-wang"), 1.0 / temperature);
            agrees(8, temperature, || {
                rule.sweep();
                rule.square.energy()
            });
        }
    }

    #[test]
    fn an_ordered_lattice_has_the_energy_of_its_bonds() {
        assert_eq!(square(5, "any").energy(), -50.0);
        assert_eq!(square(5, "any").neighbours(4), [0, 9, 3, 24]);
        assert_eq!(square(5, "any").neighbours(20), [21, 0, 24, 15]);
    }
}
