//! What all items have in common.

use crate::answer::ask;
use crate::error::{HostError, Result};
use crate::services::HostTable;
use crate::value::Tree;
use spinledger_abi::{SlCreate, SlDestroy};
use spinledger_terms::{Identity, ItemKind, Value};
use std::ffi::c_void;
use std::fmt;
use std::sync::Arc;

/// How messages speak of an item: kind, name, library and version.
#[derive(Clone, PartialEq, Eq)]
pub struct Label(Arc<str>);

impl Label {
    pub(crate) fn new(kind: ItemKind, identity: &Identity) -> Self {
        let Identity { library, version, item, .. } = identity;
        let kind = if kind == ItemKind::Update { "update rule" } else { kind.word() };
        Label(format!("the {kind} `{item}` (of `{library}` {version})").into())
    }
}

impl fmt::Display for Label {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

impl fmt::Debug for Label {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

/// An item made by a library from parameters; freed by it when the last user is gone.
pub(crate) struct Handle {
    pointer: *mut c_void,
    destroy: SlDestroy,
    pub(crate) label: Label,
    /// Item and parameters, as text: what makes two items the same.
    pub(crate) canonical: String,
}

// SAFETY: by the rules of the interface an item is immutable, shared between threads, and may be freed by any of them.
unsafe impl Send for Handle {}
// SAFETY: as above.
unsafe impl Sync for Handle {}

impl Handle {
    pub(crate) fn create(
        host: &HostTable,
        kind: ItemKind,
        identity: &Identity,
        parameters: &Value,
        create: SlCreate,
        destroy: SlDestroy,
    ) -> Result<Arc<Handle>> {
        let label = Label::new(kind, identity);
        // In a pipeline the item's name stands among its parameters.
        let parameters = match parameters {
            Value::Map(map) => Value::Map(
                map.iter().filter(|(key, _)| *key != "plugin").map(|(k, v)| (k.clone(), v.clone())).collect(),
            ),
            Value::Null => Value::Map(Default::default()),
            other => other.clone(),
        };
        let tree = Tree::new(&parameters);
        let mut pointer = std::ptr::null_mut();
        ask(&label, "take its parameters", |message| match create {
            // SAFETY: the library was checked when it was loaded; tree, place and message live for the call.
            Some(create) => unsafe { create(host.raw(), tree.root(), &mut pointer, message) },
            None => spinledger_abi::SL_FAILED,
        })?;
        if pointer.is_null() {
            return Err(HostError::Wrong { label, what: "it makes nothing from its parameters".into() });
        }
        let canonical = format!("{} {}", identity.canonical(), parameters.canonical());
        Ok(Arc::new(Handle { pointer, destroy, label, canonical }))
    }

    pub(crate) fn pointer(&self) -> *const c_void {
        self.pointer
    }

    pub(crate) fn wrong(&self, what: impl fmt::Display) -> HostError {
        HostError::Wrong { label: self.label.clone(), what: what.to_string() }
    }

    pub(crate) fn unsuited(&self, what: impl fmt::Display) -> HostError {
        HostError::Unsuited { label: self.label.clone(), what: what.to_string() }
    }
}

impl Drop for Handle {
    fn drop(&mut self) {
        if let Some(destroy) = self.destroy {
            // SAFETY: made by the same library, and this is the last user.
            unsafe { destroy(self.pointer) };
        }
    }
}

impl fmt::Debug for Handle {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.canonical)
    }
}
