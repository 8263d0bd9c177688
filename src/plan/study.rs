//! A plan, checked and resolved: what the rest of the program works from.

use crate::check::HoldoutPlan;
use crate::model::CandidatePlan;
use crate::output::{OutputPlan, SurfacePlan};
use crate::proxies::LayerPlan;
use crate::records::RecordsPlan;
use crate::units::{Length, Seed};

/// `[grid]` of a plan.
#[derive(Debug, Clone, PartialEq)]
pub enum GridPlan {
    /// The grid of this raster.
    Like(String),
    /// Cells laid over polygons.
    Region {
        /// File of polygons.
        region: String,
        /// CRS of the grid.
        crs: String,
        /// Side of a cell.
        cell: Length,
        /// Inside when touched rather than when the centre is.
        touching: bool,
    },
}

/// A whole plan.
#[derive(Debug, Clone, PartialEq)]
pub struct StudyPlan {
    /// Its title.
    pub title: String,
    /// Its seed.
    pub seed: Seed,
    /// Its grid.
    pub grid: GridPlan,
    /// Its records.
    pub records: RecordsPlan,
    /// Its layers.
    pub layers: Vec<LayerPlan>,
    /// Its candidates in the order of the plan, then the baseline `uniform`, which is always there.
    pub candidates: Vec<CandidatePlan>,
    /// How it is checked.
    pub holdout: HoldoutPlan,
    /// What is delivered.
    pub surface: SurfacePlan,
    /// Where it goes.
    pub output: OutputPlan,
}
