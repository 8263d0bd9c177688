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
    after_long_help = "Example:\n  trodden init --records records.tsv --like temperature.tif -o plan.toml\n  trodden check plan.toml        what would be done, and every problem at once\n  \
                       trodden build plan.toml        writes out/effort.tif and out/report.html\n  \
                       trodden compare plan.toml      all candidates side by side\n  \
                       trodden thin records.tsv --distance \"5 km\" -o thinned.tsv\n\n\
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
    /// Write a commented plan from files, and say what is in them
    ///
    /// Finds the columns of the records by their Darwin Core terms or usual names, takes the grid from a
    /// raster (or proposes one over a region), adds a layer for roads and for population, and proposes
    /// candidates. The plan is checked before it is written, so it runs as it stands; each guess has a
    /// comment beside it.
    #[command(
        after_long_help = "Example:\n  trodden init --records records.tsv --like temperature.tif --roads roads.gpkg \\\n    \
                                 --population people.tif -o plan.toml"
    )]
    Init(InitArgs),
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
    /// Leave as many records as possible with no two closer than a distance
    ///
    /// Reads any file of records (delimited text, Darwin Core archive, Parquet, vector file) and writes the
    /// rows that are left as delimited text with the same columns. Distances are geodesics on WGS 84.
    /// Several tries from different beginnings, and local improvement, keep more than one pass over the
    /// rows would; the same seed leaves the same rows.
    ///
    /// Thinning evens out the places of records; it does not make up for where nobody looked. Weigh the
    /// background by an effort surface for that.
    #[command(
        after_long_help = "Examples:\n  trodden thin records.tsv --distance \"5 km\" -o thinned.tsv\n  \
                                 trodden thin records.zip --square \"10 km\" --per-square 3 -o thinned.tsv"
    )]
    Thin(ThinArgs),
}

#[derive(Args)]
pub struct ThinArgs {
    /// The records
    pub records: PathBuf,
    /// No two records closer than this, such as "5 km"
    #[arg(long, value_name = "LENGTH", conflicts_with = "square", required_unless_present = "square")]
    pub distance: Option<String>,
    /// At most --per-square records in each square of this side: on the plane of a projected --crs, else on
    /// an equal-area grid of the globe
    #[arg(long, value_name = "LENGTH")]
    pub square: Option<String>,
    /// Records to keep in each square, chosen at random by the seed
    #[arg(long, value_name = "N", default_value = "1", conflicts_with = "distance")]
    pub per_square: NonZeroUsize,
    /// Reference system of the coordinate columns (a vector file has its own)
    #[arg(long, value_name = "CRS", default_value = "EPSG:4326")]
    pub crs: String,
    /// Column of the longitude, or easting (default: decimalLongitude)
    #[arg(long, value_name = "COLUMN")]
    pub longitude: Option<String>,
    /// Column of the latitude, or northing (default: decimalLatitude)
    #[arg(long, value_name = "COLUMN")]
    pub latitude: Option<String>,
    /// Layer or table inside the file
    #[arg(long, value_name = "NAME")]
    pub table: Option<String>,
    /// Number all random choices are derived from
    #[arg(long, value_name = "N", default_value = "1")]
    pub seed: u64,
    /// How many beginnings to try
    #[arg(long, value_name = "N", default_value = "4", conflicts_with = "square")]
    pub tries: NonZeroUsize,
    /// File to write (delimited text)
    #[arg(short, long, value_name = "FILE")]
    pub output: PathBuf,
}

#[derive(Args)]
pub struct InitArgs {
    /// The records: delimited text, a Darwin Core archive, Parquet or a vector file
    #[arg(long, value_name = "FILE")]
    pub records: PathBuf,
    /// A raster of your covariates: the result matches it cell for cell
    #[arg(long, value_name = "RASTER", required_unless_present = "region", conflicts_with = "region")]
    pub like: Option<PathBuf>,
    /// Polygons to lay a new grid over
    #[arg(long, value_name = "FILE")]
    pub region: Option<PathBuf>,
    /// Reference system of the records' coordinate columns (default: EPSG:4326)
    #[arg(long, value_name = "CRS")]
    pub crs: Option<String>,
    /// Roads and paths
    #[arg(long, value_name = "FILE")]
    pub roads: Option<PathBuf>,
    /// A raster of residents
    #[arg(long, value_name = "RASTER")]
    pub population: Option<PathBuf>,
    /// The plan to write; it must not exist yet
    #[arg(short, long, value_name = "FILE", default_value = "plan.toml")]
    pub output: PathBuf,
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
