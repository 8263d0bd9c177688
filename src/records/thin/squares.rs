//! Thinning to at most so many places for each square of an equal-area grid.
//!
//! In a plane the squares have the given side and one has its corner at the origin. On the globe the
//! ellipsoid is cut into N cells of equal area, N the nearest whole number to the area of the
//! ellipsoid over that of a square: a round cell at each pole and rows of roughly square cells between.
//!
//! # Formula
//! The authalic sphere keeps areas: u(φ), the number of cells whose area lies north of latitude φ, gives
//! the authalic polar distance θ = 2·asin(√(u/N)). The polar cells reach to θ₁ = 2·asin(√(1/N)); between
//! them lie n = ⌊(π − 2θ₁)/√(4π/N)⌉ rows of equal height in θ. The cells north of row i number
//! Cᵢ = ⌊N·sin²(θᵢ/2)⌉, and row i begins where u = Cᵢ exactly, so every cell has the area 1/N of the whole.
//!
//! # Source
//! Leopardi, P. (2006), A partition of the unit sphere into regions of equal area and small diameter,
//! Electronic Transactions on Numerical Analysis 25, 309–327; areas on the ellipsoid as in
//! [`zone_area`].

use rayon::prelude::*;

use crate::grid::zone_area;
use crate::maths::float;
use crate::maths::random::Stream;
use crate::units::{Metres, Seed};

use super::{Ground, Thinned};

/// Most cells the globe is cut into: counts up to here are exact.
const MOST: f64 = 1e15;

/// Keeps at most `per_square` places of each square of `side`, drawn at random: each of a square's
/// places is equally likely, identical ones counting one by one. A side of zero keeps every place.
pub fn thin_by_square(
    places: &[(f64, f64)],
    ground: Ground,
    side: Metres,
    per_square: usize,
    seed: Seed,
) -> Thinned {
    if side.get() == 0.0 {
        return Thinned::new((0..places.len() as u32).collect(), places, ground);
    }
    let squares = Squares::new(ground, side.get());
    let keys: Vec<(i64, i64)> = places.par_iter().map(|p| squares.holding(*p)).collect();
    let mut order: Vec<u32> = (0..places.len() as u32).collect();
    order.par_sort_unstable_by(|&i, &j| {
        let (p, q) = (places[i as usize], places[j as usize]);
        let by_place = || p.0.total_cmp(&q.0).then(p.1.total_cmp(&q.1));
        keys[i as usize].cmp(&keys[j as usize]).then_with(by_place).then(i.cmp(&j))
    });
    let mut stream = Stream::new(seed, "thinning by squares", 0);
    let mut kept = Vec::new();
    for square in order.chunk_by_mut(|&i, &j| keys[i as usize] == keys[j as usize]) {
        let taken = per_square.min(square.len());
        for at in 0..taken {
            square.swap(at, at + stream.below(square.len() - at));
        }
        kept.extend_from_slice(&square[..taken]);
    }
    Thinned::new(kept, places, ground)
}

/// An equal-area grid.
enum Squares {
    Plane { per_unit: f64 },
    Globe(Partition),
}

impl Squares {
    fn new(ground: Ground, side: f64) -> Self {
        match ground {
            Ground::Plane { metres_per_unit } => Self::Plane { per_unit: metres_per_unit / side },
            Ground::Globe => Self::Globe(Partition::new(side)),
        }
    }

    /// The square that holds a place.
    fn holding(&self, place: (f64, f64)) -> (i64, i64) {
        match self {
            Self::Plane { per_unit } => {
                ((place.0 * per_unit).floor() as i64, (place.1 * per_unit).floor() as i64)
            }
            Self::Globe(partition) => partition.holding(place),
        }
    }
}

/// The globe cut into cells of equal area.
struct Partition {
    cells: f64,
    /// Rows between the polar cells.
    rows: f64,
    /// Where the first of them begins, and its height, in radians from the pole.
    first: f64,
    height: f64,
}

impl Partition {
    fn new(side: f64) -> Self {
        let cells = (zone_area(-90.0, 90.0, 360.0) / (side * side)).round().clamp(1.0, MOST);
        let first = 2.0 * float::asin((1.0 / cells).sqrt());
        let span = std::f64::consts::PI - 2.0 * first;
        let ideal = (4.0 * std::f64::consts::PI / cells).sqrt();
        let rows = if cells > 2.0 { (span / ideal).round().max(1.0) } else { 0.0 };
        Self { cells, rows, first, height: if rows > 0.0 { span / rows } else { 1.0 } }
    }

    /// Cells north of a row; row 0 is the cell at the north pole, row `rows` + 1 that at the south pole.
    fn north_of(&self, row: f64) -> f64 {
        if row <= 0.0 {
            0.0
        } else if row > self.rows + 1.0 {
            self.cells
        } else if row > self.rows {
            self.cells - 1.0
        } else {
            let sine = float::sin((self.first + (row - 1.0) * self.height) / 2.0);
            (self.cells * sine * sine).round()
        }
    }

    fn holding(&self, (longitude, latitude): (f64, f64)) -> (i64, i64) {
        if self.cells < 2.0 {
            return (0, 0);
        }
        let north = self.cells * zone_area(latitude, 90.0, 360.0) / zone_area(-90.0, 90.0, 360.0);
        let polar = 2.0 * float::asin((north / self.cells).clamp(0.0, 1.0).sqrt());
        let guess = ((polar - self.first) / self.height).floor() + 1.0;
        let mut row = guess.clamp(0.0, self.rows + 1.0);
        while row > 0.0 && north < self.north_of(row) {
            row -= 1.0;
        }
        while row < self.rows + 1.0 && north >= self.north_of(row + 1.0) {
            row += 1.0;
        }
        let columns = self.north_of(row + 1.0) - self.north_of(row);
        let turn = ((longitude + 180.0) / 360.0).rem_euclid(1.0);
        (row as i64, (turn * columns).floor().min(columns - 1.0) as i64)
    }
}
