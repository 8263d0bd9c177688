//! Records in vector files: geometry where there is one, columns otherwise.

use gdal::vector::{Feature, FieldValue, LayerAccess};

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::grid::CrsKind;
use crate::records::{Content, Place, RecordsPlan, Row};

use super::crs;
use super::features::{no_crs, open_layer};
use super::files::Files;
use super::table::Columns;

/// Streams the features of a vector file.
pub(super) fn read(
    files: &Files,
    (file, index): (&str, usize),
    plan: &RecordsPlan,
    each: &mut dyn FnMut(&Row) -> Outcome<()>,
    observer: &dyn Observer,
) -> Outcome<()> {
    let dataset = files.vector(file)?;
    let mut layer = open_layer(&dataset, file, plan.table.as_deref())?;
    let names: Vec<String> = layer.defn().fields().map(|f| f.name()).collect();
    let geometries = layer.defn().geom_fields().next().is_some()
        && !plan.columns.stated.iter().any(|s| s == "longitude" || s == "latitude");
    let columns = Columns::find(&names, plan, file, geometries)?;
    let own = if geometries {
        let srs = layer.spatial_ref().ok_or_else(|| no_crs(file))?;
        Some(crs::describe(&srs).ok_or_else(|| no_crs(file))?)
    } else {
        None
    };
    observer.begin(&format!("read {file}"), layer.try_feature_count());
    for feature in layer.features() {
        let texts: Vec<String> = (0..names.len()).map(|i| text(&feature, i)).collect();
        let at = |column: usize| texts[column].as_str();
        let named: Vec<&str> = columns.filters().iter().map(|c| at(*c)).collect();
        let line = feature.fid().unwrap_or(0);
        let point = if geometries { Some(place(&feature, file)?) } else { None };
        let mut fields = columns.fields(at, point, &named);
        if let Some(own) = &own {
            fields.datum = &own.wkt;
            fields.degrees = Some(own.kind == CrsKind::Geographic);
        }
        each(&Row { file: index, line, content: Content::Fields(fields) })?;
        observer.advance(1);
    }
    observer.end();
    Ok(())
}

/// Where a feature lies; only points have a place.
fn place<'a>(feature: &Feature, file: &str) -> Outcome<Place<'a>> {
    let Some(geometry) = feature.geometry().filter(|g| !g.is_empty()) else { return Ok(Place::Missing) };
    let name = geometry.geometry_name();
    let point = if name == "POINT" {
        geometry.get_point(0)
    } else if name == "MULTIPOINT" && geometry.geometry_count() == 1 {
        geometry.get_geometry(0).get_point(0)
    } else {
        let place = format!("{file}, feature {}", feature.fid().unwrap_or(0));
        return Err(Diagnostic::input(
            "no_points",
            place,
            format!("a record must be a point, found a {name}"),
        )
        .cure("give points, or centroids with their uncertainty")
        .into());
    };
    Ok(Place::Point(point.0, point.1))
}

/// A field as the text a table would hold.
fn text(feature: &Feature, index: usize) -> String {
    match feature.field(index) {
        Ok(Some(FieldValue::StringValue(s))) => s,
        Ok(Some(FieldValue::DateValue(d))) => d.to_string(),
        Ok(Some(FieldValue::DateTimeValue(t))) => t.date_naive().to_string(),
        Ok(Some(FieldValue::IntegerValue(v))) => v.to_string(),
        Ok(Some(FieldValue::Integer64Value(v))) => v.to_string(),
        Ok(Some(FieldValue::RealValue(v))) => v.to_string(),
        Ok(None) => String::new(),
        _ => feature.field_as_string(index).ok().flatten().unwrap_or_default(),
    }
}
