//! Wrong pipelines, and what people are told about them: each `wrong/*.yaml` beside its `wrong/*.txt`.
//!
//! After a deliberate change of words: `SPINLEDGER_REWRITE=1 cargo test -p spinledger-pipeline --test wrong`, and read the difference.

mod common;

use spinledger_pipeline::{Source, locate, read, render};
use std::path::Path;

#[test]
fn every_mistake_is_told_in_its_place() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/wrong");
    let vocabulary = common::vocabulary();
    let mut files: Vec<_> = std::fs::read_dir(&folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    files.retain(|path| path.extension().is_some_and(|e| e == "yaml"));
    files.sort();
    assert!(files.len() >= 30, "{} files", files.len());
    let mut different = Vec::new();
    for path in files {
        let name = path.file_name().unwrap().to_str().unwrap().to_owned();
        let source = Source::from_bytes(&*name, &std::fs::read(&path).unwrap());
        let problems = read(&source, &vocabulary).expect_err(&name);
        for problem in &problems {
            let place = locate(&source, problem);
            assert!(place.line <= source.text().split('\n').count(), "{name}: {place:?}");
        }
        let told = render(&source, &problems);
        let expected = path.with_extension("txt");
        if std::env::var_os("SPINLEDGER_REWRITE").is_some() {
            std::fs::write(&expected, &told).unwrap();
        }
        if std::fs::read_to_string(&expected).unwrap_or_default() != told {
            different.push(format!("{name} is told as\n{told}"));
        }
    }
    assert!(different.is_empty(), "{}", different.join("\n"));
}
