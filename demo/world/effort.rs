//! The known effort: where people look, decided here once and written out as the truth.
//!
//! Nothing in this file was fitted or tuned to what a model can express. On purpose it holds things
//! that no layer of the plan holds: two kinds of traveller, people counted over a neighbourhood,
//! favourite corners of the land, and one observer who always goes to the same place.

use crate::climate::Climate;
use crate::frame::{CELL, CELLS, Field, centre, column_row, neighbour};
use crate::land::Land;
use crate::noise::Noise;
use crate::towns::coarse;

/// Visits by everybody, wherever they go.
pub const ORDINARY_VISITS: usize = 11_100;
/// Visits by one observer to one reserve.
pub const RESERVE_VISITS: usize = 350;
/// Share of the ordinary effort spread evenly over the land.
pub const EVEN_SHARE: f64 = 0.08;

/// Reach of the reserve: standard deviation of the bump, in metres.
pub const RESERVE_SD: f64 = 400.0;
/// Radius of the reserve on the map, in metres.
const RESERVE_RADIUS: f64 = 1_000.0;

/// The known effort, in parts. Each field adds up to 1 over the land.
pub struct Effort {
    /// Where an ordinary visit goes.
    pub ordinary: Field,
    /// Where a visit to the reserve goes.
    pub reserve: Field,
    /// The cell in the reserve's middle.
    pub reserve_cell: usize,
}

impl Effort {
    /// The effort that roads, tracks and people bring about.
    pub fn new(land: &Land, climate: &Climate, ways: &Ways, people: &[Option<f64>]) -> Effort {
        let cells = land.cells();
        let crowd = people_nearby(people, 4_000.0);
        let favour = Noise::new(301, 14_000.0, 3);
        let pull = |&cell: &usize| {
            main_road_pull(ways.main[cell])
                * (1.0 + 0.9 * libm::exp(-ways.tracks[cell] / 700.0))
                * libm::pow(crowd[cell] + 15.0, 0.4)
                * libm::exp(favour.at(centre(cell)))
        };
        let mut ordinary = vec![0.0; CELLS];
        let pulls: Vec<f64> = cells.iter().map(pull).collect();
        let total: f64 = pulls.iter().sum();
        for (&cell, pull) in cells.iter().zip(pulls) {
            ordinary[cell] = EVEN_SHARE / cells.len() as f64 + (1.0 - EVEN_SHARE) * pull / total;
        }
        let reserve_cell = pick_reserve(land, climate, &ways.main);
        let reserve = smooth_bump(&cells, reserve_cell, RESERVE_SD);
        Effort { ordinary, reserve, reserve_cell }
    }

    /// Expected share of all visits, by cell.
    pub fn truth(&self) -> Field {
        let (ordinary, reserve) = (ORDINARY_VISITS as f64, RESERVE_VISITS as f64);
        let mix = |(a, b): (&f64, &f64)| (ordinary * a + reserve * b) / (ordinary + reserve);
        self.ordinary.iter().zip(&self.reserve).map(mix).collect()
    }
}

/// Metres to the roads.
pub struct Ways {
    /// To primary and secondary roads.
    pub main: Field,
    /// To tracks.
    pub tracks: Field,
}

/// Most people keep close to the car; some walk.
fn main_road_pull(metres: f64) -> f64 {
    let close = libm::exp(-metres * metres / (2.0 * 2_400.0 * 2_400.0));
    0.75 * close + 0.25 * libm::exp(-metres / 5_000.0)
}

/// People per km² around each cell, weighted by a Gaussian of a standard deviation in metres.
fn people_nearby(people: &[Option<f64>], sd: f64) -> Field {
    let fine: Field = (0..CELLS).map(|cell| people[coarse(cell)].unwrap_or(0.0)).collect();
    let reach = (4.0 * sd / CELL) as isize;
    let weight = |step: isize| {
        let far = step as f64 * CELL / sd;
        libm::exp(-far * far / 2.0)
    };
    let weights: Vec<(isize, f64)> = (-reach..=reach).map(|step| (step, weight(step))).collect();
    let total: f64 = weights.iter().map(|&(_, weight)| weight).sum();
    let pass = |field: &Field, east: isize, south: isize| -> Field {
        let sum = |cell: usize| {
            let terms = weights.iter().filter_map(|&(step, weight)| {
                neighbour(cell, step * east, step * south).map(|other| weight * field[other])
            });
            terms.sum::<f64>() / total
        };
        (0..CELLS).map(sum).collect()
    };
    pass(&pass(&fine, 1, 0), 0, 1)
}

/// The reserve lies on heath, a walk away from the main roads, and not far in the east.
fn pick_reserve(land: &Land, climate: &Climate, main: &Field) -> usize {
    let walk = |&cell: &usize| {
        land.inside[cell] > 3_000.0 && (3_000.0..6_500.0).contains(&main[cell]) && column_row(cell).0 < 190
    };
    let cells = land.cells().into_iter().filter(walk);
    cells.max_by(|&a, &b| climate.heath[a].total_cmp(&climate.heath[b])).unwrap_or(0)
}

/// Share of each cell that lies in the reserve as the map has it: a disc around its middle.
pub fn reserve_cover(middle: usize) -> Field {
    const PARTS: usize = 10;
    let at = centre(middle);
    let cover = |cell: usize| {
        let corner = centre(cell).shifted(-CELL / 2.0, -CELL / 2.0);
        let part = |i: usize| (i as f64 + 0.5) * CELL / PARTS as f64;
        let inside =
            |i: &usize| corner.shifted(part(i % PARTS), part(i / PARTS)).distance(at) <= RESERVE_RADIUS;
        (0..PARTS * PARTS).filter(inside).count() as f64 / (PARTS * PARTS) as f64
    };
    (0..CELLS).map(cover).collect()
}

fn smooth_bump(cells: &[usize], middle: usize, sd: f64) -> Field {
    let mut bump = vec![0.0; CELLS];
    for &cell in cells {
        let far = centre(cell).distance(centre(middle)) / sd;
        bump[cell] = if far < 6.0 { libm::exp(-far * far / 2.0) } else { 0.0 };
    }
    let total: f64 = bump.iter().sum();
    bump.into_iter().map(|value| value / total).collect()
}
