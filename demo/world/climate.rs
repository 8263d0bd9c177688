//! The environment: yearly mean temperature, yearly rain and the cover of heath.

use crate::frame::{CELLS, Field, NORTH, WEST, centre};
use crate::land::Land;
use crate::noise::Noise;

/// Three environment fields, known on land.
pub struct Climate {
    /// Yearly mean, degrees Celsius.
    pub temperature: Field,
    /// Millimetres a year.
    pub rain: Field,
    /// Share of the cell under heath, 0 to 1.
    pub heath: Field,
}

impl Climate {
    /// The climate and cover that the lie of the land asks for.
    pub fn new(land: &Land) -> Climate {
        let warmth = Noise::new(201, 30_000.0, 3);
        let showers = Noise::new(202, 36_000.0, 3);
        let cover = Noise::new(203, 15_000.0, 4);
        let temperature = |cell: usize| {
            let north = (centre(cell).y - NORTH + 120_000.0) / 120_000.0;
            10.6 - 0.0062 * land.height[cell] - 0.9 * north + 0.9 * warmth.at(centre(cell))
        };
        let rain = |cell: usize| {
            let east = (centre(cell).x - WEST) / 150_000.0;
            860.0 + 0.8 * land.height[cell] - 330.0 * east + 260.0 * showers.at(centre(cell))
        };
        let heath = |cell: usize| {
            let height = land.height[cell];
            let belt = libm::exp(-libm::pow((height - 390.0) / 190.0, 2.0));
            1.0 / (1.0 + libm::exp(-(-2.6 + 3.4 * belt + 5.0 * cover.at(centre(cell)))))
        };
        Climate {
            temperature: (0..CELLS).map(temperature).collect(),
            rain: (0..CELLS).map(rain).collect(),
            heath: (0..CELLS).map(heath).collect(),
        }
    }
}
