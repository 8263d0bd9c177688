//! Reads `[[layer]]`.

use super::log::Log;
use super::table::Table;
use crate::proxies::{LayerPlan, Measure, Resample};

/// What candidates need to know of a layer, whether or not this version can measure it.
pub(super) struct Known<'t> {
    /// Its name.
    pub(super) name: &'t str,
    /// The plan's word for its measure, if that is one.
    pub(super) measure: Option<&'t str>,
}

impl Known<'_> {
    /// Whether effort falls with the layer rather than rises.
    pub(super) fn falls(&self) -> bool {
        matches!(self.measure, Some("distance" | "travel-time"))
    }
}

/// The keys that fit only some measures.
const BELONGS: [(&str, &[&str]); 7] = [
    ("table", &["distance", "travel-time", "density"]),
    ("where", &["distance", "travel-time", "density"]),
    ("resample", &["value"]),
    ("missing", &["value"]),
    ("travel", &["travel-time"]),
    ("weight", &["density"]),
    ("bandwidth", &["density"]),
];

/// The words of `resample`.
pub(super) const RESAMPLE: [(&str, Resample); 6] = [
    ("sum", Resample::Sum),
    ("mean", Resample::Mean),
    ("nearest", Resample::Nearest),
    ("bilinear", Resample::Bilinear),
    ("max", Resample::Max),
    ("min", Resample::Min),
];

/// Reads one layer; `None` when something that was reported is wrong.
pub(super) fn read(log: &mut Log, table: &Table) -> Option<LayerPlan> {
    if let Some(measure) = table.text("measure") {
        check_measure(log, table, measure);
    }
    open_travel(log, table);
    let word = table.text("resample").unwrap_or("mean");
    Some(LayerPlan {
        name: table.string("name")?,
        measure: match table.text("measure")? {
            "distance" => Measure::Distance,
            "value" => Measure::Value,
            _ => return None,
        },
        file: table.string("file")?,
        table: table.string("table"),
        filter: table.string("where"),
        resample: RESAMPLE.iter().find(|(known, _)| *known == word).map(|(_, resample)| *resample)?,
        missing: table.number("missing"),
    })
}

/// What candidates may refer to.
pub(super) fn known<'t>(table: &Table<'t>) -> Option<Known<'t>> {
    Some(Known { name: table.any("name")?.text()?, measure: table.text("measure") })
}

fn check_measure(log: &mut Log, table: &Table, measure: &str) {
    for (key, measures) in BELONGS.iter().filter(|(_, measures)| !measures.contains(&measure)) {
        table.misplaced(log, &[key], |key| match (measure, key) {
            ("value", "table" | "where") => {
                format!("a `value` layer is a raster and has no `{key}`")
            }
            ("distance", "missing") => {
                "a `distance` layer has a value everywhere, so `missing` does not apply".into()
            }
            _ => format!("`{key}` fits `{}` layers, and this is a `{measure}` layer", measures[0]),
        });
    }
}

/// Checks the keys of `[layer.travel]`, which no layer of this version reads.
fn open_travel(log: &mut Log, table: &Table) {
    let Some(travel) = table.item("travel").and_then(|item| Table::open(log, "layer.travel", item.value))
    else {
        return;
    };
    for (key, section) in [("roads", "layer.travel.roads"), ("cover", "layer.travel.cover")] {
        if let Some(item) = travel.item(key) {
            Table::open(log, section, item.value);
        }
    }
}
