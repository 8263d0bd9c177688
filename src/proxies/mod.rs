//! Layers that may explain where people went, each brought to one number per cell.
//!
//! Reads no files and fits nothing.

mod distance;
mod features;
mod settings;
mod stack;

pub use distance::distance;
pub use features::{Features, Shape};
pub use settings::{LayerPlan, Measure, Resample};
pub use stack::{Layer, ProxyStack};
