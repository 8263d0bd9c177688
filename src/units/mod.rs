//! Quantities that cross room borders, each with its unit and its legal range.
//!
//! Holds no formulas and touches no file.

mod length;
mod share;
mod size;

pub use length::{Length, Metres};
pub use share::Share;
pub use size::Bytes;

/// The number every random stream of a run is derived from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Seed(pub u64);
