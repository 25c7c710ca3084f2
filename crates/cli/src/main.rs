//! The program `spinledger`: glue between a person at a terminal and the engine. What is computed, and how, is left to the other crates.
#![forbid(unsafe_code)]

mod args;
mod commands;
mod screen;
mod signals;
mod text;

use clap::Parser;
use std::process::ExitCode;

fn main() -> ExitCode {
    let args = args::Args::parse();
    let outcome = match args.command {
        args::Command::Run(args) => commands::run::run(&args),
        args::Command::Check(args) => commands::check::check(&args),
        args::Command::Forecast(args) => commands::forecast::forecast(&args),
        args::Command::Print(args) => commands::print::print(&args),
        args::Command::Trace(args) => commands::trace::trace(&args),
        args::Command::Plugins(args) => commands::plugins::plugins(&args),
        args::Command::Pace(args) => commands::pace::pace(&args),
        args::Command::Worker(args) => commands::worker::worker(&args),
    };
    match outcome {
        Ok(status) => ExitCode::from(status),
        Err(error) => {
            let mut text = String::new();
            for (depth, cause) in error.chain().enumerate() {
                let cause = cause.to_string();
                if depth == 0 {
                    text.push_str(&cause);
                } else if !text.ends_with(&cause) {
                    text.push_str(&format!("\n  because: {cause}"));
                }
            }
            screen::complain(&format!("spinledger: {text}"));
            ExitCode::from(commands::WRONG)
        }
    }
}
