//! Distribution, totals, saved states and frozen chains. Systems and the chi-squared test are those of the single-spin rules.

mod decompositions;
#[path = "../../../local-updates/src/tests/exact.rs"]
mod exact;
#[allow(dead_code, unused_imports, reason = "the standard lattices as they are; not all are needed here")]
#[path = "../../../lattices/src/standard/mod.rs"]
pub(crate) mod lattices;
mod mechanics;
#[allow(dead_code, unused_imports, reason = "the standard models as they are; not all are needed here")]
#[path = "../../../models/src/standard/mod.rs"]
pub(crate) mod models;
#[path = "../../../local-updates/src/tests/systems.rs"]
mod systems;
