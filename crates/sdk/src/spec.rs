//! What an item says of itself, as constants: the manifest is made from them when the library is compiled.

/// Kinds of parameters as JSON texts; a plugin may write its own, for instance `{"word":{"of":["up","down"]}}`.
pub mod kinds {
    /// Any finite number.
    pub const NUMBER: &str = r#"{"number":{}}"#;
    /// A number above 0.
    pub const POSITIVE: &str = r#"{"number":{"above":0}}"#;
    /// A number of at least 0.
    pub const NOT_NEGATIVE: &str = r#"{"number":{"min":0}}"#;
    /// A whole number of at least 1.
    pub const COUNT: &str = r#"{"integer":{"min":1}}"#;
    /// True or false.
    pub const BOOLEAN: &str = r#"{"boolean":{}}"#;
    /// Any text.
    pub const TEXT: &str = r#"{"text":{}}"#;
    /// One number, or a mapping from bond class to number.
    pub const NUMBER_BY_CLASS: &str = r#"{"either":{"of":[{"number":{}},{"map":{"of":{"number":{}}}}]}}"#;
}

/// Views that an observable may accept, to be joined by `|`.
pub mod views {
    /// One byte a site.
    pub const BYTES: u32 = spinledger_abi::SL_VIEW_BYTES;
    /// One bit a site, of spins of two states.
    pub const BITS: u32 = spinledger_abi::SL_VIEW_BITS;
    /// One vector a site.
    pub const VECTORS: u32 = spinledger_abi::SL_VIEW_VECTORS;
    /// Whatever the rule shows: nothing is converted.
    pub const ANY: u32 = BYTES | BITS | VECTORS;
}

/// One parameter.
#[derive(Clone, Copy, Debug)]
pub struct Parameter {
    /// The key that people write.
    pub name: &'static str,
    /// What it may be: a JSON text, see [`kinds`].
    pub kind: &'static str,
    /// `energy`; `field`, which plugins get as an energy and people may give in tesla; `temperature`; empty for pure numbers.
    pub unit: &'static str,
    /// The default as JSON text; empty: none.
    pub default: &'static str,
    /// It must be given.
    pub required: bool,
    /// One line of explanation.
    pub about: &'static str,
}

impl Parameter {
    /// A required parameter.
    pub const fn required(name: &'static str, kind: &'static str, about: &'static str) -> Self {
        Parameter { name, kind, unit: "", default: "", required: true, about }
    }

    /// A parameter with a default (JSON text).
    pub const fn optional(name: &'static str, kind: &'static str, default: &'static str, about: &'static str) -> Self {
        Parameter { name, kind, unit: "", default, required: false, about }
    }

    /// Gives it a unit.
    pub const fn unit(mut self, unit: &'static str) -> Self {
        self.unit = unit;
        self
    }
}

/// Something that a model offers: the word, and conditions `(parameter, "nonzero" | "negative" | "positive" | "uneven")` any of
/// which takes it away. Words: `scalar`, `negation`, `directions`, `inversion`, `permutation`, `ferromagnetic`, `uniform`, `colours`, `vectors`.
pub type Trait = (&'static str, &'static [(&'static str, &'static str)]);

/// A lattice.
#[derive(Clone, Copy, Debug)]
pub struct LatticeSpec {
    /// The name that people write.
    pub name: &'static str,
    /// Counts changes of what it computes.
    pub revision: u32,
    /// What it is.
    pub about: &'static str,
    /// Definition, as text.
    pub formula: &'static str,
    /// Published source.
    pub source: &'static str,
    /// Parameters.
    pub parameters: &'static [Parameter],
    /// Number of directions.
    pub dimension: u32,
    /// The parameter that gives unit cells a direction; empty where there is none.
    pub size: &'static str,
    /// Sites of a unit cell.
    pub sites_per_cell: u64,
    /// Without `size`: the parameter that gives the number of sites.
    pub sites: &'static str,
    /// Bond classes, where known beforehand.
    pub classes: &'static [&'static str],
    /// The parameter that gives boundaries; empty where there is none.
    pub boundary: &'static str,
    /// Smallest period that may be antiperiodic.
    pub antiperiodic_minimum: i64,
}

impl LatticeSpec {
    /// Everything empty, for `..LatticeSpec::EMPTY`.
    pub const EMPTY: LatticeSpec = LatticeSpec {
        name: "",
        revision: 1,
        about: "",
        formula: "",
        source: "",
        parameters: &[],
        dimension: 1,
        size: "",
        sites_per_cell: 1,
        sites: "",
        classes: &[],
        boundary: "",
        antiperiodic_minimum: 2,
    };
}

/// A model.
#[derive(Clone, Copy, Debug)]
pub struct ModelSpec {
    /// The name that people write.
    pub name: &'static str,
    /// Counts changes of what it computes.
    pub revision: u32,
    /// What it is.
    pub about: &'static str,
    /// The Hamiltonian, as text.
    pub formula: &'static str,
    /// Published source.
    pub source: &'static str,
    /// Parameters.
    pub parameters: &'static [Parameter],
    /// Forms of energy that it uses: of `pair`, `factors`, `vectors`, `custom`.
    pub forms: &'static [&'static str],
    /// States of a discrete spin, if fixed; 0 otherwise.
    pub states: u64,
    /// The parameter that gives them otherwise.
    pub states_parameter: &'static str,
    /// What rules and observables may rely on.
    pub offers: &'static [Trait],
    /// Parameters that may be mappings from bond class to number.
    pub by_class: &'static [&'static str],
}

impl ModelSpec {
    /// Everything empty, for `..ModelSpec::EMPTY`.
    pub const EMPTY: ModelSpec = ModelSpec {
        name: "",
        revision: 1,
        about: "",
        formula: "",
        source: "",
        parameters: &[],
        forms: &["pair"],
        states: 0,
        states_parameter: "",
        offers: &[],
        by_class: &[],
    };
}

/// An update rule.
#[derive(Clone, Copy, Debug)]
pub struct UpdateSpec {
    /// The name that people write.
    pub name: &'static str,
    /// Counts changes of what it computes.
    pub revision: u32,
    /// What it is.
    pub about: &'static str,
    /// The rule, as text.
    pub formula: &'static str,
    /// Published source.
    pub source: &'static str,
    /// Parameters.
    pub parameters: &'static [Parameter],
    /// Forms of energy that it serves.
    pub forms: &'static [&'static str],
    /// Traits that it needs of the model; `a|b` means either.
    pub needs: &'static [&'static str],
    /// Most states that it serves; 0: any.
    pub most_states: u64,
    /// The parameter that gives the number of chains advanced together; empty: one.
    pub lanes: &'static str,
    /// Where that parameter is not given, it is chosen by size: 1 where `packing` fits, else this many. 0: it has a default of its own.
    pub together: u64,
    /// By number of directions (the list of that length serves it): the size in each must be a multiple of the number here, and at least twice that,
    /// and every boundary periodic. Where that is not so, or no list has the length, one chain (1 as value of `lanes`) is refused.
    pub packing: &'static [&'static [u64]],
}

impl UpdateSpec {
    /// Everything empty, for `..UpdateSpec::EMPTY`.
    pub const EMPTY: UpdateSpec = UpdateSpec {
        name: "",
        revision: 1,
        about: "",
        formula: "",
        source: "",
        parameters: &[],
        forms: &["pair"],
        needs: &[],
        most_states: 0,
        lanes: "",
        together: 0,
        packing: &[],
    };
}

/// A column, where it does not depend on parameters.
#[derive(Clone, Copy, Debug)]
pub struct Column {
    /// Name.
    pub name: &'static str,
    /// `energy` or empty.
    pub unit: &'static str,
    /// Unchanged by the symmetries of the Hamiltonian.
    pub invariant: bool,
    /// One line of explanation.
    pub about: &'static str,
}

/// An observable.
#[derive(Clone, Copy, Debug)]
pub struct ObservableSpec {
    /// The name that people write.
    pub name: &'static str,
    /// Counts changes of what it computes.
    pub revision: u32,
    /// What it is.
    pub about: &'static str,
    /// Definition, as text.
    pub formula: &'static str,
    /// Published source.
    pub source: &'static str,
    /// Parameters.
    pub parameters: &'static [Parameter],
    /// Traits that it needs of the model; `a|b` means either.
    pub needs: &'static [&'static str],
    /// Chains that it reads at once: 1 or 2.
    pub chains: u64,
    /// What it accepts, see [`views`].
    pub views: u32,
    /// Columns, where they do not depend on parameters.
    pub columns: &'static [Column],
}

impl ObservableSpec {
    /// Everything empty, bytes and vectors accepted, for `..ObservableSpec::EMPTY`.
    pub const EMPTY: ObservableSpec = ObservableSpec {
        name: "",
        revision: 1,
        about: "",
        formula: "",
        source: "",
        parameters: &[],
        needs: &[],
        chains: 1,
        views: views::BYTES | views::VECTORS,
        columns: &[],
    };
}
