//! What a run will need, before it starts.

use crate::diag::Diagnostic;
use crate::grid::{Grid, Metric};
use crate::model::CandidateKind;
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
    // a fit and its check, by cell; a blend fits its members on five inner folds and once more, and
    // kernels on the globe take longer than in the plane
    let fits: f64 = plan.candidates.iter().map(|c| one_fit(&c.kind, grid.metric()) * members(&c.kind)).sum();
    let seconds = cells * (1e-6 * layers + 6e-7 * fits * (folds + 1.0)) + 0.5;
    Cost { memory: Bytes((cells * per_cell) as u64 + (64 << 20)), seconds }
}

/// Cost of fitting and checking a candidate once, against an access model in the plane.
fn one_fit(kind: &CandidateKind, metric: Metric) -> f64 {
    let kernels = if metric == Metric::Geodesic { 20.0 } else { 1.5 };
    match kind {
        CandidateKind::Uniform => 0.1,
        CandidateKind::Density(_)
        | CandidateKind::Uses { remainder: Some(_), .. }
        | CandidateKind::Blend(_) => kernels,
        CandidateKind::Uses { .. } => 1.0,
    }
}

/// How often a candidate's members are fitted each time.
fn members(kind: &CandidateKind) -> f64 {
    match kind {
        CandidateKind::Blend(members) => 6.0 * members.len() as f64,
        _ => 1.0,
    }
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
