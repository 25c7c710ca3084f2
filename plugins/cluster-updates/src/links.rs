//! Sets of sites that are joined one bond at a time.

/// A forest of sites, each of which names a site of its set with a number not above its own; the lowest one names itself.
#[derive(Clone, Debug)]
pub(crate) struct Links {
    above: Vec<u32>,
}

impl Links {
    pub(crate) fn new(sites: usize) -> Self {
        let mut links = Links { above: vec![0; sites] };
        links.part();
        links
    }

    /// Every site by itself again.
    pub(crate) fn part(&mut self) {
        self.above.iter_mut().zip(0..).for_each(|(above, site)| *above = site);
    }

    /// Joins the sets of two sites: both ways up are gone together, and whichever stands lower in numbers is hung under the other on the way
    /// (Rem's algorithm: Dijkstra 1976 A Discipline of Programming; Patwary, Blair & Manne 2010 SEA 411). The walk ends where the ways meet.
    #[inline]
    pub(crate) fn join(&mut self, one: u32, other: u32) {
        let (mut a, mut b) = (one as usize, other as usize);
        let above = &mut self.above[..];
        loop {
            let (over_a, over_b) = (above[a], above[b]);
            if over_a == over_b {
                return;
            }
            if over_a < over_b {
                above[b] = over_a;
                if b == over_b as usize {
                    return;
                }
                b = over_b as usize;
            } else {
                above[a] = over_b;
                if a == over_a as usize {
                    return;
                }
                a = over_a as usize;
            }
        }
    }

    /// Lets every site name the lowest one of its set. One pass: what a site names is lower and was settled before.
    pub(crate) fn settle(&mut self) -> &[u32] {
        for site in 0..self.above.len() {
            self.above[site] = self.above[self.above[site] as usize];
        }
        &self.above
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_numerics::random::{StreamKey, Xoshiro, below};

    #[test]
    fn sets_are_those_of_a_search() {
        let mut stream = Xoshiro::from_key(&StreamKey::from_text("links"));
        for round in 0..200 {
            let sites = 1 + round as usize % 40;
            let mut site = || below(sites as u64, || stream.next()) as u32;
            let bonds: Vec<(u32, u32)> = (0..round % 50).map(|_| (site(), site())).collect();
            let mut links = Links::new(sites);
            bonds.iter().for_each(|(a, b)| links.join(*a, *b));
            // Lowest numbers spread over bonds until nothing changes.
            let mut lowest: Vec<u32> = (0..sites as u32).collect();
            for _ in 0..sites {
                for &(a, b) in &bonds {
                    let low = lowest[a as usize].min(lowest[b as usize]);
                    (lowest[a as usize], lowest[b as usize]) = (low, low);
                }
            }
            assert_eq!(links.settle(), lowest);
            links.part();
            assert!(links.settle().iter().zip(0..).all(|(a, b)| *a == b));
        }
    }
}
