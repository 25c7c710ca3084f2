//! Distribution, totals, saved states and the order of draws.

mod distribution;
mod exact;
#[allow(dead_code, unused_imports, reason = "the standard lattices as they are; not all are needed here")]
#[path = "../../../lattices/src/standard/mod.rs"]
mod lattices;
mod mechanics;
#[allow(dead_code, unused_imports, reason = "the standard models as they are; not all are needed here")]
#[path = "../../../models/src/standard/mod.rs"]
mod models;

mod systems;
mod vectors;
