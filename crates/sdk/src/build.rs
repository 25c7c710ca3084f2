//! Where lattices and models are written.

/// Number of a bond class, in order of naming.
pub type ClassIndex = u16;

/// Collects a lattice. Free sites are added before pinned ones.
#[derive(Debug, Default)]
pub struct LatticeBuilder {
    pub(crate) dimension: usize,
    pub(crate) vectors: Vec<f64>,
    pub(crate) cells: Vec<i64>,
    pub(crate) periodic: Vec<bool>,
    pub(crate) positions: Vec<f64>,
    pub(crate) sublattices: Vec<u32>,
    pub(crate) free: usize,
    pub(crate) directions: Vec<i32>,
    pub(crate) classes: Vec<String>,
    pub(crate) bonds: Vec<crate::Bond>,
    pub(crate) wraps: Vec<i32>,
    pub(crate) colours: Vec<u32>,
    pub(crate) faces: Vec<Vec<u32>>,
}

impl LatticeBuilder {
    /// An empty lattice.
    pub fn new() -> Self {
        LatticeBuilder::default()
    }

    /// Primitive vectors (a row each, in nearest-neighbour distances), unit cells per direction, and which directions are periodic. Comes first.
    ///
    /// # Panics
    /// Where the lengths do not fit.
    pub fn geometry(&mut self, vectors: &[Vec<f64>], cells: &[usize], periodic: &[bool]) {
        let dimension = vectors.len();
        assert!(cells.len() == dimension && periodic.len() == dimension, "one entry a direction");
        assert!(vectors.iter().all(|v| v.len() == dimension), "vectors of one component a direction");
        self.dimension = dimension;
        self.vectors = vectors.concat();
        self.cells = cells.iter().map(|&c| c as i64).collect();
        self.periodic = periodic.to_vec();
    }

    /// Names the next bond class.
    pub fn class(&mut self, name: &str) -> ClassIndex {
        self.classes.push(name.to_owned());
        (self.classes.len() - 1) as ClassIndex
    }

    /// Adds a free site; returns its number.
    ///
    /// # Panics
    /// After a pinned site, or where the position has another dimension.
    pub fn site(&mut self, position: &[f64], sublattice: u32) -> u32 {
        assert!(self.directions.is_empty(), "free sites come before pinned ones");
        assert_eq!(position.len(), self.dimension, "a position has one component a direction");
        self.positions.extend_from_slice(position);
        self.sublattices.push(sublattice);
        self.free += 1;
        (self.free - 1) as u32
    }

    /// Adds a pinned site that points up (+1) or down (-1); returns its number.
    ///
    /// # Panics
    /// Where the position has another dimension.
    pub fn pinned(&mut self, position: &[f64], sublattice: u32, direction: i32) -> u32 {
        assert_eq!(position.len(), self.dimension, "a position has one component a direction");
        self.positions.extend_from_slice(position);
        self.sublattices.push(sublattice);
        self.directions.push(direction);
        (self.sublattices.len() - 1) as u32
    }

    /// Adds a bond that stays within the lattice.
    pub fn bond(&mut self, i: u32, j: u32, class: ClassIndex) {
        self.bonds.push(crate::Bond { i, j, class_index: class, sign: 1, reserved: 0 });
        self.wraps.resize(self.wraps.len() + self.dimension, 0);
    }

    /// Adds a bond that wraps around the lattice, with sign -1 where it crosses an antiperiodic seam an odd number of times.
    ///
    /// # Panics
    /// Where `wrap` has another dimension.
    pub fn bond_across(&mut self, i: u32, j: u32, class: ClassIndex, wrap: &[i32], sign: i8) {
        assert_eq!(wrap.len(), self.dimension, "one entry a direction");
        self.bonds.push(crate::Bond { i, j, class_index: class, sign, reserved: 0 });
        self.wraps.extend_from_slice(wrap);
    }

    /// Colours of all free sites, such that no bond joins two of a colour. Without, the host colours by itself.
    pub fn colours(&mut self, colours: Vec<u32>) {
        self.colours = colours;
    }

    /// Adds a face: the sites around it, in order.
    pub fn face(&mut self, sites: &[u32]) {
        self.faces.push(sites.to_vec());
    }
}

/// Collects a Hamiltonian.
#[derive(Debug, Default)]
pub struct ModelBuilder {
    pub(crate) calls: Vec<ModelCall>,
}

/// One thing said of a Hamiltonian; handed to the host in order.
#[derive(Debug, Clone)]
pub(crate) enum ModelCall {
    Spins { states: usize, values: Vec<f64>, negation: Vec<u8>, up: Option<u8>, down: Option<u8> },
    Vectors { components: usize, up: Vec<f64> },
    Pair { class: ClassIndex, energies: Vec<f64> },
    SiteClasses(Vec<u16>),
    Site { class: u16, energies: Vec<f64> },
    BondStrengths(Vec<f64>),
    SiteStrengths(Vec<f64>),
    FactorTable { order: usize, energies: Vec<f64> },
    Factors { table: usize, sites: Vec<u32> },
    Coupling { class: ClassIndex, matrix: Vec<f64> },
    Anisotropy { class: u16, matrix: Vec<f64> },
    Field { class: u16, field: Vec<f64> },
    Custom,
    Involution(Vec<u8>),
    Permutations,
}

impl ModelBuilder {
    /// A Hamiltonian without terms.
    pub fn new() -> Self {
        ModelBuilder::default()
    }

    /// Discrete spins of 2 to 256 states. `values`: spin value of each state, or empty; `negation`: the state that is minus each, or
    /// empty; `up`, `down`: states of pinned sites, if the model knows such directions. Comes first.
    pub fn spins(&mut self, states: usize, values: &[f64], negation: &[u8], up: Option<u8>, down: Option<u8>) {
        self.calls.push(ModelCall::Spins { states, values: values.into(), negation: negation.into(), up, down });
    }

    /// Vector spins of unit length with 2 or 3 components; pinned sites point along `up` or against it. Comes first.
    pub fn vectors(&mut self, up: &[f64]) {
        self.calls.push(ModelCall::Vectors { components: up.len(), up: up.into() });
    }

    /// Energies of a bond class, q x q, rows by the state at `i`. Classes without are not coupled.
    pub fn pair(&mut self, class: ClassIndex, energies: &[f64]) {
        self.calls.push(ModelCall::Pair { class, energies: energies.into() });
    }

    /// Class of each free site; all are 0 otherwise.
    pub fn site_classes(&mut self, classes: &[u16]) {
        self.calls.push(ModelCall::SiteClasses(classes.into()));
    }

    /// Energies of the states of a site class.
    pub fn site(&mut self, class: u16, energies: &[f64]) {
        self.calls.push(ModelCall::Site { class, energies: energies.into() });
    }

    /// A factor on the energy of each bond.
    pub fn bond_strengths(&mut self, strengths: &[f64]) {
        self.calls.push(ModelCall::BondStrengths(strengths.into()));
    }

    /// A factor on the site energy of each free site.
    pub fn site_strengths(&mut self, strengths: &[f64]) {
        self.calls.push(ModelCall::SiteStrengths(strengths.into()));
    }

    /// The next table over `order` sites: q^order energies, the first site's state counting most. Returns its number.
    pub fn factor_table(&mut self, order: usize, energies: &[f64]) -> usize {
        let number = self.calls.iter().filter(|c| matches!(c, ModelCall::FactorTable { .. })).count();
        self.calls.push(ModelCall::FactorTable { order, energies: energies.into() });
        number
    }

    /// Many-body terms over a table: as many times `order` sites as there are terms.
    pub fn factors(&mut self, table: usize, sites: &[u32]) {
        self.calls.push(ModelCall::Factors { table, sites: sites.into() });
    }

    /// Coupling matrix of a bond class, n x n: energy S_i^T M S_j.
    pub fn coupling(&mut self, class: ClassIndex, matrix: &[f64]) {
        self.calls.push(ModelCall::Coupling { class, matrix: matrix.into() });
    }

    /// Anisotropy of a site class, n x n: energy S^T A S.
    pub fn anisotropy(&mut self, class: u16, matrix: &[f64]) {
        self.calls.push(ModelCall::Anisotropy { class, matrix: matrix.into() });
    }

    /// Field of a site class, n: energy f . S (minus the field in the usual convention).
    pub fn field(&mut self, class: u16, field: &[f64]) {
        self.calls.push(ModelCall::Field { class, field: field.into() });
    }

    /// The model's callbacks (`footprint`, `total`, `delta`) add energy.
    pub fn custom(&mut self) {
        self.calls.push(ModelCall::Custom);
    }

    /// An involution of states that leaves the energy unchanged when applied to all free spins, pinned rims aside.
    pub fn involution(&mut self, map: &[u8]) {
        self.calls.push(ModelCall::Involution(map.into()));
    }

    /// Every permutation of states does.
    pub fn permutations(&mut self) {
        self.calls.push(ModelCall::Permutations);
    }
}
