//! `spinledger worker`: the runner's other side.

use crate::args::WorkerArgs;
use crate::commands::WELL;
use crate::signals;

/// Serves until the runner is gone.
pub(crate) fn worker(args: &WorkerArgs) -> anyhow::Result<u8> {
    signals::leave_to_the_runner()?;
    spinledger_engine::worker::serve(&args.ledger, args.threads).map_err(|e| anyhow::anyhow!("{e}"))?;
    Ok(WELL)
}
