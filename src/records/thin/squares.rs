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

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::BTreeMap;

    fn metres(value: f64) -> Metres {
        Metres::new(value).unwrap()
    }

    fn anywhere(stream: &mut Stream) -> (f64, f64) {
        (stream.unit() * 360.0 - 180.0, float::asin(stream.unit() * 2.0 - 1.0).to_degrees())
    }

    #[test]
    fn cells_of_the_globe_have_equal_area() {
        for side in [3e7, 1.6e7, 1.3e7, 9e6, 2e6, 1e6] {
            let partition = Partition::new(side);
            let mut total = 0.0;
            for row in 0..=partition.rows as usize + 1 {
                let columns = partition.north_of(row as f64 + 1.0) - partition.north_of(row as f64);
                assert!(columns >= 1.0 || partition.cells == 1.0, "{side} {row}");
                total += columns;
            }
            assert_eq!(total, partition.cells);
        }
        // places uniform by area (on the ellipsoid, by rejection): every cell is equally likely
        let partition = Partition::new(3e6);
        let mut stream = Stream::new(Seed(2), "test", 0);
        let mut counts: BTreeMap<(i64, i64), f64> = BTreeMap::new();
        let mut drawn = 0.0;
        while drawn < 57_000.0 {
            let (x, y) = (stream.unit() * 360.0 - 180.0, stream.unit() * 180.0 - 90.0);
            if stream.unit() < zone_area(y - 5e-4, y + 5e-4, 0.001) / zone_area(-5e-4, 5e-4, 0.001) / 1.02 {
                *counts.entry(partition.holding((x, y))).or_default() += 1.0;
                drawn += 1.0;
            }
        }
        assert_eq!(counts.len() as f64, partition.cells);
        let mean = drawn / partition.cells;
        let chi: f64 = counts.values().map(|n| (n - mean) * (n - mean) / mean).sum();
        // about normal with mean k and variance 2k; 99.9 % quantile
        let freedom = partition.cells - 1.0;
        assert!(chi < freedom + 3.1 * (2.0 * freedom).sqrt(), "{chi} of {freedom}");
    }

    #[test]
    fn the_date_line_and_the_poles_fall_into_cells() {
        for side in [10.0, 1e3, 1e5, 1e6] {
            let partition = Partition::new(side);
            assert_eq!(partition.holding((180.0, 12.0)), partition.holding((-180.0, 12.0)));
            assert_eq!(partition.holding((33.0, 90.0)), (0, 0));
            assert_eq!(partition.holding((33.0, -90.0)), (partition.rows as i64 + 1, 0));
            assert!(partition.holding((179.999_999, 0.0)).1 > partition.holding((179.0, 0.0)).1 - 1);
        }
    }

    #[test]
    fn cells_are_roughly_square() {
        let (partition, mut stream) = (Partition::new(50e3), Stream::new(Seed(2), "test", 0));
        for _ in 0..2000 {
            let (x, y) = anywhere(&mut stream);
            let home = partition.holding((x, y));
            // a step of one side east or north leads at most two cells on
            let north = partition.holding((x, (y + 50.0 / 111.0).min(90.0)));
            assert!((0..=2).contains(&(home.0 - north.0)), "{x} {y}");
        }
    }

    #[test]
    fn keeps_at_most_so_many_per_square_drawn_by_the_seed() {
        let mut stream = Stream::new(Seed(6), "test", 0);
        let globe: Vec<_> = (0..4000).map(|_| anywhere(&mut stream)).collect();
        let plane: Vec<_> = globe.iter().map(|p| (p.0 * 1e4, p.1 * 1e4)).collect();
        for (ground, places) in [(Ground::Globe, globe), (Ground::Plane { metres_per_unit: 2.0 }, plane)] {
            let squares = Squares::new(ground, 8e5);
            let count = |kept: &[u32]| {
                let mut counts: BTreeMap<(i64, i64), usize> = BTreeMap::new();
                kept.iter()
                    .for_each(|&i| *counts.entry(squares.holding(places[i as usize])).or_default() += 1);
                counts
            };
            let all = count(&(0..4000).collect::<Vec<u32>>());
            for per_square in [0, 1, 3] {
                let run = |seed| thin_by_square(&places, ground, metres(8e5), per_square, Seed(seed));
                let thinned = run(1);
                assert_eq!(thinned, run(1));
                assert!(per_square == 0 || thinned.kept != run(2).kept);
                let counts = count(&thinned.kept);
                assert!(all.iter().all(|(s, n)| counts.get(s).copied().unwrap_or(0) == per_square.min(*n)));
                assert_eq!(thinned.closest.is_some(), per_square > 0);
            }
            let everything = thin_by_square(&places, ground, metres(0.0), 1, Seed(1));
            assert_eq!(everything.kept.len(), places.len());
        }
    }

    #[test]
    fn each_place_of_a_square_is_equally_likely() {
        let places = [(1.0, 1.0), (2.0, 1.0), (2.0, 1.0), (3.0, 4.0), (700.0, 1.0)];
        let mut counts = [0_u32; 5];
        for seed in 0..4000 {
            let ground = Ground::Plane { metres_per_unit: 1.0 };
            let kept = thin_by_square(&places, ground, metres(100.0), 1, Seed(seed)).kept;
            kept.iter().for_each(|&i| counts[i as usize] += 1);
        }
        assert_eq!(counts[4], 4000);
        assert!(counts[..4].iter().all(|&n| n.abs_diff(1000) < 100), "{counts:?}");
    }
}
