//! Acceptance, distribution, moments against exact values, totals, saved states, registers, and frozen chains.

mod acceptance;
mod distribution;
#[path = "../../../local-updates/src/tests/exact.rs"]
mod exact;
#[allow(dead_code, unused_imports, reason = "the standard lattices as they are; not all are needed here")]
#[path = "../../../lattices/src/standard/mod.rs"]
mod lattices;
mod mechanics;
#[allow(dead_code, unused_imports, reason = "the standard models as they are; not all are needed here")]
#[path = "../../../models/src/standard/mod.rs"]
mod models;
mod moments;
mod refusals;
mod systems;
