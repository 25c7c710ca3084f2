//! States of a chain in order of visits, and as the lattice has them.

use crate::plan::Plan;

/// Bytes before and after the states, so that vectors that reach over an end find memory.
pub(crate) const MARGIN: usize = 64;

/// Where the state of each site is.
pub(crate) struct Ordered {
    /// For each site, free or pinned.
    places: Vec<u32>,
    weaves: Vec<Weave>,
    /// The states in order of sites, as shown last.
    shown: Vec<u8>,
}

/// Sites `site`, `site + 2` and so on have their states from `even` on, those between them from `odd` on.
#[derive(Clone, Copy, Debug)]
struct Weave {
    site: usize,
    even: usize,
    odd: usize,
    /// Sites.
    count: usize,
}

impl Ordered {
    /// Puts the states of free sites in order of visits, those of pinned sites after them. None where numbers of 32 bits do not reach.
    pub(crate) fn new(plan: &Plan, sites: usize, total: usize) -> Option<Self> {
        if plan.sites.len() != sites {
            return None;
        }
        u32::try_from(total + 2 * MARGIN).ok()?;
        let mut places: Vec<u32> = (0..total).map(|site| (MARGIN + site) as u32).collect();
        for (visit, site) in plan.sites.iter().enumerate() {
            places[*site as usize] = (MARGIN + visit) as u32;
        }
        let weaves = weaves(&places);
        Some(Ordered { places, weaves, shown: vec![0; total] })
    }

    /// States in order of visits, with margins.
    pub(crate) fn taken_from(&self, states: &[u8]) -> Vec<u8> {
        let mut ordered = vec![0; self.places.len() + 2 * MARGIN];
        self.places.iter().zip(states).for_each(|(place, state)| ordered[*place as usize] = *state);
        ordered
    }

    /// The states, site by site.
    pub(crate) fn in_order(&self, states: &[u8]) -> impl Iterator<Item = u8> {
        self.places.iter().map(|place| states[*place as usize])
    }

    /// Where the state of a site is.
    #[inline]
    pub(crate) fn place(&self, site: usize) -> usize {
        self.places[site] as usize
    }

    /// The states in order of sites.
    pub(crate) fn show(&mut self, states: &[u8]) -> &[u8] {
        for weave in &self.weaves {
            let out = &mut self.shown[weave.site..][..weave.count];
            let (pairs, rest) = out.as_chunks_mut::<2>();
            let (even, odd) = (&states[weave.even..], &states[weave.odd..]);
            for ((pair, even), odd) in pairs.iter_mut().zip(even).zip(odd) {
                *pair = [*even, *odd];
            }
            if let [last] = rest {
                *last = even[weave.count / 2];
            }
        }
        &self.shown
    }

    /// Rewrites numbers of sites as places.
    pub(crate) fn rename(&self, sites: &mut [u32]) {
        sites.iter_mut().for_each(|site| *site = self.places[*site as usize]);
    }
}

/// Finds sites whose states stand in two rows, every second one in each.
fn weaves(places: &[u32]) -> Vec<Weave> {
    let mut weaves = Vec::new();
    let mut site = 0;
    while site < places.len() {
        let steps = places[site..].windows(3).take_while(|three| three[2] == three[0] + 1).count();
        let count = (steps + 2).min(places.len() - site);
        let odd = places.get(site + 1).unwrap_or(&places[site]);
        weaves.push(Weave { site, even: places[site] as usize, odd: *odd as usize, count });
        site += count;
    }
    weaves
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn woven_states_are_in_order_of_sites() {
        // A checkerboard of three rows of four, one of five, something without order, and consecutive ones.
        let places: &[u32] =
            &[64, 70, 65, 71, 72, 66, 73, 67, 68, 74, 69, 75, 76, 80, 77, 81, 78, 90, 91, 79, 100, 95, 110, 111, 112];
        let states: Vec<u8> = (0..120).collect();
        let mut ordered = Ordered { places: places.to_vec(), weaves: weaves(places), shown: vec![0; places.len()] };
        let expected: Vec<u8> = places.iter().map(|p| *p as u8).collect();
        assert_eq!(ordered.show(&states), expected);
        assert!(ordered.weaves.len() < 12, "{:?}", ordered.weaves);
    }
}
