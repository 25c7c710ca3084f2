//! Views of plugins, checked and converted.

use crate::error::Result;
use crate::item::Handle;
use crate::{Configuration, Energy};
use spinledger_abi::{SL_VIEW_BITS, SL_VIEW_BYTES, SL_VIEW_VECTORS, SlView};

/// A view that was checked against the Hamiltonian, and copies of it in other forms, made at most once each.
pub(crate) struct Shown {
    native: SlView,
    bytes: Option<Vec<u8>>,
    bits: Option<Vec<u64>>,
    /// What `native` shows, where that is a copy.
    _own: Option<Configuration>,
}

impl Shown {
    /// Checks a view as far as it can be checked without reading what it shows. `known` remembers the positions that were looked through: they
    /// do not change, and looking through them at every measurement would cost more than some sweeps.
    pub(crate) fn new(native: SlView, energy: &Energy, owner: &Handle, known: &mut Option<Placed>) -> Result<Self> {
        let wrong = |what: String| Err(owner.wrong(format_args!("its view {what}")));
        let total = energy.graph().total;
        let (alignment, vectors) = match native.kind {
            SL_VIEW_BYTES => (1, false),
            SL_VIEW_BITS if energy.states == 2 => (8, false),
            SL_VIEW_BITS => return wrong(format!("packs spins of {} states into bits", energy.states)),
            SL_VIEW_VECTORS => (8, true),
            other => return wrong(format!("is of kind {other}, which does not exist")),
        };
        if native.size < size_of::<SlView>() {
            return wrong(format!("has {} bytes", native.size));
        }
        if vectors != (energy.components > 0) || (vectors && native.components as usize != energy.components) {
            return wrong("is not of the model's kind of spin".into());
        }
        if native.sites != total {
            return wrong(format!("has {} sites, and the lattice {total}", native.sites));
        }
        if native.data.is_null() || !(native.data.addr()).is_multiple_of(alignment) {
            return wrong("points nowhere".into());
        }
        if native.length > isize::MAX as usize / 8 {
            return wrong("tells of more data than can be".into());
        }
        let placed = native.kind == SL_VIEW_BITS && !native.positions.is_null();
        if placed && !native.positions.is_aligned() {
            return wrong("has misaligned positions".into());
        }
        let reach = if placed { reach_of_positions(&native, known) } else { reach(&native) };
        if reach.is_none_or(|reach| reach > native.length) {
            return wrong(format!("of {total} sites reaches beyond its data of {} elements", native.length));
        }
        Ok(Shown { native, bytes: None, bits: None, _own: None })
    }

    /// A copy of a chain that was exported and checked.
    pub(crate) fn own(configuration: Configuration, energy: &Energy) -> Self {
        let native = configuration.view(energy);
        Shown { native, bytes: None, bits: None, _own: Some(configuration) }
    }

    /// A view of one of the kinds in `accepted`: what the owner shows, if that is among them, else bytes, else bits. None for vectors that are
    /// not accepted.
    pub(crate) fn view(&mut self, accepted: u32) -> Option<SlView> {
        if self.native.kind & accepted != 0 {
            return Some(self.native);
        }
        if self.native.kind == SL_VIEW_VECTORS {
            return None;
        }
        let sites = self.native.sites;
        if accepted & SL_VIEW_BYTES != 0 {
            let bytes = self.bytes();
            return Some(packed(SL_VIEW_BYTES, sites, bytes.as_ptr().cast(), bytes.len()));
        }
        if accepted & SL_VIEW_BITS != 0 {
            if self.bits.is_none() {
                let mut bits = vec![0u64; sites.div_ceil(64)];
                for (site, &state) in self.bytes().iter().enumerate() {
                    bits[site / 64] |= u64::from(state & 1) << (site % 64);
                }
                self.bits = Some(bits);
            }
            return self.bits.as_ref().map(|bits| packed(SL_VIEW_BITS, sites, bits.as_ptr().cast(), bits.len()));
        }
        None
    }

    fn bytes(&mut self) -> &[u8] {
        let native = self.native;
        self.bytes.get_or_insert_with(|| states(&native))
    }
}

/// A view of spins that lie one after the other.
fn packed(kind: u32, sites: usize, data: *const std::ffi::c_void, length: usize) -> SlView {
    let size = size_of::<SlView>();
    SlView {
        size,
        kind,
        components: 0,
        sites,
        stride: 1,
        component_stride: 0,
        offset: 0,
        positions: std::ptr::null(),
        data,
        length,
    }
}

/// Elements of the data that the numbers of a view reach, positions aside; None where that is more than can be.
fn reach(view: &SlView) -> Option<usize> {
    let Some(last) = view.sites.checked_sub(1) else { return Some(0) };
    let along = last.checked_mul(view.stride)?;
    match view.kind {
        SL_VIEW_BITS => Some(along.checked_add(view.offset)? / 64 + 1),
        SL_VIEW_VECTORS => {
            let across = (view.components as usize).saturating_sub(1).checked_mul(view.component_stride)?;
            along.checked_add(across)?.checked_add(1)
        }
        _ => along.checked_add(1),
    }
}

/// Positions that were looked through: where they are, how many, and the largest.
#[derive(Clone, Copy)]
pub(crate) struct Placed {
    positions: *const u32,
    sites: usize,
    largest: u32,
}

/// Words that the positions of a view reach.
fn reach_of_positions(view: &SlView, known: &mut Option<Placed>) -> Option<usize> {
    let SlView { positions, sites, offset, .. } = *view;
    let largest = match known {
        Some(placed) if placed.positions == positions && placed.sites == sites => placed.largest,
        _ => {
            // SAFETY: neither null nor misaligned, and as many as there are sites by the rules of the interface.
            let places = unsafe { std::slice::from_raw_parts(positions, sites) };
            let largest = places.iter().copied().max().unwrap_or(0);
            *known = Some(Placed { positions, sites, largest });
            largest
        }
    };
    Some(offset.checked_add(largest as usize)? / 64 + 1)
}

/// The states that a checked view shows.
fn states(view: &SlView) -> Vec<u8> {
    let SlView { kind, sites, stride, offset, positions, data, length, .. } = *view;
    if kind == SL_VIEW_BYTES {
        // SAFETY: not null, and as many bytes as the owner of the view says.
        let bytes = unsafe { std::slice::from_raw_parts(data.cast::<u8>(), length) };
        return (0..sites).map(|s| bytes[s * stride]).collect();
    }
    // SAFETY: neither null nor misaligned, and as many words as the owner of the view says.
    let words = unsafe { std::slice::from_raw_parts(data.cast::<u64>(), length) };
    let bit = |bit: usize| (words[bit / 64] >> (bit % 64) & 1) as u8;
    if positions.is_null() {
        return (0..sites).map(|s| bit(offset + s * stride)).collect();
    }
    // SAFETY: neither null nor misaligned, and as many as there are sites by the rules of the interface.
    let positions = unsafe { std::slice::from_raw_parts(positions, sites) };
    positions.iter().map(|&place| bit(offset + place as usize)).collect()
}
