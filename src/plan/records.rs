//! Reads `[records]`.

use super::table::{Table, entries};
use super::values::elements;
use crate::records::{ColumnValues, Columns, Count, DateRange, Precision, Quotes, RecordsPlan};
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
pub(super) fn read(table: &Table) -> Option<RecordsPlan> {
    let length = |key: &str| table.text(key).and_then(|text| Length::parse(text).ok());
    Some(RecordsPlan {
        files: files(table)?,
        table: table.string("table"),
        quotes: table.text("quotes").map(|word| if word == "none" { Quotes::None } else { Quotes::Double }),
        columns: columns(table),
        crs: table.string("crs").unwrap_or_else(|| "EPSG:4326".into()),
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
    })
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
