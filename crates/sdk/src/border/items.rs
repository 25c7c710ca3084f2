//! Tables of lattices and models. What the host keeps to is at the head of `instances.rs`.

use super::raw::{graph, params, sized, slice, view};
use super::replay::{send_lattice, send_model};
use super::status::{Outcome, guard, heed};
use crate::{Error, Lattice, LatticeBuilder, Model, ModelBuilder, Params, Result, View};
use spinledger_abi as abi;
use std::ffi::c_void;
use std::marker::PhantomData;

/// Makes an item with its own `new` and hands it out.
///
/// # Safety
/// `parameters`, `item` and `message` are as the interface describes them.
pub(super) unsafe fn create<T>(
    new: impl FnOnce(&Params) -> Result<T>,
    parameters: *const abi::SlValue,
    item: *mut *mut c_void,
    message: *mut abi::SlMessage,
) -> i32 {
    // SAFETY: passed on.
    unsafe {
        guard(message, || {
            let made = Box::new(new(&params(parameters)?)?);
            hand_out(made, item)
        })
    }
}

/// Gives a box to the host.
///
/// # Safety
/// `place` is null or may be written.
pub(super) unsafe fn hand_out<T>(made: Box<T>, place: *mut *mut c_void) -> Outcome {
    if place.is_null() {
        return Err(Error::new("the host gave no place for what is made").into());
    }
    // SAFETY: not null, and may be written.
    unsafe { place.write(Box::into_raw(made).cast()) };
    Ok(())
}

/// Frees what [`hand_out`] gave.
///
/// # Safety
/// `item` is null or from `hand_out::<T>`, not freed yet and not used afterwards.
pub(super) unsafe extern "C" fn destroy<T>(item: *mut c_void) {
    if !item.is_null() {
        // SAFETY: as the caller promises. There is no message to write a panic of `Drop` into.
        unsafe {
            guard(std::ptr::null_mut(), || {
                drop(Box::from_raw(item.cast::<T>()));
                Ok(())
            })
        };
    }
}

/// What the host hands back, as what it is.
///
/// # Safety
/// `item` is null or from `hand_out::<T>`, and lives for `'a`.
pub(super) unsafe fn borrow<'a, T>(item: *const c_void) -> Result<&'a T> {
    // SAFETY: as the caller promises.
    unsafe { item.cast::<T>().as_ref() }.ok_or_else(|| Error::new("the host named no item"))
}

/// The table of a lattice.
pub struct Lattices<L>(PhantomData<L>);

impl<L: Lattice> Lattices<L> {
    /// The functions.
    pub const TABLE: &'static abi::SlLattice = &abi::SlLattice {
        size: size_of::<abi::SlLattice>(),
        create: Some(Self::create),
        destroy: Some(destroy::<L>),
        build: Some(Self::build),
    };

    unsafe extern "C" fn create(
        _host: *const abi::SlHost,
        parameters: *const abi::SlValue,
        item: *mut *mut c_void,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe { create(L::new, parameters, item, message) }
    }

    unsafe extern "C" fn build(
        lattice: *const c_void,
        sink: *const abi::SlLatticeSink,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(message, || {
                let mut builder = LatticeBuilder::new();
                borrow::<L>(lattice)?.build(&mut builder)?;
                send_lattice(&builder, sink)
            })
        }
    }
}

/// The table of a model.
pub struct Models<M>(PhantomData<M>);

impl<M: Model> Models<M> {
    /// The functions.
    pub const TABLE: &'static abi::SlModel = &abi::SlModel {
        size: size_of::<abi::SlModel>(),
        create: Some(Self::create),
        destroy: Some(destroy::<M>),
        describe: Some(Self::describe),
        footprint: Some(Self::footprint),
        total: Self::TOTAL,
        delta: Self::DELTA,
    };
    /// The callback `total`.
    pub(crate) const TOTAL: abi::SlTotal = Some(Self::total);
    /// The callback `delta`.
    pub(crate) const DELTA: abi::SlDelta = Some(Self::delta);

    unsafe extern "C" fn create(
        _host: *const abi::SlHost,
        parameters: *const abi::SlValue,
        item: *mut *mut c_void,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe { create(M::new, parameters, item, message) }
    }

    unsafe extern "C" fn describe(
        model: *const c_void,
        raw: *const abi::SlGraph,
        sink: *const abi::SlModelSink,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(message, || {
                let mut builder = ModelBuilder::new();
                borrow::<M>(model)?.describe(&graph(raw)?, &mut builder)?;
                send_model(&builder, sink)
            })
        }
    }

    unsafe extern "C" fn footprint(
        model: *const c_void,
        raw: *const abi::SlGraph,
        site: u32,
        sink: *const abi::SlSiteSink,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface; the slice lives for the call.
        unsafe {
            guard(message, || {
                let mut sites = Vec::new();
                borrow::<M>(model)?.footprint(&graph(raw)?, site as usize, &mut sites);
                let sink = sized(sink, "sink for sites")?;
                match sink.sites {
                    Some(take) => heed(take(sink.context, sites.len(), sites.as_ptr())),
                    None => Err(Error::new("the host takes no sites").into()),
                }
            })
        }
    }

    unsafe extern "C" fn total(
        model: *const c_void,
        raw: *const abi::SlGraph,
        shown: *const abi::SlView,
        energy: *mut f64,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(message, || {
                let value = borrow::<M>(model)?.total(&graph(raw)?, &view(shown)?)?;
                match energy.as_mut() {
                    Some(energy) => *energy = value,
                    None => return Err(Error::new("the caller gave no place for the energy").into()),
                }
                Ok(())
            })
        }
    }

    unsafe extern "C" fn delta(
        model: *const c_void,
        raw: *const abi::SlGraph,
        shown: *const abi::SlView,
        count: usize,
        sites: *const u32,
        proposals: *const c_void,
        changes: *mut f64,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface: `count` sites, proposals and changes, which nobody else writes during the call.
        unsafe {
            guard(message, || {
                if count == 0 {
                    return Ok(());
                }
                if sites.is_null() || proposals.is_null() || changes.is_null() {
                    return Err(Error::new("the caller gave no proposals").into());
                }
                let (model, graph, shown) = (borrow::<M>(model)?, graph(raw)?, view(shown)?);
                let (sites, changes) = (slice(sites, count), std::slice::from_raw_parts_mut(changes, count));
                if let View::Vectors { components, .. } = shown {
                    let vectors = slice(proposals.cast(), count * components);
                    model.delta_vectors(&graph, &shown, sites, vectors, changes)?;
                } else {
                    model.delta(&graph, &shown, sites, slice(proposals.cast(), count), changes)?;
                }
                Ok(())
            })
        }
    }
}
