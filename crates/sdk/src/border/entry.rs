//! What the exported function returns.

use spinledger_abi as abi;
use std::ffi::c_void;

/// Something with pointers in it that may stand in a `static`.
#[derive(Debug)]
#[repr(transparent)]
pub struct Shared<T>(pub T);

// SAFETY: both have no cell in them, so that threads can only read them, and pointers that nobody can follow without `unsafe`; those that
// `export!` writes lead to constants. For these two types only: safe code could put a `Cell` into a `Shared` of any type.
unsafe impl Sync for Shared<abi::SlLibrary> {}
// SAFETY: as above.
unsafe impl<const N: usize> Sync for Shared<[abi::SlItem; N]> {}

/// One item of a library.
pub const fn item(kind: u32, revision: u32, name: &'static str, functions: *const c_void) -> abi::SlItem {
    let name = abi::SlText { data: name.as_ptr(), length: name.len() };
    abi::SlItem { size: size_of::<abi::SlItem>(), kind, revision, name, functions }
}

/// The library.
pub const fn library(items: &'static [abi::SlItem]) -> abi::SlLibrary {
    abi::SlLibrary {
        magic: abi::MAGIC,
        interface: abi::INTERFACE_VERSION,
        pointer_size: size_of::<*const c_void>() as u32,
        size: size_of::<abi::SlLibrary>(),
        layout: abi::LAYOUT,
        count: items.len(),
        items: items.as_ptr(),
    }
}
