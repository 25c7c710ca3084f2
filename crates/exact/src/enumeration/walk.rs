//! A walk through all states that changes one site at a time.
//!
//! Energies are added as integers, multiples of a power of two chosen so that no sum overflows: nothing drifts over a
//! billion steps, and couplings like 1 or 0.25 are exact. Others are rounded once, by about 1e-18 of the largest energy.

use super::system::{Order, PairSystem};

/// Fixed-point numbers: an integer times a power of two.
#[derive(Clone, Copy, Debug)]
pub(super) struct Scale {
    /// Value of 1.
    pub(super) quantum: f64,
    /// Integers that differ by at most this are one value up to rounding.
    pub(super) tolerance: i64,
}

impl Scale {
    /// The scale for sums of terms of which these are the largest magnitudes.
    fn new(terms: impl Iterator<Item = f64> + Clone) -> Self {
        let total: f64 = terms.clone().sum::<f64>().max(f64::MIN_POSITIVE);
        let (count, largest) = terms.fold((1.0, 0.0f64), |(count, largest), term| (count + 1.0, largest.max(term)));
        // Sums stay below 2^60, changes below 2^61.
        let mut quantum = 1.0;
        while total / quantum > (1u64 << 60) as f64 {
            quantum *= 2.0;
        }
        while total / quantum <= (1u64 << 59) as f64 && quantum > 1e-290 {
            quantum *= 0.5;
        }
        // Each term is rounded to the quantum here and to 2^-53 of itself when it was written.
        let tolerance = count * (1.0 + largest / quantum * f64::EPSILON);
        Self { quantum, tolerance: tolerance as i64 }
    }

    fn fixed(self, value: f64) -> i64 {
        (value / self.quantum).round() as i64
    }
}

/// What the walk counts: the energy and up to three order numbers.
pub(super) type Key = (i64, [i64; 3]);

/// Adjacency and integer tables of a system.
pub(super) struct Walk<'a> {
    system: &'a PairSystem,
    pub(super) energy: Scale,
    pub(super) order: Scale,
    /// Energy of free site i in state s apart from bonds between free sites and factors: `site[i * states + s]`.
    site: Vec<i64>,
    /// For each free site: neighbour, table, and whether this site is the first of the bond.
    bonds: Vec<Vec<(usize, usize, bool)>>,
    tables: Vec<Vec<i64>>,
    factors: Vec<Vec<usize>>,
    factor_tables: Vec<Vec<i64>>,
    components: Vec<Vec<i64>>,
    state: Vec<u8>,
}

impl<'a> Walk<'a> {
    /// Prepares a checked system, all free sites in state 0.
    pub(super) fn new(system: &'a PairSystem) -> Self {
        let (q, free) = (system.states, system.free);
        let largest = |table: &Vec<f64>| table.iter().fold(0.0f64, |most, entry| most.max(entry.abs()));
        let of_tables: Vec<f64> = system.tables.iter().map(largest).collect();
        let of_sites: Vec<f64> = system.site_tables.iter().map(largest).collect();
        let of_factors: Vec<f64> = system.factor_tables.iter().map(largest).collect();
        let terms = system.bonds.iter().map(|bond| of_tables[bond.2 as usize]);
        let terms = terms.chain(system.classes.iter().map(|class| of_sites[*class as usize]));
        let energy = Scale::new(terms.chain(system.factors.iter().map(|factor| of_factors[factor.0 as usize])));
        let components: &[Vec<f64>] = match &system.order {
            Order::Values(components) => components,
            Order::Colours => &[],
        };
        let most = components.iter().map(largest).fold(0.0, f64::max);
        let order = Scale::new(std::iter::repeat_n(most, free));
        let fixed = |scale: Scale, tables: &[Vec<f64>]| -> Vec<Vec<i64>> {
            tables.iter().map(|table| table.iter().map(|entry| scale.fixed(*entry)).collect()).collect()
        };
        let mut walk = Self {
            system,
            energy,
            order,
            site: vec![0; free * q],
            bonds: vec![Vec::new(); free],
            tables: fixed(energy, &system.tables),
            factors: vec![Vec::new(); free],
            factor_tables: fixed(energy, &system.factor_tables),
            components: fixed(order, components),
            state: std::iter::repeat_n(0, free).chain(system.pinned.iter().copied()).collect(),
        };
        walk.attach();
        walk
    }

    /// Distributes the energies over the free sites they depend on.
    fn attach(&mut self) {
        let (q, free) = (self.system.states, self.system.free);
        let site_tables: Vec<Vec<i64>> = self
            .system
            .site_tables
            .iter()
            .map(|table| table.iter().map(|entry| self.energy.fixed(*entry)).collect())
            .collect();
        for (site, class) in self.system.classes.iter().enumerate() {
            let own = &mut self.site[site * q..(site + 1) * q];
            own.iter_mut().zip(&site_tables[*class as usize]).for_each(|(total, entry)| *total += entry);
        }
        for (i, j, table) in &self.system.bonds {
            let (i, j, table) = (*i as usize, *j as usize, *table as usize);
            if i == j && i < free {
                for state in 0..q {
                    self.site[i * q + state] += self.tables[table][state * q + state];
                }
                continue;
            }
            if i < free {
                self.bonds[i].push((j, table, true));
            }
            if j < free {
                self.bonds[j].push((i, table, false));
            }
        }
        for (number, (_, sites)) in self.system.factors.iter().enumerate() {
            let mut sites: Vec<usize> = sites.iter().map(|site| *site as usize).filter(|site| *site < free).collect();
            sites.sort_unstable();
            sites.dedup();
            for site in sites {
                self.factors[site].push(number);
            }
        }
    }

    fn factor(&self, number: usize) -> i64 {
        let (table, sites) = &self.system.factors[number];
        let index =
            sites.iter().fold(0, |index, site| index * self.system.states + usize::from(self.state[*site as usize]));
        self.factor_tables[*table as usize][index]
    }

    /// The part of the energy that depends on a free site.
    fn around(&self, site: usize) -> i64 {
        let q = self.system.states;
        let own = usize::from(self.state[site]);
        let mut energy = self.site[site * q + own];
        for (other, table, first) in &self.bonds[site] {
            let other = usize::from(self.state[*other]);
            let index = if *first { own * q + other } else { other * q + own };
            energy += self.tables[*table][index];
        }
        energy + self.factors[site].iter().map(|number| self.factor(*number)).sum::<i64>()
    }

    /// Energy of the present state, including what pinned sites have among themselves.
    fn total(&self) -> i64 {
        let q = self.system.states;
        let state = |site: u32| usize::from(self.state[site as usize]);
        let mut energy = 0;
        for (i, j, table) in &self.system.bonds {
            energy += self.tables[*table as usize][state(*i) * q + state(*j)];
        }
        for (site, class) in self.system.classes.iter().enumerate() {
            let entry = self.system.site_tables[*class as usize][usize::from(self.state[site])];
            energy += self.energy.fixed(entry);
        }
        energy + (0..self.system.factors.len()).map(|number| self.factor(number)).sum::<i64>()
    }

    /// Calls `visit` for each of `count` states: those of the reflected Gray code with as many digits as free sites, in
    /// which one digit changes by one from state to state (Knuth, The Art of Computer Programming 4A, 7.2.1.1).
    pub(super) fn run<E>(mut self, count: u64, mut visit: impl FnMut(Key) -> Result<(), E>) -> Result<(), E> {
        let (q, free) = (self.system.states, self.system.free);
        let colours = matches!(self.system.order, Order::Colours);
        let mut energy = self.total();
        let mut order = [0i64; 3];
        for (component, sum) in self.components.iter().zip(&mut order) {
            *sum = component[0] * free as i64;
        }
        let mut shares = vec![0i64; q];
        shares[0] = free as i64;
        let mut squares = shares[0] * shares[0];
        let mut up = vec![true; free];
        for number in 1..=count {
            let key = if colours { [shares.iter().copied().max().unwrap_or(0), squares, 0] } else { order };
            visit((energy, key))?;
            if number == count {
                break;
            }
            // The digits that stand at their end turn round; the first that does not moves.
            let mut site = 0;
            loop {
                let end = if up[site] { q - 1 } else { 0 };
                if usize::from(self.state[site]) != end {
                    break;
                }
                up[site] = !up[site];
                site += 1;
            }
            let old = usize::from(self.state[site]);
            let new = if up[site] { old + 1 } else { old - 1 };
            energy -= self.around(site);
            self.state[site] = new as u8;
            energy += self.around(site);
            for (component, sum) in self.components.iter().zip(&mut order) {
                *sum += component[new] - component[old];
            }
            squares += 2 * (shares[new] - shares[old] + 1);
            shares[old] -= 1;
            shares[new] += 1;
        }
        Ok(())
    }
}
