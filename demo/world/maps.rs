//! Writes rasters (GeoTIFF) and vectors (GeoPackage).

use std::path::Path;

use gdal::errors::Result;
use gdal::raster::{Buffer, RasterCreationOptions};
use gdal::spatial_ref::SpatialRef;
use gdal::vector::{Defn, Feature, FieldDefn, Geometry, LayerOptions, OGRFieldType};
use gdal::vector::{OGRwkbGeometryType as Shape, OGRwkbGeometryType::Type};
use gdal::{Dataset, DriverManager};

use crate::frame::{CELL, COLUMNS, CRS, NORTH, Point, WEST};
use crate::outline::{Polygon, Ring};
use crate::roads::Road;
use crate::towns::Settlement;

/// What stands for "nothing known" in a raster.
const NODATA: f64 = -9999.0;

/// Writes a raster of the frame: `values` by row from the north-west, in as many columns as fit.
pub fn write_raster(path: &Path, values: &[Option<f64>], columns: usize) -> Result<()> {
    let driver = DriverManager::get_driver_by_name("GTiff")?;
    let options = RasterCreationOptions::from_iter(["COMPRESS=DEFLATE"]);
    let rows = values.len() / columns;
    let cell = CELL * COLUMNS as f64 / columns as f64;
    let mut file = driver.create_with_band_type_with_options::<f32, _>(path, columns, rows, 1, &options)?;
    file.set_geo_transform(&[WEST, cell, 0.0, NORTH, 0.0, -cell])?;
    file.set_spatial_ref(&SpatialRef::from_wkt(CRS)?)?;
    let mut band = file.rasterband(1)?;
    band.set_no_data_value(Some(NODATA))?;
    let numbers: Vec<f32> = values.iter().map(|value| value.unwrap_or(NODATA) as f32).collect();
    band.write((0, 0), (columns, rows), &mut Buffer::new((columns, rows), numbers))?;
    file.close()
}

/// Writes the region: a polygon for each piece of land.
pub fn write_region(path: &Path, polygons: &[Polygon]) -> Result<()> {
    write_layer(
        path,
        "region",
        Shape::wkbPolygon,
        &["name"],
        polygons.iter().map(|polygon| {
            let name = if polygon.holes.is_empty() { "Skerrow isle" } else { "Skerrow Uplands" };
            let mut shape = Geometry::empty(Shape::wkbPolygon)?;
            shape.add_geometry(line(&polygon.outer, Shape::wkbLinearRing)?)?;
            for hole in &polygon.holes {
                shape.add_geometry(line(hole, Shape::wkbLinearRing)?)?;
            }
            Ok((shape, vec![name.to_owned()]))
        }),
    )
}

/// Writes the roads.
pub fn write_roads(path: &Path, roads: &[Road]) -> Result<()> {
    write_layer(
        path,
        "roads",
        Shape::wkbLineString,
        &["class"],
        roads
            .iter()
            .map(|road| Ok((line(&road.line, Shape::wkbLineString)?, vec![road.class.word().to_owned()]))),
    )
}

/// Writes the towns.
pub fn write_towns(path: &Path, towns: &[Settlement], place: impl Fn(usize) -> Point) -> Result<()> {
    write_layer(
        path,
        "towns",
        Shape::wkbPoint,
        &["name", "population"],
        towns.iter().map(|town| {
            let point = place(town.cell);
            let mut shape = Geometry::empty(Shape::wkbPoint)?;
            shape.set_point_2d(0, (point.x, point.y));
            Ok((shape, vec![town.name.to_owned(), town.people.to_string()]))
        }),
    )
}

fn line(points: &Ring, kind: Type) -> Result<Geometry> {
    let mut shape = Geometry::empty(kind)?;
    for point in points {
        // Whole centimetres keep the file the same wherever it is made.
        shape.add_point_2d(((point.x * 100.0).round() / 100.0, (point.y * 100.0).round() / 100.0));
    }
    Ok(shape)
}

/// Writes one layer of a new file; the column `population` holds whole numbers, all others text.
fn write_layer(
    path: &Path,
    name: &str,
    kind: Type,
    columns: &[&str],
    features: impl Iterator<Item = Result<(Geometry, Vec<String>)>>,
) -> Result<()> {
    let mut file: Dataset = DriverManager::get_driver_by_name("GPKG")?.create_vector_only(path)?;
    let mut all = file.start_transaction()?;
    let srs = SpatialRef::from_wkt(CRS)?;
    let layer = all.create_layer(LayerOptions { name, srs: Some(&srs), ty: kind, options: None })?;
    for &column in columns {
        let whole = column == "population";
        let kind = if whole { OGRFieldType::OFTInteger } else { OGRFieldType::OFTString };
        FieldDefn::new(column, kind)?.add_to_layer(&layer)?;
    }
    let definition = Defn::from_layer(&layer);
    for feature in features {
        let (shape, values) = feature?;
        let mut row = Feature::new(&definition)?;
        row.set_geometry(shape)?;
        for (number, value) in values.iter().enumerate() {
            row.set_field_string(number, value)?;
        }
        row.create(&layer)?;
    }
    all.commit()?;
    file.close()
}
