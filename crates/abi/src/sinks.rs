//! Where plugins write what they describe. A sink's function returns a status: where it is not [`crate::SL_OK`], the plugin stops and
//! returns it; the host knows why.

use crate::{SlBond, SlText};
use core::ffi::c_void;

/// Takes bytes.
#[repr(C)]
#[derive(Debug)]
pub struct SlByteSink {
    /// Size of this struct in bytes.
    pub size: usize,
    /// To be handed back.
    pub context: *mut c_void,
    /// Appends bytes.
    pub write: Option<unsafe extern "C" fn(context: *mut c_void, data: *const u8, count: usize) -> i32>,
}

/// Takes a lattice. Order of calls: geometry, sites, pinned, classes, bonds, then the rest.
#[repr(C)]
#[derive(Debug)]
pub struct SlLatticeSink {
    /// Size of this struct in bytes.
    pub size: usize,
    /// To be handed back.
    pub context: *mut c_void,
    /// Primitive vectors (`dimension` x `dimension`, a row each, in nearest-neighbour distances), unit cells per direction, and
    /// whether each direction is periodic (1) or not (0).
    pub geometry: Option<
        unsafe extern "C" fn(
            context: *mut c_void,
            dimension: u32,
            vectors: *const f64,
            cells: *const i64,
            periodic: *const u8,
        ) -> i32,
    >,
    /// Appends free sites: positions (`count` x dimension) and sublattices.
    pub sites: Option<
        unsafe extern "C" fn(context: *mut c_void, count: usize, positions: *const f64, sublattices: *const u32) -> i32,
    >,
    /// Appends pinned sites, numbered after all free ones, with the direction (+1 or -1) that each points to.
    pub pinned: Option<
        unsafe extern "C" fn(
            context: *mut c_void,
            count: usize,
            positions: *const f64,
            sublattices: *const u32,
            directions: *const i32,
        ) -> i32,
    >,
    /// Names the next bond class: `first.x`, `second` ...
    pub class_name: Option<unsafe extern "C" fn(context: *mut c_void, name: SlText) -> i32>,
    /// Appends bonds, with how often each wraps around each direction (`count` x dimension), or null for none.
    pub bonds: Option<
        unsafe extern "C" fn(context: *mut c_void, count: usize, bonds: *const SlBond, wraps: *const i32) -> i32,
    >,
    /// Colour of each free site, such that no bond joins two sites of a colour. Optional: the host colours by itself otherwise.
    pub colours: Option<unsafe extern "C" fn(context: *mut c_void, count: usize, colours: *const u32) -> i32>,
    /// Appends faces: number of sites of each, and all their sites in order around. Optional.
    pub faces:
        Option<unsafe extern "C" fn(context: *mut c_void, count: usize, lengths: *const u32, sites: *const u32) -> i32>,
}

/// Takes a Hamiltonian. `spins` or `vectors` comes first.
#[repr(C)]
#[derive(Debug)]
pub struct SlModelSink {
    /// Size of this struct in bytes.
    pub size: usize,
    /// To be handed back.
    pub context: *mut c_void,
    /// Discrete spins of 2 to 256 states: the value of each (or null), the state that is minus each (or null), and the states
    /// of sites pinned up and down (equal to `states` where there are none).
    pub spins: Option<
        unsafe extern "C" fn(
            context: *mut c_void,
            states: u32,
            values: *const f64,
            negation: *const u8,
            up: u32,
            down: u32,
        ) -> i32,
    >,
    /// Vector spins of 2 or 3 components and unit length, and the vector of sites pinned up.
    pub vectors: Option<unsafe extern "C" fn(context: *mut c_void, components: u32, up: *const f64) -> i32>,
    /// Energies of a bond class, q x q, rows by the state at `i`. Classes without are not coupled.
    pub pair: Option<unsafe extern "C" fn(context: *mut c_void, class_index: u32, energies: *const f64) -> i32>,
    /// Class of each free site; all are 0 otherwise.
    pub site_classes: Option<unsafe extern "C" fn(context: *mut c_void, count: usize, classes: *const u16) -> i32>,
    /// Energies of the states of a site class.
    pub site: Option<unsafe extern "C" fn(context: *mut c_void, class_index: u32, energies: *const f64) -> i32>,
    /// A factor on the energy of each bond (disorder).
    pub bond_strengths: Option<unsafe extern "C" fn(context: *mut c_void, count: usize, strengths: *const f64) -> i32>,
    /// A factor on the site energy of each free site (disorder).
    pub site_strengths: Option<unsafe extern "C" fn(context: *mut c_void, count: usize, strengths: *const f64) -> i32>,
    /// The next factor table: q^order energies, the first site's state counting most; order 1 to 8.
    pub factor_table: Option<unsafe extern "C" fn(context: *mut c_void, order: u32, energies: *const f64) -> i32>,
    /// Factors over a table, by its number: `count` x order sites, different within a factor.
    pub factors: Option<unsafe extern "C" fn(context: *mut c_void, table: u32, count: usize, sites: *const u32) -> i32>,
    /// Coupling matrix of a bond class, n x n: energy S_i^T M S_j.
    pub coupling: Option<unsafe extern "C" fn(context: *mut c_void, class_index: u32, matrix: *const f64) -> i32>,
    /// Anisotropy of a site class, n x n: energy S^T A S.
    pub anisotropy: Option<unsafe extern "C" fn(context: *mut c_void, class_index: u32, matrix: *const f64) -> i32>,
    /// Field of a site class, n: energy f . S.
    pub field: Option<unsafe extern "C" fn(context: *mut c_void, class_index: u32, field: *const f64) -> i32>,
    /// The model's own callbacks add energy.
    pub custom: Option<unsafe extern "C" fn(context: *mut c_void) -> i32>,
    /// An involution of states, a map of q, that leaves the energy unchanged when applied to all free spins.
    pub involution: Option<unsafe extern "C" fn(context: *mut c_void, map: *const u8) -> i32>,
    /// Every permutation of states does.
    pub permutations: Option<unsafe extern "C" fn(context: *mut c_void) -> i32>,
}

/// Takes site numbers.
#[repr(C)]
#[derive(Debug)]
pub struct SlSiteSink {
    /// Size of this struct in bytes.
    pub size: usize,
    /// To be handed back.
    pub context: *mut c_void,
    /// Appends sites.
    pub sites: Option<unsafe extern "C" fn(context: *mut c_void, count: usize, sites: *const u32) -> i32>,
}

/// The column is unchanged by the symmetries of the Hamiltonian.
pub const SL_COLUMN_INVARIANT: u32 = 1;

/// Takes an observable's columns.
#[repr(C)]
#[derive(Debug)]
pub struct SlColumnSink {
    /// Size of this struct in bytes.
    pub size: usize,
    /// To be handed back.
    pub context: *mut c_void,
    /// The next column: name, unit (`energy` or empty), `SL_COLUMN_` flags, and numbers a measurement (1 for a plain column).
    pub column:
        Option<unsafe extern "C" fn(context: *mut c_void, name: SlText, unit: SlText, flags: u32, width: u32) -> i32>,
}
