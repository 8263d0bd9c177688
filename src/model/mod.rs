//! Estimators: each takes training records and layers and gives a surface with its evidence.
//!
//! Never sees held-out records.

mod access;
mod blend;
mod density;
mod fitted;
mod groups;
mod lattice;
mod precision;
mod remainder;
mod settings;
mod terms;

pub use fitted::{Context, Evidence, Fitted, OddsBin, Parameter, examine, fit, observed_to_available};
pub use settings::{CandidateKind, CandidatePlan, CurveForm, DensityPlan, Fit, TermPlan};
