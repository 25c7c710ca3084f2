//! Loading a library and checking what it hands out. In this order, each step relying on those before:
//!
//! 1. the file is still the one that was found (hash), and its manifest is for this version of the interface;
//! 2. the system loads it, with all symbols resolved and none given to others;
//! 3. it exports the entry function, whose result begins with the agreed word;
//! 4. the code agrees with the manifest about the interface version, and with this program about the size of pointers and structs;
//! 5. its items are those of the manifest, and have the functions that their kind requires.
//!
//! A library that was loaded is never unloaded, not even when a later step refuses it: threads, thread-local destructors and
//! exit handlers of its runtime may still refer to its code.

use crate::LoadError;
use crate::object_file::{LibraryFile, read};
use spinledger_abi::{
    ENTRY_SYMBOL, INTERFACE_VERSION, LAYOUT, MAGIC, SL_LATTICE, SL_MODEL, SL_OBSERVABLE, SL_UPDATE, SlEntry, SlItem,
    SlLattice, SlLibrary, SlModel, SlObservable, SlUpdate,
};
use spinledger_terms::{ContentHash, ItemKind};
use std::collections::BTreeMap;
use std::ffi::c_void;
use std::path::{Path, PathBuf};
use std::sync::{Mutex, PoisonError};

/// A library that is loaded and passed all checks.
#[derive(Debug)]
pub(crate) struct Library {
    hash: ContentHash,
    items: Vec<(String, Functions)>,
}

/// The functions of an item, as far as the library has them.
#[derive(Debug)]
pub(crate) enum Functions {
    Lattice(SlLattice),
    Model(SlModel),
    Update(SlUpdate),
    Observable(SlObservable),
}

impl Functions {
    pub(crate) fn kind(&self) -> ItemKind {
        match self {
            Functions::Lattice(_) => ItemKind::Lattice,
            Functions::Model(_) => ItemKind::Model,
            Functions::Update(_) => ItemKind::Update,
            Functions::Observable(_) => ItemKind::Observable,
        }
    }

    /// The first required function that is not there.
    fn missing(&self) -> Option<&'static str> {
        let required = match self {
            Functions::Lattice(f) => {
                vec![("create", f.create.is_some()), ("destroy", f.destroy.is_some()), ("build", f.build.is_some())]
            }
            Functions::Model(f) => vec![
                ("create", f.create.is_some()),
                ("destroy", f.destroy.is_some()),
                ("describe", f.describe.is_some()),
            ],
            Functions::Update(f) => vec![
                ("create", f.create.is_some()),
                ("destroy", f.destroy.is_some()),
                ("prepare", f.prepare.is_some()),
                ("release", f.release.is_some()),
                ("import", f.import.is_some()),
                ("export", f.export.is_some()),
                ("sweep", f.sweep.is_some()),
                ("view", f.view.is_some()),
                ("save", f.save.is_some()),
                ("restore", f.restore.is_some()),
            ],
            Functions::Observable(f) => vec![
                ("create", f.create.is_some()),
                ("destroy", f.destroy.is_some()),
                ("prepare", f.prepare.is_some()),
                ("release", f.release.is_some()),
                ("columns", f.columns.is_some()),
                ("measure", f.measure.is_some()),
            ],
        };
        required.into_iter().find(|(_, there)| !there).map(|(name, _)| name)
    }
}

impl Library {
    /// The functions of an item.
    pub(crate) fn functions(&self, kind: ItemKind, name: &str) -> Option<&Functions> {
        self.items.iter().find(|(n, f)| n == name && f.kind() == kind).map(|(_, f)| f)
    }
}

/// Libraries loaded by this process, by canonical path.
static LOADED: Mutex<BTreeMap<PathBuf, &'static Library>> = Mutex::new(BTreeMap::new());

/// The library of a file, loaded now if it was not before.
pub(crate) fn load(path: &Path, expected: ContentHash) -> Result<&'static Library, LoadError> {
    let canonical = path.canonicalize().unwrap_or_else(|_| path.to_owned());
    let mut loaded = LOADED.lock().unwrap_or_else(PoisonError::into_inner);
    let library = match loaded.get(&canonical) {
        Some(library) => *library,
        None => {
            let file = read(&canonical)?;
            if file.hash != expected {
                return Err(LoadError::Changed { file: path.to_owned() });
            }
            let library: &'static Library = Box::leak(Box::new(open(&canonical, &file)?));
            loaded.insert(canonical, library);
            library
        }
    };
    // The code in memory is that of the first time, whatever the file has become.
    if library.hash == expected { Ok(library) } else { Err(LoadError::Changed { file: path.to_owned() }) }
}

/// Steps 2 to 5.
fn open(path: &Path, file: &LibraryFile) -> Result<Library, LoadError> {
    let entry = entry(path)?;
    // SAFETY: the symbol is the agreed one; that it has the agreed type is the library's word.
    let raw = unsafe { entry() };
    let here = || path.to_owned();
    // SAFETY: neither null nor misaligned; a pointer from the entry function leads at least to the first word, which is read before anything
    // is relied on.
    if raw.is_null() || !raw.is_aligned() || unsafe { (&raw const (*raw).magic).read() } != MAGIC {
        return Err(LoadError::NotALibrary { file: here() });
    }
    // SAFETY: the first word says that a library begins here; up to `size` its layout is fixed for all versions.
    let (interface, pointers, size) = unsafe { ((*raw).interface, (*raw).pointer_size, (*raw).size) };
    if interface != INTERFACE_VERSION {
        return Err(LoadError::Interface { file: here(), found: interface, here: INTERFACE_VERSION });
    }
    let pointer_size = size_of::<*const c_void>() as u32;
    if pointers != pointer_size {
        return Err(LoadError::PointerSize { file: here(), found: pointers, here: pointer_size });
    }
    if size < size_of::<SlLibrary>() {
        let (found, here_size) = (size as u32, size_of::<SlLibrary>() as u32);
        return Err(LoadError::Layout { file: here(), name: "SlLibrary", found, here: here_size });
    }
    // SAFETY: it is of this version and large enough.
    let library: &SlLibrary = unsafe { &*raw };
    check_layout(path, &library.layout)?;
    let items: &[SlItem] = match library.count {
        0 => &[],
        _ if library.items.is_null() => return Err(LoadError::NotALibrary { file: here() }),
        // SAFETY: not null, with `SlItem` of the same size on both sides, and alive for the life of the process.
        count => unsafe { std::slice::from_raw_parts(library.items, count) },
    };
    let items = items.iter().map(|item| item_of(path, item)).collect::<Result<Vec<_>, _>>()?;
    compare(path, &items, file)?;
    let items = items.into_iter().map(|(name, _, functions)| (name, functions)).collect();
    Ok(Library { hash: file.hash, items })
}

/// Loads the file for good and finds its entry function.
fn entry(path: &Path) -> Result<SlEntry, LoadError> {
    let system = |source| LoadError::System { file: path.to_owned(), source };
    #[cfg(unix)]
    // SAFETY: initialisers of a plugin run here: that is what loading means, and the user named the file.
    let library = unsafe {
        use libloading::os::unix::{Library, RTLD_LOCAL, RTLD_NOW};
        libloading::Library::from(Library::open(Some(path), RTLD_NOW | RTLD_LOCAL).map_err(system)?)
    };
    #[cfg(not(unix))]
    // SAFETY: as above.
    let library = unsafe { libloading::Library::new(path).map_err(system)? };
    // Leaked: what is loaded stays.
    let library: &'static libloading::Library = Box::leak(Box::new(library));
    // SAFETY: the agreed symbol has the agreed type.
    let symbol = unsafe { library.get::<SlEntry>(ENTRY_SYMBOL) };
    match symbol {
        Ok(entry) => Ok(*entry),
        Err(source) => Err(LoadError::NoSymbol { file: path.to_owned(), source }),
    }
}

/// Structs that stand in arrays must have one size on both sides. Of the others, this program's may be larger: it was built later, and
/// the library does not look at what was added at the end.
fn check_layout(path: &Path, found: &[u32; 8]) -> Result<(), LoadError> {
    const STRUCTS: [(&str, bool); 8] = [
        ("SlValue", true),
        ("SlGraph", false),
        ("SlEnergy", false),
        ("SlView", true),
        ("SlTallies", true),
        ("SlPrepare", false),
        ("SlBond", true),
        ("SlItem", true),
    ];
    for (k, (name, in_arrays)) in STRUCTS.into_iter().enumerate() {
        let (found, here) = (found[k], LAYOUT[k]);
        if found > here || (in_arrays && found < here) {
            return Err(LoadError::Layout { file: path.to_owned(), name, found, here });
        }
    }
    Ok(())
}

/// Name, revision and functions of an item.
fn item_of(path: &Path, item: &SlItem) -> Result<(String, u32, Functions), LoadError> {
    let differ = |what: String| LoadError::ItemsDiffer { file: path.to_owned(), what };
    if item.name.data.is_null() || item.functions.is_null() {
        return Err(differ("an item has no name or no functions".into()));
    }
    // SAFETY: not null, and alive for the life of the process.
    let name = unsafe { std::slice::from_raw_parts(item.name.data, item.name.length) };
    let name = String::from_utf8_lossy(name).into_owned();
    // SAFETY: the item's table is of the type of its kind, and begins with its size.
    let functions = unsafe {
        match item.kind {
            SL_LATTICE => Functions::Lattice(table(item.functions)),
            SL_MODEL => Functions::Model(table(item.functions)),
            SL_UPDATE => Functions::Update(table(item.functions)),
            SL_OBSERVABLE => Functions::Observable(table(item.functions)),
            other => return Err(differ(format!("`{name}` is of kind {other}, which does not exist"))),
        }
    };
    match functions.missing() {
        Some(function) => Err(LoadError::MissingFunction { file: path.to_owned(), item: name, function }),
        None => Ok((name, item.revision, functions)),
    }
}

/// A table of functions as far as the library has it; what it does not have is null.
///
/// # Safety
/// `source` leads to a struct that begins with its size, and whose common part is `T`, for which zeros are valid.
unsafe fn table<T>(source: *const c_void) -> T {
    let mut out = std::mem::MaybeUninit::<T>::zeroed();
    // SAFETY: at most as many bytes as both sides have.
    unsafe {
        // Whole words: half a pointer to a function would be one to nowhere.
        let size =
            source.cast::<usize>().read_unaligned().min(size_of::<T>()) / size_of::<usize>() * size_of::<usize>();
        std::ptr::copy_nonoverlapping(source.cast::<u8>(), out.as_mut_ptr().cast::<u8>(), size);
        out.assume_init()
    }
}

/// Refuses a library whose items are not those of its manifest.
fn compare(path: &Path, items: &[(String, u32, Functions)], file: &LibraryFile) -> Result<(), LoadError> {
    let differ = |what: String| Err(LoadError::ItemsDiffer { file: path.to_owned(), what });
    let told = &file.manifest.items;
    for (name, _, functions) in items {
        let kind = functions.kind();
        if !told.iter().any(|item| item.kind == kind && item.name == *name) {
            return differ(format!("the manifest does not tell of the {kind} `{name}`"));
        }
    }
    for item in told {
        let Some((_, revision, functions)) = items.iter().find(|(n, _, f)| *n == item.name && f.kind() == item.kind)
        else {
            return differ(format!("the code does not have the {} `{}`", item.kind, item.name));
        };
        if *revision != item.revision {
            let (name, told) = (&item.name, item.revision);
            return differ(format!("`{name}` has revision {revision} in the code and {told} in the manifest"));
        }
        if let (Functions::Observable(code), Some(told)) = (functions, &item.observable)
            && u64::from(code.chains) != told.chains
        {
            let (name, code, told) = (&item.name, code.chains, told.chains);
            return differ(format!("`{name}` reads {code} chains by the code and {told} by the manifest"));
        }
    }
    Ok(())
}
