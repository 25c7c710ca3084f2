//! Plain data that crosses the border.

use core::ffi::c_void;

/// UTF-8 text, not terminated. Borrowed for the call unless said otherwise.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlText {
    /// First byte; may be null when `length` is 0.
    pub data: *const u8,
    /// Number of bytes.
    pub length: usize,
}

/// A buffer of the host for an error message: the writer puts at most `capacity` bytes of UTF-8 and sets `length`.
#[repr(C)]
#[derive(Debug)]
pub struct SlMessage {
    /// Where to write.
    pub data: *mut u8,
    /// Room in bytes.
    pub capacity: usize,
    /// Bytes written.
    pub length: usize,
}

/// Kinds of [`SlValue`].
pub const SL_VALUE_NULL: u32 = 0;
/// `integer` is 0 or 1.
pub const SL_VALUE_BOOLEAN: u32 = 1;
/// `integer` holds it, and `number` the same as a double.
pub const SL_VALUE_INTEGER: u32 = 2;
/// `number` holds it.
pub const SL_VALUE_NUMBER: u32 = 3;
/// `text` holds it.
pub const SL_VALUE_TEXT: u32 = 4;
/// `items` holds `count` elements.
pub const SL_VALUE_LIST: u32 = 5;
/// `items` holds `count` elements, each with its `key`, in byte order of the keys.
pub const SL_VALUE_MAP: u32 = 6;

/// A node of a parameter tree. Parameters arrive checked against the manifest, with defaults filled in.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlValue {
    /// One of the `SL_VALUE_` constants.
    pub kind: u32,
    /// Zero.
    pub reserved: u32,
    /// Value of booleans and whole numbers.
    pub integer: i64,
    /// Value of numbers.
    pub number: f64,
    /// Value of text.
    pub text: SlText,
    /// The name under which the node stands in its parent mapping.
    pub key: SlText,
    /// Children.
    pub items: *const SlValue,
    /// Number of children.
    pub count: usize,
}

/// Key of a random stream.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlKey {
    /// 256 bits.
    pub bytes: [u8; 32],
}

/// State of a xoshiro256++ stream; plain data that may be copied into and out of a saved state.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlStream {
    /// The four words of state.
    pub state: [u64; 4],
}

/// What the host offers. Valid for the life of the process.
#[repr(C)]
#[derive(Debug)]
pub struct SlHost {
    /// Size of this struct in bytes.
    pub size: usize,
    /// To be handed back with every call.
    pub context: *mut c_void,
    /// Logs a line. Levels: 0 note, 1 warning.
    pub log: Option<unsafe extern "C" fn(context: *mut c_void, level: u32, text: SlText)>,
    /// Not zero when the host wants long calls to come to an end.
    pub cancelled: Option<unsafe extern "C" fn(context: *mut c_void) -> i32>,
    /// Starts the stream of a key.
    pub open_stream: Option<unsafe extern "C" fn(context: *mut c_void, key: *const SlKey, stream: *mut SlStream)>,
    /// Draws `count` words from a stream.
    pub fill: Option<unsafe extern "C" fn(context: *mut c_void, stream: *mut SlStream, words: *mut u64, count: usize)>,
    /// Runs `body(argument, tile)` for every tile from 0 to `tiles` - 1, in any order, on the threads that the run lends. Tiles must
    /// not write to the same memory. Returns when all are done.
    pub parallel_for: Option<
        unsafe extern "C" fn(
            context: *mut c_void,
            tiles: usize,
            body: Option<unsafe extern "C" fn(argument: *mut c_void, tile: usize)>,
            argument: *mut c_void,
        ),
    >,
    /// e^x; the same bits on every machine, unlike the C library's.
    pub exp: Option<unsafe extern "C" fn(x: f64) -> f64>,
    /// Natural logarithm.
    pub ln: Option<unsafe extern "C" fn(x: f64) -> f64>,
    /// Sine.
    pub sin: Option<unsafe extern "C" fn(x: f64) -> f64>,
    /// Cosine.
    pub cos: Option<unsafe extern "C" fn(x: f64) -> f64>,
    /// x^y.
    pub pow: Option<unsafe extern "C" fn(x: f64, y: f64) -> f64>,
    /// The key of a numbered stream under a key: for tiles that draw for themselves, or for streams of several purposes. Other numbers and
    /// other keys give streams that have nothing to do with each other.
    pub derive_key:
        Option<unsafe extern "C" fn(context: *mut c_void, key: *const SlKey, number: u32, derived: *mut SlKey)>,
}

/// A bond.
#[repr(C)]
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SlBond {
    /// One end, a free site.
    pub i: u32,
    /// The other end, free or pinned.
    pub j: u32,
    /// Bond class.
    pub class_index: u16,
    /// 1, or -1 where the spin at `j` is seen with opposite sign (across an antiperiodic seam).
    pub sign: i8,
    /// Zero.
    pub reserved: u8,
}

/// A lattice as the host keeps it: immutable, shared by all instances.
#[repr(C)]
#[derive(Debug)]
pub struct SlGraph {
    /// Size of this struct in bytes.
    pub size: usize,
    /// Number of directions.
    pub dimension: u32,
    /// Number of free sites.
    pub sites: u32,
    /// Number of free and pinned sites.
    pub total: u32,
    /// Number of bond classes.
    pub classes: u32,
    /// Number of bonds.
    pub bonds: usize,
    /// Bonds in the lattice's order, `bonds` of them.
    pub bond_list: *const SlBond,
    /// How often each bond wraps around each direction, `bonds` x `dimension`.
    pub wraps: *const i32,
    /// Where the neighbours of each free site begin, `sites` + 1.
    pub offsets: *const u32,
    /// Neighbours, in order of bonds; a bond of a site with itself stands twice.
    pub neighbours: *const u32,
    /// The bond behind each neighbour.
    pub neighbour_bonds: *const u32,
    /// Positions in nearest-neighbour distances, `total` x `dimension`.
    pub positions: *const f64,
    /// Sublattice of each site, `total`.
    pub sublattices: *const u32,
    /// Direction to which each pinned site points, +1 or -1, `total` - `sites`.
    pub directions: *const i32,
    /// Primitive vectors, `dimension` x `dimension`, a row each.
    pub vectors: *const f64,
    /// Period of each direction in cells; 0 where it is not periodic.
    pub periods: *const i64,
    /// Unit cells in each direction.
    pub cells: *const i64,
    /// Names of the classes.
    pub class_names: *const SlText,
    /// Number of faces; 0 where the lattice gives none.
    pub faces: usize,
    /// Where the sites of each face begin, `faces` + 1.
    pub face_offsets: *const u32,
    /// Sites around each face, in order.
    pub face_sites: *const u32,
}

/// A table over k sites: energies of all q^k combinations, the first site's state counting most.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlFactorTable {
    /// Number of sites.
    pub order: u32,
    /// Zero.
    pub reserved: u32,
    /// q^order energies.
    pub energies: *const f64,
}

/// One many-body term.
#[repr(C)]
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SlFactor {
    /// Its table.
    pub table: u32,
    /// Where its sites begin in `factor_sites`.
    pub first: u32,
}

/// A Hamiltonian on a graph, flattened by the host. Energy = pairs + sites + factors + vectors + custom, each where present.
///
/// For discrete spins: sum over bonds b of `strength(b) E[table(b)][s_i][s_j]`, plus sum over free sites of `strength(i) E[class(i)][s_i]`,
/// plus sum over factors. For vector spins: sum over bonds of `strength(b) S_i^T M S_j`, plus sum over free sites of
/// `strength(i) (S^T A S + f . S)`.
/// Signs of antiperiodic bonds are folded into the tables.
#[repr(C)]
#[derive(Debug)]
pub struct SlEnergy {
    /// Size of this struct in bytes.
    pub size: usize,
    /// States of a discrete spin; 0 for vector spins.
    pub states: u32,
    /// Components of a vector spin of unit length; 0 for discrete spins.
    pub components: u32,
    /// Spin value of each state, or null where states have none.
    pub values: *const f64,
    /// The state that is minus each state, or null.
    pub negation: *const u8,
    /// State, or vector of `components`, of each pinned site (`total` - `sites`): exactly one of the two is not null when there are any.
    pub pinned_states: *const u8,
    /// See `pinned_states`.
    pub pinned_vectors: *const f64,
    /// Number of pair tables (or of vector couplings).
    pub tables: u32,
    /// Number of site classes.
    pub site_classes: u32,
    /// `tables` x q x q: energy by own state (row) and neighbour's state; null without pair tables.
    pub pair_tables: *const f64,
    /// Table of each entry of `neighbours`, as seen from the site of the row.
    pub neighbour_tables: *const u16,
    /// Table of each bond, rows by the state at `i`.
    pub bond_tables: *const u16,
    /// Factor on each entry of `neighbours`, or null where all are 1.
    pub neighbour_strengths: *const f64,
    /// Factor on each bond, or null where all are 1.
    pub bond_strengths: *const f64,
    /// `site_classes` x q; null without site energies.
    pub site_tables: *const f64,
    /// Class of each free site.
    pub site_class: *const u16,
    /// Factor on each site's energy, or null where all are 1.
    pub site_strengths: *const f64,
    /// Number of factor tables.
    pub factor_tables: usize,
    /// The factor tables.
    pub factor_table_list: *const SlFactorTable,
    /// Number of factors.
    pub factors: usize,
    /// The factors.
    pub factor_list: *const SlFactor,
    /// Sites of all factors.
    pub factor_sites: *const u32,
    /// Where the factors of each free site begin, `sites` + 1; null without factors.
    pub site_factor_offsets: *const u32,
    /// Factors of each site.
    pub site_factors: *const u32,
    /// Which of the factor's sites it is.
    pub site_factor_slots: *const u32,
    /// `tables` x n x n: energy S_i^T M S_j, own components as rows; null without.
    pub couplings: *const f64,
    /// `site_classes` x n x n: energy S^T A S; null without.
    pub anisotropies: *const f64,
    /// `site_classes` x n: energy f . S (a field enters with its sign); null without.
    pub fields: *const f64,
    /// Callbacks of the model; null without.
    pub custom: *const SlCustom,
    /// Number of involutions of states that leave the energy unchanged when applied to all free spins (pinned rims aside).
    pub involutions: usize,
    /// The involutions, each a map of q states.
    pub involution_list: *const u8,
    /// Not zero where every permutation of states leaves the energy unchanged (pinned rims aside).
    pub permutations: u32,
    /// Number of colours: sets of free sites that do not interact within.
    pub colours: u32,
    /// Where the sites of each colour begin in `colour_sites`, `colours` + 1.
    pub colour_offsets: *const u32,
    /// Free sites by colour, ascending within each.
    pub colour_sites: *const u32,
}

/// The callbacks of a custom model, bound to it.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlCustom {
    /// Size of this struct in bytes.
    pub size: usize,
    /// The model, to be handed back.
    pub model: *const c_void,
    /// See [`crate::SlModel::total`].
    pub total: crate::SlTotal,
    /// See [`crate::SlModel::delta`].
    pub delta: crate::SlDelta,
}

/// One byte a site.
pub const SL_VIEW_BYTES: u32 = 1;
/// One bit a site, for two states.
pub const SL_VIEW_BITS: u32 = 2;
/// One vector of doubles a site.
pub const SL_VIEW_VECTORS: u32 = 4;

/// A configuration of one chain, where its owner keeps it. Everything that the numbers reach lies within `length`; a reader that does not
/// trust the owner needs to look no further. A state is below the model's number of states unless the rule has a fault: who indexes memory by
/// one checks it.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlView {
    /// Size of this struct in bytes.
    pub size: usize,
    /// One of the `SL_VIEW_` constants.
    pub kind: u32,
    /// Components of vectors; 0 otherwise.
    pub components: u32,
    /// Sites shown, `total` of the graph.
    pub sites: usize,
    /// Bytes: site s is at `data[s * stride]`. Vectors: component c of site s is double `s * stride + c * component_stride`. Bits: without
    /// `positions`, site s is bit `offset + s * stride` of the 64-bit words, the least significant bit first.
    pub stride: usize,
    /// See `stride`.
    pub component_stride: usize,
    /// See `stride`.
    pub offset: usize,
    /// Bits: where not null, site s is bit `offset + positions[s]`. They do not change while the instance lives.
    pub positions: *const u32,
    /// Bytes, 64-bit words or doubles, aligned as such.
    pub data: *const c_void,
    /// How many of them.
    pub length: usize,
}

/// A configuration to write: `states` for discrete spins (one byte a site), `vectors` for vector spins (components innermost); `sites` of them.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlSpins {
    /// Size of this struct in bytes.
    pub size: usize,
    /// `total` of the graph.
    pub sites: usize,
    /// Where to write bytes, or null.
    pub states: *mut u8,
    /// Where to write vectors, or null.
    pub vectors: *mut f64,
}

/// `energy` is valid.
pub const SL_TALLY_ENERGY: u32 = 1;
/// `magnetisation` is valid.
pub const SL_TALLY_MAGNETISATION: u32 = 2;
/// `proposed` and `accepted` are valid.
pub const SL_TALLY_ACCEPTANCE: u32 = 4;

/// Totals that a rule keeps while it works.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlTallies {
    /// Size of this struct in bytes.
    pub size: usize,
    /// Which of them are valid: `SL_TALLY_` flags.
    pub valid: u32,
    /// Zero.
    pub reserved: u32,
    /// Total energy.
    pub energy: f64,
    /// Sum of spin values over free sites; of vectors, their components.
    pub magnetisation: [f64; 3],
    /// Proposals since the instance was prepared.
    pub proposed: u64,
    /// Of these, accepted.
    pub accepted: u64,
    /// Zero: room for totals to come, since tallies stand in arrays and do not grow. Flags in `valid` will tell of them.
    pub spare: [f64; 8],
}

/// What an update rule is prepared with.
#[repr(C)]
#[derive(Debug)]
pub struct SlPrepare {
    /// Size of this struct in bytes.
    pub size: usize,
    /// The host.
    pub host: *const SlHost,
    /// The lattice.
    pub graph: *const SlGraph,
    /// The Hamiltonian.
    pub energy: *const SlEnergy,
    /// 1/(k_B T) in 1/energy; at least 0.
    pub inverse_temperature: f64,
    /// Number of chains of the group.
    pub lanes: usize,
    /// Stream key of each chain, `lanes` of them.
    pub lane_keys: *const SlKey,
    /// Stream key of the group, for rules that draw for all lanes together.
    pub group_key: SlKey,
}
