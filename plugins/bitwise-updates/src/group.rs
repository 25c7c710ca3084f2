//! Chains under the rule.

use crate::count::{Counts, Lanes, Ones, Sum, Unlike};
use crate::coupling::Coupling;
use crate::decision::{Decision, MOST_NEIGHBOURS};
use crate::kernel::{Kind, Sweeps, refresh};
use crate::layout::{self, Layout};
use crate::packing::Packing;
use crate::rare::Rare;
use crate::simd::Level;
use crate::vectors::Vectors;
use crate::word::LANES;
use spinledger_numerics::random::{Eight, RestoreError, SAVED_LEN};
use spinledger_sdk::{Error, Host, PositionList, Prepare, Result, Spins, Tallies, UpdateInstance, View};
use std::cell::OnceCell;

/// Visits of vectors between two looks at whether to stop: some milliseconds.
const UNINTERRUPTED: u64 = 1 << 17;

/// One chain packed by sites, or 512 packed by chains.
pub(crate) struct Group<'a> {
    host: Host<'a>,
    level: Level,
    layout: Layout,
    kinds: Vec<Option<Kind>>,
    opposed: bool,
    vectors: Vectors,
    stream: Eight,
    energy: Levels,
    values: Option<[f64; 2]>,
    sites: usize,
    /// Free and pinned sites.
    total: usize,
    /// Bits of the sites of the one chain; None: there are 512.
    positions: Option<PositionList>,
    counts: OnceCell<Totals>,
}

/// The energy by broken bonds.
#[derive(Clone, Copy, Debug)]
struct Levels {
    base: f64,
    step: f64,
    /// All coupled bonds.
    bonds: u64,
}

/// What is counted when it is asked for, chain by chain.
struct Totals {
    ones: Vec<u64>,
    broken: Vec<u64>,
}

impl<'a> Group<'a> {
    /// Gets ready. Every chain begins with all spins in state 0, until configurations are imported.
    ///
    /// # Errors
    /// Where the Hamiltonian, the lattice or the number of chains is not served.
    pub(crate) fn new(prepare: Prepare<'a>, level: Level) -> Result<Self> {
        let Prepare { host, problem, inverse_temperature, lane_keys, group_key } = prepare;
        let (graph, energy) = (&problem.graph, &problem.energy);
        let coupling = Coupling::new(&problem)?;
        let (draft, key, positions) = match &lane_keys[..] {
            [only] => {
                let packing = Packing::new(graph)?;
                (packing.draft(graph, &coupling)?, *only, Some(packing.positions(graph.sites)))
            }
            all if all.len() == LANES => {
                let draft = layout::by_chains(&coupling, graph.total, energy.colour_offsets, energy.colour_sites)?;
                (draft, group_key, None)
            }
            other => {
                return Err(Error::new(format!(
                    "`multi-spin` advances 1 or {LANES} chains together, not {}",
                    other.len()
                )));
            }
        };
        let layout = draft.finish();
        let x = inverse_temperature * coupling.step;
        let mut kinds: Vec<Option<Kind>> = vec![None; MOST_NEIGHBOURS + 1];
        for run in &layout.runs {
            kinds[run.degree].get_or_insert_with(|| {
                let decision = Decision::new(run.degree, x);
                let rare = Rare::new(&decision.left, &key.derive(&format!("rare events {}", run.degree)));
                Kind { decision, rare }
            });
        }
        let mut vectors = Vectors::new(layout.total + layout.copies.len());
        for (vector, pinned) in vectors.all_mut()[layout.free..layout.total].iter_mut().zip(energy.pinned_states) {
            *vector = [u64::from(*pinned).wrapping_neg(); 8];
        }
        refresh(&layout.copies, layout.total, vectors.all_mut());
        Ok(Group {
            host,
            level,
            kinds,
            opposed: coupling.opposed,
            vectors,
            stream: Eight::from_key(&key),
            energy: Levels { base: coupling.base, step: coupling.step, bonds: coupling.bonds.len() as u64 },
            values: energy.values.first_chunk().copied(),
            sites: graph.sites,
            total: graph.total,
            positions,
            counts: OnceCell::new(),
            layout,
        })
    }

    /// For tests that look at vectors.
    #[cfg(test)]
    pub(crate) fn vectors(&self) -> &[crate::word::Vector] {
        &self.vectors.all()[..self.layout.free]
    }

    /// For tests that plant faults.
    #[cfg(test)]
    pub(crate) fn kinds(&mut self) -> &mut [Option<Kind>] {
        &mut self.kinds
    }

    /// For tests that plant faults.
    #[cfg(test)]
    pub(crate) fn set_stream(&mut self, key: &spinledger_numerics::random::StreamKey) {
        self.stream = Eight::from_key(key);
    }

    /// Number of chains.
    fn lanes(&self) -> usize {
        if self.positions.is_some() { 1 } else { LANES }
    }

    /// Where the bit of a site of a chain is.
    fn bit(&self, site: usize, lane: usize) -> usize {
        match &self.positions {
            Some(list) => list.positions().places()[site] as usize,
            None => site * LANES + lane,
        }
    }

    fn counted(&self) -> &Totals {
        self.counts.get_or_init(|| {
            let vectors = self.vectors.all();
            let ones = self.level.run(Ones(&vectors[..self.layout.free]));
            let unlike = self.level.run(Unlike { vectors, pairs: &self.layout.pairs });
            let one = self.positions.is_some();
            let broken = |unlike: u64| if self.opposed { self.energy.bonds - unlike } else { unlike };
            let lanes = |counts: &Counts| match one {
                true => vec![self.level.run(Sum(counts))],
                false => self.level.run(Lanes(counts)).into_iter().map(u64::from).collect(),
            };
            Totals { ones: lanes(&ones), broken: lanes(&unlike).into_iter().map(broken).collect() }
        })
    }

    fn shown(&self, lane: usize) -> View<'_> {
        let words = self.vectors.words();
        match &self.positions {
            Some(list) => {
                View::Bits { sites: self.total, words, offset: 0, stride: 1, positions: Some(list.positions()) }
            }
            None => View::Bits { sites: self.total, words, offset: lane, stride: LANES, positions: None },
        }
    }
}

impl UpdateInstance for Group<'_> {
    fn import(&mut self, lane: usize, view: &View<'_>) -> Result<()> {
        if lane >= self.lanes() {
            return Err(Error::new(format!("there is no chain {lane} in a group of {}", self.lanes())));
        }
        if view.sites() != self.total || matches!(view, View::Vectors { .. }) {
            return Err(Error::new(format!("a configuration of {} discrete spins is needed", self.total)));
        }
        if let Some(site) = (0..self.sites).find(|s| view.state(*s) > 1) {
            return Err(Error::new(format!("site {site} is in state {}; there are two", view.state(site))));
        }
        // Pinned sites keep the states that the Hamiltonian gives them.
        for site in 0..self.sites {
            let bit = self.bit(site, lane);
            let word = &mut self.vectors.words_mut()[bit / 64];
            *word = *word & !(1 << (bit % 64)) | u64::from(view.state(site)) << (bit % 64);
        }
        refresh(&self.layout.copies, self.layout.total, self.vectors.all_mut());
        self.counts.take();
        Ok(())
    }

    fn export(&self, lane: usize, spins: &mut Spins<'_>) {
        if let Spins::States(out) = spins {
            let view = self.shown(lane);
            out.iter_mut().enumerate().for_each(|(site, state)| *state = view.state(site));
        }
    }

    fn sweep(&mut self, count: u64) -> Result<()> {
        self.counts.take();
        let at_once = (UNINTERRUPTED / self.layout.free.max(1) as u64).max(1);
        let mut left = count;
        while left > 0 {
            if self.host.cancelled() {
                return Err(Error::cancelled());
            }
            let now = left.min(at_once);
            let Some(mut stream) = self.stream.lanes() else {
                return Err(Error::new("the stream stands within a block"));
            };
            self.level.run(Sweeps {
                layout: &self.layout,
                kinds: &mut self.kinds,
                opposed: self.opposed,
                vectors: self.vectors.all_mut(),
                stream: &mut stream,
                count: now,
            });
            self.stream = Eight::from_lanes(stream);
            left -= now;
        }
        Ok(())
    }

    fn view(&mut self, lane: usize) -> View<'_> {
        self.shown(lane)
    }

    fn tallies(&self, lane: usize) -> Tallies {
        let Totals { ones, broken } = self.counted();
        let (ones, zeros) = (ones[lane] as f64, (self.sites as u64 - ones[lane]) as f64);
        Tallies {
            energy: Some(self.energy.base + self.energy.step * broken[lane] as f64),
            magnetisation: self.values.map(|[zero, one]| [zeros * zero + ones * one, 0.0, 0.0]),
            acceptance: None,
        }
    }

    fn save(&self, out: &mut Vec<u8>) {
        let free = &self.vectors.words()[..8 * self.layout.free];
        free.iter().for_each(|word| out.extend_from_slice(&word.to_le_bytes()));
        self.stream.save(out);
        self.kinds.iter().flatten().for_each(|kind| kind.rare.save(out));
    }

    fn path(&self) -> &str {
        self.level.name()
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let wrong = || Error::new("the saved state is of another lattice, model or number of chains");
        let (vectors, rest) = bytes.split_at_checked(64 * self.layout.free).ok_or_else(wrong)?;
        let (stream, rares) = rest.split_at_checked(SAVED_LEN).ok_or_else(wrong)?;
        let (rares, left) = rares.as_chunks::<{ Rare::SAVED }>();
        if rares.len() != self.kinds.iter().flatten().count() || !left.is_empty() {
            return Err(wrong());
        }
        let stream = Eight::restore(stream).map_err(|_: RestoreError| wrong())?;
        if stream.lanes().is_none() {
            return Err(wrong());
        }
        for (kind, bytes) in self.kinds.iter_mut().flatten().zip(rares) {
            kind.rare.restore(bytes)?;
        }
        self.stream = stream;
        for (word, bytes) in self.vectors.words_mut().iter_mut().zip(vectors.as_chunks::<8>().0) {
            *word = u64::from_le_bytes(*bytes);
        }
        refresh(&self.layout.copies, self.layout.total, self.vectors.all_mut());
        self.counts.take();
        Ok(())
    }
}
