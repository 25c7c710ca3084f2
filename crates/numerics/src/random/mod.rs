//! Named random streams and frozen maps from words to numbers.
//!
//! A [`StreamKey`] names a stream; [`Xoshiro`] and [`Eight`] turn it into 64-bit words; the functions and thresholds
//! turn words into numbers and decisions. All of it is frozen: see `README.md` beside this file for the protocol,
//! which is complete enough to be written again in another language.
//!
//! The generators also implement the core traits of `rand`, for code that wants its interface. The sampling maps
//! of `rand` change between releases and are therefore not used.

mod eight;
mod halves;
mod key;
mod maps;
mod splitmix;
mod threshold;
mod xoshiro;

pub use eight::{Eight, RestoreError, SAVED_LEN};
pub use halves::Halves;
pub use key::StreamKey;
pub use maps::{below, below_u32, open_unit_f64, unit_f64};
pub use splitmix::SplitMix;
pub use threshold::{Threshold32, Threshold64};
pub use xoshiro::Xoshiro;

/// The traits that the generators implement.
pub use rand::rand_core;
