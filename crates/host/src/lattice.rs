//! Lattices.

use crate::Graph;
use crate::answer::ask;
use crate::collected::{Collected, slice};
use crate::error::Result;
use crate::item::Handle;
use spinledger_abi::{SL_FAILED, SlBond, SlLattice, SlLatticeSink, SlText};
use spinledger_flatten::{LatticeParts, Unsound};
use std::ffi::c_void;
use std::sync::Arc;

/// A lattice made from parameters.
#[derive(Clone, Debug)]
pub struct LatticeItem {
    pub(crate) table: &'static SlLattice,
    pub(crate) handle: Arc<Handle>,
}

impl LatticeItem {
    /// Sites and bonds, checked.
    ///
    /// # Errors
    /// The plugin fails, or what it says cannot be: the message names the plugin and the site or bond.
    pub fn build(&self) -> Result<Arc<Graph>> {
        let mut collected = Collected::<LatticeParts>::default();
        let sink = SlLatticeSink {
            size: size_of::<SlLatticeSink>(),
            context: (&raw mut collected).cast(),
            geometry: Some(geometry),
            sites: Some(sites),
            pinned: Some(pinned),
            class_name: Some(class_name),
            bonds: Some(bonds),
            colours: Some(colours),
            faces: Some(faces),
        };
        let asked = ask(&self.handle.label, "build itself", |message| match self.table.build {
            // SAFETY: the table was checked when the library was loaded; the sink and what it writes to live for the call.
            Some(build) => unsafe { build(self.handle.pointer(), &sink, message) },
            None => SL_FAILED,
        });
        let graph = collected.finish(asked, |parts| parts.finish(), |what| self.handle.wrong(what))?;
        Ok(Graph::new(graph))
    }
}

type Parts = Collected<LatticeParts>;

unsafe extern "C" fn geometry(
    context: *mut c_void,
    dimension: u32,
    vectors: *const f64,
    cells: *const i64,
    periodic: *const u8,
) -> i32 {
    // SAFETY: in this and the following functions: the plugin hands back the sink's context, and slices as the interface says.
    unsafe {
        Parts::take(context, |parts| {
            // Checked before `dimension` is believed as the length of anything.
            let d = LatticeParts::checked_dimension(dimension as usize)?;
            let vectors = slice(vectors, d * d, "primitive vectors")?;
            let (cells, periodic) = (slice(cells, d, "cells")?, slice(periodic, d, "periodic directions")?);
            let periodic: Vec<bool> = periodic.iter().map(|&p| p != 0).collect();
            Ok(parts.geometry(vectors, cells, &periodic)?)
        })
    }
}

unsafe extern "C" fn sites(context: *mut c_void, count: usize, positions: *const f64, sublattices: *const u32) -> i32 {
    // SAFETY: see `geometry`.
    unsafe {
        Parts::take(context, |parts| {
            let positions = slice(positions, count.saturating_mul(parts.dimension()), "positions")?;
            Ok(parts.sites(positions, slice(sublattices, count, "sublattices")?)?)
        })
    }
}

unsafe extern "C" fn pinned(
    context: *mut c_void,
    count: usize,
    positions: *const f64,
    sublattices: *const u32,
    directions: *const i32,
) -> i32 {
    // SAFETY: see `geometry`.
    unsafe {
        Parts::take(context, |parts| {
            let positions = slice(positions, count.saturating_mul(parts.dimension()), "positions")?;
            let sublattices = slice(sublattices, count, "sublattices")?;
            Ok(parts.pinned(positions, sublattices, slice(directions, count, "directions")?)?)
        })
    }
}

unsafe extern "C" fn class_name(context: *mut c_void, name: SlText) -> i32 {
    // SAFETY: see `geometry`.
    unsafe {
        Parts::take(context, |parts| {
            let name = slice(name.data, name.length, "a bond class")?;
            let name =
                std::str::from_utf8(name).map_err(|_| Unsound::new("a bond class has a name that is not UTF-8"))?;
            Ok(parts.class_name(name)?)
        })
    }
}

unsafe extern "C" fn bonds(context: *mut c_void, count: usize, bonds: *const SlBond, wraps: *const i32) -> i32 {
    // SAFETY: see `geometry`.
    unsafe {
        Parts::take(context, |parts| {
            let bonds = slice(bonds, count, "bonds")?;
            let entries = count.saturating_mul(parts.dimension());
            let wraps = if wraps.is_null() { None } else { Some(slice(wraps, entries, "wraps")?) };
            Ok(parts.bonds(bonds, wraps)?)
        })
    }
}

unsafe extern "C" fn colours(context: *mut c_void, count: usize, colours: *const u32) -> i32 {
    // SAFETY: see `geometry`.
    unsafe { Parts::take(context, |parts| Ok(parts.colours(slice(colours, count, "colours")?)?)) }
}

unsafe extern "C" fn faces(context: *mut c_void, count: usize, lengths: *const u32, sites: *const u32) -> i32 {
    // SAFETY: see `geometry`.
    unsafe {
        Parts::take(context, |parts| {
            let lengths = slice(lengths, count, "faces")?;
            let corners: usize = lengths.iter().map(|&n| n as usize).fold(0, usize::saturating_add);
            Ok(parts.faces(lengths, slice(sites, corners, "corners of faces")?)?)
        })
    }
}
