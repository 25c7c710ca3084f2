//! `spinledger check`: every mistake in a pipeline, and nothing run.

use crate::args::CheckArgs;
use crate::commands::{WELL, WRONG, open};
use crate::screen::{Screen, Style};
use serde_json::json;

/// Checks a pipeline.
pub(crate) fn check(args: &CheckArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    let Some(study) = open(&args.pipeline, &mut screen)? else { return Ok(WRONG) };
    let steps = study.pipeline.steps.len();
    screen.event(&json!({ "event": "checked", "pipeline": study.pipeline.name, "steps": steps, "problems": 0 }));
    let steps = crate::text::counted(steps as u64, "step");
    screen.line(&format!("{}: {steps}, nothing wrong", study.pipeline.name));
    Ok(WELL)
}
