//! TODO
mod dates;
mod settings;
pub use dates::*;
pub use settings::*;
