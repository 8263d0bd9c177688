//! How far a projection's lengths and areas are from the ground's.

use crate::diag::{Diagnostic, Outcome};
use crate::grid::{Metric, Region, geocentric, geodesic};

use super::crs;

/// Places looked at.
const SAMPLES: usize = 256;

/// The largest departure of the plane from the ground over a region.
#[derive(Debug, Clone, PartialEq)]
pub struct Wander {
    /// Largest relative departure of a length or an area, as a share (0.02 is 2 %).
    pub worst: f64,
    /// `length` or `area`.
    pub of: &'static str,
    /// Longitude and latitude of the region's middle.
    pub middle: (f64, f64),
}

/// Compares lengths and areas of cells with those on the ellipsoid.
pub(super) fn wander(region: &Region) -> Outcome<Option<Wander>> {
    let grid = region.grid();
    if grid.metric() == Metric::Geodesic {
        return Ok(None);
    }
    let from = crs::parse(&grid.crs.wkt, "grid")?;
    let to = crs::parse("EPSG:4326", "grid")?;
    let unplaced = || {
        Diagnostic::input(
            "no_transformation",
            "grid",
            format!("places of {} have no longitude and latitude", grid.crs.label),
        )
        .cure("choose a grid within the area for which its CRS is made")
    };
    let transform = crs::transform(&from, &to).ok_or_else(unplaced)?;
    let stride = region.len().div_ceil(SAMPLES);
    let cells: Vec<usize> = (0..region.len()).step_by(stride).chain([region.len() - 1]).collect();
    let (dx, dy) = (grid.transform[1], grid.transform[5].abs());
    let (mut x, mut y): (Vec<f64>, Vec<f64>) =
        cells.iter().map(|c| region.centre(*c)).flat_map(|(x, y)| [(x, y), (x + dx, y), (x, y + dy)]).unzip();
    crs::turn(&transform, &mut x, &mut y);
    if x.iter().any(|v| v.is_nan()) {
        return Err(unplaced().into());
    }
    let unit = grid.metres_per_unit();
    let (mut length, mut area) = (0.0_f64, 0.0_f64);
    for i in (0..x.len()).step_by(3) {
        let at = |k: usize| (x[i + k], y[i + k]);
        length = length.max(departure(geodesic(at(0), at(1)) / (dx * unit)));
        length = length.max(departure(geodesic(at(0), at(2)) / (dy * unit)));
        area = area.max(departure(parallelogram(at(0), at(1), at(2)) / (dx * dy * unit * unit)));
    }
    let middle = cells.len() / 2 * 3;
    let (worst, of) = if area > length { (area, "area") } else { (length, "length") };
    Ok(Some(Wander { worst, of, middle: (x[middle], y[middle]) }))
}

/// How far a ratio is from 1, in either direction.
fn departure(ratio: f64) -> f64 {
    ratio.max(1.0 / ratio) - 1.0
}

/// Area on the ground between two short sides.
fn parallelogram(origin: (f64, f64), a: (f64, f64), b: (f64, f64)) -> f64 {
    let [o, a, b] = [origin, a, b].map(|p| geocentric(p.0, p.1));
    let u = [a[0] - o[0], a[1] - o[1], a[2] - o[2]];
    let v = [b[0] - o[0], b[1] - o[1], b[2] - o[2]];
    let cross = [u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2], u[0] * v[1] - u[1] * v[0]];
    cross.iter().map(|c| c * c).sum::<f64>().sqrt()
}
