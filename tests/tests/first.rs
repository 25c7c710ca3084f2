//! docs/first-pipeline.md, followed to the letter: files are written as they stand there, commands typed, and what the chapter says comes out comes out.

use spinledger_tests::program::{Desk, program, top};
use std::path::PathBuf;
use std::process::Command;

/// A fenced block: its language and its lines.
struct Block {
    language: String,
    text: String,
}

fn blocks(document: &str) -> Vec<Block> {
    let mut blocks = Vec::new();
    let mut open: Option<Block> = None;
    for line in document.lines() {
        match (line.strip_prefix("```"), &mut open) {
            (Some(language), None) => open = Some(Block { language: language.to_owned(), text: String::new() }),
            (Some(_), Some(_)) => blocks.extend(open.take()),
            (None, Some(block)) => {
                block.text.push_str(line);
                block.text.push('\n');
            }
            (None, None) => {}
        }
    }
    blocks
}

/// Words with one blank between them: columns are as wide as their cells, and a chapter leaves some rows out.
fn words(line: &str) -> String {
    line.split_whitespace().collect::<Vec<_>>().join(" ")
}

#[test]
fn the_chapter_is_true() {
    let document = std::fs::read_to_string(top().join("docs/first-pipeline.md")).unwrap();
    let desk = Desk::new();
    let python = std::env::var_os("SPINLEDGER_PYTHON").map_or_else(|| top().join(".venv/bin/python"), PathBuf::from);
    let path = format!("{}:{}", program().parent().unwrap().display(), std::env::var("PATH").unwrap());
    let mut said = String::new();
    let mut counts = [0; 4];
    for Block { language, text } in blocks(&document) {
        let mut command = match language.as_str() {
            "yaml" => {
                desk.write("first.yaml", &text);
                counts[0] += 1;
                continue;
            }
            "text" => {
                let said: Vec<String> = said.lines().map(words).collect();
                for line in text.lines().map(words).filter(|line| !line.is_empty() && line != "...") {
                    assert!(said.contains(&line), "`{line}` is not among\n{}", said.join("\n"));
                }
                counts[1] += 1;
                continue;
            }
            "sh" => {
                counts[2] += 1;
                let mut shell = Command::new("sh");
                shell.arg("-c").arg(&text);
                shell
            }
            "python" => {
                counts[3] += 1;
                let mut command = Command::new(&python);
                command.arg("-c").arg(&text);
                command
            }
            other => panic!("nobody knows what to do with `{other}`"),
        };
        command.current_dir(desk.path(".")).env("PATH", &path).env("MPLBACKEND", "Agg");
        command.env_remove("SPINLEDGER_LEDGER").env_remove("SPINLEDGER_PLUGINS");
        let output = command.output().expect("it starts");
        said = format!("{}{}", String::from_utf8_lossy(&output.stdout), String::from_utf8_lossy(&output.stderr));
        assert!(output.status.success(), "{text}\n{said}");
    }
    assert!(counts.iter().all(|n| *n > 0), "something is missing: {counts:?}");
    let drawn = std::fs::read(desk.path("binder.png")).expect("the picture that the Python lines draw");
    assert!(drawn.starts_with(b"\x89PNG") && drawn.len() > 5000);
}
