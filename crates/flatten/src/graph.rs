//! The checked lattice.

use spinledger_abi::{SlBond, SlGraph, SlText};
use std::ptr;

/// A lattice: free sites `0..sites`, pinned sites `sites..total`, and the bonds. Fields are as in [`SlGraph`].
#[derive(Clone, Debug, PartialEq)]
pub struct GraphData {
    /// Number of directions.
    pub dimension: usize,
    /// Number of free sites.
    pub sites: usize,
    /// Number of free and pinned sites.
    pub total: usize,
    /// Bonds in the lattice's order.
    pub bonds: Vec<SlBond>,
    /// How often each bond wraps around each direction.
    pub wraps: Vec<i32>,
    /// Where the neighbours of each free site begin.
    pub offsets: Vec<u32>,
    /// Neighbours, in order of bonds.
    pub neighbours: Vec<u32>,
    /// The bond behind each neighbour.
    pub neighbour_bonds: Vec<u32>,
    /// Positions, in nearest-neighbour distances.
    pub positions: Vec<f64>,
    /// Sublattice of each site.
    pub sublattices: Vec<u32>,
    /// Direction of each pinned site.
    pub directions: Vec<i32>,
    /// Primitive vectors, a row each.
    pub vectors: Vec<f64>,
    /// Period of each direction in cells; 0 where it is not periodic.
    pub periods: Vec<i64>,
    /// Unit cells in each direction.
    pub cells: Vec<i64>,
    /// Names of the bond classes.
    pub class_names: Vec<String>,
    /// Where the sites of each face begin; empty without faces.
    pub face_offsets: Vec<u32>,
    /// Sites around each face.
    pub face_sites: Vec<u32>,
    /// Colour of each free site: no bond joins two of one colour.
    pub colours: Vec<u32>,
}

impl GraphData {
    /// The class names in the interface's form; valid while `self` is neither moved out of nor changed.
    pub fn class_texts(&self) -> Vec<SlText> {
        self.class_names.iter().map(|name| SlText { data: name.as_ptr(), length: name.len() }).collect()
    }

    /// The interface's form. The pointers are valid while the vectors of `self` and `texts` (from [`GraphData::class_texts`]) live and
    /// are not changed; moving `self` as a whole is harmless, since the vectors' memory stays.
    pub fn raw(&self, texts: &[SlText]) -> SlGraph {
        SlGraph {
            size: size_of::<SlGraph>(),
            dimension: self.dimension as u32,
            sites: self.sites as u32,
            total: self.total as u32,
            classes: self.class_names.len() as u32,
            bonds: self.bonds.len(),
            bond_list: self.bonds.as_ptr(),
            wraps: self.wraps.as_ptr(),
            offsets: self.offsets.as_ptr(),
            neighbours: self.neighbours.as_ptr(),
            neighbour_bonds: self.neighbour_bonds.as_ptr(),
            positions: self.positions.as_ptr(),
            sublattices: self.sublattices.as_ptr(),
            directions: self.directions.as_ptr(),
            vectors: self.vectors.as_ptr(),
            periods: self.periods.as_ptr(),
            cells: self.cells.as_ptr(),
            class_names: texts.as_ptr(),
            faces: self.face_offsets.len().saturating_sub(1),
            face_offsets: pointer(&self.face_offsets),
            face_sites: pointer(&self.face_sites),
        }
    }
}

/// Null where there is nothing.
pub(crate) fn pointer<T>(slice: &[T]) -> *const T {
    if slice.is_empty() { ptr::null() } else { slice.as_ptr() }
}
