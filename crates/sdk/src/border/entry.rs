//! What the exported function returns.

use spinledger_abi as abi;
use std::ffi::c_void;

/// Something with pointers in it that may stand in a `static`.
#[derive(Debug)]
#[repr(transparent)]
pub struct Shared<T>(pub T);

// SAFETY: made by `export!` only, from tables and texts that are constants: nobody writes through the pointers.
unsafe impl<T> Sync for Shared<T> {}

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
