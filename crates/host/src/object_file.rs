//! The manifest of a library file, read without loading it.

use crate::FindError;
use object::read::ReadCache;
use object::{Architecture, BinaryFormat, FileKind, Object, ObjectKind, ObjectSection};
use serde::Deserialize;
use spinledger_abi::INTERFACE_VERSION;
use spinledger_terms::{ContentHash, ItemKind, LibraryManifest};
use std::fs::File;
use std::io::{Seek, SeekFrom};
use std::path::Path;

/// Name of the section on this platform.
pub(crate) const SECTION: &str =
    if cfg!(target_vendor = "apple") { spinledger_abi::SECTION_MACHO } else { spinledger_abi::SECTION };

/// A library file as it was when it was read.
#[derive(Clone, Debug)]
pub(crate) struct LibraryFile {
    pub(crate) manifest: LibraryManifest,
    pub(crate) hash: ContentHash,
}

/// Reads headers and the manifest's section, and only then, of what is a plugin library, the whole file for its hash.
pub(crate) fn read(path: &Path) -> Result<LibraryFile, FindError> {
    let file = || path.to_owned();
    let unreadable = |source| FindError::Unreadable { file: file(), source };
    let handle = match File::open(path) {
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => return Err(FindError::Missing { file: file() }),
        other => other.map_err(unreadable)?,
    };
    let cache = ReadCache::new(handle);
    if FileKind::parse(&cache).is_err() {
        return Err(FindError::NotAnObject { file: file() });
    }
    let truncated = |source| FindError::Truncated { file: file(), source };
    let object = object::File::parse(&cache).map_err(truncated)?;
    let (found, here) = (platform(&object), here());
    if here.as_ref().is_some_and(|here| *here != found) {
        let here = here.map_or_else(String::new, |here| words(&here));
        return Err(FindError::OtherPlatform { file: file(), found: words(&found), here });
    }
    if object.kind() != ObjectKind::Dynamic {
        return Err(FindError::NotShared { file: file() });
    }
    let Some(section) = object.section_by_name(SECTION) else { return Err(FindError::NoManifest { file: file() }) };
    let manifest = parse(path, section.data().map_err(truncated)?)?;
    drop(object);
    let mut handle = cache.into_inner();
    handle.seek(SeekFrom::Start(0)).map_err(unreadable)?;
    let mut hasher = blake3::Hasher::new();
    hasher.update_reader(handle).map_err(unreadable)?;
    Ok(LibraryFile { manifest, hash: ContentHash(*hasher.finalize().as_bytes()) })
}

/// Format, processor, pointers of 64 bits, little end first.
type Platform = (BinaryFormat, Architecture, bool, bool);

fn platform<'data, R: object::ReadRef<'data>>(object: &object::File<'data, R>) -> Platform {
    (object.format(), object.architecture(), object.is_64(), object.is_little_endian())
}

/// The platform of this program; none where it is not in this list, and then the system's loader is the one to refuse.
fn here() -> Option<Platform> {
    let format = if cfg!(target_vendor = "apple") {
        BinaryFormat::MachO
    } else if cfg!(unix) {
        BinaryFormat::Elf
    } else {
        return None;
    };
    let architecture = match std::env::consts::ARCH {
        "x86_64" => Architecture::X86_64,
        "x86" => Architecture::I386,
        "aarch64" => Architecture::Aarch64,
        "arm" => Architecture::Arm,
        "riscv64" => Architecture::Riscv64,
        "powerpc64" => Architecture::PowerPc64,
        "s390x" => Architecture::S390x,
        "loongarch64" => Architecture::LoongArch64,
        _ => return None,
    };
    Some((format, architecture, cfg!(target_pointer_width = "64"), cfg!(target_endian = "little")))
}

fn words((format, architecture, wide, little): &Platform) -> String {
    let (bits, end) = (if *wide { 64 } else { 32 }, if *little { "little" } else { "big" });
    format!("{format:?} on {architecture:?} ({bits} bits, {end}-endian)")
}

/// The manifest in a section.
fn parse(path: &Path, section: &[u8]) -> Result<LibraryManifest, FindError> {
    /// What every version of the manifest has.
    #[derive(Deserialize)]
    struct Version {
        interface: u32,
    }
    let file = || path.to_owned();
    let bad = |source| FindError::BadManifest { file: file(), source };
    // A linker may fill up with zeros, and a C compiler ends texts with one.
    let end = section.iter().rposition(|&byte| byte != 0).map_or(0, |last| last + 1);
    let text = &section[..end];
    // Of another version nothing but its number can be expected to make sense.
    let Version { interface } = serde_json::from_slice(text).map_err(bad)?;
    if interface != INTERFACE_VERSION {
        return Err(FindError::Interface { file: file(), found: interface, here: INTERFACE_VERSION });
    }
    let manifest: LibraryManifest = serde_json::from_slice(text).map_err(bad)?;
    match contradiction(&manifest) {
        Some(what) => Err(FindError::Contradiction { file: file(), what }),
        None => Ok(manifest),
    }
}

/// What cannot be true of a manifest that can be read.
fn contradiction(manifest: &LibraryManifest) -> Option<String> {
    if manifest.library.is_empty() {
        return Some("the library has no name".into());
    }
    for (k, item) in manifest.items.iter().enumerate() {
        if item.name.is_empty() {
            return Some(format!("item {k} has no name"));
        }
        if manifest.items[..k].iter().any(|earlier| earlier.kind == item.kind && earlier.name == item.name) {
            return Some(format!("it has {} `{}` twice", item.kind.article(), item.name));
        }
        let told = match item.kind {
            ItemKind::Lattice => item.lattice.is_some(),
            ItemKind::Model => item.model.is_some(),
            ItemKind::Update => item.update.is_some(),
            ItemKind::Observable => item.observable.is_some(),
        };
        if !told {
            return Some(format!("`{}` is {} without a field `{}`", item.name, item.kind.article(), item.kind));
        }
        if item.observable.as_ref().is_some_and(|o| !(1..=2).contains(&o.chains)) {
            return Some(format!("`{}` reads neither one chain nor two", item.name));
        }
    }
    None
}
