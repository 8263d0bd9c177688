//! Coordinates of records as longitude and latitude on WGS 84, or as they are in a plane.

use crate::diag::Outcome;
use crate::grid::{Crs, CrsKind};
use crate::records::Projection;

use super::crs;
use super::files::Files;
use super::sources::Sources;

/// Turns the coordinates of one source.
pub struct OnEarth<'a> {
    files: &'a Files,
    from: String,
    kind: CrsKind,
    wgs84: Crs,
    /// Whether coordinates stay as they are.
    plane: bool,
}

impl<'a> OnEarth<'a> {
    /// Coordinates of the CRS `from`, the argument `place`; `plane`: those of a projection stay as they are.
    ///
    /// # Errors
    /// When the CRS is unknown.
    pub fn new(files: &'a Files, from: &str, place: &str, plane: bool) -> Outcome<Self> {
        let srs = crs::parse(from, place)?;
        let known =
            crs::describe(&srs).ok_or_else(|| super::features::no_way(place, "longitude and latitude"))?;
        let wgs84 = crs::describe(&crs::parse("EPSG:4326", place)?).expect("WGS 84 is known");
        let plane = plane && known.kind != CrsKind::Geographic;
        Ok(Self { files, from: from.to_owned(), kind: known.kind, wgs84, plane })
    }

    /// Metres in a unit of the plane in which coordinates stay; `None` where they become longitudes and
    /// latitudes.
    pub fn plane(&self) -> Option<f64> {
        match self.kind {
            CrsKind::Projected { metres } if self.plane => Some(metres),
            _ => None,
        }
    }
}

impl Projection for OnEarth<'_> {
    fn degrees(&self, _: usize) -> bool {
        self.kind == CrsKind::Geographic
    }

    fn window(&self, _: usize) -> Option<[f64; 4]> {
        None
    }

    fn turn(&self, source: usize, datum: &str, x: &mut [f64], y: &mut [f64]) -> Outcome<()> {
        if self.plane {
            return Ok(());
        }
        let own = if self.degrees(source) || datum.contains('[') { datum } else { "" };
        let from = self.files.datum(own, &self.from, x.len());
        crs::project(from, &self.wgs84, x, y)
    }
}
