//! The arguments of the command line.

use std::num::NonZeroUsize;
use std::path::PathBuf;

use clap::{Args, Parser, Subcommand, ValueEnum};

use trodden::units::Bytes;

/// Effort rasters for niche models: where people looked, on the grid of your covariates.
///
/// From the records of a target group, a population raster, roads and other layers, `trodden` builds
/// a normalised surface of recording effort, checks it on records held out, and writes it as a
/// GeoTIFF that any niche-modelling method takes as background weights.
#[derive(Parser)]
#[command(
    name = "trodden",
    version,
    max_term_width = 100,
    after_long_help = "Example:\n  trodden check plan.toml        what would be done, and every problem at once\n  \
                       trodden build plan.toml        writes out/effort.tif and out/report.html\n  \
                       trodden compare plan.toml      all candidates side by side\n\n\
                       Exit codes: 0 done · 1 a defect of the program · 2 wrong usage or plan · 3 an input cannot \
                       be used · 4 an output cannot be written · 130 interrupted"
)]
pub struct Arguments {
    #[command(flatten)]
    pub common: Common,
    #[command(subcommand)]
    pub command: Command,
}

/// Options every command takes.
#[derive(Args)]
pub struct Common {
    /// Print the result as one JSON object
    #[arg(long, global = true)]
    pub json: bool,
    /// Print errors only
    #[arg(long, global = true)]
    pub quiet: bool,
    /// When to use colour
    #[arg(long, global = true, value_name = "WHEN", default_value = "auto")]
    pub color: Color,
    /// Threads to use (default: all cores); the result does not depend on it
    #[arg(long, global = true, value_name = "N")]
    pub threads: Option<NonZeroUsize>,
    /// Memory to stay below, such as "4 GiB" (default: 70 % of what is free)
    #[arg(long, global = true, value_name = "SIZE", value_parser = Bytes::parse)]
    pub memory: Option<Bytes>,
}

/// When to use colour.
#[derive(Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum Color {
    /// On a terminal, unless `NO_COLOR` is set
    Auto,
    /// Always
    Always,
    /// Never
    Never,
}

#[derive(Subcommand)]
pub enum Command {
    /// Look at a plan and its inputs, and say what a build would do
    ///
    /// Reads every input, brings it to the grid, screens the records, and reports the grid, the
    /// inputs, memory and time, and every problem at once. Fits nothing and writes nothing.
    #[command(after_long_help = "Example:\n  trodden check demo/plan.toml")]
    Check(CheckArgs),
    /// Build the effort surface of a plan, with its report
    ///
    /// Fits the plan's candidates, checks them on held-out records, and writes the surface of the
    /// best (the simplest of those that cannot be told apart from the best, unless the plan names
    /// one): effort.tif, effort.json, held-out.csv, dropped.csv, report.html, manifest.json.
    #[command(after_long_help = "Example:\n  trodden build demo/plan.toml -o out")]
    Build(BuildArgs),
    /// Compare all candidates of a plan side by side
    ///
    /// As `build`, for every candidate: writes surface-NAME.tif for each, comparison.json,
    /// comparison.csv and comparison.html.
    #[command(after_long_help = "Example:\n  trodden compare demo/plan.toml -o out/compare")]
    Compare(CompareArgs),
}

#[derive(Args)]
pub struct CheckArgs {
    /// The plan (TOML)
    pub plan: PathBuf,
}

#[derive(Args)]
pub struct BuildArgs {
    /// The plan (TOML)
    pub plan: PathBuf,
    /// Deliver this candidate rather than the best
    #[arg(long, value_name = "NAME")]
    pub candidate: Option<String>,
    /// Folder to write into (default: the plan's)
    #[arg(short, long, value_name = "DIR")]
    pub output: Option<PathBuf>,
}

#[derive(Args)]
pub struct CompareArgs {
    /// The plan (TOML)
    pub plan: PathBuf,
    /// Folder to write into (default: the plan's)
    #[arg(short, long, value_name = "DIR")]
    pub output: Option<PathBuf>,
}
