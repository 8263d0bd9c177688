//! Reads plans.
mod study;
pub use study::*;
