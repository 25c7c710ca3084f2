//! Tables of functions that a library hands out.

use crate::{
    SlByteSink, SlColumnSink, SlEnergy, SlGraph, SlHost, SlLatticeSink, SlMessage, SlModelSink, SlPrepare, SlSiteSink,
    SlSpins, SlTallies, SlText, SlValue, SlView,
};
use core::ffi::c_void;

/// Makes an item from its parameters (a mapping). On success `*item` is set.
pub type SlCreate = Option<
    unsafe extern "C" fn(
        host: *const SlHost,
        parameters: *const SlValue,
        item: *mut *mut c_void,
        message: *mut SlMessage,
    ) -> i32,
>;
/// Frees an item or an instance.
pub type SlDestroy = Option<unsafe extern "C" fn(item: *mut c_void)>;
/// The energy that a custom model adds, of a whole configuration.
pub type SlTotal = Option<
    unsafe extern "C" fn(
        model: *const c_void,
        graph: *const SlGraph,
        view: *const SlView,
        energy: *mut f64,
        message: *mut SlMessage,
    ) -> i32,
>;
/// The change of that energy for each of `count` proposals, taken one at a time from the configuration shown; the sites' footprints do
/// not meet. Proposals are states (bytes) or vectors (doubles, components innermost).
pub type SlDelta = Option<
    unsafe extern "C" fn(
        model: *const c_void,
        graph: *const SlGraph,
        view: *const SlView,
        count: usize,
        sites: *const u32,
        proposals: *const c_void,
        changes: *mut f64,
        message: *mut SlMessage,
    ) -> i32,
>;

/// Functions of a lattice.
#[repr(C)]
#[derive(Debug)]
pub struct SlLattice {
    /// Size of this struct in bytes.
    pub size: usize,
    /// Required.
    pub create: SlCreate,
    /// Required.
    pub destroy: SlDestroy,
    /// Writes the lattice. Required.
    pub build: Option<
        unsafe extern "C" fn(lattice: *const c_void, sink: *const SlLatticeSink, message: *mut SlMessage) -> i32,
    >,
}

/// Functions of a model.
#[repr(C)]
#[derive(Debug)]
pub struct SlModel {
    /// Size of this struct in bytes.
    pub size: usize,
    /// Required.
    pub create: SlCreate,
    /// Required.
    pub destroy: SlDestroy,
    /// Writes the Hamiltonian on a graph. Required.
    pub describe: Option<
        unsafe extern "C" fn(
            model: *const c_void,
            graph: *const SlGraph,
            sink: *const SlModelSink,
            message: *mut SlMessage,
        ) -> i32,
    >,
    /// The sites on whose spins the change of energy at a site depends, itself aside. With `custom` only.
    pub footprint: Option<
        unsafe extern "C" fn(
            model: *const c_void,
            graph: *const SlGraph,
            site: u32,
            sink: *const SlSiteSink,
            message: *mut SlMessage,
        ) -> i32,
    >,
    /// With `custom` only.
    pub total: SlTotal,
    /// With `custom` only.
    pub delta: SlDelta,
}

/// Functions of an update rule.
#[repr(C)]
#[derive(Debug)]
pub struct SlUpdate {
    /// Size of this struct in bytes.
    pub size: usize,
    /// Required.
    pub create: SlCreate,
    /// Required.
    pub destroy: SlDestroy,
    /// Makes an instance for a group of chains. Required.
    pub prepare: Option<
        unsafe extern "C" fn(
            rule: *const c_void,
            prepare: *const SlPrepare,
            instance: *mut *mut c_void,
            message: *mut SlMessage,
        ) -> i32,
    >,
    /// Frees an instance. Required.
    pub release: SlDestroy,
    /// Takes over the configuration of a chain (contiguous bytes or vectors). Required.
    pub import: Option<
        unsafe extern "C" fn(instance: *mut c_void, lane: usize, view: *const SlView, message: *mut SlMessage) -> i32,
    >,
    /// Writes the configuration of a chain. Required.
    pub export: Option<
        unsafe extern "C" fn(
            instance: *const c_void,
            lane: usize,
            spins: *const SlSpins,
            message: *mut SlMessage,
        ) -> i32,
    >,
    /// Does `count` sweeps of all chains. Required.
    pub sweep: Option<unsafe extern "C" fn(instance: *mut c_void, count: u64, message: *mut SlMessage) -> i32>,
    /// Shows a chain; valid until the next call on the instance. Required.
    pub view: Option<
        unsafe extern "C" fn(instance: *mut c_void, lane: usize, view: *mut SlView, message: *mut SlMessage) -> i32,
    >,
    /// The totals of a chain. Optional.
    pub tallies: Option<unsafe extern "C" fn(instance: *const c_void, lane: usize, tallies: *mut SlTallies) -> i32>,
    /// Writes everything that the future depends on. Required.
    pub save:
        Option<unsafe extern "C" fn(instance: *const c_void, sink: *const SlByteSink, message: *mut SlMessage) -> i32>,
    /// Takes back what `save` of the same revision wrote. Required.
    pub restore: Option<
        unsafe extern "C" fn(instance: *mut c_void, data: *const u8, count: usize, message: *mut SlMessage) -> i32,
    >,
    /// Turns the adapting of step widths on (1) or off (0). Optional.
    pub adapt: Option<unsafe extern "C" fn(instance: *mut c_void, on: i32) -> i32>,
    /// Which of the rule's code runs for an instance, in a word or two for people (`portable`, `avx512`); UTF-8, valid until the next call on
    /// the instance. Nothing depends on it. Optional.
    pub path: Option<unsafe extern "C" fn(instance: *const c_void, path: *mut SlText) -> i32>,
}

/// Functions of an observable.
#[repr(C)]
#[derive(Debug)]
pub struct SlObservable {
    /// Size of this struct in bytes.
    pub size: usize,
    /// Required.
    pub create: SlCreate,
    /// Required.
    pub destroy: SlDestroy,
    /// Views that it accepts, `SL_VIEW_` flags; the host converts otherwise.
    pub views: u32,
    /// Chains that it reads at once, 1 or 2.
    pub chains: u32,
    /// Makes an instance for a graph and a Hamiltonian. Required.
    pub prepare: Option<
        unsafe extern "C" fn(
            observable: *const c_void,
            host: *const SlHost,
            graph: *const SlGraph,
            energy: *const SlEnergy,
            instance: *mut *mut c_void,
            message: *mut SlMessage,
        ) -> i32,
    >,
    /// Frees an instance. Required.
    pub release: SlDestroy,
    /// Names the columns. Required.
    pub columns: Option<
        unsafe extern "C" fn(instance: *const c_void, sink: *const SlColumnSink, message: *mut SlMessage) -> i32,
    >,
    /// Measures: `chains` views and tallies in, one double a column (or `width` of them) out. Required.
    pub measure: Option<
        unsafe extern "C" fn(
            instance: *mut c_void,
            views: *const SlView,
            tallies: *const SlTallies,
            values: *mut f64,
            message: *mut SlMessage,
        ) -> i32,
    >,
}

/// One item of a library.
#[repr(C)]
#[derive(Clone, Copy, Debug)]
pub struct SlItem {
    /// Size of this struct in bytes.
    pub size: usize,
    /// [`crate::SL_LATTICE`], [`crate::SL_MODEL`], [`crate::SL_UPDATE`] or [`crate::SL_OBSERVABLE`].
    pub kind: u32,
    /// As in the manifest.
    pub revision: u32,
    /// As in the manifest.
    pub name: SlText,
    /// The table of functions for its kind.
    pub functions: *const c_void,
}

/// What a library's entry function returns; valid for the life of the process.
#[repr(C)]
#[derive(Debug)]
pub struct SlLibrary {
    /// [`crate::MAGIC`].
    pub magic: u64,
    /// [`crate::INTERFACE_VERSION`] of the builder.
    pub interface: u32,
    /// Size of a pointer in bytes.
    pub pointer_size: u32,
    /// Size of this struct in bytes.
    pub size: usize,
    /// Sizes of `SlValue`, `SlGraph`, `SlEnergy`, `SlView`, `SlTallies`, `SlPrepare`, `SlBond` and `SlItem` as the builder's compiler lays
    /// them out: a disagreement is found here and not in the numbers.
    pub layout: [u32; 8],
    /// Number of items.
    pub count: usize,
    /// The items.
    pub items: *const SlItem,
}

/// The sizes that [`SlLibrary::layout`] holds, as this compiler lays them out.
pub const LAYOUT: [u32; 8] = [
    size_of::<SlValue>() as u32,
    size_of::<SlGraph>() as u32,
    size_of::<SlEnergy>() as u32,
    size_of::<SlView>() as u32,
    size_of::<SlTallies>() as u32,
    size_of::<SlPrepare>() as u32,
    size_of::<crate::SlBond>() as u32,
    size_of::<SlItem>() as u32,
];

/// Type of the exported function.
pub type SlEntry = unsafe extern "C" fn() -> *const SlLibrary;
