//! The manifest, written by the compiler.
//!
//! Constant functions cannot allocate, so the text is written twice: once into no room at all, which gives its length, then into an array of
//! that length. Both passes run the same code, so that they cannot disagree.

use crate::spec::{LatticeSpec, ModelSpec, ObservableSpec, Parameter, UpdateSpec};

/// One item's specification.
#[derive(Clone, Copy, Debug)]
pub enum ItemSpec {
    /// Of a lattice.
    Lattice(&'static LatticeSpec),
    /// Of a model.
    Model(&'static ModelSpec),
    /// Of an update rule.
    Update(&'static UpdateSpec),
    /// Of an observable.
    Observable(&'static ObservableSpec),
}

/// A text of which the first `N` bytes are kept.
#[derive(Debug)]
pub struct Manifest<const N: usize> {
    bytes: [u8; N],
    length: usize,
}

impl<const N: usize> Manifest<N> {
    /// The manifest of a library.
    pub const fn of(library: &str, version: &str, licence: &str, items: &[ItemSpec]) -> Self {
        let mut out = Manifest { bytes: [0; N], length: 0 };
        out.raw("{\"interface\":");
        out.number(spinledger_abi::INTERFACE_VERSION as u64);
        out.field("library", library);
        out.field("version", version);
        out.field("licence", licence);
        out.raw(",\"items\":[");
        let mut k = 0;
        while k < items.len() {
            out.comma(k);
            out.item(items[k]);
            k += 1;
        }
        out.raw("]}");
        out
    }

    /// Bytes written, kept or not.
    pub const fn length(&self) -> usize {
        self.length
    }

    /// The bytes kept.
    pub const fn bytes(self) -> [u8; N] {
        self.bytes
    }

    const fn byte(&mut self, byte: u8) {
        if self.length < N {
            self.bytes[self.length] = byte;
        }
        self.length += 1;
    }

    const fn raw(&mut self, text: &str) {
        let (bytes, mut k) = (text.as_bytes(), 0);
        while k < bytes.len() {
            self.byte(bytes[k]);
            k += 1;
        }
    }

    const fn comma(&mut self, index: usize) {
        if index > 0 {
            self.byte(b',');
        }
    }

    /// A JSON string.
    const fn text(&mut self, text: &str) {
        const DIGITS: &[u8; 16] = b"0123456789abcdef";
        let (bytes, mut k) = (text.as_bytes(), 0);
        self.byte(b'"');
        while k < bytes.len() {
            match bytes[k] {
                byte @ (b'"' | b'\\') => {
                    self.byte(b'\\');
                    self.byte(byte);
                }
                byte @ 0..=0x1f => {
                    self.raw("\\u00");
                    self.byte(DIGITS[(byte >> 4) as usize]);
                    self.byte(DIGITS[(byte & 15) as usize]);
                }
                byte => self.byte(byte),
            }
            k += 1;
        }
        self.byte(b'"');
    }

    const fn number(&mut self, number: u64) {
        if number >= 10 {
            self.number(number / 10);
        }
        self.byte(b'0' + (number % 10) as u8);
    }

    /// A further field that holds text.
    const fn field(&mut self, name: &str, value: &str) {
        self.byte(b',');
        self.text(name);
        self.byte(b':');
        self.text(value);
    }

    /// A further field that holds a number.
    const fn count(&mut self, name: &str, value: u64) {
        self.byte(b',');
        self.text(name);
        self.byte(b':');
        self.number(value);
    }

    /// A further field that holds a list of texts.
    const fn list(&mut self, name: &str, values: &[&str]) {
        self.byte(b',');
        self.text(name);
        self.raw(":[");
        let mut k = 0;
        while k < values.len() {
            self.comma(k);
            self.text(values[k]);
            k += 1;
        }
        self.byte(b']');
    }

    /// A further field that holds lists of numbers.
    const fn grids(&mut self, name: &str, grids: &[&[u64]]) {
        self.byte(b',');
        self.text(name);
        self.raw(":[");
        let mut k = 0;
        while k < grids.len() {
            self.comma(k);
            self.byte(b'[');
            let mut d = 0;
            while d < grids[k].len() {
                self.comma(d);
                self.number(grids[k][d]);
                d += 1;
            }
            self.byte(b']');
            k += 1;
        }
        self.byte(b']');
    }

    const fn item(&mut self, item: ItemSpec) {
        match item {
            ItemSpec::Lattice(s) => {
                self.head("lattice", s.name, s.revision, s.about, s.formula, s.source, s.parameters);
                self.raw(",\"lattice\":{\"dimension\":");
                self.number(s.dimension as u64);
                self.field("size", s.size);
                self.count("sites_per_cell", s.sites_per_cell);
                self.field("sites", s.sites);
                self.list("classes", s.classes);
                if !s.boundary.is_empty() {
                    assert!(s.antiperiodic_minimum >= 0, "a period is not negative");
                    self.raw(",\"boundaries\":{\"parameter\":");
                    self.text(s.boundary);
                    self.count("antiperiodic_minimum", s.antiperiodic_minimum as u64);
                    self.byte(b'}');
                }
            }
            ItemSpec::Model(s) => {
                self.head("model", s.name, s.revision, s.about, s.formula, s.source, s.parameters);
                self.raw(",\"model\":{\"states_parameter\":");
                self.text(s.states_parameter);
                self.list("forms", s.forms);
                if s.states > 0 {
                    self.count("states", s.states);
                }
                self.offers(s.offers);
                self.list("by_class", s.by_class);
            }
            ItemSpec::Update(s) => {
                self.head("update", s.name, s.revision, s.about, s.formula, s.source, s.parameters);
                self.raw(",\"update\":{\"lanes\":");
                self.text(s.lanes);
                self.list("forms", s.forms);
                self.list("needs", s.needs);
                if s.most_states > 0 {
                    self.count("most_states", s.most_states);
                }
                if s.together > 0 {
                    self.count("together", s.together);
                    self.grids("packing", s.packing);
                }
            }
            ItemSpec::Observable(s) => {
                assert!(s.chains == 1 || s.chains == 2, "an observable reads one chain or two");
                self.head("observable", s.name, s.revision, s.about, s.formula, s.source, s.parameters);
                self.raw(",\"observable\":{\"chains\":");
                self.number(s.chains);
                self.list("needs", s.needs);
                self.raw(",\"columns\":[");
                let mut k = 0;
                while k < s.columns.len() {
                    self.comma(k);
                    self.raw("{\"name\":");
                    self.text(s.columns[k].name);
                    self.field("unit", s.columns[k].unit);
                    self.raw(if s.columns[k].invariant { ",\"invariant\":true" } else { ",\"invariant\":false" });
                    self.field("about", s.columns[k].about);
                    self.byte(b'}');
                    k += 1;
                }
                self.byte(b']');
            }
        }
        self.raw("}}");
    }

    const fn offers(&mut self, offers: &[crate::Trait]) {
        self.raw(",\"offers\":[");
        let mut k = 0;
        while k < offers.len() {
            self.comma(k);
            let (name, unless) = offers[k];
            self.raw("{\"name\":");
            self.text(name);
            self.raw(",\"unless\":[");
            let mut c = 0;
            while c < unless.len() {
                self.comma(c);
                self.raw("{\"parameter\":");
                self.text(unless[c].0);
                self.field("is", unless[c].1);
                self.byte(b'}');
                c += 1;
            }
            self.raw("]}");
            k += 1;
        }
        self.byte(b']');
    }

    #[expect(clippy::too_many_arguments, reason = "the fields that all four kinds share")]
    const fn head(
        &mut self,
        kind: &str,
        name: &str,
        revision: u32,
        about: &str,
        formula: &str,
        source: &str,
        parameters: &[Parameter],
    ) {
        assert!(!name.is_empty(), "an item has a name");
        self.raw("{\"kind\":");
        self.text(kind);
        self.field("name", name);
        self.count("revision", revision as u64);
        self.field("about", about);
        self.field("formula", formula);
        self.field("source", source);
        self.raw(",\"parameters\":[");
        let mut k = 0;
        while k < parameters.len() {
            let parameter = &parameters[k];
            self.comma(k);
            self.raw("{\"name\":");
            self.text(parameter.name);
            self.raw(",\"kind\":");
            self.raw(parameter.kind);
            self.field("unit", parameter.unit);
            if !parameter.default.is_empty() {
                self.raw(",\"default\":");
                self.raw(parameter.default);
            }
            self.raw(if parameter.required { ",\"required\":true" } else { ",\"required\":false" });
            self.field("about", parameter.about);
            self.byte(b'}');
            k += 1;
        }
        self.byte(b']');
    }
}
