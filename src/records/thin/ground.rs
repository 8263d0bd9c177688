//! What distance means: geodesics on WGS 84, or straight lines in a plane.

use crate::grid::{chords_that_settle, geocentric, geodesic};
use crate::maths::float;

/// What the coordinates of places are.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Ground {
    /// Longitude and latitude in degrees on WGS 84.
    Globe,
    /// Coordinates of a plane.
    Plane {
        /// Metres that one unit of the coordinates stands for.
        metres_per_unit: f64,
    },
}

impl Ground {
    /// Coordinates in metres in which straight lines tell near from far.
    pub fn point(self, place: (f64, f64)) -> [f64; 3] {
        match self {
            Self::Globe => geocentric(place.0, place.1),
            Self::Plane { metres_per_unit: m } => [place.0 * m, place.1 * m, 0.0],
        }
    }

    /// The distance in metres, the same from either end.
    pub fn distance(self, p: (f64, f64), q: (f64, f64)) -> f64 {
        match self {
            Self::Globe => geodesic(p, q).min(geodesic(q, p)),
            Self::Plane { metres_per_unit } => {
                (float::square(p.0 - q.0) + float::square(p.1 - q.1)).sqrt() * metres_per_unit
            }
        }
    }

    /// Squares of the straight lines that settle, rounding allowed for, whether a distance is shorter
    /// than `distance`; `extent` is the largest coordinate of a point.
    pub fn settling(self, distance: f64, extent: f64) -> (f64, f64) {
        let (shorter, not_shorter) = match self {
            Self::Globe => chords_that_settle(distance),
            Self::Plane { .. } => (distance, distance),
        };
        let slack = 1e-12 * extent;
        let below = (shorter * (1.0 - 1e-9) - slack).max(0.0);
        (below * below, float::square(not_shorter * (1.0 + 1e-9) + slack))
    }
}

/// Square of the straight line between two points.
pub fn square_between(p: &[f64; 3], q: &[f64; 3]) -> f64 {
    float::square(p[0] - q[0]) + float::square(p[1] - q[1]) + float::square(p[2] - q[2])
}

/// The largest coordinate, signs aside.
pub fn extent(points: &[[f64; 3]]) -> f64 {
    points.iter().flatten().fold(0.0, |most, c| c.abs().max(most))
}

/// Places that may stand in each other's way, with the rule that decides it.
pub struct Space {
    /// The points of the places.
    pub points: Vec<[f64; 3]>,
    places: Vec<(f64, f64)>,
    ground: Ground,
    distance: f64,
    /// Squares of lines below which places are too near, and from which they are not.
    pub settling: (f64, f64),
}

impl Space {
    /// The places under the rule that none be closer than `distance` metres.
    pub fn new(places: Vec<(f64, f64)>, ground: Ground, distance: f64) -> Self {
        let points: Vec<_> = places.iter().map(|p| ground.point(*p)).collect();
        let settling = ground.settling(distance, extent(&points));
        Self { points, places, ground, distance, settling }
    }

    /// Whether two places are too near to each other to be both kept.
    #[inline]
    pub fn clash(&self, a: usize, b: usize) -> bool {
        let square = square_between(&self.points[a], &self.points[b]);
        square < self.settling.0 || (square < self.settling.1 && self.in_doubt(a, b))
    }

    #[cold]
    fn in_doubt(&self, a: usize, b: usize) -> bool {
        self.ground.distance(self.places[a], self.places[b]) < self.distance
    }

    /// Puts the places in another order.
    pub fn reorder(&mut self, order: &[u32]) {
        self.points = order.iter().map(|&i| self.points[i as usize]).collect();
        self.places = order.iter().map(|&i| self.places[i as usize]).collect();
    }
}
