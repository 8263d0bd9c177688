//! Plans: from the text of a TOML file to a checked [`StudyPlan`], or to all that is wrong with it.
//!
//! Pure: takes text and gives values; opens no file, so that a file that is missing shows later.

mod study;
mod log;
mod syntax;
mod keys;
mod known;
mod table;
mod values;
mod measures;
mod later;
mod grid;
mod records;
mod layers;
mod candidates;
mod curves;
mod rest;
mod resolved;
mod reference;
mod read;

pub use crate::gate::is_remote;
pub use read::read;
pub use reference::reference;
pub use resolved::resolved;
pub use study::{GridPlan, StudyPlan};
