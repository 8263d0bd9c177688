//! Records in vector files: geometry where there is one, columns otherwise.

use gdal::vector::{Feature, FieldValue, LayerAccess};

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::grid::CrsKind;
use crate::records::{Collector, Content, Place, RecordsPlan, Row, Screener};

use super::crs;
use super::features::{forget_errors, geometry_of, last_error, no_crs, open_layer};
use super::files::Files;
use super::layout::{Layout, Named, Point, Texts};

/// Features screened together.
const BATCH: usize = 16_384;

/// The fields of a feature.
struct Attributes(Vec<String>);

impl Texts for Attributes {
    fn own(&self, column: usize) -> &str {
        &self.0[column]
    }
}

/// Hands the features of a vector file to the collector.
pub(super) fn read(
    files: &Files,
    (file, number): (&str, usize),
    plan: &RecordsPlan,
    (screener, collector): (&Screener, &mut Collector),
    observer: &dyn Observer,
) -> Outcome<()> {
    let source = &plan.sources[number];
    let index = collector.open(file);
    let dataset = files.vector(file)?;
    let mut layer = open_layer(&dataset, file, source.table.as_deref())?;
    let names: Vec<String> = layer.defn().fields().map(|f| f.name()).collect();
    let geometries = layer.defn().geom_fields().next().is_some()
        && !source.columns.stated.iter().any(|s| s == "longitude" || s == "latitude");
    let layout = Layout::find(&Named::in_order(&names), (plan, source), file, geometries)?;
    collector.found(index, &layout.matches);
    let own = if geometries {
        let srs = layer.spatial_ref().ok_or_else(|| no_crs(file))?;
        Some(crs::describe(&srs).ok_or_else(|| no_crs(file))?)
    } else {
        None
    };
    observer.begin(&format!("read {file}"), layer.try_feature_count());
    let mut batch = screener.batch(index, number);
    forget_errors();
    for feature in layer.features() {
        let texts = Attributes((0..names.len()).map(|i| text(&feature, i)).collect());
        let line = feature.fid().unwrap_or(0);
        let point = match &own {
            Some(own) => {
                let degrees = own.kind == CrsKind::Geographic;
                Some(Point { place: place(&feature, file)?, wkt: &own.wkt, degrees })
            }
            None => None,
        };
        layout.fields(&texts, point, |fields| {
            screener.push(&mut batch, &Row { line, content: Content::Fields(fields) });
        });
        if batch.waiting() >= BATCH {
            unharmed(file)?;
            collector.take(screener, std::mem::replace(&mut batch, screener.batch(index, number)))?;
            forget_errors(); // a place that cannot be turned is none of the file's
        }
        observer.advance(1);
    }
    observer.end();
    unharmed(file)?;
    collector.take(screener, batch)
}

/// Whether features came without an error so far: the driver ends at one as it does at the file's end.
fn unharmed(file: &str) -> Outcome<()> {
    last_error().map_or(Ok(()), |error| {
        let text = format!("cannot be read to its end: {error}");
        Err(Diagnostic::input("cut_off", file, text).cure("check that the file is whole").into())
    })
}

/// Where a feature lies; only points have a place.
fn place<'a>(feature: &Feature, file: &str) -> Outcome<Place<'a>> {
    let Some(geometry) = geometry_of(feature) else { return Ok(Place::Missing) };
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
