//! The WGS 84 ellipsoid: areas of zones, geocentric coordinates, geodesic distances.

use crate::maths::float;

/// Semi-major axis of WGS 84, metres.
const A: f64 = 6_378_137.0;
/// Flattening of WGS 84.
const F: f64 = 1.0 / 298.257_223_563;
/// Square of the first eccentricity.
const E2: f64 = F * (2.0 - F);

/// Mean radius (2a + b)/3 of WGS 84, metres (Moritz 1980).
pub const MEAN_RADIUS: f64 = 6_371_008.771_4;

/// Area in m² between two parallels, over a span of longitude; degrees in.
///
/// # Formula
/// Δλ·(b²/2)·[q(φ₂)−q(φ₁)], q(φ) = sinφ/(1−e²sin²φ) + ln((1+e sinφ)/(1−e sinφ))/(2e).
///
/// # Source
/// Snyder, J. P. (1987), Map Projections: A Working Manual, USGS PP 1395, eq. 3-12.
pub fn zone_area(south: f64, north: f64, span: f64) -> f64 {
    let e = E2.sqrt();
    let b = A * (1.0 - F);
    let q = |degrees: f64| {
        let s = float::sin(degrees.to_radians());
        s / (1.0 - E2 * s * s) + (float::log1p(e * s) - float::log1p(-e * s)) / (2.0 * e)
    };
    (span.to_radians() * b * b / 2.0 * (q(north) - q(south))).abs()
}

/// Geocentric coordinates in metres of a place on the ellipsoid; degrees in.
///
/// # Source
/// Moritz, H. (1980), Geodetic Reference System 1980, Bulletin Géodésique 54, 395–405.
pub fn geocentric(longitude: f64, latitude: f64) -> [f64; 3] {
    let (phi, lambda) = (latitude.to_radians(), longitude.to_radians());
    let sin = float::sin(phi);
    let n = A / (1.0 - E2 * sin * sin).sqrt();
    let ring = n * float::cos(phi);
    [ring * float::cos(lambda), ring * float::sin(lambda), n * (1.0 - E2) * sin]
}

/// Length along the ground that belongs to a straight line between two places on the ellipsoid.
///
/// # Formula
/// 2R·asin(c/2R) with the mean radius R. The chord itself is exact on the ellipsoid; only the
/// correction for the bend uses the sphere: below 1e-5 relative up to 1,000 km.
pub fn arc_of_chord(chord: f64) -> f64 {
    2.0 * MEAN_RADIUS * float::asin((chord / (2.0 * MEAN_RADIUS)).min(1.0))
}

/// Geodesic distance in metres between two places (longitude, latitude in degrees).
///
/// # Source
/// Karney, C. F. F. (2013), Algorithms for geodesics, Journal of Geodesy 87, 43–55.
pub fn geodesic(from: (f64, f64), to: (f64, f64)) -> f64 {
    use geographiclib_rs::{Geodesic, InverseGeodesic};
    Geodesic::wgs84().inverse(from.1, from.0, to.1, to.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Computed with pyproj 3.7.2 (PROJ 9.5.1), `Geod(ellps="WGS84").inv`; tolerance 1 mm.
    const GEODESICS: [(f64, f64, f64, f64, f64); 8] = [
        (-30.0, 0.0, 29.9, 179.8, 19_989_832.827_610),
        (0.0, 0.0, 0.5, 179.7, 19_944_127.420_750),
        (0.0, 0.0, 0.0, 1.0, 111_319.490_793),
        (0.0, 0.0, 1.0, 0.0, 110_574.388_558),
        (89.0, 0.0, 90.0, 0.0, 111_693.864_914),
        (10.0, 179.5, 10.0, -179.5, 109_639.322_105),
        (-17.5, 177.5, -17.5, -178.0, 477_886.336_307),
        (60.0, -45.0, 60.0, 135.0, 6_695_785.819_644),
    ];

    #[test]
    fn geodesics_match_the_reference_library() {
        for (lat1, lon1, lat2, lon2, s) in GEODESICS {
            assert!((geodesic((lon1, lat1), (lon2, lat2)) - s).abs() < 1e-3, "{lat1} {lon1}");
        }
    }

    #[test]
    fn arcs_of_chords_are_close_to_geodesics() {
        for (lat1, lon1, lat2, lon2, s) in &GEODESICS[2..7] {
            let (p, q) = (geocentric(*lon1, *lat1), geocentric(*lon2, *lat2));
            let chord = p.iter().zip(q).map(|(p, q)| (p - q) * (p - q)).sum::<f64>().sqrt();
            assert!((arc_of_chord(chord) / s - 1.0).abs() < 1e-5, "{lat1}");
        }
    }

    /// Zonal formula checked against quadrature and EPSG:6933 (pyproj 3.7.2), km².
    #[test]
    fn zones_match_published_areas() {
        for (south, span, height, km2) in [
            (0.0, 1.0, 1.0, 12_308.463_894),
            (45.0, 1.0, 1.0, 8_686.494_957),
            (89.0, 1.0, 1.0, 108.866_682),
            (70.0, 1.0 / 120.0, 1.0 / 120.0, 0.295_786),
            (60.0, 1.0 / 6.0, 1.0 / 6.0, 172.256_689),
        ] {
            let got = zone_area(south, south + height, span) / 1e6;
            assert!((got - km2).abs() < 6e-7, "{south}: {got}");
        }
        assert!((zone_area(-90.0, 90.0, 360.0) / 1e6 - 510_065_621.724).abs() < 1e-3);
    }
}
