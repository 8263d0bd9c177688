//! What leaves the house: the finished surface, the figures, the tables, the page for people.
//!
//! Touches no disk and computes no new statistics.

mod finding;
mod report;
mod settings;
mod summary;
mod surface;
mod tables;

pub use finding::{CandidateFinding, Finding, Tool};
pub use report::{Page, comparison, report};
pub use settings::{Choice, Compress, OutputPlan, Per, Scale, SurfacePlan};
pub use summary::{
    Checked, CheckedInput, FileDigest, Manifest, Stage, check_json, comparison_json, effort_json,
    manifest_json,
};
pub use surface::{Finished, finish};
pub use tables::{comparison_csv, held_out_csv, held_out_units_csv, kept_csv};
