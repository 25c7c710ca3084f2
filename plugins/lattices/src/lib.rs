//! The standard lattices: `chain`, `square`, `triangular`, `honeycomb`, `kagome`, `cubic`, `bcc`, `fcc`, `diamond`.
//!
//! Each is a unit cell (`standard/<name>.rs`) repeated over a box (`standard/brick.rs`); another lattice is one more such file and its line
//! below. Common to all:
//! - Sites are numbered with the last direction fastest; lengths are in nearest-neighbour distances.
//! - Each bond stands once. A period of two keeps both wrapping bonds, a period of one a bond of the site with itself.
//! - `plus`, `minus`: the sites beyond an end that are neighbours of free sites are pinned up or down; every bond to them counts. Such a
//!   bond runs from the free site to the pinned one. Sites beyond two pinned ends at once point as the first of the two directions says.
//! - `antiperiodic`: bonds that cross the seam carry the sign -1; a period of one is refused.
//! - Colourings: two colours where periods are even, three on hypercubic lattices otherwise; on the triangular lattice three where periods
//!   are multiples of three, four where they are even; on lattices with several sites a cell the sublattices, which are two on `honeycomb`, `bcc`
//!   and `diamond`; elsewhere the host colours by itself.
//! - Faces: plaquettes, triangles and hexagons of planar lattices and plaquettes of `cubic`, whose corners are free sites, all different.
#![deny(unsafe_code)]

mod standard;
#[cfg(test)]
mod tests;

use standard::{Bcc, Chain, Cubic, Diamond, Fcc, Honeycomb, Kagome, Square, Triangular};

#[allow(unsafe_code)]
mod export {
    use super::{Bcc, Chain, Cubic, Diamond, Fcc, Honeycomb, Kagome, Square, Triangular};

    spinledger_sdk::export! {
        library: "lattices", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        lattices: [Chain, Square, Triangular, Honeycomb, Kagome, Cubic, Bcc, Fcc, Diamond],
    }
}
