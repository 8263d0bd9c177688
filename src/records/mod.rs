//! Records of the target group: screened with reasons, gathered into units of effort, split into
//! training and held-out parts.
//!
//! Knows no file formats and fits nothing.

mod batch;
mod blocks;
mod caps;
mod collect;
mod dates;
mod desk;
mod holdout;
mod ledger;
mod names;
mod piles;
mod row;
mod screen;
mod settings;
mod shares;
mod signs;
mod smells;
mod snap;
mod split;
mod thin;
mod units;
mod visits;

pub use batch::{Batch, Detail, Projection, Screener};
pub use blocks::Blocks;
pub use caps::{Capped, Groups};
pub use collect::{Collector, Gathering, Kept, Sink};
pub use dates::{DateRange, Precision};
pub use desk::{Desk, Match, Tray};
pub use holdout::{HoldoutPlan, Split};
pub use ledger::{Ledger, Rule};
pub use piles::Pile;
pub use row::{Content, Fields, Place, Row};
pub use settings::{CapPlan, ColumnValues, Columns, Count, Quotes, RecordsPlan, SourcePlan};
pub use split::{Folds, HeldOut, Training};
pub use thin::{Ground, Spot, SpotList, Spotter, Thinned, thin_by_distance, thin_by_square};
pub use units::{Reach, Records, Unit, VisitFacts, median_uncertainty};
