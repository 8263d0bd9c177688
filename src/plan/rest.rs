//! Reads `[holdout]`, `[surface]` and `[output]`; a table that is absent is all defaults.

use super::candidates::unknown_candidate;
use super::log::Log;
use super::table::Table;
use crate::check::{HoldoutPlan, Split};
use crate::output::{Choice, Compress, OutputPlan, Per, Scale, SurfacePlan};
use crate::units::{Length, Share};

/// Reads `[holdout]`.
pub(super) fn holdout(table: Option<&Table>) -> Option<HoldoutPlan> {
    let whole = |key: &str, default: usize| match table.and_then(|table| table.whole(key)) {
        Some(number) => usize::try_from(number).ok(),
        None => Some(default),
    };
    Some(HoldoutPlan {
        split: match table.and_then(|table| table.text("split")) {
            Some("random") => Split::Random,
            Some("blocks") => Split::Blocks,
            _ => Split::Outings,
        },
        folds: whole("folds", 5)?,
        block: table.and_then(|table| table.text("block")).and_then(|text| Length::parse(text).ok()),
        resamples: whole("resamples", 999)?,
    })
}

/// Reads `[surface]`; `names` are those of the candidates.
pub(super) fn surface(log: &mut Log, table: Option<&Table>, names: &[String]) -> Option<SurfacePlan> {
    let choice = table.and_then(|table| table.item("candidate"));
    let named = choice.and_then(|item| item.text()).unwrap_or("best");
    if let Some(item) = choice.filter(|_| named != "best" && !names.iter().any(|name| name == named)) {
        unknown_candidate(log, item, names);
    }
    Some(SurfacePlan {
        candidate: if named == "best" { Choice::Best } else { Choice::Named(named.into()) },
        per: match table.and_then(|table| table.text("per")) {
            Some("km2") => Per::Km2,
            _ => Per::Cell,
        },
        scale: match table.and_then(|table| table.text("scale")) {
            Some("max") => Scale::Max,
            Some("mean") => Scale::Mean,
            _ => Scale::Sum,
        },
        floor: Share::new(table.and_then(|table| table.number("floor")).unwrap_or(0.01))?,
        support: table.and_then(|table| table.number("support")).unwrap_or(5.0),
    })
}

/// Reads `[output]`.
pub(super) fn output(table: Option<&Table>) -> OutputPlan {
    OutputPlan {
        folder: table.and_then(|table| table.string("folder")).unwrap_or_else(|| "out".into()),
        compress: match table.and_then(|table| table.text("compress")) {
            Some("zstd") => Compress::Zstd,
            Some("lzw") => Compress::Lzw,
            Some("none") => Compress::None,
            _ => Compress::Deflate,
        },
        details: table.and_then(|table| table.flag("details")).unwrap_or(false),
    }
}
