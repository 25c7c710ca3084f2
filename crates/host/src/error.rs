//! Why a file is no plugin library, why it is not loaded, and what goes wrong afterwards.

use crate::Label;
use std::io;
use std::path::PathBuf;

/// Why a file is not taken as a plugin library.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum FindError {
    /// There is nothing of that name.
    #[error("{}: there is no such file or folder", .file.display())]
    Missing {
        /// The path.
        file: PathBuf,
    },
    /// The file cannot be read.
    #[error("{}: cannot be read", .file.display())]
    Unreadable {
        /// The file.
        file: PathBuf,
        /// Why.
        source: io::Error,
    },
    /// The file does not begin like a library of any platform.
    #[error("{}: is not a plugin library (it is not an object file)", .file.display())]
    NotAnObject {
        /// The file.
        file: PathBuf,
    },
    /// The file begins like a library and does not go on like one.
    #[error("{}: is a truncated or damaged library", .file.display())]
    Truncated {
        /// The file.
        file: PathBuf,
        /// What is wrong with it.
        source: object::Error,
    },
    /// An object file that cannot be loaded, such as one that still has to be linked.
    #[error("{}: is an object file but not a shared library", .file.display())]
    NotShared {
        /// The file.
        file: PathBuf,
    },
    /// The library is for another system or processor.
    #[error("{}: is a library for {found}, and this program is for {here}", .file.display())]
    OtherPlatform {
        /// The file.
        file: PathBuf,
        /// Format and processor of the file.
        found: String,
        /// Format and processor of this program.
        here: String,
    },
    /// A library without manifest.
    #[error("{}: is not a plugin library (it has no manifest section `{}`)", .file.display(), crate::object_file::SECTION)]
    NoManifest {
        /// The file.
        file: PathBuf,
    },
    /// The manifest is not JSON, or lacks fields, or has wrong ones.
    #[error("{}: has a manifest that cannot be read", .file.display())]
    BadManifest {
        /// The file.
        file: PathBuf,
        /// Where and why.
        source: serde_json::Error,
    },
    /// The manifest can be read and cannot be true.
    #[error("{}: has a manifest that contradicts itself: {what}", .file.display())]
    Contradiction {
        /// The file.
        file: PathBuf,
        /// What is wrong.
        what: String,
    },
    /// Another version of the plugin interface.
    #[error("{}: was built for version {found} of the plugin interface, and this program has version {here}", .file.display())]
    Interface {
        /// The file.
        file: PathBuf,
        /// Its version.
        found: u32,
        /// The program's version.
        here: u32,
    },
}

impl FindError {
    /// The file or folder.
    pub fn file(&self) -> &PathBuf {
        match self {
            FindError::Missing { file }
            | FindError::Unreadable { file, .. }
            | FindError::NotAnObject { file }
            | FindError::Truncated { file, .. }
            | FindError::NotShared { file }
            | FindError::OtherPlatform { file, .. }
            | FindError::NoManifest { file }
            | FindError::BadManifest { file, .. }
            | FindError::Contradiction { file, .. }
            | FindError::Interface { file, .. } => file,
        }
    }
}

/// Why a library is not loaded.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum LoadError {
    /// It is not one any more.
    #[error(transparent)]
    Find(#[from] FindError),
    /// The file is another one than when it was found.
    #[error("{}: has changed since it was found", .file.display())]
    Changed {
        /// The file.
        file: PathBuf,
    },
    /// The system refuses to load it, for instance because it needs a library that is not there.
    #[error("{}: cannot be loaded", .file.display())]
    System {
        /// The file.
        file: PathBuf,
        /// What the system says.
        source: libloading::Error,
    },
    /// It does not export the entry function.
    #[error("{}: does not export the function `{}`", .file.display(), spinledger_abi::ENTRY_SYMBOL)]
    NoSymbol {
        /// The file.
        file: PathBuf,
        /// What the system says.
        source: libloading::Error,
    },
    /// The entry function returns nothing, or something without the agreed first word.
    #[error("{}: `{}` does not return a library", .file.display(), spinledger_abi::ENTRY_SYMBOL)]
    NotALibrary {
        /// The file.
        file: PathBuf,
    },
    /// The code is for another version of the interface, whatever the manifest says.
    #[error("{}: its code is for version {found} of the plugin interface, and this program has version {here}", .file.display())]
    Interface {
        /// The file.
        file: PathBuf,
        /// Its version.
        found: u32,
        /// The program's version.
        here: u32,
    },
    /// Pointers of another size.
    #[error("{}: was built for pointers of {found} bytes, not {here}", .file.display())]
    PointerSize {
        /// The file.
        file: PathBuf,
        /// Its size.
        found: u32,
        /// The program's size.
        here: u32,
    },
    /// A struct of another size than this program's.
    #[error("{}: lays `{name}` out in {found} bytes, and this program in {here}", .file.display())]
    Layout {
        /// The file.
        file: PathBuf,
        /// The struct.
        name: &'static str,
        /// Its size.
        found: u32,
        /// The program's size.
        here: u32,
    },
    /// The items are not those of the manifest.
    #[error("{}: its code and its manifest differ: {what}", .file.display())]
    ItemsDiffer {
        /// The file.
        file: PathBuf,
        /// How.
        what: String,
    },
    /// A required function is missing.
    #[error("{}: `{item}` lacks the function `{function}`", .file.display())]
    MissingFunction {
        /// The file.
        file: PathBuf,
        /// The item.
        item: String,
        /// The function.
        function: &'static str,
    },
}

/// What goes wrong with a plugin's item after its library is loaded.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum HostError {
    /// The library is not loaded.
    #[error(transparent)]
    Load(#[from] LoadError),
    /// The library has no such item.
    #[error("{}: has no {kind} `{name}`", .file.display())]
    NoItem {
        /// The file.
        file: PathBuf,
        /// The kind.
        kind: spinledger_terms::ItemKind,
        /// The name.
        name: String,
    },
    /// The plugin says that it cannot.
    #[error("{label} fails to {doing}: {message}")]
    Failed {
        /// The item.
        label: Label,
        /// What it was asked to do.
        doing: &'static str,
        /// What it says.
        message: String,
    },
    /// The plugin's code panicked.
    #[error("{label} panicked when asked to {doing}: {message}")]
    Panicked {
        /// The item.
        label: Label,
        /// What it was asked to do.
        doing: &'static str,
        /// The panic's text.
        message: String,
    },
    /// The plugin stopped because it was asked to.
    #[error("{label} was stopped when asked to {doing}")]
    Cancelled {
        /// The item.
        label: Label,
        /// What it was asked to do.
        doing: &'static str,
    },
    /// The plugin answers something that cannot be.
    #[error("{label} is wrong: {what}")]
    Wrong {
        /// The item.
        label: Label,
        /// What is wrong with its answer.
        what: String,
    },
    /// The item cannot serve what it is asked to serve.
    #[error("{label} cannot be used here: {what}")]
    Unsuited {
        /// The item.
        label: Label,
        /// Why.
        what: String,
    },
    /// An instance that panicked is asked to go on.
    #[error("{label} panicked before and is not used again")]
    Broken {
        /// The item.
        label: Label,
    },
    /// A configuration does not fit the lattice or the model.
    #[error("the configuration does not fit: {what}")]
    Configuration {
        /// Why.
        what: String,
    },
    /// A saved state belongs to something else, or is damaged: the chain starts anew.
    #[error("the saved state of {label} cannot be taken up, the chain starts anew: {what}")]
    Saved {
        /// The item.
        label: Label,
        /// Why.
        what: String,
    },
    /// The threads cannot be had.
    #[error("cannot start {threads} threads")]
    Threads {
        /// How many.
        threads: usize,
        /// What the system says.
        source: rayon::ThreadPoolBuildError,
    },
}

/// Result of asking a plugin.
pub(crate) type Result<T, E = HostError> = std::result::Result<T, E>;
