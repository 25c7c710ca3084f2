//! Random streams, elementary functions and ordered sums.
//!
//! Everything in spinledger that turns bits into numbers passes here, so that the same bits come out on every
//! machine: [`random`] names streams and generates words, [`elementary`] evaluates functions from one pinned
//! library, [`special`] builds a few distributions on them, and [`sum`] adds in a fixed order.
//!
//! ```
//! use spinledger_numerics::random::{StreamKey, Xoshiro, unit_f64};
//!
//! let key = StreamKey::from_text("seed 7, square 16").derive("chain 0");
//! let mut stream = Xoshiro::from_key(&key);
//! let first = unit_f64(stream.next());
//! assert_eq!(first, unit_f64(Xoshiro::from_key(&key).next()));
//! assert!((0.0..1.0).contains(&first));
//! ```
//!
//! What is left to others: which stream a chain gets (the engine says so in the text of the key), sampling of
//! physical distributions (plugins), and statistics (`spinledger-stats`).
//!
//! A change of any value that leaves this crate changes results and cached entries. The tests called
//! `value_stability` hold values as literals for that reason.

#![forbid(unsafe_code)]

pub mod elementary;
pub mod random;
pub mod special;
pub mod sum;
