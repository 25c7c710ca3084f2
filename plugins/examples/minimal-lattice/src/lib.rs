//! A complete plugin library with one lattice: a ladder of two coupled chains, closed to a ring.
#![forbid(unsafe_code)]

use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Parameter, Params, Result, export, kinds};

/// Two chains of `size` sites, with a rung between them at every site.
struct Ladder {
    size: usize,
}

impl Lattice for Ladder {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "ladder",
        about: "Two chains joined by rungs, periodic along the chains.",
        parameters: &[Parameter::required("size", kinds::COUNT, "Rungs.")],
        size: "size",
        sites_per_cell: 2,
        classes: &["first.leg", "first.rung"],
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(Ladder { size: params.count("size")? })
    }

    fn build(&self, lattice: &mut LatticeBuilder) -> Result<()> {
        let n = self.size as u32;
        lattice.geometry(&[vec![1.0]], &[self.size], &[true]);
        for x in 0..n {
            // Both sites of a rung have the rung's position: the lattice has one direction.
            lattice.site(&[f64::from(x)], 0);
            lattice.site(&[f64::from(x)], 1);
        }
        let (leg, rung) = (lattice.class("first.leg"), lattice.class("first.rung"));
        for x in 0..n {
            let next = (x + 1) % n;
            for side in 0..2 {
                let wrap = i32::from(x + 1 == n);
                lattice.bond_across(2 * x + side, 2 * next + side, leg, &[wrap], 1);
            }
            lattice.bond(2 * x, 2 * x + 1, rung);
        }
        Ok(())
    }
}

export! {
    library: "minimal-lattice", version: env!("CARGO_PKG_VERSION"), licence: "MIT OR Apache-2.0",
    lattices: [Ladder],
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_manifest_names_the_parameter_that_the_code_reads() {
        let size = Params::Map(vec![(Ladder::SPEC.size.to_owned(), Params::Integer(3))]);
        assert_eq!(Ladder::new(&size).unwrap().size, 3);
    }
}
