//! Sets of sites that do not interact within.

/// The smallest colour that no neighbour with a smaller number has, site by site: depends on the numbering only.
pub(crate) fn greedy<I: Iterator<Item = u32>>(sites: usize, adjacent: impl Fn(usize) -> I) -> Vec<u32> {
    let mut colours = vec![u32::MAX; sites];
    // `seen[c]` is the last site that saw a neighbour of colour c, so that it need not be cleared.
    let mut seen: Vec<usize> = Vec::new();
    for site in 0..sites {
        for n in adjacent(site).map(|n| n as usize).filter(|&n| n < site) {
            seen[colours[n] as usize] = site;
        }
        let colour = (0..seen.len()).find(|&c| seen[c] != site).unwrap_or(seen.len());
        if colour == seen.len() {
            seen.push(usize::MAX);
        }
        colours[site] = colour as u32;
    }
    colours
}

/// Numbers colours from 0 without gaps, keeping their order.
pub(crate) fn compact(mut colours: Vec<u32>) -> Vec<u32> {
    let mut used = colours.clone();
    used.sort_unstable();
    used.dedup();
    for colour in &mut colours {
        *colour = used.partition_point(|u| u < colour) as u32;
    }
    colours
}

/// Free sites by colour: offsets and sites, ascending within each colour.
pub(crate) fn by_colour(colours: &[u32]) -> (Vec<u32>, Vec<u32>) {
    let count = colours.iter().max().map_or(0, |&c| c as usize + 1);
    let mut offsets = vec![0u32; count + 1];
    for &c in colours {
        offsets[c as usize + 1] += 1;
    }
    for c in 0..count {
        offsets[c + 1] += offsets[c];
    }
    let (mut next, mut sites) = (offsets.clone(), vec![0; colours.len()]);
    for (site, &c) in colours.iter().enumerate() {
        sites[next[c as usize] as usize] = site as u32;
        next[c as usize] += 1;
    }
    (offsets, sites)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_ring_of_five_takes_three_colours() {
        let ring = |s: usize| [(s as u32 + 1) % 5, (s as u32 + 4) % 5].into_iter();
        let colours = greedy(5, ring);
        assert_eq!(colours, [0, 1, 0, 1, 2]);
        assert_eq!(by_colour(&colours), (vec![0, 2, 4, 5], vec![0, 2, 1, 3, 4]));
    }

    #[test]
    fn gaps_close_and_order_stays() {
        assert_eq!(compact(vec![7, 3, 9, 3]), [1, 0, 2, 0]);
    }
}
