//! Everything a run found out, as the rooms below gave it.

use std::sync::Arc;

use crate::check::{CandidateScores, HoldoutPlan, Split, Verdict};
use crate::diag::Diagnostic;
use crate::grid::Region;
use crate::model::{CandidateKind, Fitted, OddsBin};
use crate::proxies::ProxyStack;
use crate::records::{Blocks, Folds, Kept, Records};
use crate::units::Seed;

use super::settings::SurfacePlan;

/// The program that made it.
#[derive(Debug, Clone)]
pub struct Tool {
    /// Version of the program.
    pub version: &'static str,
    /// Versions of the libraries that read and write rasters.
    pub libraries: String,
}

/// One candidate: fitted to all records, and scored on held-out ones.
pub struct CandidateFinding {
    /// Its name.
    pub name: String,
    /// What it is made of.
    pub kind: CandidateKind,
    /// Fitted to all records.
    pub fitted: Fitted,
    /// On held-out units.
    pub scores: CandidateScores,
    /// For each layer it uses: name and classes of observed to available.
    pub odds: Vec<(String, Vec<OddsBin>)>,
}

/// A whole run.
pub struct Finding {
    /// Title of the plan.
    pub title: String,
    /// Seed of the plan.
    pub seed: Seed,
    /// The program.
    pub tool: Tool,
    /// Grid and mask.
    pub region: Arc<Region>,
    /// The records.
    pub records: Records,
    /// Which records were kept; empty unless asked for.
    pub kept: Vec<Kept>,
    /// The record files, in the plan's order.
    pub files: Vec<String>,
    /// The layers.
    pub layers: ProxyStack,
    /// What was asked of the hold-out.
    pub holdout: HoldoutPlan,
    /// Blocks behind intervals (and behind a split by blocks).
    pub blocks: Blocks,
    /// Who was held out when.
    pub folds: Folds,
    /// The candidates, in the plan's order.
    pub candidates: Vec<CandidateFinding>,
    /// Their standing.
    pub verdict: Verdict,
    /// Number of the candidate that is delivered.
    pub delivered: usize,
    /// What is delivered.
    pub surface: SurfacePlan,
    /// What deserves attention.
    pub warnings: Vec<Diagnostic>,
}

impl Finding {
    /// What was really split (`random` takes the place of `outings` where there are none).
    pub fn split(&self) -> Split {
        self.folds.split
    }

    /// The delivered candidate.
    pub fn chosen(&self) -> &CandidateFinding {
        &self.candidates[self.delivered]
    }

    /// Smallest number of distinct places that carry the weight of a cell, over cells whose density
    /// before the floor is at least a hundredth of the uniform one; for a surface that no place
    /// carries alone, the number of places.
    pub fn support_min(&self) -> f64 {
        let fitted = &self.chosen().fitted;
        match &fitted.support {
            None => self.records.places as f64,
            Some(support) => support
                .iter()
                .zip(&fitted.density)
                .filter(|(_, d)| **d >= 0.01)
                .map(|(s, _)| *s)
                .fold(f64::INFINITY, f64::min),
        }
    }
}
