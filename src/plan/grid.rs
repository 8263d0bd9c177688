//! Reads `[grid]`.

use super::GridPlan;
use super::log::Log;
use super::table::Table;
use crate::units::Length;

/// The keys of a grid of one's own.
const OWN: [&str; 4] = ["region", "crs", "cell", "touching"];

/// Reads the grid; `None` with a report when something is wrong.
pub(super) fn read(log: &mut Log, table: &Table) -> Option<GridPlan> {
    if table.has("like") {
        if let Some(item) = OWN.iter().find_map(|key| table.any(key)) {
            let text = format!("`like` and `{}` cannot stand together", item.key);
            let cure = format!("keep `like` for the grid of a raster, or {OWN_WORDS} for a new one");
            log.say(&item.at, "grid_choice", text, &cure);
        }
        return table.string("like").map(GridPlan::Like);
    }
    if !OWN.iter().any(|key| table.has(key)) {
        let cure = format!("add `like`, a raster whose grid is taken, or {OWN_WORDS}");
        log.say(table.span(), "grid_choice", "`[grid]` has neither `like` nor `region`", &cure);
        return None;
    }
    for key in &OWN[..3] {
        table.require(log, key);
    }
    Some(GridPlan::Region {
        region: table.string("region")?,
        crs: table.string("crs")?,
        cell: Length::parse(table.text("cell")?).ok()?,
        touching: table.flag("touching").unwrap_or(false),
    })
}

const OWN_WORDS: &str = "`region` with `crs` and `cell`";
