//! Items by identity.

use crate::error::{HostError, Result};
use crate::item::Handle;
use crate::library::{Functions, load};
use crate::services::{HostTable, Services};
use crate::{LatticeItem, ModelItem, ObservableItem, UpdateItem};
use spinledger_terms::{Identity, ItemKind, Value};
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// Makes items. Libraries are loaded when they are first needed and stay loaded for the life of the process, also beyond the loader's.
pub struct Loader {
    host: &'static HostTable,
}

impl Loader {
    /// A loader whose plugins are offered these services. What stands behind them (a few words, and the threads) is never freed, since
    /// plugins may hold on to it: make one loader for a process.
    ///
    /// # Errors
    /// The threads cannot be had.
    pub fn new(services: Services) -> Result<Loader> {
        Ok(Loader { host: HostTable::start(services)? })
    }

    /// Asks plugins to bring long calls to an end, or takes that back.
    pub fn set_cancelled(&self, on: bool) {
        self.host.set_cancelled(on);
    }

    /// Loads the library of an item and checks it, without making the item.
    ///
    /// # Errors
    /// [`HostError::Load`] or [`HostError::NoItem`].
    pub fn load(&self, kind: ItemKind, identity: &Identity) -> Result<()> {
        self.functions(kind, identity).map(drop)
    }

    /// A lattice. `parameters` is the mapping of a checked pipeline, complete with defaults; a key `plugin` in it is passed over.
    ///
    /// # Errors
    /// The library cannot be loaded or has no such item, or the item refuses its parameters. The same holds for the other kinds.
    pub fn lattice(&self, identity: &Identity, parameters: &Value) -> Result<LatticeItem> {
        match self.functions(ItemKind::Lattice, identity)? {
            Functions::Lattice(table) => {
                let handle = self.create(ItemKind::Lattice, identity, parameters, table.create, table.destroy)?;
                Ok(LatticeItem { table, handle })
            }
            _ => Err(no_item(ItemKind::Lattice, identity)),
        }
    }

    /// A model.
    ///
    /// # Errors
    /// As for [`Loader::lattice`].
    pub fn model(&self, identity: &Identity, parameters: &Value) -> Result<ModelItem> {
        match self.functions(ItemKind::Model, identity)? {
            Functions::Model(table) => {
                let handle = self.create(ItemKind::Model, identity, parameters, table.create, table.destroy)?;
                Ok(ModelItem { table, handle })
            }
            _ => Err(no_item(ItemKind::Model, identity)),
        }
    }

    /// An update rule.
    ///
    /// # Errors
    /// As for [`Loader::lattice`].
    pub fn update(&self, identity: &Identity, parameters: &Value) -> Result<UpdateItem> {
        match self.functions(ItemKind::Update, identity)? {
            Functions::Update(table) => {
                let handle = self.create(ItemKind::Update, identity, parameters, table.create, table.destroy)?;
                Ok(UpdateItem { table, handle, host: self.host, identity: identity.canonical() })
            }
            _ => Err(no_item(ItemKind::Update, identity)),
        }
    }

    /// An observable.
    ///
    /// # Errors
    /// As for [`Loader::lattice`].
    pub fn observable(&self, identity: &Identity, parameters: &Value) -> Result<ObservableItem> {
        match self.functions(ItemKind::Observable, identity)? {
            Functions::Observable(table) => {
                let handle = self.create(ItemKind::Observable, identity, parameters, table.create, table.destroy)?;
                Ok(ObservableItem { table, handle, host: self.host })
            }
            _ => Err(no_item(ItemKind::Observable, identity)),
        }
    }

    fn functions(&self, kind: ItemKind, identity: &Identity) -> Result<&'static Functions> {
        let library = load(Path::new(&identity.file), identity.file_hash)?;
        library.functions(kind, &identity.item).ok_or_else(|| no_item(kind, identity))
    }

    fn create(
        &self,
        kind: ItemKind,
        identity: &Identity,
        parameters: &Value,
        create: spinledger_abi::SlCreate,
        destroy: spinledger_abi::SlDestroy,
    ) -> Result<Arc<Handle>> {
        Handle::create(self.host, kind, identity, parameters, create, destroy)
    }
}

impl std::fmt::Debug for Loader {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Loader").finish_non_exhaustive()
    }
}

fn no_item(kind: ItemKind, identity: &Identity) -> HostError {
    HostError::NoItem { file: PathBuf::from(&identity.file), kind, name: identity.item.clone() }
}
