//! A discrete system as plain data.

use thiserror::Error;

/// States visited at most, 2^30: about a minute.
pub const MOST_STATES: u64 = 1 << 30;

/// What is counted beside the energy.
#[derive(Clone, Debug, PartialEq)]
pub enum Order {
    /// Components of the spin: entry `[c][s]` is component c of state s. At most three components. The order is their
    /// sum over free sites.
    Values(Vec<Vec<f64>>),
    /// How the free sites are shared between the states: the number in the most common one, and the sum of squares.
    Colours,
}

/// A system with pair, site and factor energies. Free sites come first, then sites pinned to a state.
#[derive(Clone, Debug, PartialEq)]
pub struct PairSystem {
    /// Number of states of a site, 1 to 256.
    pub states: usize,
    /// Number of free sites.
    pub free: usize,
    /// States of the pinned sites, which have the indices from `free` on.
    pub pinned: Vec<u8>,
    /// Bonds: two sites and a pair table. A bond may be listed twice, and then counts twice.
    pub bonds: Vec<(u32, u32, u32)>,
    /// Pair tables: the energy of a bond (i, j, t) is `tables[t][state of i * states + state of j]`.
    pub tables: Vec<Vec<f64>>,
    /// Site tables: energy by state.
    pub site_tables: Vec<Vec<f64>>,
    /// Site table of each free site; empty if sites have no energy.
    pub classes: Vec<u32>,
    /// Factors: a table and the sites it joins.
    pub factors: Vec<(u32, Vec<u32>)>,
    /// Factor tables, the first site varying slowest.
    pub factor_tables: Vec<Vec<f64>>,
    /// What is counted beside the energy.
    pub order: Order,
}

/// Why a system cannot be enumerated.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum EnumerationError {
    /// More than [`MOST_STATES`] states.
    #[error("{states} states on {sites} sites are too many to visit")]
    TooManyStates {
        /// States of a site.
        states: usize,
        /// Free sites.
        sites: usize,
    },
    /// More distinct energies and orders than are kept.
    #[error("more than {most} distinct levels: too many to count")]
    TooManyLevels {
        /// Levels kept at most.
        most: usize,
    },
    /// A table has another number of entries than its sites have states.
    #[error("{what} {index} has {found} entries, not {expected}")]
    TableSize {
        /// Kind of table.
        what: &'static str,
        /// Its index.
        index: usize,
        /// Entries found.
        found: usize,
        /// Entries it should have.
        expected: usize,
    },
    /// A site, state or table that does not exist is referred to.
    #[error("{what} {index} refers to what does not exist")]
    Reference {
        /// What refers.
        what: &'static str,
        /// Its index.
        index: usize,
    },
    /// An energy or a spin component is infinite or not a number.
    #[error("{what} {index} has an entry that is not finite")]
    NotFinite {
        /// Kind of table.
        what: &'static str,
        /// Its index.
        index: usize,
    },
    /// No free sites, no states or more than 256, or more than three components of the order.
    #[error("at least 1 free site, 1 to 256 states and at most 3 components are needed")]
    Shape,
}

impl PairSystem {
    /// Free sites without energies.
    #[must_use]
    pub fn new(states: usize, free: usize, order: Order) -> Self {
        Self {
            states,
            free,
            pinned: Vec::new(),
            bonds: Vec::new(),
            tables: Vec::new(),
            site_tables: Vec::new(),
            classes: Vec::new(),
            factors: Vec::new(),
            factor_tables: Vec::new(),
            order,
        }
    }

    /// Number of states of the whole system, if it can be visited.
    ///
    /// # Errors
    /// More than [`MOST_STATES`].
    pub fn state_count(&self) -> Result<u64, EnumerationError> {
        let too_many = || EnumerationError::TooManyStates { states: self.states, sites: self.free };
        let mut count = 1u64;
        for _ in 0..self.free {
            count = count.checked_mul(self.states as u64).filter(|count| *count <= MOST_STATES).ok_or_else(too_many)?;
            if self.states == 1 {
                break;
            }
        }
        Ok(count)
    }

    /// Checks shapes and references.
    pub(super) fn check(&self) -> Result<(), EnumerationError> {
        let components = match &self.order {
            Order::Values(components) => components.as_slice(),
            Order::Colours => &[],
        };
        if !(1..=256).contains(&self.states) || components.len() > 3 || self.free == 0 {
            return Err(EnumerationError::Shape);
        }
        let q = self.states;
        tables("component", components, |_| Some(q))?;
        tables("pair table", &self.tables, |_| Some(q * q))?;
        tables("site table", &self.site_tables, |_| Some(q))?;
        let sites = self.free + self.pinned.len();
        let site = |index: u32| (index as usize) < sites;
        let table = |index: u32, tables: &[Vec<f64>]| (index as usize) < tables.len();
        refers("pinned site", &self.pinned, |state| usize::from(*state) < q)?;
        refers("bond", &self.bonds, |(i, j, t)| site(*i) && site(*j) && table(*t, &self.tables))?;
        refers("factor", &self.factors, |(t, sites)| {
            table(*t, &self.factor_tables) && sites.iter().all(|index| site(*index))
        })?;
        if !self.classes.is_empty() && self.classes.len() != self.free {
            return Err(EnumerationError::Reference { what: "site class", index: self.classes.len().min(self.free) });
        }
        refers("site class", &self.classes, |class| table(*class, &self.site_tables))?;
        let arity = |index: usize| {
            let uses = self.factors.iter().find(|(table, _)| *table as usize == index);
            uses.map(|(_, sites)| {
                u32::try_from(sites.len()).ok().and_then(|arity| q.checked_pow(arity)).unwrap_or(usize::MAX)
            })
        };
        tables("factor table", &self.factor_tables, arity)?;
        refers("factor", &self.factors, |(t, sites)| {
            let size = u32::try_from(sites.len()).ok().and_then(|arity| q.checked_pow(arity));
            size == Some(self.factor_tables[*t as usize].len())
        })
    }
}

/// Checks sizes (where one is expected) and finiteness of tables.
fn tables(
    what: &'static str,
    tables: &[Vec<f64>],
    expected: impl Fn(usize) -> Option<usize>,
) -> Result<(), EnumerationError> {
    for (index, table) in tables.iter().enumerate() {
        if let Some(expected) = expected(index).filter(|expected| *expected != table.len()) {
            return Err(EnumerationError::TableSize { what, index, found: table.len(), expected });
        }
        if !table.iter().all(|entry| entry.is_finite()) {
            return Err(EnumerationError::NotFinite { what, index });
        }
    }
    Ok(())
}

fn refers<T>(what: &'static str, items: &[T], exists: impl Fn(&T) -> bool) -> Result<(), EnumerationError> {
    match items.iter().position(|item| !exists(item)) {
        Some(index) => Err(EnumerationError::Reference { what, index }),
        None => Ok(()),
    }
}
