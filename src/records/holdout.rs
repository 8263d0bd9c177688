//! What a plan may say about holding out.

use crate::units::Length;

/// What is held out together.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Split {
    /// Everything one observer did on one date.
    Outings,
    /// Places.
    Random,
    /// Square blocks of the region.
    Blocks,
}

impl Split {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Outings => "outings",
            Self::Random => "random",
            Self::Blocks => "blocks",
        }
    }
}

/// `[holdout]` of a plan.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HoldoutPlan {
    /// What is held out together.
    pub split: Split,
    /// Number of parts.
    pub folds: usize,
    /// Side of a block; `None`: a tenth of the region's larger side.
    pub block: Option<Length>,
    /// Resamples behind each interval.
    pub resamples: usize,
}
