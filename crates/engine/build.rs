//! Records what the program is built from, for the records of what it computes: the compiler and, where there is a checkout, its commit.

use std::process::Command;

fn main() {
    let rustc = std::env::var("RUSTC").unwrap_or_else(|_| "rustc".into());
    let compiler = output(Command::new(rustc).arg("--version")).unwrap_or_else(|| "unknown".into());
    println!("cargo::rustc-env=SPINLEDGER_COMPILER={compiler}");
    let commit = output(Command::new("git").args(["rev-parse", "HEAD"]));
    // A checkout with changes is not the commit that it names.
    let clean = output(Command::new("git").args(["status", "--porcelain", "--untracked-files=no"]));
    let commit = match (commit, clean) {
        (Some(commit), None) => commit,
        (Some(commit), Some(_)) => format!("{commit} with changes"),
        (None, _) => "unknown".into(),
    };
    println!("cargo::rustc-env=SPINLEDGER_COMMIT={commit}");
    for file in ["HEAD", "logs/HEAD"] {
        if let Some(path) = output(Command::new("git").args(["rev-parse", "--git-path", file])) {
            println!("cargo::rerun-if-changed={path}");
        }
    }
    println!("cargo::rerun-if-changed=build.rs");
    println!("cargo::rerun-if-changed=src");
}

/// What a command prints; None where it fails or prints nothing.
fn output(command: &mut Command) -> Option<String> {
    let out = command.output().ok()?;
    let text = String::from_utf8(out.stdout).ok()?.trim().to_owned();
    (out.status.success() && !text.is_empty()).then_some(text)
}
