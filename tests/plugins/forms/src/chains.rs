//! Configurations of a group of chains, and changes of energy of all forms.

use spinledger_sdk::numerics::random::{StreamKey, Xoshiro};
use spinledger_sdk::{Energy, Error, Graph, Problem, Result, Spins, View};

/// One chain.
pub struct Chain {
    pub stream: Xoshiro,
    pub states: Vec<u8>,
    pub vectors: Vec<f64>,
    pub energy: f64,
    pub proposed: u64,
    pub accepted: u64,
}

impl Chain {
    pub fn new(key: &StreamKey, problem: &Problem<'_>) -> Self {
        let (total, n) = (problem.graph.total, problem.energy.components);
        let states = if n == 0 { vec![0; total] } else { Vec::new() };
        let (stream, vectors) = (Xoshiro::from_key(key), vec![0.0; total * n]);
        Chain { stream, states, vectors, energy: 0.0, proposed: 0, accepted: 0 }
    }

    pub fn view(&self, components: usize) -> View<'_> {
        if components == 0 { View::bytes(&self.states) } else { View::vectors(&self.vectors, components) }
    }

    pub fn import(&mut self, problem: &Problem<'_>, view: &View<'_>) -> Result<()> {
        let n = problem.energy.components;
        for site in 0..problem.graph.total {
            match n {
                0 => self.states[site] = view.state(site),
                n => (0..n).for_each(|c| self.vectors[site * n + c] = view.component(site, c)),
            }
        }
        self.energy = self.total(problem)?;
        Ok(())
    }

    pub fn export(&self, spins: &mut Spins<'_>) {
        match spins {
            Spins::States(out) => out.copy_from_slice(&self.states),
            Spins::Vectors(out) => out.copy_from_slice(&self.vectors),
        }
    }

    /// Total energy.
    fn total(&self, problem: &Problem<'_>) -> Result<f64> {
        let (g, e) = (&problem.graph, &problem.energy);
        let mut sum = 0.0;
        for (b, bond) in g.bonds.iter().enumerate() {
            let (i, j) = (bond.i as usize, bond.j as usize);
            if !e.bond_tables.is_empty() {
                sum += strength(e.bond_strengths, b) * self.pair(e, usize::from(e.bond_tables[b]), i, j, None);
            }
        }
        for s in 0..g.sites {
            sum += self.alone(e, s, None);
        }
        for f in 0..e.factors.len() {
            sum += self.factor(e, f, None);
        }
        match e.custom {
            Some(custom) => Ok(sum + custom.total(&self.view(e.components))?),
            None => Ok(sum),
        }
    }

    /// Change of energy, callbacks aside, when a site takes a state or a vector.
    pub fn change(&self, g: &Graph<'_>, e: &Energy<'_>, site: usize, new: &New) -> f64 {
        let with = Some((site, new));
        let mut sum = self.alone(e, site, with) - self.alone(e, site, None);
        if !e.neighbour_tables.is_empty() {
            let mut own = None;
            for k in g.range(site) {
                let other = g.neighbours[k] as usize;
                // A bond of the site with itself stands twice and counts once.
                if other == site && own.replace(g.neighbour_bonds[k]) == Some(g.neighbour_bonds[k]) {
                    continue;
                }
                let table = usize::from(e.neighbour_tables[k]);
                let change = self.pair(e, table, site, other, with) - self.pair(e, table, site, other, None);
                sum += strength(e.neighbour_strengths, k) * change;
            }
        }
        if !e.site_factor_offsets.is_empty() {
            for k in e.site_factor_offsets[site] as usize..e.site_factor_offsets[site + 1] as usize {
                let f = e.site_factors[k] as usize;
                sum += self.factor(e, f, with) - self.factor(e, f, None);
            }
        }
        sum
    }

    fn state(&self, site: usize, with: Option<(usize, &New)>) -> usize {
        usize::from(match with {
            Some((s, New::State(state))) if s == site => *state,
            _ => self.states[site],
        })
    }

    fn vector<'a>(&'a self, n: usize, site: usize, with: Option<(usize, &'a New)>) -> &'a [f64] {
        match with {
            Some((s, New::Vector(vector))) if s == site => &vector[..n],
            _ => &self.vectors[site * n..(site + 1) * n],
        }
    }

    fn pair(&self, e: &Energy<'_>, table: usize, i: usize, j: usize, with: Option<(usize, &New)>) -> f64 {
        let (q, n) = (e.states, e.components);
        if n == 0 {
            return e.pair_tables[table * q * q + self.state(i, with) * q + self.state(j, with)];
        }
        product(self.vector(n, i, with), &e.couplings[table * n * n..][..n * n], self.vector(n, j, with))
    }

    fn alone(&self, e: &Energy<'_>, site: usize, with: Option<(usize, &New)>) -> f64 {
        let (q, n, class) = (e.states, e.components, usize::from(e.site_class[site]));
        let mut sum = 0.0;
        if !e.site_tables.is_empty() {
            sum += e.site_tables[class * q + self.state(site, with)];
        }
        if !e.anisotropies.is_empty() {
            let spin = self.vector(n, site, with);
            sum += product(spin, &e.anisotropies[class * n * n..][..n * n], spin);
        }
        if !e.fields.is_empty() {
            sum += e.fields[class * n..][..n].iter().zip(self.vector(n, site, with)).map(|(f, s)| f * s).sum::<f64>();
        }
        strength(e.site_strengths, site) * sum
    }

    fn factor(&self, e: &Energy<'_>, f: usize, with: Option<(usize, &New)>) -> f64 {
        let table = &e.factor_tables[e.factors[f].table as usize];
        let sites = &e.factor_sites[e.factors[f].first as usize..][..table.order];
        table.energies[sites.iter().fold(0, |index, &s| index * e.states + self.state(s as usize, with))]
    }

    /// Everything that the future depends on.
    pub fn save(&self, out: &mut Vec<u8>) {
        self.stream.state().iter().for_each(|word| out.extend_from_slice(&word.to_le_bytes()));
        for word in [self.energy.to_bits(), self.proposed, self.accepted] {
            out.extend_from_slice(&word.to_le_bytes());
        }
        out.extend_from_slice(&self.states);
        self.vectors.iter().for_each(|x| out.extend_from_slice(&x.to_le_bytes()));
    }

    /// Takes back what `save` wrote; returns the rest.
    pub fn restore<'a>(&mut self, bytes: &'a [u8]) -> Result<&'a [u8]> {
        let short = || Error::new("the saved state is too short");
        let mut rest = bytes;
        let mut word = || {
            let (word, after) = rest.split_first_chunk::<8>().ok_or_else(short)?;
            rest = after;
            Ok::<u64, Error>(u64::from_le_bytes(*word))
        };
        self.stream = Xoshiro::from_state([word()?, word()?, word()?, word()?]);
        self.energy = f64::from_bits(word()?);
        (self.proposed, self.accepted) = (word()?, word()?);
        let (states, after) = rest.split_at_checked(self.states.len()).ok_or_else(short)?;
        self.states.copy_from_slice(states);
        let (vectors, after) = after.split_at_checked(self.vectors.len() * 8).ok_or_else(short)?;
        for (x, bytes) in self.vectors.iter_mut().zip(vectors.as_chunks::<8>().0) {
            *x = f64::from_le_bytes(*bytes);
        }
        Ok(after)
    }
}

/// What a site may become.
pub enum New {
    State(u8),
    Vector([f64; 3]),
}

fn strength(strengths: &[f64], index: usize) -> f64 {
    strengths.get(index).copied().unwrap_or(1.0)
}

/// a^T M b.
fn product(a: &[f64], matrix: &[f64], b: &[f64]) -> f64 {
    let n = a.len();
    (0..n).map(|r| a[r] * (0..n).map(|c| matrix[r * n + c] * b[c]).sum::<f64>()).sum()
}
