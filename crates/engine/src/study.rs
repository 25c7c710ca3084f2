//! A pipeline, read and checked against the plugins that were found. Nothing is loaded for it.

use crate::steps::{self, Checked};
use spinledger_host::{Catalogue, Search};
use spinledger_pipeline::{Expansion, Pipeline, Point, Source};
use spinledger_terms::{Path as Place, Problem, Vocabulary};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

/// A checked pipeline and what it was checked against.
pub struct Study {
    /// The text.
    pub source: Source,
    /// The pipeline.
    pub pipeline: Pipeline,
    /// Step kinds and plugin items.
    pub vocabulary: Vocabulary,
    /// The plugin files.
    pub catalogue: Catalogue,
}

/// Where plugins are looked for: what the pipeline names, the environment, the folders of the program.
pub fn search(source: &Source, pipeline_file: &Path) -> Search {
    let folder = pipeline_file.parent().unwrap_or(Path::new("."));
    let named: Vec<PathBuf> = spinledger_pipeline::plugin_paths(source).iter().map(|path| folder.join(path)).collect();
    Search::usual(&named)
}

/// The words that pipelines may use, with the plugins found.
pub fn vocabulary(catalogue: &Catalogue) -> Vocabulary {
    Vocabulary { steps: steps::KINDS.iter().map(|kind| (kind.spec)()).collect(), items: catalogue.items() }
}

impl Study {
    /// Reads and checks a pipeline.
    ///
    /// # Errors
    /// Every problem found.
    pub fn open(source: Source, catalogue: Catalogue) -> Result<Study, Vec<Problem>> {
        let vocabulary = vocabulary(&catalogue);
        let mut problems = Vec::new();
        let mut catalogue_problems = plugin_problems(&source, &catalogue);
        match spinledger_pipeline::read(&source, &vocabulary) {
            Err(found) => problems.extend(found),
            Ok(pipeline) => {
                check(&pipeline, &vocabulary, &mut problems);
                if problems.is_empty() && catalogue_problems.is_empty() {
                    return Ok(Study { source, pipeline, vocabulary, catalogue });
                }
            }
        }
        problems.append(&mut catalogue_problems);
        Err(problems)
    }
}

/// The refusals of plugin files that the pipeline names, at their place.
fn plugin_problems(source: &Source, catalogue: &Catalogue) -> Vec<Problem> {
    let mut problems = Vec::new();
    let named: Vec<PathBuf> = search(source, Path::new(source.name())).pipeline;
    for refusal in catalogue.refusals() {
        let file = refusal.error.file();
        // The file itself is named, or the folder that it is in.
        let Some(number) = named.iter().position(|path| file == path || file.parent() == Some(path)) else { continue };
        let place = Place::top().key("plugins").index(number);
        let problem = Problem::at_value(&place, crate::chain_text(&refusal.error));
        problems.push(problem.expected("a plugin library, or a folder of them"));
    }
    problems
}

/// What step kinds find wrong beyond types.
pub(crate) fn check(pipeline: &Pipeline, vocabulary: &Vocabulary, problems: &mut Vec<Problem>) {
    let kinds: BTreeMap<String, String> = pipeline.steps.iter().map(|s| (s.name.clone(), s.does.clone())).collect();
    let mut earlier: BTreeMap<String, Vec<Point>> = BTreeMap::new();
    for step in &pipeline.steps {
        let Some(kind) = steps::kind(&step.does) else { continue };
        let points = match step.expand(&|_| None, vocabulary) {
            Ok(Expansion::Points(points)) => points,
            Ok(Expansion::Waits(_)) => Vec::new(),
            Err(found) => {
                problems.extend(found);
                continue;
            }
        };
        let (path, points_here) = (&step.path, points.as_slice());
        let checked =
            Checked { path, step, points: points_here, kinds: &kinds, earlier: &earlier, pipeline, vocabulary };
        (kind.check)(&checked, problems);
        earlier.insert(step.name.clone(), points);
    }
}
