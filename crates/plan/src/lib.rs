//! From a checked pipeline and the ledger's index to parcels and their states: what is recorded, what is partial, what is due.
//!
//! Everything here is pure: no file is opened and no plugin loaded. Planning is staged, since the points of a scan may come from the table
//! of an earlier step, and the key of an analysis depends on the content that it analyses: a step is planned when the steps that it
//! needs are complete.
//!
//! - [`sample`] plans a `sample` step: its points, the groups of chains of each, how many rows are on record.
//! - [`states`] says what chains begin from and which configurations are kept, [`sequence`] which points follow each other.
//! - [`analysis`] makes the keys of everything else.
//! - [`lanes`] says how many chains a rule advances together.
//! - [`blocks`] cuts chains into blocks.
//!
//! The preimages made here are what keys mean: changing their form orphans every ledger, so they are frozen by tests.
#![forbid(unsafe_code)]

pub mod analysis;
pub mod blocks;
pub mod dynamics;
pub mod lanes;
pub mod sample;
pub mod sequence;
pub mod states;
