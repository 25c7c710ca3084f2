//! The command line.

use clap::{Args as ClapArgs, Parser, Subcommand};
use std::path::PathBuf;

/// Runs reproducible studies of lattice spin systems: what is computed once is on record, and every number can be traced to what made it. Results
/// are research estimates, not certified material data.
#[derive(Debug, Parser)]
#[command(name = "spinledger", version, max_term_width = 100)]
pub(crate) struct Args {
    #[command(subcommand)]
    pub(crate) command: Command,
}

#[derive(Debug, Subcommand)]
pub(crate) enum Command {
    /// Compute what is due of a pipeline and write its results
    Run(RunArgs),
    /// Find every mistake in a pipeline; run nothing
    Check(CheckArgs),
    /// Tell what would run and why, what is on record, and about how long it takes
    Forecast(ForecastArgs),
    /// Print a result table, in the terminal or as CSV or JSON lines
    Print(PrintArgs),
    /// Tell what made a result: the chain of records back to the inputs
    Trace(TraceArgs),
    /// List the plugins that are found, or document one
    Plugins(PluginsArgs),
    /// Measure how fast update rules are on this machine
    Pace(PaceArgs),
    /// Serve a runner (started by `run`)
    #[command(hide = true)]
    Worker(WorkerArgs),
}

/// Where the ledger is.
#[derive(Debug, ClapArgs)]
pub(crate) struct LedgerArgs {
    /// The ledger: the folder where everything computed is kept
    #[arg(long, env = "SPINLEDGER_LEDGER", default_value = ".spinledger", value_name = "DIR")]
    pub(crate) ledger: PathBuf,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct RunArgs {
    /// The pipeline, a YAML file
    pub(crate) pipeline: PathBuf,
    #[command(flatten)]
    pub(crate) ledger: LedgerArgs,
    /// The folder of results [default: results/PIPELINE]
    #[arg(long, value_name = "DIR")]
    pub(crate) out: Option<PathBuf>,
    /// Worker processes [default: the number of processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=4096))]
    pub(crate) workers: Option<u16>,
    /// Threads lent to each worker
    #[arg(long, value_name = "N", default_value = "1", value_parser = clap::value_parser!(u16).range(1..=4096))]
    pub(crate) threads: u16,
    /// Take a parcel without progress for so long as broken
    #[arg(long, value_name = "SECONDS", value_parser = seconds)]
    pub(crate) stall: Option<f64>,
    /// Only this step and what it needs
    #[arg(long, value_name = "STEP")]
    pub(crate) only: Option<String>,
    /// Print nothing but what went wrong
    #[arg(long)]
    pub(crate) quiet: bool,
    /// Print events as JSON lines
    #[arg(long)]
    pub(crate) json: bool,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct CheckArgs {
    /// The pipeline, a YAML file
    pub(crate) pipeline: PathBuf,
    /// Print problems as JSON lines
    #[arg(long)]
    pub(crate) json: bool,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct ForecastArgs {
    /// The pipeline, a YAML file
    pub(crate) pipeline: PathBuf,
    #[command(flatten)]
    pub(crate) ledger: LedgerArgs,
    /// The folder of results [default: results/PIPELINE]
    #[arg(long, value_name = "DIR")]
    pub(crate) out: Option<PathBuf>,
    /// Worker processes to reckon with [default: the number of processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=4096))]
    pub(crate) workers: Option<u16>,
    /// Print JSON
    #[arg(long)]
    pub(crate) json: bool,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct PrintArgs {
    /// A Parquet file, or a folder of them that is one table (what a sample step wrote)
    pub(crate) file: PathBuf,
    /// Print CSV: all rows, all digits
    #[arg(long, conflicts_with = "json")]
    pub(crate) csv: bool,
    /// Print JSON lines: a row each, all rows, all digits
    #[arg(long)]
    pub(crate) json: bool,
    /// Print at most so many rows, or `all` [default: 40 as a table, else all]
    #[arg(long, value_name = "N")]
    pub(crate) rows: Option<Rows>,
    /// Print these columns only, in this order
    #[arg(long, value_name = "A,B", value_delimiter = ',')]
    pub(crate) columns: Vec<String>,
    /// Print rows only in which a column has this value; may be given several times
    #[arg(long = "where", value_name = "COLUMN=VALUE")]
    pub(crate) filter: Vec<String>,
}

/// How many rows to print.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Rows {
    /// So many at most.
    First(u64),
    /// All.
    All,
}

impl std::str::FromStr for Rows {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        match text {
            "all" => Ok(Rows::All),
            _ => text.parse().map(Rows::First).map_err(|_| "expected a number of rows, or `all`".into()),
        }
    }
}

#[derive(Debug, ClapArgs)]
pub(crate) struct TraceArgs {
    /// A file of results (Parquet, SVG, PNG, HTML), or a key (its first digits suffice)
    pub(crate) what: String,
    #[command(flatten)]
    pub(crate) ledger: LedgerArgs,
    /// Tell of every entry by itself
    #[arg(long)]
    pub(crate) all: bool,
    /// Print the records as JSON lines
    #[arg(long)]
    pub(crate) json: bool,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct PluginsArgs {
    /// The plugin to document
    pub(crate) name: Option<String>,
    /// Print manifests as JSON
    #[arg(long)]
    pub(crate) json: bool,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct PaceArgs {
    /// A lattice as in a pipeline: `{ plugin: square, size: 512 }`; may be given several times [default, where another is named: this one]
    #[arg(long, value_name = "LATTICE")]
    pub(crate) lattice: Vec<String>,
    /// A model: `ising`, `{ plugin: potts, q: 3 }`; may be given several times [default, where another is named: ising]
    #[arg(long, value_name = "MODEL")]
    pub(crate) model: Vec<String>,
    /// A rule: `{ plugin: metropolis, lanes: 64 }`; may be given several times [default, where another is named: the standard rules that serve]
    #[arg(long, value_name = "RULE")]
    pub(crate) update: Vec<String>,
    /// The temperature, k_B = 1 [default: near that of ordering where it is known, else 2.27]
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    pub(crate) temperature: Option<String>,
    /// How long to measure each combination
    #[arg(long, value_name = "SECONDS", default_value = "1", value_parser = seconds)]
    pub(crate) seconds: f64,
    /// Threads lent to the rule
    #[arg(long, value_name = "N", default_value = "1", value_parser = clap::value_parser!(u16).range(1..=4096))]
    pub(crate) threads: u16,
    /// Print an event for each combination as JSON lines
    #[arg(long)]
    pub(crate) json: bool,
}

#[derive(Debug, ClapArgs)]
pub(crate) struct WorkerArgs {
    pub(crate) ledger: PathBuf,
    pub(crate) threads: usize,
}

fn seconds(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(seconds) if seconds > 0.0 && seconds <= 1e9 => Ok(seconds),
        _ => Err("expected a number of seconds above 0".into()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_command_line_is_consistent() {
        Args::command().debug_assert();
    }
}
