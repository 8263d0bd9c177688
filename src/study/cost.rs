//! What a run will need, before it starts.

use crate::diag::Diagnostic;
use crate::grid::Grid;
use crate::plan::{GridPlan, StudyPlan};
use crate::units::Bytes;

/// Memory and time of a run.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cost {
    /// Bytes at the peak.
    pub memory: Bytes,
    /// Seconds on two cores, roughly (measured on a grid of a million cells).
    pub seconds: f64,
}

/// Estimates the cost of a plan on a grid, as if every cell were inside.
pub fn estimate(plan: &StudyPlan, grid: &Grid) -> Cost {
    let cells = grid.len() as f64;
    let folds = plan.holdout.folds as f64;
    let (layers, candidates) = (plan.layers.len() as f64, plan.candidates.len() as f64);
    // by cell: index and mask 13, warping 16, kernels 32, areas 16, a layer 8 and its column 8, a
    // candidate's surface and support 16, a fold's surface and its sorted and logged copies 40
    let per_cell = 13.0 + 16.0 + 32.0 + 16.0 + 16.0 * layers + 16.0 * candidates + 40.0 * folds + 64.0;
    let seconds = cells * (1.5e-6 * layers + 2.5e-7 * candidates * (folds + 1.0)) + 0.5;
    Cost { memory: Bytes((cells * per_cell) as u64 + (64 << 20)), seconds }
}

/// The refusal of a grid that would not fit.
pub(super) fn too_large(plan: &StudyPlan, grid: &Grid, cost: Cost, limit: Bytes) -> Diagnostic {
    let text = format!(
        "a grid of {} by {} cells would need about {} of memory; {limit} may be used",
        grid.columns, grid.rows, cost.memory
    );
    let cure = "use larger cells, fewer folds or a machine with more memory, or raise `--memory`";
    match &plan.grid {
        GridPlan::Like(file) => Diagnostic::input("too_large", file.as_str(), text).cure(cure),
        GridPlan::Region { .. } => Diagnostic::plan("too_large", "[grid] cell", text).cure(cure),
    }
}
