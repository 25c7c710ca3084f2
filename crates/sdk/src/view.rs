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
        positions: Option<Positions<'a>>,
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

/// Where bits are that are not evenly spaced. How far they reach is found once, so that showing them costs nothing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Positions<'a> {
    places: &'a [u32],
    /// None: not found yet.
    reach: Option<u32>,
}

impl<'a> Positions<'a> {
    /// From the position of each site. Cost: one pass; for a chain that is shown often keep a [`PositionList`].
    pub fn new(places: &'a [u32]) -> Self {
        Positions { places, reach: Some(furthest(places)) }
    }

    /// The same without the pass: how far they reach is found when the view is shown to somebody else. Most that are received are only read.
    pub(crate) fn received(places: &'a [u32]) -> Self {
        Positions { places, reach: None }
    }

    /// The position of each site.
    pub fn places(&self) -> &'a [u32] {
        self.places
    }
}

fn furthest(places: &[u32]) -> u32 {
    places.iter().copied().max().unwrap_or(0)
}

/// Positions for good.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct PositionList {
    places: Vec<u32>,
    reach: u32,
}

impl PositionList {
    /// From the position of each site. Cost: one pass.
    pub fn new(places: Vec<u32>) -> Self {
        let reach = furthest(&places);
        PositionList { places, reach }
    }

    /// To be shown.
    pub fn positions(&self) -> Positions<'_> {
        Positions { places: &self.places, reach: Some(self.reach) }
    }
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
                let bit = offset + positions.map_or(site * stride, |p| p.places[site] as usize);
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

    /// Elements of the data that the numbers reach; None where that is more than can be.
    fn reach(&self) -> Option<usize> {
        let Some(last) = self.sites().checked_sub(1) else { return Some(0) };
        match *self {
            View::Bytes { stride, .. } => last.checked_mul(stride)?.checked_add(1),
            View::Bits { offset, stride, positions: None, .. } => {
                Some(last.checked_mul(stride)?.checked_add(offset)? / 64 + 1)
            }
            View::Bits { offset, positions: Some(positions), .. } if positions.places.len() > last => {
                let furthest = positions.reach.unwrap_or_else(|| furthest(positions.places));
                Some(offset.checked_add(furthest as usize)? / 64 + 1)
            }
            View::Bits { .. } => None,
            View::Vectors { components, stride, component_stride, .. } => {
                let across = components.saturating_sub(1).checked_mul(component_stride)?;
                last.checked_mul(stride)?.checked_add(across)?.checked_add(1)
            }
        }
    }

    /// The view in the interface's form, whose readers cannot see where the data end.
    ///
    /// # Errors
    /// Where the numbers reach beyond the data.
    pub(crate) fn raw(&self) -> Result<abi::SlView> {
        let (kind, data, length): (_, *const c_void, _) = match *self {
            View::Bytes { data, .. } => (abi::SL_VIEW_BYTES, data.as_ptr().cast(), data.len()),
            View::Bits { words, .. } => (abi::SL_VIEW_BITS, words.as_ptr().cast(), words.len()),
            View::Vectors { data, .. } => (abi::SL_VIEW_VECTORS, data.as_ptr().cast(), data.len()),
        };
        if self.reach().is_none_or(|reach| reach > length) {
            let sites = self.sites();
            return Err(Error::new(format!("a view of {sites} sites reaches beyond its data of {length} elements")));
        }
        let plain = abi::SlView {
            size: size_of::<abi::SlView>(),
            kind,
            components: 0,
            sites: self.sites(),
            stride: 1,
            component_stride: 0,
            offset: 0,
            positions: std::ptr::null(),
            data,
            length,
        };
        Ok(match *self {
            View::Bytes { stride, .. } => abi::SlView { stride, ..plain },
            View::Bits { offset, stride, positions, .. } => abi::SlView {
                stride,
                offset,
                positions: positions.map_or(std::ptr::null(), |p| p.places.as_ptr()),
                ..plain
            },
            View::Vectors { components, stride, component_stride, .. } => {
                abi::SlView { components: components as u32, stride, component_stride, ..plain }
            }
        })
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
            spare: [0.0; 8],
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
    let raw = custom.shown(view)?;
    let mut energy = 0.0;
    with_message(|message| {
        // SAFETY: the host checked the table and keeps model and graph alive while the instance lives, for which `custom` is borrowed; the
        // view has the lattice's sites and the model's kind of spin, does not reach beyond its data, and borrows them for the call.
        unsafe { total(custom.raw.model, custom.graph, &raw, &mut energy, message) }
    })?;
    Ok(energy)
}

/// Calls a custom model's `delta`.
///
/// # Safety
/// `proposals` leads to as many states, or vectors of the model's components, as there are sites.
pub(crate) unsafe fn custom_delta(
    custom: &Custom<'_>,
    view: &View<'_>,
    sites: &[u32],
    proposals: *const c_void,
    changes: &mut [f64],
) -> Result<()> {
    let Some(delta) = custom.raw.delta else { return Err(Error::new("the model has no change of energy")) };
    assert_eq!(sites.len(), changes.len(), "one change a site");
    let free = custom.graph.sites;
    if let Some(site) = sites.iter().find(|site| **site >= free) {
        return Err(Error::new(format!("a change of energy at site {site} is asked for; {free} sites are free")));
    }
    let raw = custom.shown(view)?;
    with_message(|message| {
        // SAFETY: as in `custom_total`; sites exist, there is a change for each, and the caller promises the proposals.
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

#[cfg(test)]
mod tests {
    use super::*;

    fn said(view: View<'_>) -> String {
        view.raw().expect_err("a refusal").0
    }

    /// Safe code can write any numbers into a view; none of them may leave the library.
    #[test]
    fn views_do_not_reach_beyond_their_data() {
        let (bytes, words, doubles) = ([0; 6], [0; 2], [0.0; 6]);
        let of_bytes = |sites, stride| View::Bytes { sites, data: &bytes, stride };
        assert!(of_bytes(3, 2).raw().is_ok() && of_bytes(2, 5).raw().is_ok() && of_bytes(0, 9).raw().is_ok());
        assert!(said(of_bytes(4, 2)).contains("4 sites reaches beyond its data of 6"));
        said(of_bytes(3, usize::MAX));
        let of_bits = |sites, offset, stride, positions| View::Bits { sites, words: &words, offset, stride, positions };
        assert!(of_bits(128, 0, 1, None).raw().is_ok() && of_bits(2, 64, 63, None).raw().is_ok());
        said(of_bits(128, 1, 1, None));
        let list = PositionList::new(vec![127, 3]);
        assert!(of_bits(2, 0, 0, Some(list.positions())).raw().is_ok());
        said(of_bits(3, 0, 0, Some(list.positions())));
        said(of_bits(2, 1, 0, Some(list.positions())));
        said(of_bits(2, usize::MAX, 0, Some(Positions::new(&[1, 2]))));
        let of_vectors = |sites, components, stride, component_stride| View::Vectors {
            sites,
            components,
            data: &doubles,
            stride,
            component_stride,
        };
        assert!(of_vectors(2, 3, 3, 1).raw().is_ok() && of_vectors(2, 3, 1, 2).raw().is_ok());
        said(of_vectors(3, 3, 1, 2));
        said(of_vectors(2, usize::MAX, 1, 2));
    }
}
