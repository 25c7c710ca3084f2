//! Where plugin libraries are looked for.

use std::env;
use std::path::{Path, PathBuf};

/// Names of the libraries that come with the program. One of these names, found in the program's own places, makes a library standard.
pub const STANDARD: [&str; 6] =
    ["lattices", "models", "local-updates", "cluster-updates", "bitwise-updates", "observables"];

/// The variable that names further files and folders, separated as in `PATH`.
pub(crate) const VARIABLE: &str = "SPINLEDGER_PLUGINS";

/// Places to look, in order: what a pipeline names, what the environment names, and where the program itself is. Each is a file or a folder;
/// of a folder, all files with the platform's suffix for libraries are looked at, in order of names. What is found first
/// hides what has the same kind and name later.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Search {
    /// The pipeline's `plugins:`, relative to the pipeline's folder already resolved.
    pub pipeline: Vec<PathBuf>,
    /// From `SPINLEDGER_PLUGINS`.
    pub environment: Vec<PathBuf>,
    /// The folder of the program, then `../lib/spinledger` seen from there.
    pub program: Vec<PathBuf>,
}

impl Search {
    /// The usual places: `pipeline` as given, then those of the environment, then the program's.
    pub fn usual(pipeline: &[PathBuf]) -> Self {
        let environment = env::var_os(VARIABLE)
            .map(|paths| env::split_paths(&paths).filter(|path| !path.as_os_str().is_empty()).collect())
            .unwrap_or_default();
        let program = env::current_exe()
            .ok()
            // Through links, so that a link to the program in some `bin` still finds its plugins.
            .and_then(|program| program.canonicalize().ok())
            .and_then(|program| program.parent().map(Search::program_places))
            .unwrap_or_default();
        Search { pipeline: pipeline.to_vec(), environment, program }
    }

    /// The places that belong to a program in this folder.
    pub fn program_places(folder: &Path) -> Vec<PathBuf> {
        let beside = folder.join("..").join("lib").join("spinledger");
        vec![folder.to_owned(), beside.canonicalize().unwrap_or(beside)]
    }
}
