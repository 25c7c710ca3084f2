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
    /// Checks a view as far as it can be checked without reading what it shows.
    pub(crate) fn new(native: SlView, energy: &Energy, owner: &Handle) -> Result<Self> {
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
        let reach = native.stride.checked_mul(total).and_then(|reach| reach.checked_add(native.offset));
        let across = native.component_stride.checked_mul(energy.components.max(1));
        if reach.zip(across).and_then(|(a, b)| a.checked_add(b)).is_none_or(|reach| reach > isize::MAX as usize / 8) {
            return wrong("reaches beyond all memory".into());
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
            return Some(packed(SL_VIEW_BYTES, sites, self.bytes().as_ptr().cast()));
        }
        if accepted & SL_VIEW_BITS != 0 {
            if self.bits.is_none() {
                let mut bits = vec![0u64; sites.div_ceil(64)];
                for (site, &state) in self.bytes().iter().enumerate() {
                    bits[site / 64] |= u64::from(state & 1) << (site % 64);
                }
                self.bits = Some(bits);
            }
            return self.bits.as_ref().map(|bits| packed(SL_VIEW_BITS, sites, bits.as_ptr().cast()));
        }
        None
    }

    fn bytes(&mut self) -> &[u8] {
        let native = self.native;
        self.bytes.get_or_insert_with(|| states(&native))
    }
}

/// A view of spins that lie one after the other.
fn packed(kind: u32, sites: usize, data: *const std::ffi::c_void) -> SlView {
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
    }
}

/// The states that a checked view shows.
fn states(view: &SlView) -> Vec<u8> {
    let SlView { kind, sites, stride, offset, positions, data, .. } = *view;
    let bit = |bit: usize| {
        // SAFETY: the owner of the view says that its words reach as far as its numbers do.
        let word = unsafe { data.cast::<u64>().add(bit / 64).read() };
        (word >> (bit % 64) & 1) as u8
    };
    match kind {
        // SAFETY: as above, for bytes.
        SL_VIEW_BYTES => (0..sites).map(|s| unsafe { data.cast::<u8>().add(s * stride).read() }).collect(),
        _ if positions.is_null() => (0..sites).map(|s| bit(offset + s * stride)).collect(),
        // SAFETY: not null, and as many as there are sites.
        _ => (0..sites).map(|s| bit(offset + unsafe { positions.add(s).read() } as usize)).collect(),
    }
}
