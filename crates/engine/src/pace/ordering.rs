//! Temperatures near which systems order, for who gives none: there rules are needed most, and clusters are as large as they get.

use spinledger_exact::closed::critical;
use spinledger_plan::dynamics::ItemRef;
use spinledger_terms::Value;

/// The temperature where none is known: near that of the square lattice.
const OTHERWISE: f64 = 2.27;

/// A temperature near that of ordering, in units where k_B is 1. Good to three digits at least where lattice and model are of the standard ones with one
/// coupling for all bonds; otherwise 2.27.
pub(super) fn near(lattice: &ItemRef, model: &ItemRef) -> f64 {
    known(lattice, model).unwrap_or(OTHERWISE)
}

fn known(lattice: &ItemRef, model: &ItemRef) -> Option<f64> {
    if !(lattice.identity.standard && model.identity.standard) {
        return None;
    }
    let coupling = match model.parameters.get("coupling") {
        Some(value) => value.as_f64().filter(|j| *j != 0.0)?,
        None => return None,
    };
    let q = model.parameters.get("q").and_then(Value::as_i64).map(|q| q as f64);
    let reduced = match (model.identity.item.as_str(), lattice.identity.item.as_str(), q) {
        ("ising", "square", _) => critical::square_ising(),
        ("ising", "triangular", _) => critical::triangular_ising(),
        ("ising", "honeycomb", _) => critical::honeycomb_ising(),
        ("ising", "kagome", _) => critical::kagome_ising(),
        // Ferrenberg, Xu & Landau 2018 Phys. Rev. E 97 043301.
        ("ising", "cubic", _) => 4.511_523,
        // Butera & Comi 2000 Phys. Rev. B 62 14837.
        ("ising", "bcc", _) => 1.0 / 0.15737,
        ("ising", "fcc", _) => 1.0 / 0.10207,
        // Gaunt & Sykes 1973 J. Phys. A 6 1517.
        ("ising", "diamond", _) => 1.0 / 0.3697,
        ("potts", "square", Some(q)) => critical::square_potts(q)?,
        ("potts", "triangular", Some(q)) => critical::triangular_potts(q)?,
        ("potts", "honeycomb", Some(q)) => critical::honeycomb_potts(q)?,
        _ => return None,
    };
    Some(reduced * coupling.abs())
}
