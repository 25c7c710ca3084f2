//! From what a builder collected to the host's sinks, and to the flattening of unit tests.

use super::raw::sized;
use super::status::{Outcome, Stop, heed};
use crate::build::ModelCall;
use crate::{Error, LatticeBuilder, ModelBuilder, Result};
use spinledger_abi as abi;
use spinledger_flatten::{LatticeParts, ModelParts, Unsound};
use std::ptr::null;

/// Calls a function of a sink that the host must have set.
macro_rules! call {
    ($sink:expr, $function:ident $(, $argument:expr)*) => {{
        let Some(function) = $sink.$function else {
            return Err(Stop::Error(Error::new(concat!("the host takes no ", stringify!($function)))));
        };
        heed(function($sink.context $(, $argument)*))?
    }};
}

/// Hands a lattice to the host.
///
/// # Safety
/// `sink` is null or a valid sink.
pub(super) unsafe fn send_lattice(lattice: &LatticeBuilder, sink: *const abi::SlLatticeSink) -> Outcome {
    let LatticeBuilder { free, dimension, .. } = *lattice;
    let periodic: Vec<u8> = lattice.periodic.iter().map(|&p| u8::from(p)).collect();
    let (places, pinned_places) = lattice.positions.split_at(free * dimension);
    let (sublattices, pinned_sublattices) = lattice.sublattices.split_at(free);
    // SAFETY: the sink is valid, and each call hands over slices of the length that it names, alive for the call.
    unsafe {
        let sink = sized(sink, "sink for a lattice")?;
        call!(sink, geometry, dimension as u32, lattice.vectors.as_ptr(), lattice.cells.as_ptr(), periodic.as_ptr());
        call!(sink, sites, free, places.as_ptr(), sublattices.as_ptr());
        if !lattice.directions.is_empty() {
            let (count, directions) = (lattice.directions.len(), lattice.directions.as_ptr());
            call!(sink, pinned, count, pinned_places.as_ptr(), pinned_sublattices.as_ptr(), directions);
        }
        for name in &lattice.classes {
            call!(sink, class_name, abi::SlText { data: name.as_ptr(), length: name.len() });
        }
        call!(sink, bonds, lattice.bonds.len(), lattice.bonds.as_ptr(), lattice.wraps.as_ptr());
        if !lattice.colours.is_empty() {
            call!(sink, colours, lattice.colours.len(), lattice.colours.as_ptr());
        }
        if !lattice.faces.is_empty() {
            let lengths: Vec<u32> = lattice.faces.iter().map(|face| face.len() as u32).collect();
            let corners = lattice.faces.concat();
            call!(sink, faces, lengths.len(), lengths.as_ptr(), corners.as_ptr());
        }
    }
    Ok(())
}

/// Hands a Hamiltonian to the host.
///
/// # Safety
/// `sink` is null or a valid sink.
pub(super) unsafe fn send_model(model: &ModelBuilder, sink: *const abi::SlModelSink) -> Outcome {
    // The host takes as many numbers as the kind of spin has it read, so lengths are checked on this side.
    let (mut q, mut n, mut orders) = (0, 0, Vec::new());
    // SAFETY: the sink is valid, and each call hands over slices of the length that the host reads, alive for the call.
    unsafe {
        let sink = sized(sink, "sink for a Hamiltonian")?;
        for said in &model.calls {
            match said {
                ModelCall::Spins { states, values, negation, up, down } => {
                    let count = u32::try_from(*states).unwrap_or(u32::MAX);
                    q = *states;
                    let state = |s: &Option<u8>| s.map_or(count, u32::from);
                    let values = optional(values, q, "spin values")?;
                    let negation = optional(negation, q, "negations")?;
                    call!(sink, spins, count, values, negation, state(up), state(down));
                }
                ModelCall::Vectors { components, up } => {
                    n = *components;
                    call!(sink, vectors, n as u32, up.as_ptr());
                }
                ModelCall::Pair { class, energies } => {
                    call!(sink, pair, u32::from(*class), exact(energies, q * q, "pair energies")?);
                }
                ModelCall::SiteClasses(classes) => call!(sink, site_classes, classes.len(), classes.as_ptr()),
                ModelCall::Site { class, energies } => {
                    call!(sink, site, u32::from(*class), exact(energies, q, "site energies")?);
                }
                ModelCall::BondStrengths(strengths) => {
                    call!(sink, bond_strengths, strengths.len(), strengths.as_ptr());
                }
                ModelCall::SiteStrengths(strengths) => {
                    call!(sink, site_strengths, strengths.len(), strengths.as_ptr());
                }
                ModelCall::FactorTable { order, energies } => {
                    let size = u32::try_from(*order).ok().and_then(|order| q.checked_pow(order));
                    let energies = exact(energies, size.unwrap_or(usize::MAX), "factor energies")?;
                    orders.push(*order);
                    call!(sink, factor_table, *order as u32, energies);
                }
                ModelCall::Factors { table, sites } => {
                    let order = orders.get(*table).copied().unwrap_or(0);
                    if order == 0 || !sites.len().is_multiple_of(order) {
                        return Err(Error::new(format!("factors over table {table} have {} sites", sites.len())).into());
                    }
                    call!(sink, factors, *table as u32, sites.len() / order, sites.as_ptr());
                }
                ModelCall::Coupling { class, matrix } => {
                    call!(sink, coupling, u32::from(*class), exact(matrix, n * n, "couplings")?);
                }
                ModelCall::Anisotropy { class, matrix } => {
                    call!(sink, anisotropy, u32::from(*class), exact(matrix, n * n, "anisotropies")?);
                }
                ModelCall::Field { class, field } => {
                    call!(sink, field, u32::from(*class), exact(field, n, "fields")?);
                }
                ModelCall::Custom => call!(sink, custom),
                ModelCall::Involution(map) => {
                    exact(map, q, "states of an involution")?;
                    call!(sink, involution, map.as_ptr());
                }
                ModelCall::Permutations => call!(sink, permutations),
            }
        }
    }
    Ok(())
}

/// The pointer to a slice of a given length.
fn exact<T>(given: &[T], count: usize, what: &str) -> Result<*const T> {
    if given.len() == count {
        Ok(given.as_ptr())
    } else {
        Err(Error::new(format!("the model gives {} {what}; its spins need {count}", given.len())))
    }
}

/// The same, null where there is none.
fn optional<T>(given: &[T], count: usize, what: &str) -> Result<*const T> {
    if given.is_empty() { Ok(null()) } else { exact(given, count, what) }
}

/// Hands a lattice to the flattening.
pub(crate) fn replay_lattice(lattice: &LatticeBuilder) -> std::result::Result<LatticeParts, Unsound> {
    let (places, pinned_places) = lattice.positions.split_at(lattice.free * lattice.dimension);
    let (sublattices, pinned_sublattices) = lattice.sublattices.split_at(lattice.free);
    let mut parts = LatticeParts::default();
    parts.geometry(&lattice.vectors, &lattice.cells, &lattice.periodic)?;
    parts.sites(places, sublattices)?;
    parts.pinned(pinned_places, pinned_sublattices, &lattice.directions)?;
    for name in &lattice.classes {
        parts.class_name(name)?;
    }
    parts.bonds(&lattice.bonds, Some(&lattice.wraps))?;
    if !lattice.colours.is_empty() {
        parts.colours(&lattice.colours)?;
    }
    if !lattice.faces.is_empty() {
        let lengths: Vec<u32> = lattice.faces.iter().map(|face| face.len() as u32).collect();
        parts.faces(&lengths, &lattice.faces.concat())?;
    }
    Ok(parts)
}

/// Hands a Hamiltonian to the flattening.
pub(crate) fn replay_model(model: &ModelBuilder, parts: &mut ModelParts) -> std::result::Result<(), Unsound> {
    fn some<T>(given: &[T]) -> Option<&[T]> {
        (!given.is_empty()).then_some(given)
    }
    for said in &model.calls {
        match said {
            ModelCall::Spins { states, values, negation, up, down } => {
                let count = u32::try_from(*states).unwrap_or(u32::MAX);
                let state = |s: &Option<u8>| s.map_or(count, u32::from);
                parts.spins(count, some(values), some(negation), state(up), state(down))?;
            }
            ModelCall::Vectors { up, .. } => parts.vectors(up)?,
            ModelCall::Pair { class, energies } => parts.pair(u32::from(*class), energies)?,
            ModelCall::SiteClasses(classes) => parts.site_classes(classes)?,
            ModelCall::Site { class, energies } => parts.site(u32::from(*class), energies)?,
            ModelCall::BondStrengths(strengths) => parts.bond_strengths(strengths)?,
            ModelCall::SiteStrengths(strengths) => parts.site_strengths(strengths)?,
            ModelCall::FactorTable { order, energies } => parts.factor_table(*order as u32, energies)?,
            ModelCall::Factors { table, sites } => parts.factors(*table as u32, sites)?,
            ModelCall::Coupling { class, matrix } => parts.coupling(u32::from(*class), matrix)?,
            ModelCall::Anisotropy { class, matrix } => parts.anisotropy(u32::from(*class), matrix)?,
            ModelCall::Field { class, field } => parts.field(u32::from(*class), field)?,
            ModelCall::Custom => parts.custom(),
            ModelCall::Involution(map) => parts.involution(map)?,
            ModelCall::Permutations => parts.permutations()?,
        }
    }
    Ok(())
}
