//! How well surfaces foretell records they have not seen, and whether one is really better.
//!
//! Fits nothing: it takes surfaces made from training records and scores them on held-out ones.

mod auc;
mod bootstrap;
mod boyce;
mod calibration;
mod score;
mod verdict;

pub use crate::records::{HoldoutPlan, Split};
pub use auc::{Background, auc};
pub use bootstrap::Resamples;
pub use boyce::{WINDOWS, Windows};
pub use calibration::Slope;
pub use score::{CandidateScores, FoldScores, Scores, UnitScore, score};
pub use verdict::{Estimate, Standing, Verdict, judge};

/// The surface as it would be delivered: a share of the weight spread evenly over the area.
pub fn with_floor(density: &[f64], floor: f64) -> Vec<f64> {
    density.iter().map(|d| (1.0 - floor) * d + floor).collect()
}
