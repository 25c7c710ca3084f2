//! The lattice as the host keeps it.

/// A bond between a free site `i` and a site `j`, free or pinned.
pub type Bond = spinledger_abi::SlBond;

/// A lattice: free sites `0..sites`, pinned sites `sites..total`, and the bonds. Slices are the host's and live as long as the instance.
#[derive(Clone, Debug)]
pub struct Graph<'a> {
    /// Number of directions.
    pub dimension: usize,
    /// Number of free sites.
    pub sites: usize,
    /// Number of free and pinned sites.
    pub total: usize,
    /// Bonds in the lattice's order.
    pub bonds: &'a [Bond],
    /// How often each bond wraps around each direction, `bonds` x `dimension`.
    pub wraps: &'a [i32],
    /// Where the neighbours of each free site begin, `sites` + 1.
    pub offsets: &'a [u32],
    /// Neighbours, in order of bonds.
    pub neighbours: &'a [u32],
    /// The bond behind each entry of `neighbours`.
    pub neighbour_bonds: &'a [u32],
    /// Positions in nearest-neighbour distances, `total` x `dimension`.
    pub positions: &'a [f64],
    /// Sublattice of each site, `total`.
    pub sublattices: &'a [u32],
    /// Direction of each pinned site, `total - sites`.
    pub directions: &'a [i32],
    /// Primitive vectors, `dimension` x `dimension`, a row each.
    pub vectors: &'a [f64],
    /// Period of each direction in cells; 0 where it is not periodic.
    pub periods: &'a [i64],
    /// Unit cells in each direction.
    pub cells: &'a [i64],
    /// Names of the bond classes.
    pub class_names: Vec<&'a str>,
    /// Where the sites of each face begin; empty where the lattice gives no faces.
    pub face_offsets: &'a [u32],
    /// Sites around each face.
    pub face_sites: &'a [u32],
}

impl<'a> Graph<'a> {
    /// The range of a free site's entries in `neighbours`. Panics where `site` is not a free site.
    pub fn range(&self, site: usize) -> std::ops::Range<usize> {
        self.offsets[site] as usize..self.offsets[site + 1] as usize
    }

    /// The neighbours of a free site. Panics where `site` is not a free site.
    pub fn neighbours_of(&self, site: usize) -> &'a [u32] {
        &self.neighbours[self.range(site)]
    }
}
