//! Square blocks laid over a region at a random place: what is held out or resampled together.

use std::collections::BTreeMap;

use crate::grid::{MEAN_RADIUS, Metric, Region};
use crate::maths::float;
use crate::maths::random::Stream;
use crate::units::Metres;

/// The blocks of a region.
#[derive(Debug, Clone)]
pub struct Blocks {
    /// Side of a block.
    pub side: Metres,
    /// Block of each inside cell, numbered from 0.
    pub of_cell: Vec<u32>,
    /// Number of blocks with a cell inside.
    pub count: usize,
}

impl Blocks {
    /// Lays squares of a side over the region, shifted at random. On the globe blocks are bands of
    /// equal height, each cut into as many equal parts as fit the side in its middle.
    pub fn lay(region: &Region, side: Metres, stream: &mut Stream) -> Self {
        let shift = (stream.unit(), stream.unit());
        let mut numbers = BTreeMap::new();
        let keys: Vec<(i64, i64)> = (0..region.len()).map(|c| key(region, c, side.get(), shift)).collect();
        keys.iter().for_each(|k| {
            numbers.insert(*k, 0_u32);
        });
        numbers.values_mut().enumerate().for_each(|(i, n)| *n = i as u32);
        Self { side, of_cell: keys.iter().map(|k| numbers[k]).collect(), count: numbers.len() }
    }
}

/// Which block a cell's centre falls in: its row and its place in the row.
fn key(region: &Region, cell: usize, side: f64, shift: (f64, f64)) -> (i64, i64) {
    let grid = region.grid();
    let (x, y) = region.centre(cell);
    match grid.metric() {
        Metric::Planar => {
            let [west, south, ..] = grid.extent();
            let unit = grid.metres_per_unit();
            let at = |v: f64, from: f64, shift: f64| ((v - from) * unit / side + shift).floor() as i64;
            (at(y, south, shift.1), at(x, west, shift.0))
        }
        Metric::Geodesic => {
            let height = (side / MEAN_RADIUS).to_degrees();
            let band = ((y + 90.0) / height + shift.1).floor();
            let middle = ((band + 0.5 - shift.1) * height - 90.0).clamp(-89.9, 89.9).to_radians();
            let parts = (360.0 * float::cos(middle) / height).round().max(1.0);
            let turn = (x / 360.0).rem_euclid(1.0) * parts + shift.0;
            (band as i64, turn.floor().rem_euclid(parts) as i64)
        }
    }
}
