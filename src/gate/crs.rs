//! Reference systems and turning coordinates between them.

use gdal::spatial_ref::{AxisMappingStrategy, CoordTransform, SpatialRef};

use crate::diag::{Diagnostic, Outcome};
use crate::grid::{Crs, CrsKind};

/// Reads a definition (`EPSG:3035`, WKT, PROJ text); x is always easting or longitude.
pub(super) fn parse(definition: &str, place: &str) -> Outcome<SpatialRef> {
    let mut srs = SpatialRef::from_definition(definition).map_err(|_| {
        Diagnostic::plan("unknown_crs", place, format!("`{definition}` is no known CRS"))
            .cure("give an EPSG code such as \"EPSG:4326\", or the CRS as WKT")
    })?;
    srs.set_axis_mapping_strategy(AxisMappingStrategy::TraditionalGisOrder);
    Ok(srs)
}

/// What the rooms below need to know of a system.
pub(super) fn describe(srs: &SpatialRef) -> Option<Crs> {
    let kind = if srs.is_geographic() {
        CrsKind::Geographic
    } else if srs.is_projected() {
        CrsKind::Projected { metres: srs.linear_units() }
    } else {
        return None;
    };
    let named = srs.name().filter(|n| !["unknown", "unnamed"].contains(&n.to_lowercase().as_str()));
    let label =
        srs.authority().ok().or(named).or_else(|| srs.to_proj4().ok()).unwrap_or_else(|| "unnamed".into());
    Some(Crs { wkt: srs.to_wkt().ok()?, label, kind })
}

/// A transformation; x is always easting or longitude.
pub(super) fn transform(from: &SpatialRef, to: &SpatialRef) -> Option<CoordTransform> {
    let ordered = |srs: &SpatialRef| {
        let mut srs = srs.clone();
        srs.set_axis_mapping_strategy(AxisMappingStrategy::TraditionalGisOrder);
        srs
    };
    CoordTransform::new(&ordered(from), &ordered(to)).ok()
}

/// Turns coordinates in place; those that cannot be turned become not-a-number.
pub(super) fn turn(transform: &CoordTransform, x: &mut [f64], y: &mut [f64]) {
    // the call reports failure when any point fails; the failed ones are infinite
    let _ = transform.transform_coords(x, y, &mut []);
    for (x, y) in x.iter_mut().zip(y) {
        if !x.is_finite() || !y.is_finite() {
            (*x, *y) = (f64::NAN, f64::NAN);
        }
    }
}

/// The CRS a datum's usual name stands for; `None` when it is not known.
pub(super) fn of_datum(datum: &str) -> Option<&'static str> {
    let folded: String =
        datum.chars().filter(char::is_ascii_alphanumeric).map(|c| c.to_ascii_lowercase()).collect();
    Some(match folded.as_str() {
        "wgs84" | "worldgeodeticsystem1984" | "epsg4326" => "EPSG:4326",
        "nad27" | "northamericandatum1927" | "epsg4267" => "EPSG:4267",
        "nad83" | "northamericandatum1983" | "epsg4269" => "EPSG:4269",
        "etrs89" | "europeanterrestrialreferencesystem1989" | "epsg4258" => "EPSG:4258",
        "ed50" | "europeandatum1950" | "epsg4230" => "EPSG:4230",
        "osgb36" | "osgb1936" | "epsg4277" => "EPSG:4277",
        "gda94" | "geocentricdatumofaustralia1994" | "epsg4283" => "EPSG:4283",
        "gda2020" | "epsg7844" => "EPSG:7844",
        "agd66" | "epsg4202" => "EPSG:4202",
        "agd84" | "epsg4203" => "EPSG:4203",
        "sad69" | "southamericandatum1969" | "epsg4618" => "EPSG:4618",
        "sirgas2000" | "epsg4674" => "EPSG:4674",
        "tokyo" | "tokyodatum" | "epsg4301" => "EPSG:4301",
        "pulkovo1942" | "epsg4284" => "EPSG:4284",
        _ => return None,
    })
}
