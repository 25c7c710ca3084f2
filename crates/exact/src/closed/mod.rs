//! Closed forms.

pub mod critical;
mod elliptic;
mod ring;
mod square;
mod torus;

pub use ring::{Ring, ring};
pub use square::{Square, square};
pub use torus::{Torus, torus};
