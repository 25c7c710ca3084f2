//! Slices, parameter trees and views from what the host points at.

use crate::energy::{Custom, Energy, FactorTable};
use crate::view::Positions;
use crate::{Error, Graph, Params, Result, View};
use spinledger_abi as abi;

/// Deepest parameter tree; a guard against a tree that runs in a circle.
const DEEPEST: usize = 64;

/// A slice of `count` elements; empty where the pointer is null.
///
/// # Safety
/// `data` is null, or points at `count` elements that live and do not change for `'a`.
pub(super) unsafe fn slice<'a, T>(data: *const T, count: usize) -> &'a [T] {
    if data.is_null() || count == 0 {
        return &[];
    }
    // SAFETY: not null, and as the caller promises.
    unsafe { std::slice::from_raw_parts(data, count) }
}

/// A struct of the host, if it is there and as large as this build needs it.
///
/// # Safety
/// `raw` is null, or points at a struct that begins with its size and lives for `'a`.
pub(super) unsafe fn sized<'a, T>(raw: *const T, what: &str) -> Result<&'a T> {
    if raw.is_null() {
        return Err(Error::new(format!("the host gave no {what}")));
    }
    // SAFETY: every struct that this is used for begins with a `usize` that holds its size.
    let size = unsafe { raw.cast::<usize>().read() };
    if size < size_of::<T>() {
        return Err(Error::new(format!("the host's {what} is smaller than this library needs")));
    }
    // SAFETY: not null, large enough, and alive as the caller promises.
    Ok(unsafe { &*raw })
}

/// Text; what is not UTF-8 is replaced.
///
/// # Safety
/// As for [`slice`], of the bytes.
unsafe fn text(raw: abi::SlText) -> String {
    // SAFETY: passed on.
    String::from_utf8_lossy(unsafe { slice(raw.data, raw.length) }).into_owned()
}

/// A parameter tree.
///
/// # Safety
/// `raw` is null or the root of a valid tree.
pub(super) unsafe fn params(raw: *const abi::SlValue) -> Result<Params> {
    // SAFETY: passed on.
    match unsafe { raw.as_ref() } {
        // SAFETY: passed on.
        Some(value) => unsafe { param(value, DEEPEST) },
        None => Err(Error::new("the host gave no parameters")),
    }
}

/// # Safety
/// `value` is a node of a valid tree.
unsafe fn param(value: &abi::SlValue, depth: usize) -> Result<Params> {
    if depth == 0 {
        return Err(Error::new("the parameters are nested too deeply"));
    }
    // SAFETY: the children of a valid node.
    let items = || unsafe { slice(value.items, value.count) }.iter();
    Ok(match value.kind {
        abi::SL_VALUE_NULL => Params::Null,
        abi::SL_VALUE_BOOLEAN => Params::Boolean(value.integer != 0),
        abi::SL_VALUE_INTEGER => Params::Integer(value.integer),
        abi::SL_VALUE_NUMBER => Params::Number(value.number),
        // SAFETY: the text of a valid node.
        abi::SL_VALUE_TEXT => Params::Text(unsafe { text(value.text) }),
        abi::SL_VALUE_LIST => {
            // SAFETY: children of a valid node are valid.
            Params::List(items().map(|item| unsafe { param(item, depth - 1) }).collect::<Result<_>>()?)
        }
        abi::SL_VALUE_MAP => Params::Map(
            // SAFETY: as above, with their keys.
            items().map(|item| Ok(unsafe { (text(item.key), param(item, depth - 1)?) })).collect::<Result<_>>()?,
        ),
        other => return Err(Error::new(format!("the host gave a parameter of unknown kind {other}"))),
    })
}

/// A lattice as slices.
///
/// # Safety
/// `raw` is null or a graph as the interface describes it, alive and unchanged for `'a`.
pub(crate) unsafe fn graph<'a>(raw: *const abi::SlGraph) -> Result<Graph<'a>> {
    // SAFETY: in this whole function: lengths are those that the interface states for a valid graph.
    unsafe {
        let raw = sized(raw, "lattice")?;
        let (d, sites, total) = (raw.dimension as usize, raw.sites as usize, raw.total as usize);
        let offsets = slice(raw.offsets, sites + 1);
        let entries = offsets.last().map_or(0, |&end| end as usize);
        let face_offsets = slice(raw.face_offsets, if raw.faces == 0 { 0 } else { raw.faces + 1 });
        let names = slice(raw.class_names, raw.classes as usize);
        let class_names = names
            .iter()
            .map(|name| std::str::from_utf8(slice(name.data, name.length)))
            .collect::<std::result::Result<_, _>>()
            .map_err(|_| Error::new("a bond class has a name that is not UTF-8"))?;
        Ok(Graph {
            dimension: d,
            sites,
            total,
            bonds: slice(raw.bond_list, raw.bonds),
            wraps: slice(raw.wraps, raw.bonds * d),
            offsets,
            neighbours: slice(raw.neighbours, entries),
            neighbour_bonds: slice(raw.neighbour_bonds, entries),
            positions: slice(raw.positions, total * d),
            sublattices: slice(raw.sublattices, total),
            directions: slice(raw.directions, total - sites),
            vectors: slice(raw.vectors, d * d),
            periods: slice(raw.periods, d),
            cells: slice(raw.cells, d),
            class_names,
            face_offsets,
            face_sites: slice(raw.face_sites, face_offsets.last().map_or(0, |&end| end as usize)),
        })
    }
}

/// A Hamiltonian as slices.
///
/// # Safety
/// Both are null or as the interface describes them, and belong together; alive and unchanged for `'a`.
pub(crate) unsafe fn energy<'a>(graph: *const abi::SlGraph, raw: *const abi::SlEnergy) -> Result<Energy<'a>> {
    // SAFETY: in this whole function: lengths are those that the interface states for a valid Hamiltonian on a valid graph.
    unsafe {
        let graph: &abi::SlGraph = sized(graph, "lattice")?;
        let raw: &abi::SlEnergy = sized(raw, "Hamiltonian")?;
        let (q, n) = (raw.states as usize, raw.components as usize);
        let (tables, classes) = (raw.tables as usize, raw.site_classes as usize);
        let (sites, pinned) = (graph.sites as usize, (graph.total - graph.sites) as usize);
        let entries = slice(graph.offsets, sites + 1).last().map_or(0, |&end| end as usize);
        let factor_tables: Vec<FactorTable<'a>> = slice(raw.factor_table_list, raw.factor_tables)
            .iter()
            .map(|table| FactorTable {
                order: table.order as usize,
                energies: slice(table.energies, q.pow(table.order)),
            })
            .collect();
        let factors = slice(raw.factor_list, raw.factors);
        let end = |factor: &abi::SlFactor| {
            factor.first as usize + factor_tables.get(factor.table as usize).map_or(0, |table| table.order)
        };
        let factor_sites = slice(raw.factor_sites, factors.iter().map(end).max().unwrap_or(0));
        let site_factor_offsets = slice(raw.site_factor_offsets, sites + 1);
        let factor_entries = site_factor_offsets.last().map_or(0, |&end| end as usize);
        let colour_offsets = slice(raw.colour_offsets, raw.colours as usize + 1);
        let custom = if raw.custom.is_null() {
            None
        } else {
            Some(Custom { raw: sized(raw.custom, "table of callbacks")?, graph, states: q, components: n })
        };
        Ok(Energy {
            states: q,
            components: n,
            values: slice(raw.values, q),
            negation: slice(raw.negation, q),
            pinned_states: slice(raw.pinned_states, pinned),
            pinned_vectors: slice(raw.pinned_vectors, pinned * n),
            tables,
            pair_tables: slice(raw.pair_tables, tables * q * q),
            neighbour_tables: slice(raw.neighbour_tables, entries),
            bond_tables: slice(raw.bond_tables, graph.bonds),
            neighbour_strengths: slice(raw.neighbour_strengths, entries),
            bond_strengths: slice(raw.bond_strengths, graph.bonds),
            site_classes: classes,
            site_tables: slice(raw.site_tables, classes * q),
            site_class: slice(raw.site_class, sites),
            site_strengths: slice(raw.site_strengths, sites),
            factor_tables,
            factors,
            factor_sites,
            site_factor_offsets,
            site_factors: slice(raw.site_factors, factor_entries),
            site_factor_slots: slice(raw.site_factor_slots, factor_entries),
            couplings: slice(raw.couplings, tables * n * n),
            anisotropies: slice(raw.anisotropies, classes * n * n),
            fields: slice(raw.fields, classes * n),
            custom,
            involutions: slice(raw.involution_list, raw.involutions * q).chunks_exact(q.max(1)).collect(),
            permutations: raw.permutations != 0,
            colour_offsets,
            colour_sites: slice(raw.colour_sites, sites),
        })
    }
}

/// The host's services; none where it offers none.
///
/// # Safety
/// `raw` is null or a table as the interface describes it, alive for `'a`.
pub(super) unsafe fn host<'a>(raw: *const abi::SlHost) -> Result<crate::Host<'a>> {
    if raw.is_null() {
        return Ok(crate::Host::NONE);
    }
    // SAFETY: passed on.
    Ok(crate::Host { raw: Some(unsafe { sized(raw, "table of services") }?) })
}

/// A configuration as its owner shows it. Reads beyond its data panic, whatever its numbers are.
///
/// # Safety
/// `raw` is null, or a view whose data and positions live and do not change for `'a`.
pub(crate) unsafe fn view<'a>(raw: *const abi::SlView) -> Result<View<'a>> {
    // SAFETY: passed on.
    let raw: &abi::SlView = unsafe { sized(raw, "view") }?;
    let (sites, stride) = (raw.sites, raw.stride);
    match raw.kind {
        // SAFETY: data are as many elements as the view says; so below, and as many positions as sites.
        abi::SL_VIEW_BYTES => Ok(View::Bytes { sites, data: unsafe { slice(raw.data.cast(), raw.length) }, stride }),
        abi::SL_VIEW_BITS => {
            // SAFETY: as above.
            let words = unsafe { slice(raw.data.cast(), raw.length) };
            // SAFETY: as above.
            let positions =
                (!raw.positions.is_null()).then(|| Positions::received(unsafe { slice(raw.positions, sites) }));
            Ok(View::Bits { sites, words, offset: raw.offset, stride, positions })
        }
        abi::SL_VIEW_VECTORS => Ok(View::Vectors {
            sites,
            components: raw.components as usize,
            // SAFETY: as above.
            data: unsafe { slice(raw.data.cast(), raw.length) },
            stride,
            component_stride: raw.component_stride,
        }),
        other => Err(Error::new(format!("a view of unknown kind {other}"))),
    }
}
