//! Configurations and totals.

use crate::energy::Custom;
use crate::{Error, Result};
use spinledger_abi as abi;
use std::ffi::c_void;

/// A configuration of one chain, where its owner keeps it.
#[derive(Clone, Copy, Debug)]
pub enum View<'a> {
    /// One byte a site: site s is `data[s * stride]`.
    Bytes {
        /// Number of sites, free and pinned.
        sites: usize,
        /// The bytes.
        data: &'a [u8],
        /// Distance between sites.
        stride: usize,
    },
    /// One bit a site: site s is bit `offset + s * stride`, or `offset + positions[s]`, least significant bit first.
    Bits {
        /// Number of sites, free and pinned.
        sites: usize,
        /// The words.
        words: &'a [u64],
        /// First bit.
        offset: usize,
        /// Distance between sites.
        stride: usize,
        /// Where the sites are, if not evenly spaced.
        positions: Option<&'a [u32]>,
    },
    /// One vector a site: component c of site s is `data[s * stride + c * component_stride]`.
    Vectors {
        /// Number of sites, free and pinned.
        sites: usize,
        /// Number of components.
        components: usize,
        /// The numbers.
        data: &'a [f64],
        /// Distance between sites.
        stride: usize,
        /// Distance between components.
        component_stride: usize,
    },
}

impl<'a> View<'a> {
    /// Bytes, one after the other.
    pub fn bytes(data: &'a [u8]) -> Self {
        View::Bytes { sites: data.len(), data, stride: 1 }
    }

    /// Vectors, one after the other, components innermost.
    pub fn vectors(data: &'a [f64], components: usize) -> Self {
        View::Vectors {
            sites: data.len() / components.max(1),
            components,
            data,
            stride: components,
            component_stride: 1,
        }
    }

    /// Number of sites, free and pinned.
    pub fn sites(&self) -> usize {
        match self {
            View::Bytes { sites, .. } | View::Bits { sites, .. } | View::Vectors { sites, .. } => *sites,
        }
    }

    /// The state of a site of a discrete configuration.
    ///
    /// # Panics
    /// Where there is no such site, or sites hold vectors.
    pub fn state(&self, site: usize) -> u8 {
        match self {
            View::Bytes { data, stride, .. } => data[site * stride],
            View::Bits { words, offset, stride, positions, .. } => {
                let bit = offset + positions.map_or(site * stride, |p| p[site] as usize);
                (words[bit / 64] >> (bit % 64) & 1) as u8
            }
            View::Vectors { .. } => panic!("a vector has no state"),
        }
    }

    /// A component of the vector at a site.
    ///
    /// # Panics
    /// Where there is no such site or component, or sites hold states.
    pub fn component(&self, site: usize, component: usize) -> f64 {
        match self {
            View::Vectors { data, stride, component_stride, .. } => data[site * stride + component * component_stride],
            _ => panic!("a state has no components"),
        }
    }

    /// The view in the interface's form.
    pub(crate) fn raw(&self) -> abi::SlView {
        let empty = abi::SlView {
            size: size_of::<abi::SlView>(),
            kind: abi::SL_VIEW_BYTES,
            components: 0,
            sites: self.sites(),
            stride: 1,
            component_stride: 0,
            offset: 0,
            positions: std::ptr::null(),
            data: std::ptr::null(),
        };
        match *self {
            View::Bytes { data, stride, .. } => abi::SlView { stride, data: data.as_ptr().cast(), ..empty },
            View::Bits { words, offset, stride, positions, .. } => abi::SlView {
                kind: abi::SL_VIEW_BITS,
                stride,
                offset,
                positions: positions.map_or(std::ptr::null(), <[u32]>::as_ptr),
                data: words.as_ptr().cast(),
                ..empty
            },
            View::Vectors { components, data, stride, component_stride, .. } => abi::SlView {
                kind: abi::SL_VIEW_VECTORS,
                components: components as u32,
                stride,
                component_stride,
                data: data.as_ptr().cast(),
                ..empty
            },
        }
    }
}

impl spinledger_flatten::Shown for View<'_> {
    #[inline]
    fn state(&self, site: usize) -> usize {
        usize::from(View::state(self, site))
    }

    #[inline]
    fn component(&self, site: usize, component: usize, _components: usize) -> f64 {
        View::component(self, site, component)
    }
}

/// A configuration to be written: free and pinned sites, one after the other.
#[derive(Debug)]
pub enum Spins<'a> {
    /// One byte a site.
    States(&'a mut [u8]),
    /// One vector a site, components innermost.
    Vectors(&'a mut [f64]),
}

/// Totals that a rule keeps while it works; None where it does not.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Tallies {
    /// Total energy.
    pub energy: Option<f64>,
    /// Sum of spin values over free sites (first component), or of vectors.
    pub magnetisation: Option<[f64; 3]>,
    /// Proposals and, of these, accepted ones, since the instance was prepared.
    pub acceptance: Option<(u64, u64)>,
}

impl Tallies {
    pub(crate) fn raw(&self) -> abi::SlTallies {
        let flag = |valid: bool, flag: u32| if valid { flag } else { 0 };
        let (proposed, accepted) = self.acceptance.unwrap_or((0, 0));
        abi::SlTallies {
            size: size_of::<abi::SlTallies>(),
            valid: flag(self.energy.is_some(), abi::SL_TALLY_ENERGY)
                | flag(self.magnetisation.is_some(), abi::SL_TALLY_MAGNETISATION)
                | flag(self.acceptance.is_some(), abi::SL_TALLY_ACCEPTANCE),
            reserved: 0,
            energy: self.energy.unwrap_or(0.0),
            magnetisation: self.magnetisation.unwrap_or([0.0; 3]),
            proposed,
            accepted,
        }
    }

    pub(crate) fn from_raw(raw: &abi::SlTallies) -> Self {
        let valid = |flag: u32| raw.valid & flag != 0;
        Tallies {
            energy: valid(abi::SL_TALLY_ENERGY).then_some(raw.energy),
            magnetisation: valid(abi::SL_TALLY_MAGNETISATION).then_some(raw.magnetisation),
            acceptance: valid(abi::SL_TALLY_ACCEPTANCE).then_some((raw.proposed, raw.accepted)),
        }
    }
}

/// Calls a custom model's `total`.
pub(crate) fn custom_total(custom: &Custom<'_>, view: &View<'_>) -> Result<f64> {
    let Some(total) = custom.raw.total else { return Err(Error::new("the model has no total energy")) };
    let mut energy = 0.0;
    with_message(|message| {
        let raw = view.raw();
        // SAFETY: the host checked the table and keeps model and graph alive while the instance lives; `raw` borrows `view`
        // for the call only.
        unsafe { total(custom.raw.model, custom.graph, &raw, &mut energy, message) }
    })?;
    Ok(energy)
}

/// Calls a custom model's `delta`; lengths were checked by the caller.
pub(crate) fn custom_delta(
    custom: &Custom<'_>,
    view: &View<'_>,
    sites: &[u32],
    proposals: *const c_void,
    changes: &mut [f64],
) -> Result<()> {
    let Some(delta) = custom.raw.delta else { return Err(Error::new("the model has no change of energy")) };
    with_message(|message| {
        let raw = view.raw();
        // SAFETY: as in `custom_total`; the three arrays hold `sites.len()` elements each.
        unsafe {
            delta(
                custom.raw.model,
                custom.graph,
                &raw,
                sites.len(),
                sites.as_ptr(),
                proposals,
                changes.as_mut_ptr(),
                message,
            )
        }
    })
}

/// Runs a call that may fail and turns its message into an error.
fn with_message(call: impl FnOnce(*mut abi::SlMessage) -> i32) -> Result<()> {
    let mut buffer = vec![0u8; 1024];
    let mut message = abi::SlMessage { data: buffer.as_mut_ptr(), capacity: buffer.len(), length: 0 };
    if call(&mut message) == abi::SL_OK {
        return Ok(());
    }
    buffer.truncate(message.length.min(1024));
    Err(Error(String::from_utf8_lossy(&buffer).into_owned()))
}
