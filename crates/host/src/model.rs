//! Models.

use crate::answer::ask;
use crate::collected::{Collected, slice};
use crate::error::Result;
use crate::item::Handle;
use crate::{Energy, Graph};
use spinledger_abi::{SL_FAILED, SlModel, SlModelSink, SlSiteSink};
use spinledger_flatten::{ModelParts, Unsound};
use std::ffi::c_void;
use std::sync::Arc;

/// A model made from parameters.
#[derive(Clone, Debug)]
pub struct ModelItem {
    pub(crate) table: &'static SlModel,
    pub(crate) handle: Arc<Handle>,
}

impl ModelItem {
    /// The Hamiltonian on a lattice, flattened and checked.
    ///
    /// # Errors
    /// The plugin fails, or what it says cannot be or does not fit the lattice.
    pub fn describe(&self, graph: &Arc<Graph>) -> Result<Arc<Energy>> {
        let mut collected = Collected::new(ModelParts::new(graph));
        let sink = SlModelSink {
            size: size_of::<SlModelSink>(),
            context: (&raw mut collected).cast(),
            spins: Some(spins),
            vectors: Some(vectors),
            pair: Some(pair),
            site_classes: Some(site_classes),
            site: Some(site),
            bond_strengths: Some(bond_strengths),
            site_strengths: Some(site_strengths),
            factor_table: Some(factor_table),
            factors: Some(factors),
            coupling: Some(coupling),
            anisotropy: Some(anisotropy),
            field: Some(field),
            custom: Some(custom),
            involution: Some(involution),
            permutations: Some(permutations),
        };
        let asked = ask(&self.handle.label, "describe its Hamiltonian", |message| match self.table.describe {
            // SAFETY: the table was checked when the library was loaded; graph, sink and what it writes to live for the call.
            Some(describe) => unsafe { describe(self.handle.pointer(), graph.raw(), &sink, message) },
            None => SL_FAILED,
        });
        let wrong = |what: Unsound| self.handle.wrong(what);
        let parts = collected.finish(asked, Ok, wrong)?;
        let footprints = if parts.has_custom() { Some(self.footprints(graph)?) } else { None };
        let data = parts.finish(graph, footprints.as_deref()).map_err(wrong)?;
        let callbacks = (self.table.total, self.table.delta);
        Ok(Energy::new(data, self.handle.clone(), graph.clone(), callbacks))
    }

    /// What the change of energy at each free site depends on.
    fn footprints(&self, graph: &Arc<Graph>) -> Result<Vec<Vec<u32>>> {
        let (Some(footprint), Some(_), Some(_)) = (self.table.footprint, self.table.total, self.table.delta) else {
            return Err(self.handle.wrong("it has callbacks and lacks `footprint`, `total` or `delta`"));
        };
        let one = |site: u32| {
            let mut collected = Collected::new(Vec::new());
            let sink = SlSiteSink {
                size: size_of::<SlSiteSink>(),
                context: (&raw mut collected).cast(),
                sites: Some(footprint_sites),
            };
            let asked = ask(&self.handle.label, "name a footprint", |message| {
                // SAFETY: the graph, the sink and what it writes to live for the call.
                unsafe { footprint(self.handle.pointer(), graph.raw(), site, &sink, message) }
            });
            collected.finish(asked, Ok, |what: Unsound| self.handle.wrong(what))
        };
        (0..graph.sites as u32).map(one).collect()
    }
}

unsafe extern "C" fn footprint_sites(context: *mut c_void, count: usize, sites: *const u32) -> i32 {
    // SAFETY: the plugin hands back the sink's context and a slice as the interface says.
    unsafe {
        Collected::<Vec<u32>>::take(context, |all| {
            all.extend_from_slice(slice(sites, count, "sites of a footprint")?);
            Ok(())
        })
    }
}

type Parts = Collected<ModelParts>;

unsafe extern "C" fn spins(
    context: *mut c_void,
    states: u32,
    values: *const f64,
    negation: *const u8,
    up: u32,
    down: u32,
) -> i32 {
    // SAFETY: in this and the following functions: the plugin hands back the sink's context, and slices as the interface says.
    unsafe {
        Parts::take(context, |parts| {
            // Checked before `states` is believed as the length of anything.
            let q = ModelParts::checked_states(states)?;
            let values = if values.is_null() { None } else { Some(slice(values, q, "spin values")?) };
            let negation = if negation.is_null() { None } else { Some(slice(negation, q, "the negation")?) };
            Ok(parts.spins(states, values, negation, up, down)?)
        })
    }
}

unsafe extern "C" fn vectors(context: *mut c_void, components: u32, up: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let n = ModelParts::checked_components(components)?;
            Ok(parts.vectors(slice(up, n, "the vector of sites pinned up")?)?)
        })
    }
}

unsafe extern "C" fn pair(context: *mut c_void, class_index: u32, energies: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let q = parts.states();
            Ok(parts.pair(class_index, slice(energies, q * q, "pair energies")?)?)
        })
    }
}

unsafe extern "C" fn site_classes(context: *mut c_void, count: usize, classes: *const u16) -> i32 {
    // SAFETY: see `spins`.
    unsafe { Parts::take(context, |parts| Ok(parts.site_classes(slice(classes, count, "site classes")?)?)) }
}

unsafe extern "C" fn site(context: *mut c_void, class_index: u32, energies: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let q = parts.states();
            Ok(parts.site(class_index, slice(energies, q, "site energies")?)?)
        })
    }
}

unsafe extern "C" fn bond_strengths(context: *mut c_void, count: usize, strengths: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe { Parts::take(context, |parts| Ok(parts.bond_strengths(slice(strengths, count, "strengths of bonds")?)?)) }
}

unsafe extern "C" fn site_strengths(context: *mut c_void, count: usize, strengths: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe { Parts::take(context, |parts| Ok(parts.site_strengths(slice(strengths, count, "strengths of sites")?)?)) }
}

unsafe extern "C" fn factor_table(context: *mut c_void, order: u32, energies: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let count = parts.factor_energies(order)?;
            Ok(parts.factor_table(order, slice(energies, count, "factor energies")?)?)
        })
    }
}

unsafe extern "C" fn factors(context: *mut c_void, table: u32, count: usize, sites: *const u32) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let order = parts.factor_order(table).unwrap_or(0) as usize;
            Ok(parts.factors(table, slice(sites, count.saturating_mul(order), "sites of factors")?)?)
        })
    }
}

unsafe extern "C" fn coupling(context: *mut c_void, class_index: u32, matrix: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let n = parts.components();
            Ok(parts.coupling(class_index, slice(matrix, n * n, "a coupling")?)?)
        })
    }
}

unsafe extern "C" fn anisotropy(context: *mut c_void, class_index: u32, matrix: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let n = parts.components();
            Ok(parts.anisotropy(class_index, slice(matrix, n * n, "an anisotropy")?)?)
        })
    }
}

unsafe extern "C" fn field(context: *mut c_void, class_index: u32, field: *const f64) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let n = parts.components();
            Ok(parts.field(class_index, slice(field, n, "a field")?)?)
        })
    }
}

unsafe extern "C" fn custom(context: *mut c_void) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            parts.custom();
            Ok(())
        })
    }
}

unsafe extern "C" fn involution(context: *mut c_void, map: *const u8) -> i32 {
    // SAFETY: see `spins`.
    unsafe {
        Parts::take(context, |parts| {
            let q = parts.states();
            Ok(parts.involution(slice(map, q, "an involution")?)?)
        })
    }
}

unsafe extern "C" fn permutations(context: *mut c_void) -> i32 {
    // SAFETY: see `spins`.
    unsafe { Parts::take(context, |parts| Ok(parts.permutations()?)) }
}
