//! What every cluster rule keeps of its chain.

use crate::symmetry::Symmetry;
use spinledger_numerics::random::Halves;
use spinledger_sdk::{Error, Host, Prepare, Problem, Result, View};

/// A chain's states and random numbers, with the Hamiltonian and its symmetry.
pub(crate) struct Configuration<'a> {
    pub(crate) host: Host<'a>,
    pub(crate) problem: Problem<'a>,
    pub(crate) symmetry: Symmetry,
    pub(crate) inverse_temperature: f64,
    /// States, pinned sites after free ones.
    pub(crate) states: Vec<u8>,
    pub(crate) words: Halves,
}

impl<'a> Configuration<'a> {
    /// All spins in state 0 until a configuration is imported, and the stream of the chain's key from its beginning.
    ///
    /// # Errors
    /// Where spins are vectors, energies other than pairs are there, no symmetry is given or the tables contradict it, or several chains are
    /// asked for.
    pub(crate) fn new(prepare: Prepare<'a>) -> Result<Self> {
        let Prepare { host, problem, inverse_temperature, lane_keys, .. } = prepare;
        let energy = &problem.energy;
        if energy.states == 0 || energy.custom.is_some() || !energy.factors.is_empty() {
            return Err(Error::new("this rule serves discrete spins with pair energies only"));
        }
        let [key] = &lane_keys[..] else { return Err(Error::new("this rule advances one chain at a time")) };
        let symmetry = Symmetry::of(energy)?;
        let mut states = vec![0; problem.graph.sites];
        states.extend_from_slice(energy.pinned_states);
        Ok(Configuration { host, symmetry, inverse_temperature, states, words: Halves::from_key(key), problem })
    }

    /// Takes over the states of free sites. Pinned sites keep those that the Hamiltonian gives them.
    ///
    /// # Errors
    /// Where the configuration does not fit.
    pub(crate) fn import(&mut self, view: &View<'_>) -> Result<()> {
        self.problem.check(view)?;
        let (sites, states) = (self.problem.graph.sites, self.problem.energy.states);
        if let Some(site) = (0..sites).find(|s| view.state(*s) as usize >= states) {
            return Err(Error::new(format!("site {site} is in state {}; there are {states}", view.state(site))));
        }
        (0..sites).for_each(|site| self.states[site] = view.state(site));
        Ok(())
    }

    /// Energy by definition.
    ///
    /// # Errors
    /// None for the energies that these rules serve.
    pub(crate) fn energy(&self) -> Result<f64> {
        self.problem.total(&View::bytes(&self.states))
    }

    /// Sum of spin values over free sites, where states have values: counted, and so exact for the usual values and without a history.
    pub(crate) fn magnetisation(&self) -> Option<[f64; 3]> {
        let values = self.problem.energy.values;
        let mut counts = vec![0_u64; self.problem.energy.states];
        let free = &self.states[..self.problem.graph.sites];
        if let [zeros, ones] = &mut counts[..] {
            // A sum of bytes, which compilers vectorise.
            *ones = free.iter().map(|s| u64::from(*s)).sum();
            *zeros = free.len() as u64 - *ones;
        } else {
            free.iter().for_each(|s| counts[*s as usize] += 1);
        }
        let sum = counts.iter().zip(values).map(|(count, value)| *count as f64 * value).sum();
        (!values.is_empty()).then_some([sum, 0.0, 0.0])
    }

    /// Appends states and stream.
    pub(crate) fn save(&self, out: &mut Vec<u8>) {
        out.extend_from_slice(&self.states);
        self.words.save(out);
    }

    /// Takes back what [`Configuration::save`] appended, which is what `bytes` begins with; gives the rest.
    ///
    /// # Errors
    /// Where the bytes do not fit.
    pub(crate) fn restore<'b>(&mut self, bytes: &'b [u8]) -> Result<&'b [u8]> {
        let wrong = || Error::new("the saved state is of another lattice or model");
        let (states, rest) = bytes.split_at_checked(self.states.len()).ok_or_else(wrong)?;
        let (words, rest) = rest.split_at_checked(Halves::SAVED).ok_or_else(wrong)?;
        if states.iter().any(|s| *s as usize >= self.problem.energy.states) {
            return Err(wrong());
        }
        self.words = Halves::restore(words).map_err(|error| Error::new(format!("the random stream: {error}")))?;
        self.states.copy_from_slice(states);
        Ok(rest)
    }
}
