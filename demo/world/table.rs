//! Writes the records as tab-separated text without quotes, a few rows of it broken.

use std::error::Error;
use std::io::Write;

use gdal::spatial_ref::{AxisMappingStrategy, CoordTransform, SpatialRef};

use crate::dice::Dice;
use crate::frame::CRS;
use crate::rows::{Row, Whereabouts};

/// The columns.
const COLUMNS: [&str; 11] = [
    "occurrenceID",
    "basisOfRecord",
    "scientificName",
    "eventDate",
    "recordedBy",
    "datasetName",
    "decimalLongitude",
    "decimalLatitude",
    "coordinateUncertaintyInMeters",
    "occurrenceStatus",
    "individualCount",
];

/// Rows with a wrong number of fields.
const BROKEN: usize = 6;

/// Writes the table; returns how many rows it has.
pub fn write(out: &mut impl Write, rows: &[&Row]) -> Result<usize, Box<dyn Error>> {
    let mut dice = Dice::new(9);
    let broken = dice.choose(BROKEN, rows.len());
    writeln!(out, "{}", COLUMNS.join("\t"))?;
    for (number, (row, place)) in rows.iter().zip(coordinates(rows)?).enumerate() {
        let mut fields = fields(number, row, place);
        match broken.iter().position(|&b| b == number) {
            Some(k) if k % 2 == 0 => fields.truncate(COLUMNS.len() - 2),
            Some(_) => fields.insert(5, "seen with others".to_owned()),
            None => {}
        }
        writeln!(out, "{}", fields.join("\t"))?;
    }
    Ok(rows.len())
}

fn fields(number: usize, row: &Row, (longitude, latitude): (String, String)) -> Vec<String> {
    let whole = |value: Option<u32>| value.map(|value| value.to_string()).unwrap_or_default();
    vec![
        format!("skerrow-{:06}", number + 1),
        row.basis.to_owned(),
        row.species.clone(),
        row.date.clone(),
        row.observer.clone(),
        row.dataset.to_owned(),
        longitude,
        latitude,
        whole(row.uncertainty),
        row.status.to_owned(),
        whole(row.count),
    ]
}

/// Longitude and latitude of each row, as written: a hundred-thousandth of a degree is a metre.
fn coordinates(rows: &[&Row]) -> Result<Vec<(String, String)>, Box<dyn Error>> {
    let mut from = SpatialRef::from_wkt(CRS)?;
    let mut to = SpatialRef::from_epsg(4326)?;
    from.set_axis_mapping_strategy(AxisMappingStrategy::TraditionalGisOrder);
    to.set_axis_mapping_strategy(AxisMappingStrategy::TraditionalGisOrder);
    let known = |row: &Row| match row.place {
        Whereabouts::At(point) => Some(point),
        Whereabouts::Unknown | Whereabouts::Zero => None,
    };
    let points: Vec<_> = rows.iter().filter_map(|row| known(row)).collect();
    let mut x: Vec<f64> = points.iter().map(|point| point.x).collect();
    let mut y: Vec<f64> = points.iter().map(|point| point.y).collect();
    CoordTransform::new(&from, &to)?.transform_coords(&mut x, &mut y, &mut [])?;
    let mut done = x.into_iter().zip(y);
    let text = |row: &&Row| match row.place {
        Whereabouts::At(_) => done.next().map(|(x, y)| (format!("{x:.5}"), format!("{y:.5}"))),
        Whereabouts::Unknown => Some((String::new(), String::new())),
        Whereabouts::Zero => Some(("0".to_owned(), "0".to_owned())),
    };
    Ok(rows.iter().map(text).map(Option::unwrap_or_default).collect())
}
