//! For unit tests of plugins: a lattice and a model, flattened as the host does it, without loading a library.
//!
//! ```
//! use spinledger_sdk::testing::{Bench, params};
//! # use spinledger_sdk::*;
//! # struct Ring(usize);
//! # impl Lattice for Ring {
//! #     const SPEC: LatticeSpec = LatticeSpec {
//! #         name: "ring", size: "size", parameters: &[Parameter::required("size", kinds::COUNT, "Sites.")], ..LatticeSpec::EMPTY
//! #     };
//! #     fn new(params: &Params) -> Result<Self> { Ok(Ring(params.count("size")?)) }
//! #     fn build(&self, b: &mut LatticeBuilder) -> Result<()> {
//! #         b.geometry(&[vec![1.0]], &[self.0], &[true]);
//! #         for s in 0..self.0 { b.site(&[s as f64], 0); }
//! #         let first = b.class("first");
//! #         for s in 0..self.0 { b.bond_across(s as u32, ((s + 1) % self.0) as u32, first, &[((s + 1) / self.0) as i32], 1); }
//! #         Ok(())
//! #     }
//! # }
//! # struct Ising(f64);
//! # impl Model for Ising {
//! #     const SPEC: ModelSpec = ModelSpec {
//! #         name: "ising", states: 2, parameters: &[Parameter::optional("coupling", kinds::NUMBER, "1", "J.")], ..ModelSpec::EMPTY
//! #     };
//! #     fn new(params: &Params) -> Result<Self> { Ok(Ising(params.number("coupling")?)) }
//! #     fn describe(&self, _: &Graph<'_>, b: &mut ModelBuilder) -> Result<()> {
//! #         b.spins(2, &[1.0, -1.0], &[1, 0], Some(0), Some(1));
//! #         b.pair(0, &[-self.0, self.0, self.0, -self.0]);
//! #         Ok(())
//! #     }
//! # }
//! let bench = Bench::new::<Ring, Ising>(&params(r#"{"size": 4}"#), &params("{}"));
//! assert_eq!(bench.graph().sites, 4);
//! assert_eq!(bench.total(&[0, 0, 0, 0]), -4.0);
//! let prepare = bench.prepare(0.5, 2, 7); // inverse temperature, lanes, seed
//! assert_eq!(prepare.lane_keys.len(), 2);
//! ```

mod bench;
mod json;

pub use bench::Bench;
pub use json::params;
