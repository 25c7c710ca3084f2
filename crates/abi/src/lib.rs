//! The plugin interface, version 1: C-compatible types, constants and nothing else.
//!
//! A plugin library exports one function, [`ENTRY_SYMBOL`] of type [`SlEntry`], which returns a [`SlLibrary`]: a list of
//! items, each with a table of functions for its kind ([`SlLattice`], [`SlModel`], [`SlUpdate`], [`SlObservable`]). It
//! carries a manifest, JSON text, in the object-file section [`SECTION`], so that it can be described without being loaded.
//!
//! The C header `include/spinledger.h` is generated from this crate; a test compares them.
//!
//! # Rules that hold throughout
//! - **Status.** Functions that can fail return an `int32_t`: [`SL_OK`] or one of the others, with a message written into
//!   the host's [`SlMessage`]. No panic, exception or `longjmp` may cross the border.
//! - **Memory.** Whoever allocates frees. Pointers that a side is given are valid during the call only, except graph,
//!   energy, host and custom tables, which outlive every instance prepared with them. An item outlives its instances, a model also every
//!   Hamiltonian that it described. What `create` and `prepare` return is not null, and is freed exactly once, by `destroy` and `release`.
//! - **Threads.** What `create` returns is shared between threads and immutable; an instance (`prepare`) is used by one
//!   thread at a time. Parallel loops go through [`SlHost::parallel_for`], over tiles whose number does not depend on threads.
//! - **Stopping.** A rule that stops because [`SlHost::cancelled`] says so, or fails, leaves its chains where nobody knows: the host makes no
//!   call on the instance but `release`. The same holds after a panic, and for observables.
//! - **Randomness.** Only from the streams that an instance is given. The same keys must give the same bits.
//! - **Growth.** Every struct but the smallest begins with its size in bytes, as its writer knows it. New fields are added
//!   at the end only; a reader uses a field only if the size covers it. Structs that stand in arrays ([`SlText`], [`SlValue`], [`SlKey`],
//!   [`SlBond`], [`SlFactor`], [`SlFactorTable`], [`SlView`], [`SlTallies`], [`SlItem`]) never grow within a version: the distance between two
//!   of them must be the same on both sides. Of what the host hands out singly ([`SlHost`], [`SlGraph`], [`SlEnergy`], [`SlPrepare`]) the host's may be larger
//!   than the library's, never smaller: [`SlLibrary::layout`] is compared when a library is loaded. Tables of functions are read as
//!   far as the library has them. A change of meaning makes a new interface version.
//!   Until each kind and each form of energy serves a real plugin in Rust and in C, version 1 is provisional.
//! - **Numbers.** Sites are numbered from 0: free sites first, then pinned ones. Energies are in the pipeline's energy unit. Strengths
//!   multiply energies of every form: those of bonds pair tables and couplings, those of sites site tables, anisotropies and fields. Signs of
//!   antiperiodic bonds are folded into pair tables and couplings; models with factors or callbacks read them from the bonds.
#![no_std]

mod data;
mod sinks;
mod tables;

pub use data::*;
pub use sinks::*;
pub use tables::*;

/// Version of the interface that these types describe.
pub const INTERFACE_VERSION: u32 = 1;
/// First word of every [`SlLibrary`]: the bytes `spinledg` read as a little-endian number.
pub const MAGIC: u64 = 0x6764_656c_6e69_7073;
/// The one symbol that a library exports.
pub const ENTRY_SYMBOL: &str = "spinledger_plugin";
/// The section that holds the manifest in ELF files.
pub const SECTION: &str = ".spinledger";
/// The section that holds the manifest in Mach-O files (in segment `__DATA`).
pub const SECTION_MACHO: &str = "__spinledger";

/// All went well.
pub const SL_OK: i32 = 0;
/// It failed; the message says why.
pub const SL_FAILED: i32 = 1;
/// A panic was caught at the border; the message holds its text.
pub const SL_PANICKED: i32 = 2;
/// The host asked to stop ([`SlHost::cancelled`]) and the function did.
pub const SL_CANCELLED: i32 = 3;

/// Kinds of items: sites and bonds.
pub const SL_LATTICE: u32 = 1;
/// A Hamiltonian.
pub const SL_MODEL: u32 = 2;
/// An update rule.
pub const SL_UPDATE: u32 = 3;
/// An observable.
pub const SL_OBSERVABLE: u32 = 4;
