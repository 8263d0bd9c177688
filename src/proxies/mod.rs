//! TODO
mod settings;
pub use settings::*;
