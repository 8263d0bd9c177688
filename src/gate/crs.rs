//! Reference systems and turning coordinates between them.

use std::cell::RefCell;
use std::collections::BTreeMap;

use gdal::spatial_ref::{AxisMappingStrategy, CoordTransform, SpatialRef};

use crate::diag::{Diagnostic, Outcome};
use crate::grid::{Crs, CrsKind, Region};

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

/// Turns coordinates of a CRS into another's, in place.
pub(super) fn project(from: &str, to: &Crs, x: &mut [f64], y: &mut [f64]) -> Outcome<()> {
    thread_local! {
        // a transformation belongs to one thread; `None`: the two systems are the same
        static KNOWN: RefCell<BTreeMap<(String, String), Option<CoordTransform>>> = RefCell::default();
    }
    KNOWN.with_borrow_mut(|known| {
        let key = (from.to_owned(), to.wkt.clone());
        if !known.contains_key(&key) {
            let (source, target) = (parse(from, "[records] crs")?, parse(&to.wkt, "grid")?);
            let made = if source == target {
                None
            } else {
                Some(
                    transform(&source, &target)
                        .ok_or_else(|| super::features::no_way("[records] crs", &to.label))?,
                )
            };
            known.insert(key.clone(), made);
        }
        if let Some(Some(way)) = known.get(&key) {
            turn(way, x, y);
        }
        Ok(())
    })
}

/// West, south, east, north of a region in another CRS, a little widened; `None` where there is no telling.
pub(super) fn window(to: &str, region: &Region) -> Outcome<Option<[f64; 4]>> {
    let grid = region.grid();
    let (source, target) = (parse(&grid.crs.wkt, "grid")?, parse(to, "[records] crs")?);
    let [w, s, e, n] = grid.extent();
    let bounds = if source == target {
        Some([w, s, e, n])
    } else {
        transform(&source, &target).and_then(|way| way.transform_bounds(&[w, s, e, n], 21).ok())
    };
    let plain = |b: &[f64; 4]| {
        b.iter().all(|v| v.is_finite()) && (!target.is_geographic() || -180.0 <= b[0] && b[2] <= 180.0)
    };
    Ok(bounds.filter(plain).map(|[w, s, e, n]| {
        let (dx, dy) = (0.01 * (e - w).abs() + 1e-3, 0.01 * (n - s) + 1e-3);
        [w - dx, s - dy, e + dx, n + dy]
    }))
}

/// The CRS a datum stands for, by an EPSG code or its usual name; `plan` where the datum says that none
/// was recorded; `None` when it is not known.
pub(super) fn of_datum<'a>(datum: &'a str, plan: &'a str) -> Option<&'a str> {
    let folded: String =
        datum.chars().filter(char::is_ascii_alphanumeric).map(|c| c.to_ascii_lowercase()).collect();
    if folded.starts_with("epsg") {
        let code = datum.trim();
        let sound = SpatialRef::from_definition(code).is_ok_and(|s| s.is_geographic());
        return sound.then_some(code);
    }
    Some(match folded.as_str() {
        "notrecorded" | "unknown" | "notknown" | "na" | "none" => plan,
        "wgs84" | "worldgeodeticsystem1984" => "EPSG:4326",
        "nad27" | "northamericandatum1927" => "EPSG:4267",
        "nad83" | "northamericandatum1983" => "EPSG:4269",
        "etrs89" | "europeanterrestrialreferencesystem1989" => "EPSG:4258",
        "ed50" | "europeandatum1950" => "EPSG:4230",
        "osgb36" | "osgb1936" => "EPSG:4277",
        "gda94" | "geocentricdatumofaustralia1994" => "EPSG:4283",
        "gda2020" => "EPSG:7844",
        "agd66" => "EPSG:4202",
        "agd84" => "EPSG:4203",
        "sad69" | "southamericandatum1969" => "EPSG:4618",
        "sirgas2000" => "EPSG:4674",
        "tokyo" | "tokyodatum" => "EPSG:4301",
        "pulkovo1942" => "EPSG:4284",
        "wgs72" => "EPSG:4322",
        "nzgd2000" => "EPSG:4167",
        "nzgd49" | "nzgd1949" => "EPSG:4272",
        "hartebeesthoek94" => "EPSG:4148",
        "cape" => "EPSG:4222",
        "arc1960" => "EPSG:4210",
        "psad56" => "EPSG:4248",
        "ch1903" => "EPSG:4149",
        "dhdn" | "potsdam" => "EPSG:4314",
        "mgi" => "EPSG:4312",
        "jgd2000" => "EPSG:4612",
        "jgd2011" => "EPSG:6668",
        "cgcs2000" => "EPSG:4490",
        _ => return None,
    })
}
