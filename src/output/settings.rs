//! What a plan may say about the delivered surface and its files.

use crate::units::Share;

/// What a cell's number means.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Per {
    /// Chance that a background point falls in the cell.
    Cell,
    /// Weight per unit of area.
    Km2,
}

impl Per {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Cell => "cell",
            Self::Km2 => "km2",
        }
    }
}

/// How the surface is normalised.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scale {
    /// All cells add to 1.
    Sum,
    /// The largest is 1.
    Max,
    /// The average is 1.
    Mean,
}

impl Scale {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Sum => "sum",
            Self::Max => "max",
            Self::Mean => "mean",
        }
    }
}

/// Which candidate is delivered.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Choice {
    /// The best on held-out records.
    Best,
    /// The one of this name.
    Named(String),
}

/// `[surface]` of a plan.
#[derive(Debug, Clone, PartialEq)]
pub struct SurfacePlan {
    /// Which candidate.
    pub candidate: Choice,
    /// What a cell's number means.
    pub per: Per,
    /// How it is normalised.
    pub scale: Scale,
    /// Share of the weight spread evenly over the area.
    pub floor: Share,
    /// Warn where fewer distinct places carry a cell's weight.
    pub support: f64,
}

/// Compression of the GeoTIFF.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Compress {
    /// Deflate.
    Deflate,
    /// Zstandard.
    Zstd,
    /// Lempel-Ziv-Welch.
    Lzw,
    /// None.
    None,
}

impl Compress {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Deflate => "deflate",
            Self::Zstd => "zstd",
            Self::Lzw => "lzw",
            Self::None => "none",
        }
    }
}

/// `[output]` of a plan.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct OutputPlan {
    /// The folder, as the plan writes it.
    pub folder: String,
    /// Compression of rasters.
    pub compress: Compress,
    /// Also write what the result was made of.
    pub details: bool,
}
