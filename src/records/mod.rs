//! Records of the target group: screened with reasons, gathered into units of effort, split into
//! training and held-out parts.
//!
//! Knows no file formats and fits nothing.

mod blocks;
mod collect;
mod dates;
mod holdout;
mod ledger;
mod row;
mod screen;
mod settings;
mod snap;
mod split;
mod thin;
mod units;
mod visits;

pub use blocks::Blocks;
pub use collect::{Collector, Kept, Project, Sink};
pub use dates::{DateRange, Precision};
pub use holdout::{HoldoutPlan, Split};
pub use ledger::{Ledger, Rule};
pub use row::{Content, Fields, Place, Row};
pub use settings::{ColumnValues, Columns, Count, Quotes, RecordsPlan};
pub use split::{Folds, HeldOut, Training};
pub use thin::{Ground, Thinned, thin_by_distance, thin_by_square};
pub use units::{Records, Unit, VisitFacts, median_uncertainty};
