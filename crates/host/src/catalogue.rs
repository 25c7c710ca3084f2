//! What is found where.

use crate::object_file::{LibraryFile, read};
use crate::search::STANDARD;
use crate::{FindError, Search};
use spinledger_terms::{Identity, Item, ItemKind, LibraryManifest};
use std::collections::{BTreeMap, BTreeSet};
use std::fmt;
use std::path::{Path, PathBuf};

/// A file that is not taken.
#[derive(Debug)]
pub struct Refusal {
    /// Why.
    pub error: FindError,
    /// Whether somebody named this very file or folder, so that going on without it would be wrong.
    pub named: bool,
}

/// Something that may surprise.
#[derive(Clone, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum Note {
    /// An item that is not used, since one of its kind and name was found earlier.
    Hidden {
        /// Its kind.
        kind: ItemKind,
        /// Its name.
        name: String,
        /// Where it is.
        file: PathBuf,
        /// Where the one that is used is.
        by: PathBuf,
    },
}

impl fmt::Display for Note {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Note::Hidden { kind, name, file, by } = self;
        write!(f, "the {kind} `{name}` of {} is hidden by that of {}", file.display(), by.display())
    }
}

/// The libraries found, by manifest: none of them is loaded.
#[derive(Debug, Default)]
pub struct Catalogue {
    libraries: Vec<(PathBuf, LibraryManifest)>,
    items: Vec<(Identity, Item)>,
    refusals: Vec<Refusal>,
    notes: Vec<Note>,
}

impl Catalogue {
    /// Looks everywhere, in order. Cost: headers of every library file in the folders, and the whole of every plugin library, for its hash.
    ///
    /// Libraries that are not plugins are passed over in folders and refused where they are named; other refusals are kept either way.
    pub fn find(search: &Search) -> Self {
        let mut catalogue = Catalogue::default();
        let mut seen = BTreeSet::new();
        let mut places = BTreeMap::new();
        let places_of = [(&search.pipeline, false), (&search.environment, false), (&search.program, true)];
        for (paths, own) in places_of {
            for path in paths {
                let named = !own && !path.is_dir();
                for file in catalogue.files(path, own) {
                    // The same file by two ways is one library.
                    if seen.insert(file.canonicalize().unwrap_or_else(|_| file.clone())) {
                        catalogue.add(&file, named, own, &mut places);
                    }
                }
            }
        }
        catalogue
    }

    /// The files to look at. A place of the program itself may be missing, others may not.
    fn files(&mut self, path: &Path, own: bool) -> Vec<PathBuf> {
        if !path.is_dir() {
            if own && !path.exists() {
                return Vec::new();
            }
            return vec![path.to_owned()];
        }
        let entries = std::fs::read_dir(path).and_then(|entries| entries.collect::<Result<Vec<_>, _>>());
        match entries {
            Ok(entries) => {
                let suffix = std::env::consts::DLL_EXTENSION;
                let is_library = |file: &PathBuf| file.extension().is_some_and(|e| e == suffix) && file.is_file();
                let mut files: Vec<PathBuf> =
                    entries.into_iter().map(|entry| entry.path()).filter(is_library).collect();
                files.sort();
                files
            }
            Err(source) => {
                let error = FindError::Unreadable { file: path.to_owned(), source };
                self.refusals.push(Refusal { error, named: !own });
                Vec::new()
            }
        }
    }

    fn add(&mut self, file: &Path, named: bool, own: bool, places: &mut BTreeMap<(ItemKind, String), usize>) {
        let LibraryFile { manifest, hash } = match read(file) {
            Ok(library) => library,
            Err(FindError::NoManifest { .. }) if !named => return,
            Err(error) => return self.refusals.push(Refusal { error, named }),
        };
        let standard = own && STANDARD.contains(&manifest.library.as_str());
        for item in &manifest.items {
            if let Some(&earlier) = places.get(&(item.kind, item.name.clone())) {
                let by = &self.items[earlier].0;
                // A copy of a library, as an installation may have, surprises nobody.
                if by.file_hash != hash {
                    self.notes.push(Note::Hidden {
                        kind: item.kind,
                        name: item.name.clone(),
                        file: file.to_owned(),
                        by: PathBuf::from(&by.file),
                    });
                }
                continue;
            }
            places.insert((item.kind, item.name.clone()), self.items.len());
            let identity = Identity {
                library: manifest.library.clone(),
                version: manifest.version.clone(),
                item: item.name.clone(),
                revision: item.revision,
                standard,
                file: file.to_string_lossy().into_owned(),
                file_hash: hash,
            };
            self.items.push((identity, item.clone()));
        }
        self.libraries.push((file.to_owned(), manifest));
    }

    /// The items that can be used, in order of discovery: what `Vocabulary::items` wants.
    pub fn items(&self) -> Vec<(Identity, Item)> {
        self.items.clone()
    }

    /// The item of a kind and name.
    pub fn item(&self, kind: ItemKind, name: &str) -> Option<(&Identity, &Item)> {
        let found = self.items.iter().find(|(_, item)| item.kind == kind && item.name == name)?;
        Some((&found.0, &found.1))
    }

    /// The libraries and their manifests, in order of discovery, hidden items included.
    pub fn libraries(&self) -> &[(PathBuf, LibraryManifest)] {
        &self.libraries
    }

    /// The file that an item of this catalogue is in.
    pub fn library_of(&self, identity: &Identity) -> PathBuf {
        PathBuf::from(&identity.file)
    }

    /// The files that are not taken.
    pub fn refusals(&self) -> &[Refusal] {
        &self.refusals
    }

    /// The same, to be kept or thrown.
    pub fn into_refusals(self) -> Vec<Refusal> {
        self.refusals
    }

    /// What may surprise.
    pub fn notes(&self) -> &[Note] {
        &self.notes
    }
}
