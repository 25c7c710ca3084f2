//! Exact results for lattice spin systems.
//!
//! - [`enumeration`]: all states of a small discrete system, counted in exact integers, and canonical averages from them
//! - [`closed`]: closed forms: the infinite square lattice, the finite torus, the ring, critical temperatures
//!
//! Systems are plain data (lists of bonds, tables of energies): lattices and models by name are left to others.
//!
//! ```
//! use spinledger_exact::closed::{critical, square};
//! use spinledger_exact::enumeration::{Order, PairSystem};
//!
//! // Two Ising spins joined by one bond.
//! let pair = PairSystem {
//!     bonds: vec![(0, 1, 0)],
//!     tables: vec![vec![-1.0, 1.0, 1.0, -1.0]],
//!     ..PairSystem::new(2, 2, Order::Values(vec![vec![-1.0, 1.0]]))
//! };
//! let levels = pair.degeneracies()?;
//! assert_eq!(levels.levels().iter().map(|level| level.count).sum::<u64>(), 4);
//! assert!((levels.averages(0.5).energy + 0.5 * 0.5f64.tanh()).abs() < 1e-15);
//!
//! assert!(square(1.0 / critical::square_ising()).energy + 2f64.sqrt() < 1e-12);
//! # Ok::<(), spinledger_exact::enumeration::EnumerationError>(())
//! ```
//!
//! Conventions: each bond counts once, k_B = 1, K = J/T; averages are per site where they say so.

#![forbid(unsafe_code)]

pub mod closed;
pub mod enumeration;
