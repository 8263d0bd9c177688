//! Records in vector files: geometry where there is one, columns otherwise.

use gdal::Dataset;
use gdal::vector::{Feature, FieldValue, LayerAccess};

use crate::diag::{Diagnostic, Outcome};
use crate::grid::{Crs, CrsKind};
use crate::records::{Content, Desk, Place, Row, SourcePlan};

use super::crs;
use super::features::{forget_errors, geometry_of, last_error, no_crs, open_layer};
use super::files::Files;
use super::layout::{Layout, Named, Point, Texts};
use super::record_files::Reading;

/// Features screened together.
const BATCH: usize = 16_384;

/// Takes a feature: its number, its attributes as text, and its place.
type Each<'a> = dyn FnMut(u64, &[String], Option<Place>) -> Outcome<()> + 'a;

/// A layer of records, opened.
pub(super) struct Points<'a> {
    file: &'a str,
    dataset: Dataset,
    table: Option<String>,
    /// Names of its attributes.
    pub(super) names: Vec<String>,
    /// CRS of its geometries; `None` where the place is in columns.
    pub(super) own: Option<Crs>,
}

impl<'a> Points<'a> {
    /// Opens a layer.
    pub(super) fn open(files: &Files, file: &'a str, source: &SourcePlan) -> Outcome<Self> {
        let dataset = files.vector(file)?;
        let layer = open_layer(&dataset, file, source.table.as_deref())?;
        let names: Vec<String> = layer.defn().fields().map(|f| f.name()).collect();
        let geometries = layer.defn().geom_fields().next().is_some()
            && !source.columns.stated.iter().any(|s| s == "longitude" || s == "latitude");
        let own = if geometries {
            let srs = layer.spatial_ref().ok_or_else(|| no_crs(file))?;
            Some(crs::describe(&srs).ok_or_else(|| no_crs(file))?)
        } else {
            None
        };
        Ok(Self { file, dataset, table: source.table.clone(), names, own })
    }

    /// How many features it says it holds.
    pub(super) fn count(&self) -> Option<u64> {
        open_layer(&self.dataset, self.file, self.table.as_deref()).ok()?.try_feature_count()
    }

    /// Hands every feature to `each`: its number, its attributes as text, and its place.
    pub(super) fn each(&self, each: &mut Each) -> Outcome<()> {
        let mut layer = open_layer(&self.dataset, self.file, self.table.as_deref())?;
        forget_errors();
        for feature in layer.features() {
            unharmed(self.file)?;
            let texts: Vec<String> = (0..self.names.len()).map(|i| text(&feature, i)).collect();
            let place = if self.own.is_some() { Some(place(&feature, self.file)?) } else { None };
            each(feature.fid().unwrap_or(0), &texts, place)?;
            forget_errors(); // a place that cannot be turned is none of the file's
        }
        unharmed(self.file)
    }
}

/// The attributes of a feature.
struct Attributes<'a>(&'a [String]);

impl Texts for Attributes<'_> {
    fn own(&self, column: usize) -> &str {
        &self.0[column]
    }
}

/// Hands the features of a vector file on.
pub(super) fn read<D: Desk>(points: &Points, to: &mut Reading<D>) -> Outcome<()> {
    let named = Named::in_order(&points.names);
    let layout = Layout::find(&named, (to.plan, to.source()), points.file, points.own.is_some())?;
    let file = to.tray.open(points.file);
    to.tray.found(file, &layout.matches);
    let mut part = to.desk.begin(file, to.number);
    let mut rows = 0;
    points.each(&mut |line, texts, place| {
        let point = points.own.as_ref().zip(place).map(|(own, place)| {
            let degrees = own.kind == CrsKind::Geographic;
            Point { place, wkt: &own.wkt, degrees }
        });
        layout.fields(&Attributes(texts), point, |fields| {
            to.desk.push(&mut part, &Row { line, content: Content::Fields(fields) });
        });
        to.observer.advance(1);
        rows += 1;
        if rows % BATCH == 0 {
            let full = std::mem::replace(&mut part, to.desk.begin(file, to.number));
            to.hand(full)?;
        }
        Ok(())
    })?;
    to.hand(part)
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
