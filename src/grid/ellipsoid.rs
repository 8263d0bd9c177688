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

/// Straight lines that settle whether a geodesic is shorter than `distance` metres: below the first
/// it is, from the second on it is not; between them only [`geodesic`] knows.
///
/// # Formula
/// Shorter: 2ρ·sin(d/2ρ), ρ = b²/a the least radius of curvature. A geodesic of length g bends
/// nowhere more than a circle of radius ρ, so its chord is at least 2ρ·sin(g/2ρ) while g ≤ πρ;
/// a chord below 12,500 km leaves g no more than that.
/// Not shorter: d itself (no path is shorter than its chord), or √(4a²·sin²(d/2b) + (a−b)²) where
/// that is less: pulling the path in to the sphere of radius b lengthens it nowhere, and the angle
/// between two places at least b and at most a from the centre is at least that of the formula.
///
/// # Source
/// Schur, A. (1921), Mathematische Annalen 83, 143–148 (chords of curves that bend less).
pub fn chords_that_settle(distance: f64) -> (f64, f64) {
    let b = A * (1.0 - F);
    let least = b * b / A;
    if distance > std::f64::consts::PI * A {
        return (f64::INFINITY, f64::INFINITY);
    }
    let bent = distance / (2.0 * least);
    let sure = 12_500_000.0_f64;
    let shorter = if bent < 1.4 { (2.0 * least * float::sin(bent)).min(sure) } else { sure };
    let drawn = distance / (2.0 * b);
    let not_shorter = if drawn < std::f64::consts::FRAC_PI_2 {
        (float::square(2.0 * A * float::sin(drawn)) + float::square(A - b)).sqrt().min(distance)
    } else {
        f64::INFINITY
    };
    (shorter, not_shorter)
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

    /// Lines straight through, near and almost opposite, against geodesics all over the globe.
    #[test]
    fn chords_settle_only_what_geodesics_say() {
        let mut stream = crate::maths::random::Stream::new(crate::units::Seed(5), "test", 0);
        let mut place =
            || (stream.unit() * 360.0 - 180.0, float::asin(stream.unit() * 2.0 - 1.0).to_degrees());
        for i in 0..6000 {
            let (p, mut q) = (place(), place());
            let spread = float::pow(10.0, -((i % 7) as f64));
            q = match i % 3 {
                0 => q,
                1 => (p.0 + q.0 * spread, (p.1 + q.1 * spread).clamp(-90.0, 90.0)),
                _ => (p.0 + 180.0 + q.0 * spread, (-p.1 + q.1 * spread).clamp(-90.0, 90.0)),
            };
            let (a, b) = (geocentric(p.0, p.1), geocentric(q.0, q.1));
            let chord = a.iter().zip(b).map(|(a, b)| (a - b) * (a - b)).sum::<f64>().sqrt();
            let true_length = geodesic(p, q);
            let slack = 1e-5_f64.min(true_length / 2.0);
            // at a distance that is just the geodesic, the chord must be left in doubt
            let (shorter, not_shorter) = chords_that_settle(true_length);
            assert!(chord >= shorter - slack, "{p:?} {q:?} {chord} {shorter}");
            assert!(chord <= not_shorter + slack, "{p:?} {q:?} {chord} {not_shorter}");
        }
        let (shorter, not_shorter) = chords_that_settle(10_000.0);
        assert!(10_000.0 - shorter < 0.002 && not_shorter == 10_000.0);
        assert_eq!(chords_that_settle(2.1e7), (f64::INFINITY, f64::INFINITY));
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
