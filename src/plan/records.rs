//! Reads `[records]`.

use super::log::Log;
use super::table::{Table, entries};
use super::values::elements;
use crate::records::{
    CapPlan, ColumnValues, Columns, Count, DateRange, Precision, Quotes, RecordsPlan, SourcePlan,
};
use crate::units::Length;

/// The keys that name columns, with the Darwin Core terms they default to.
pub(super) const COLUMNS: [(&str, &str); 7] = [
    ("longitude", "decimalLongitude"),
    ("latitude", "decimalLatitude"),
    ("date", "eventDate"),
    ("observer", "recordedBy"),
    ("dataset", "datasetName"),
    ("taxon", "scientificName"),
    ("uncertainty", "coordinateUncertaintyInMeters"),
];

/// Reads the records' settings; `None` when something that was reported is wrong.
pub(super) fn read(log: &mut Log, table: &Table) -> Option<RecordsPlan> {
    let length = |key: &str| table.text(key).and_then(|text| Length::parse(text).ok());
    Some(RecordsPlan {
        sources: sources(log, table)?,
        dates: table.text("dates").and_then(DateRange::parse).map(normalised),
        max_uncertainty: length("max_uncertainty").and_then(|length| match length {
            Length::Metres(metres) => Some(metres),
            _ => None,
        }),
        keep: column_values(table, "keep"),
        leave_out: column_values(table, "leave_out"),
        snap: length("snap"),
        count: match table.text("count") {
            Some("records") => Count::Records,
            Some("places") => Count::Places,
            _ => Count::Visits,
        },
        cap: cap(log, table),
    })
}

/// Keys that say how files are read; without `file` beside them they say nothing.
const HOW: [&str; 10] = [
    "table",
    "quotes",
    "longitude",
    "latitude",
    "crs",
    "date",
    "observer",
    "dataset",
    "taxon",
    "uncertainty",
];

/// The files of `[records]` itself, then each `[[records.source]]`.
fn sources(log: &mut Log, table: &Table) -> Option<Vec<SourcePlan>> {
    let others: Vec<Table> = table
        .item("source")
        .into_iter()
        .flat_map(|item| elements(item))
        .filter_map(|element| Table::open(log, "records.source", element.value))
        .collect();
    if others.is_empty() {
        table.require(log, "file");
    }
    let own = table.has("file").then(|| source(table));
    if own.is_none() && !others.is_empty() {
        table.misplaced(log, &HOW, |key| {
            format!("`{key}` says how the files of [records] are read, which names none; each `[[records.source]]` has keys of its own")
        });
    }
    twice(log, own.is_some().then_some(table).into_iter().chain(&others));
    own.into_iter().chain(others.iter().map(source)).collect()
}

/// A file (and table in it) that is named twice would count twice.
fn twice<'a, 't: 'a>(log: &mut Log, tables: impl Iterator<Item = &'a Table<'t>>) {
    let mut seen = std::collections::BTreeSet::new();
    for table in tables {
        for file in files(table).unwrap_or_default() {
            let one = (file.trim_start_matches("./").to_owned(), table.string("table"));
            if !seen.insert(one) {
                let at = table.item("file").map_or_else(|| table.span().clone(), |item| item.span());
                let text = format!("`{file}` is named twice: its records would count twice");
                log.say(&at, "file_twice", text, "name each file once");
            }
        }
    }
}

fn source(table: &Table) -> Option<SourcePlan> {
    Some(SourcePlan {
        files: files(table)?,
        table: table.string("table"),
        quotes: table.text("quotes").map(|word| if word == "none" { Quotes::None } else { Quotes::Double }),
        columns: columns(table),
        crs: table.string("crs").unwrap_or_else(|| "EPSG:4326".into()),
    })
}

/// Caps as shares; visits can be weighed, places cannot.
fn cap(log: &mut Log, table: &Table) -> CapPlan {
    let Some(item) = table.item("cap") else { return CapPlan::default() };
    if table.text("count") == Some("places") {
        let text =
            "`cap` weighs the visits of each observer, but `count = \"places\"` counts each place once";
        log.say(&item.at, "misplaced_key", text, "remove `cap`, or count \"visits\" or \"records\"");
    }
    let entries = item.value.get_ref().as_table().map(entries).unwrap_or_default();
    let share = |key: &str| {
        let text = entries.iter().find(|e| e.key == key)?.text()?;
        text.trim().trim_end_matches('%').trim().parse::<f64>().ok().map(|percent| percent / 100.0)
    };
    CapPlan { observer: share("observer"), dataset: share("dataset") }
}

fn files(table: &Table) -> Option<Vec<String>> {
    let item = table.item("file")?;
    match item.text() {
        Some(one) => Some(vec![one.into()]),
        None => elements(item).map(|element| element.text().map(String::from)).collect(),
    }
}

fn columns(table: &Table) -> Columns {
    let column = |n: usize| table.string(COLUMNS[n].0).unwrap_or_else(|| COLUMNS[n].1.into());
    Columns {
        longitude: column(0),
        latitude: column(1),
        date: column(2),
        observer: column(3),
        dataset: column(4),
        taxon: column(5),
        uncertainty: column(6),
        stated: COLUMNS.iter().filter(|(key, _)| table.has(key)).map(|(key, _)| (*key).into()).collect(),
    }
}

/// A range whose ends are the same day is that day.
fn normalised(mut range: DateRange) -> DateRange {
    if range.precision == Precision::Range && range.first == range.last {
        range.precision = Precision::Day;
    }
    range
}

/// The columns in the order of their names, as the order of the plan has no meaning.
fn column_values(table: &Table, key: &str) -> Vec<ColumnValues> {
    let Some(columns) = table.item(key).and_then(|item| item.value.get_ref().as_table()) else {
        return Vec::new();
    };
    let values = |item: &super::table::Item| match item.text() {
        Some(one) => vec![one.into()],
        None => elements(item).filter_map(|element| element.text().map(String::from)).collect(),
    };
    let mut columns: Vec<ColumnValues> = entries(columns)
        .iter()
        .map(|item| ColumnValues { column: item.key.into(), values: values(item) })
        .collect();
    columns.sort_by(|a, b| a.column.cmp(&b.column));
    columns
}
