//! Single clusters.

use crate::adjacency::Adjacency;
use crate::bonds::{self, Line, Rows};
use crate::configuration::Configuration;
use crate::even::Even;
use crate::symmetry::Symmetry;
use spinledger_numerics::random::{Halves, below_u32};
use spinledger_sdk::{
    Error, Parameter, Params, Prepare, Problem, Result, Spins, Tallies, Update, UpdateInstance, UpdateSpec, View, kinds,
};

/// Half words below it leave the next cluster as it is: one in 16. See `README.md`, "Why some clusters rest".
const REST: u32 = 1 << 28;

/// The update rule `wolff`.
#[derive(Debug)]
pub(crate) struct Wolff {
    clusters: usize,
}

impl Update for Wolff {
    const SPEC: UpdateSpec = UpdateSpec {
        name: "wolff",
        about: "single-cluster rule: a cluster grown from a random site is flipped",
        formula: "a neighbour is added with probability max(0, 1 - exp(-(E(R a, b) - E(a, b))/T)), a and b the states of both ends, R the \
                  symmetry operation; one cluster in 16, drawn beforehand, and each that takes in a pinned site is left as it is",
        source: "Wolff 1989 Phys. Rev. Lett. 62 361",
        parameters: &[Parameter::optional("clusters", kinds::COUNT, "1", "clusters in a sweep")],
        forms: &["pair"],
        needs: &["inversion|permutation", "inversion|ferromagnetic"],
        ..UpdateSpec::EMPTY
    };
    type Instance<'a> = Chain<'a>;

    fn new(params: &Params) -> Result<Self> {
        Ok(Wolff { clusters: params.count("clusters")? })
    }

    fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Self::Instance<'a>> {
        Chain::new(self.clusters, prepare)
    }
}

/// A chain under single-cluster updates.
pub(crate) struct Chain<'a> {
    clusters: usize,
    base: Configuration<'a>,
    adjacency: Adjacency<'a>,
    /// The same once more, where it is simple.
    even: Option<Even>,
    /// Rows of each involution, or one set that is rewritten for each exchange.
    rows: Vec<Rows>,
    /// For exchanges, see [`Rows::exchange`].
    costs: Vec<(Line, Line)>,
    /// The states while a cluster grows: the state before the flip, plus q if the site waits in the queue, plus 2 q if it was worked off.
    marks: Vec<u16>,
    /// Sites of the cluster in the order in which they were added. One longer than there are sites, since the place behind the last one is
    /// written to before it is known whether a site is added.
    queue: Vec<u32>,
    energy: f64,
}

impl<'a> Chain<'a> {
    /// Gets ready, with all spins in state 0 until a configuration is imported.
    ///
    /// # Errors
    /// See [`Configuration::new`].
    fn new(clusters: usize, prepare: Prepare<'a>) -> Result<Self> {
        let base = Configuration::new(prepare)?;
        let (energy, beta) = (&base.problem.energy, base.inverse_temperature);
        let adjacency = Adjacency::new(&base.problem);
        let costs = bonds::exchange_costs(&base.symmetry, &adjacency.ties, energy.pair_tables, beta);
        let rows = match &base.symmetry {
            Symmetry::Involutions(maps) => {
                maps.iter().map(|map| Rows::of_involution(map, &adjacency.ties, energy.pair_tables, beta)).collect()
            }
            Symmetry::Exchanges(q) => vec![Rows::of_exchanges(*q, adjacency.ties.len())],
        };
        let mut chain = Chain {
            clusters,
            even: Even::new(&adjacency),
            adjacency,
            rows,
            costs,
            marks: vec![0; base.states.len()],
            queue: vec![0; base.states.len() + 1],
            energy: 0.0,
            base,
        };
        chain.begin()?;
        Ok(chain)
    }

    /// Marks and energy from the states.
    fn begin(&mut self) -> Result<()> {
        self.marks.iter_mut().zip(&self.base.states).for_each(|(mark, state)| *mark = u16::from(*state));
        self.energy = self.base.energy()?;
        Ok(())
    }

    /// For tests: a fault of two percent in the probability of every bond.
    #[cfg(test)]
    pub(crate) fn spoil(&mut self) {
        let spoil = |line: &mut Line| line.limit -= line.limit / 50;
        self.rows.iter_mut().flat_map(|rows| &mut rows.lines).for_each(spoil);
        self.costs.iter_mut().for_each(|(alike, apart)| [alike, apart].into_iter().for_each(spoil));
    }

    /// For tests: as if there were too many kinds of bonds for rows.
    #[cfg(test)]
    pub(crate) fn forget_rows(&mut self) {
        self.adjacency.ties.clear();
        self.even = None;
    }

    /// For tests: as if the lattice looked different from every site.
    #[cfg(test)]
    pub(crate) fn forget_steps(&mut self) {
        assert!(self.even.take().is_some(), "an even lattice");
    }

    /// Grows a cluster and flips it, unless it rests or touches a pinned site.
    fn cluster(&mut self) {
        let sites = self.base.problem.graph.sites as u32;
        let words = &mut self.base.words;
        if words.next() < REST {
            return;
        }
        let seed = below_u32(sites, || words.next());
        let operation = match &self.base.symmetry {
            Symmetry::Involutions(maps) if maps.len() > 1 => below_u32(maps.len() as u32, || words.next()) as usize,
            Symmetry::Involutions(_) => 0,
            Symmetry::Exchanges(q) => {
                let own = self.base.states[seed as usize];
                let choice = if *q > 2 { below_u32(*q as u32 - 1, || words.next()) as u8 } else { 0 };
                self.rows[0].exchange(own, choice + u8::from(choice >= own), &self.costs);
                0
            }
        };
        let (size, change, frozen) = match self.even.as_ref().map(|even| even.degree) {
            Some(2) => self.grow_even::<2>(seed, operation),
            Some(3) => self.grow_even::<3>(seed, operation),
            Some(4) => self.grow_even::<4>(seed, operation),
            Some(6) => self.grow_even::<6>(seed, operation),
            Some(8) => self.grow_even::<8>(seed, operation),
            Some(12) => self.grow_even::<12>(seed, operation),
            _ => self.grow_any(seed, operation),
        };
        let map = &self.rows[operation].map;
        for site in &self.queue[..size] {
            let (state, mark) = (&mut self.base.states[*site as usize], &mut self.marks[*site as usize]);
            if !frozen {
                *state = map[*state as usize];
            }
            *mark = u16::from(*state);
        }
        if !frozen {
            self.energy += change;
        }
    }

    fn grow_any(&mut self, seed: u32, operation: usize) -> (usize, f64, bool) {
        match (self.adjacency.is_varied(), self.adjacency.tie.is_empty()) {
            (true, _) => self.grow(seed, operation, Bonds::Varied),
            (false, true) => self.grow(seed, operation, Bonds::Alike),
            (false, false) => self.grow(seed, operation, Bonds::Kinds),
        }
    }

    /// As [`Chain::grow`], on an even lattice.
    fn grow_even<const DEGREE: usize>(&mut self, seed: u32, operation: usize) -> (usize, f64, bool) {
        let Some(even) = self.even.as_ref() else { return self.grow_any(seed, operation) };
        let rows = &self.rows[operation];
        let steps = even.steps.as_chunks::<DEGREE>().0;
        let (sites, q) = (self.base.problem.graph.sites, self.base.problem.energy.states as u16);
        let (marks, queue, words) = (&mut self.marks[..], &mut self.queue[..], &mut self.base.words);
        let (mut head, mut tail, mut change) = (0, 1, 0.0);
        queue[0] = seed;
        marks[seed as usize] += q;
        while head < tail {
            let site = queue[head];
            head += 1;
            if site as usize >= sites {
                return (tail, 0.0, true);
            }
            let own = marks[site as usize];
            marks[site as usize] = own + q;
            let lines = rows.of((own - q) as usize);
            let steps = &steps[even.rows[site as usize] as usize];
            let (words, _) = words.few(DEGREE).as_chunks::<DEGREE>();
            // All neighbours are looked at before one is marked: they differ, and loads need not wait for stores.
            let neighbours: [u32; DEGREE] = std::array::from_fn(|k| site.wrapping_add(steps[k]));
            let seen: [u16; DEGREE] = std::array::from_fn(|k| marks[neighbours[k] as usize]);
            let mut step = 0.0;
            for k in 0..DEGREE {
                let line = lines[seen[k] as usize];
                let added = u64::from(words[0][k]).wrapping_sub(line.limit) >> 63;
                marks[neighbours[k] as usize] = seen[k] + (q & (added as u16).wrapping_neg());
                queue[tail] = neighbours[k];
                tail += added as usize;
                step += line.change;
            }
            change += step;
        }
        (tail, change, false)
    }

    /// Grows a cluster first in, first out, a half word for every neighbour looked at; returns its size, the change of energy if it flips,
    /// and whether it took in a pinned site.
    #[inline(always)]
    fn grow(&mut self, seed: u32, operation: usize, kind: Bonds) -> (usize, f64, bool) {
        let rows = &self.rows[operation];
        let (sites, q) = (self.base.problem.graph.sites as u32, self.base.problem.energy.states as u16);
        let (marks, queue, words) = (&mut self.marks[..], &mut self.queue[..], &mut self.base.words);
        let (mut head, mut tail, mut change) = (0, 1, 0.0);
        queue[0] = seed;
        marks[seed as usize] += q;
        while head < tail {
            let site = queue[head];
            head += 1;
            if site >= sites {
                return (tail, 0.0, true);
            }
            let state = marks[site as usize] - q;
            marks[site as usize] += q;
            let row = rows.row(state as usize);
            // Summed by site first: sites follow each other faster than one long chain of additions would let them.
            let mut step = 0.0;
            let mut entry = self.adjacency.neighbours.offsets[site as usize] as usize;
            let end = self.adjacency.neighbours.offsets[site as usize + 1] as usize;
            while entry < end {
                let neighbours = &self.adjacency.neighbours.sites[entry..end.min(entry + Halves::FEW)];
                let words = words.few(neighbours.len());
                for (place, (&neighbour, &word)) in neighbours.iter().zip(words).enumerate() {
                    let mark = marks[neighbour as usize];
                    let line = match kind {
                        Bonds::Alike => rows.lines[row + mark as usize],
                        Bonds::Kinds => {
                            let tie = self.adjacency.tie[entry + place] as usize;
                            rows.lines[tie * rows.stride() + row + mark as usize]
                        }
                        Bonds::Varied => {
                            let tie = self.adjacency.tie_of(entry + place);
                            varied(self.base.inverse_temperature, &self.base.problem, tie, &rows.map, state, mark)
                        }
                    };
                    // The sign of the difference: added, 1, or not, 0, without a branch that would be mispredicted.
                    let added = u64::from(word).wrapping_sub(line.limit) >> 63;
                    marks[neighbour as usize] = mark + q * added as u16;
                    queue[tail] = neighbour;
                    tail += added as usize;
                    step += line.change;
                }
                entry += neighbours.len();
            }
            change += step;
        }
        (tail, change, false)
    }
}

/// How thresholds are found.
#[derive(Clone, Copy)]
enum Bonds {
    /// One kind of bond.
    Alike,
    /// Several kinds, a row of lines for each.
    Kinds,
    /// Too many kinds: computed each time.
    Varied,
}

/// The line of a bond that has no row.
fn varied(
    inverse_temperature: f64,
    problem: &Problem<'_>,
    tie: crate::adjacency::Tie,
    map: &[u8; 256],
    state: u16,
    mark: u16,
) -> Line {
    let q = problem.energy.states;
    let (own, part, other) = (state as usize, mark as usize / q, mark as usize % q);
    let pairs = &problem.energy.pair_tables[tie.table as usize * q * q..];
    let cost = tie.strength * (pairs[map[own] as usize * q + other] - pairs[own * q + other]);
    match part {
        0 => bonds::line(inverse_temperature, cost),
        1 => Line { limit: 0, change: cost },
        _ => Line { limit: 0, change: -cost },
    }
}

impl UpdateInstance for Chain<'_> {
    fn import(&mut self, _lane: usize, view: &View<'_>) -> Result<()> {
        self.base.import(view)?;
        self.begin()
    }

    fn export(&self, _lane: usize, spins: &mut Spins<'_>) {
        if let Spins::States(out) = spins {
            out.copy_from_slice(&self.base.states);
        }
    }

    fn sweep(&mut self, count: u64) -> Result<()> {
        for _ in 0..count {
            if self.base.host.cancelled() {
                return Err(Error::cancelled());
            }
            for _ in 0..self.clusters {
                self.cluster();
            }
        }
        Ok(())
    }

    fn view(&mut self, _lane: usize) -> View<'_> {
        View::bytes(&self.base.states)
    }

    fn tallies(&self, _lane: usize) -> Tallies {
        Tallies { energy: Some(self.energy), magnetisation: self.base.magnetisation(), acceptance: None }
    }

    fn save(&self, out: &mut Vec<u8>) {
        self.base.save(out);
        out.extend_from_slice(&self.energy.to_bits().to_le_bytes());
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let rest = self.base.restore(bytes)?;
        let energy = rest.try_into().map_err(|_| Error::new("the saved state is not one of this rule"))?;
        self.begin()?;
        self.energy = f64::from_bits(u64::from_le_bytes(energy));
        Ok(())
    }
}
