//! The whole route of a study, from its plan to its findings.
//!
//! Holds the order of steps; the formulas and formats live in the rooms below.

mod cost;
mod gather;
mod route;

pub use cost::{Cost, estimate};
pub use gather::{Gathered, Needs, Notes, gather};
pub use route::{ready, run};
