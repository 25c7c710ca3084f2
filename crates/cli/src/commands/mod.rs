//! One file a command, and what they share.

pub(crate) mod check;
pub(crate) mod closing;
pub(crate) mod forecast;
pub(crate) mod pace;
pub(crate) mod plugins;
pub(crate) mod print;
pub(crate) mod run;
pub(crate) mod trace;
pub(crate) mod worker;

use crate::screen::{Screen, complain};
use anyhow::Context;
use spinledger_engine::{Study, search};
use spinledger_host::Catalogue;
use spinledger_pipeline::{Source, located, render};
use spinledger_terms::Problem;
use std::path::{Path, PathBuf};

/// Exit status: all well.
pub(crate) const WELL: u8 = 0;
/// Exit status: a parcel broke, or a comparison disagrees.
pub(crate) const BROKEN: u8 = 1;
/// Exit status: the pipeline or the command line is wrong; nothing ran.
pub(crate) const WRONG: u8 = 2;

/// Reads and checks a pipeline; None where it is wrong, which has been told.
pub(crate) fn open(path: &Path, screen: &mut Screen) -> anyhow::Result<Option<Study>> {
    let bytes = std::fs::read(path).with_context(|| format!("cannot read the pipeline {}", path.display()))?;
    let source = Source::from_bytes(path.display().to_string(), &bytes);
    let catalogue = Catalogue::find(&search(&source, path));
    match Study::open(source.clone(), catalogue) {
        Ok(study) => Ok(Some(study)),
        Err(problems) => {
            tell_problems(&source, &problems, screen);
            Ok(None)
        }
    }
}

/// Shows problems: for a person on standard error, for a program as events.
pub(crate) fn tell_problems(source: &Source, problems: &[Problem], screen: &mut Screen) {
    if screen.is_json() {
        for problem in located(source, problems) {
            let mut event = serde_json::json!(problem);
            if let Some(event) = event.as_object_mut() {
                event.insert("event".into(), "problem".into());
            }
            screen.event(&event);
        }
    } else {
        complain(render(source, problems).trim_end());
        let count = problems.len() as u64;
        complain(&format!("\n{} in {}; nothing ran", crate::text::counted(count, "problem"), source.name()));
    }
}

/// The folder of results of a pipeline, where the user gives none.
pub(crate) fn results(given: Option<&Path>, study: &Study) -> PathBuf {
    given.map_or_else(|| Path::new("results").join(&study.pipeline.name), Path::to_path_buf)
}

/// Worker processes when the user gives none: one a processor.
pub(crate) fn workers(given: Option<u16>) -> usize {
    given.map_or_else(|| std::thread::available_parallelism().map_or(1, usize::from), usize::from)
}
