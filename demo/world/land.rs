//! The lie of the land: coast, inland border, islands, lakes and height. No people yet.

use crate::frame::{AROUND, CELL, CELLS, COLUMNS, Field, NORTH, Point, ROWS, SIDES, WEST, centre, neighbour};
use crate::noise::Noise;

/// Land, sea and height on the grid.
pub struct Land {
    /// Metres inside the land's edge, negative outside: its zero line is the outline.
    pub inside: Field,
    /// True for cells of the sea (not for lakes, nor for what lies beyond the inland border).
    pub sea: Vec<bool>,
    /// True for the largest piece of land.
    pub mainland: Vec<bool>,
    /// Height above the sea in metres, 0 outside the land.
    pub height: Field,
    /// Metres from the sea, roughly; negative at sea.
    pub shore: Field,
}

/// Bulges of the coast: easting and northing from the south-western corner, size and reach, in km.
/// A negative size is a bay, a positive one a headland or an island.
const BULGES: [(f64, f64, f64, f64); 9] = [
    (24.0, 74.0, -17.0, 6.0),
    (33.0, 79.0, -8.0, 5.0),
    (84.0, 22.0, -18.0, 6.5),
    (118.0, 17.0, -9.0, 5.0),
    (14.0, 98.0, 8.0, 6.0),
    (58.0, 10.0, 9.0, 6.0),
    (8.0, 47.0, 19.0, 4.0),
    (13.0, 30.0, 14.0, 3.2),
    (100.0, 6.5, 17.0, 3.0),
];

/// Lakes: easting and northing from the south-western corner, half length, half width (km), bearing.
const LAKES: [(f64, f64, f64, f64, f64); 6] = [
    (62.0, 66.0, 8.5, 2.0, 0.7),
    (88.0, 84.0, 5.5, 2.6, 2.3),
    (113.0, 58.0, 6.5, 1.6, 1.3),
    (48.0, 42.0, 3.0, 1.7, 0.2),
    (123.0, 93.0, 3.4, 1.5, 2.8),
    (41.0, 101.0, 3.6, 1.5, 1.0),
];

impl Land {
    /// Raises the land.
    pub fn new() -> Land {
        let coast = Noise::new(101, 30_000.0, 5);
        let border = Noise::new(102, 30_000.0, 3);
        let lakes = Noise::new(103, 5_000.0, 3);
        let shore: Field = (0..CELLS).map(|cell| shore(centre(cell), &coast)).collect();
        let edge = |cell: usize| {
            let place = centre(cell);
            shore[cell].min(inland_border(place, &border)).min(-in_lake(place, &lakes)).min(in_frame(place))
        };
        let mut inside: Field = (0..CELLS).map(edge).collect();
        drown_specks(&mut inside);
        fill_specks(&mut inside);
        let sea = (0..CELLS).map(|cell| shore[cell] < 0.0 && inside[cell] <= 0.0).collect();
        let height = (0..CELLS).map(|cell| if inside[cell] > 0.0 { height(cell, &shore) } else { 0.0 });
        let height = rounded(height.collect(), &inside);
        let mainland = largest_piece(&inside);
        Land { inside, sea, mainland, height, shore }
    }

    /// Whether a cell is land: its centre is.
    pub fn is_land(&self, cell: usize) -> bool {
        self.inside[cell] > 0.0
    }

    /// The cells that are land.
    pub fn cells(&self) -> Vec<usize> {
        (0..CELLS).filter(|&cell| self.is_land(cell)).collect()
    }
}

/// Kilometres east and north of the south-western corner.
fn corner_km(place: Point) -> (f64, f64) {
    ((place.x - WEST) / 1000.0, (place.y - NORTH + ROWS as f64 * CELL) / 1000.0)
}

fn shore(place: Point, coast: &Noise) -> f64 {
    let (x, y) = corner_km(place);
    let (west, south) = (x - 21.0, y - 18.0);
    let softness = 7.0;
    let joined = -softness * libm::log(libm::exp(-west / softness) + libm::exp(-south / softness));
    let bulges: f64 = BULGES.iter().map(|&(bx, by, size, reach)| size * bump(x - bx, y - by, reach)).sum();
    1000.0 * (joined + bulges + 17.0 * coast.at(place))
}

fn bump(dx: f64, dy: f64, reach: f64) -> f64 {
    libm::exp(-(dx * dx + dy * dy) / (2.0 * reach * reach))
}

fn inland_border(place: Point, border: &Noise) -> f64 {
    let (x, y) = corner_km(place);
    let east = COLUMNS as f64 * CELL / 1000.0 - x;
    let north = ROWS as f64 * CELL / 1000.0 - y;
    1000.0 * (east.min(north) - 5.0 + 6.0 * border.at(place))
}

/// Metres inside the outermost ring of cells, which is never land.
fn in_frame(place: Point) -> f64 {
    let (x, y) = corner_km(place);
    let (width, height) = (COLUMNS as f64 * CELL / 1000.0, ROWS as f64 * CELL / 1000.0);
    1000.0 * x.min(y).min(width - x).min(height - y) - CELL
}

fn in_lake(place: Point, wobble: &Noise) -> f64 {
    let (x, y) = corner_km(place);
    let depth = |&(lx, ly, long, wide, bearing): &(f64, f64, f64, f64, f64)| {
        let (dx, dy) = (x - lx, y - ly);
        let along = dx * libm::sin(bearing) + dy * libm::cos(bearing);
        let across = dx * libm::cos(bearing) - dy * libm::sin(bearing);
        let bend = 0.25 * wide * libm::sin(1.6 * along / wide.max(1.0));
        let radius = libm::hypot(along / long, (across - bend) / wide);
        1000.0 * wide * (1.0 - radius + 0.5 * wobble.at(place))
    };
    LAKES.iter().map(depth).fold(f64::NEG_INFINITY, f64::max)
}

/// Height rises inland to broken uplands in the north and east.
fn height(cell: usize, shore: &Field) -> f64 {
    let place = centre(cell);
    let (x, y) = corner_km(place);
    let hills = Noise::new(104, 26_000.0, 5).at(place);
    let valleys = Noise::new(105, 45_000.0, 2).at(place);
    let inland = shore[cell] / 1000.0;
    let rise = 1.0 / (1.0 + libm::exp(-(inland - 30.0 + 55.0 * valleys) / 9.0));
    let tilt = 0.75 + 0.25 * ((x + y) / 270.0);
    let low = 15.0 * (1.0 - libm::exp(-inland.max(0.0) / 1.5));
    (low + 640.0 * tilt * rise * (1.0 + 1.5 * hills) + 70.0 * (hills + 0.2).max(0.0)).max(1.0)
}

/// Rounds the heights: each cell is averaged with the land around it.
fn rounded(height: Field, inside: &Field) -> Field {
    let mean = |cell: usize| {
        let around = AROUND.iter().filter_map(|&(dx, dy)| neighbour(cell, dx, dy));
        let land: Vec<f64> = around.filter(|&other| inside[other] > 0.0).map(|other| height[other]).collect();
        let sum: f64 = land.iter().sum();
        (height[cell] + sum) / (1.0 + land.len() as f64)
    };
    (0..height.len()).map(|cell| if inside[cell] > 0.0 { mean(cell) } else { 0.0 }).collect()
}

/// Labels connected pieces of the cells that `member` says yes to.
fn pieces(member: impl Fn(usize) -> bool, steps: &[(isize, isize)]) -> Vec<Vec<usize>> {
    let mut seen = vec![false; CELLS];
    let mut found = Vec::new();
    for start in 0..CELLS {
        if seen[start] || !member(start) {
            continue;
        }
        seen[start] = true;
        let mut piece = vec![start];
        let mut next = 0;
        while next < piece.len() {
            let from = piece[next];
            for other in steps.iter().filter_map(|&(dx, dy)| neighbour(from, dx, dy)) {
                if !seen[other] && member(other) {
                    seen[other] = true;
                    piece.push(other);
                }
            }
            next += 1;
        }
        found.push(piece);
    }
    found
}

/// Takes away islets too small for a map of this scale.
fn drown_specks(inside: &mut Field) {
    let all = pieces(|cell| inside[cell] > 0.0, &SIDES);
    for cell in all.into_iter().filter(|piece| piece.len() < 14).flatten() {
        inside[cell] = -100.0;
    }
}

/// Fills puddles too small for a map of this scale.
fn fill_specks(inside: &mut Field) {
    let all = pieces(|cell| inside[cell] <= 0.0, &AROUND);
    for cell in all.into_iter().filter(|piece| piece.len() < 14).flatten() {
        inside[cell] = 100.0;
    }
}

fn largest_piece(inside: &Field) -> Vec<bool> {
    let mut mainland = vec![false; CELLS];
    let all = pieces(|cell| inside[cell] > 0.0, &SIDES);
    for cell in all.into_iter().max_by_key(Vec::len).unwrap_or_default() {
        mainland[cell] = true;
    }
    mainland
}
