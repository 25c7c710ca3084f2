//! Turns due parcels into ledger entries.
//!
//! - [`Study`] is a pipeline, read and checked; nothing is loaded for it.
//! - [`run::run`] does what is due of it, with worker processes ([`worker::serve`] is their side).
//! - [`steps`] holds the kinds of step, one file each.
//!
//! Left to others: reading YAML (`pipeline`), preimages of keys (`plan`), bytes on disk (`ledger`), plugins (`host`), estimators (`stats`), the terminal
//! (`cli`).
#![forbid(unsafe_code)]

mod analyse;
mod close;
mod failure;
pub mod forecast;
mod gather;
pub mod job;
mod kept;
mod line;
mod loaded;
pub mod pace;
pub mod planning;
mod pool;
pub mod program;
pub mod results;
pub mod run;
mod sampling;
mod saved;
mod series;
pub mod steps;
mod study;
pub mod worker;

pub use pool::PoolOptions;
pub use series::SeriesReader;
pub use study::{Study, search, vocabulary};

/// An error and its causes, in one line.
pub fn chain_text(error: &dyn std::error::Error) -> String {
    let mut text = error.to_string();
    let mut source = error.source();
    while let Some(cause) = source {
        let cause_text = cause.to_string();
        if !text.ends_with(&cause_text) {
            text.push_str(": ");
            text.push_str(&cause_text);
        }
        source = cause.source();
    }
    text
}
