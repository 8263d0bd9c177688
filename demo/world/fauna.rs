//! Sixty invented hoverflies: their names, how common they are, where they like to be.

use crate::climate::Climate;
use crate::dice::Dice;
use crate::frame::CELLS;

/// An invented species.
pub struct Species {
    /// Invented binomial.
    pub name: String,
    /// Finds per hour of average skill, by cell; 0 outside the land.
    pub rate: Vec<f64>,
}

/// Invented genera.
const GENERA: [&str; 6] =
    ["Skerrosyrphus", "Fabulomyiola", "Commentisyrpha", "Nusquamomyia", "Ficticeriola", "Somniosyrphus"];

/// Invented epithets.
const EPITHETS: [&str; 10] = [
    "skerrowensis",
    "fabulae",
    "commenti",
    "nusquami",
    "tarnoveri",
    "ulverackensis",
    "umbrae",
    "errantis",
    "vacui",
    "hessocki",
];

/// Finds of all species together in an hour of average skill, averaged over the land.
const FINDS_PER_HOUR: f64 = 2.1;

/// What a species asks of a place.
struct Niche {
    temperature: (f64, f64),
    rain: (f64, f64),
    heath: f64,
    commonness: f64,
}

impl Niche {
    fn suitability(&self, climate: &Climate, cell: usize) -> f64 {
        let off = |value: f64, (best, width): (f64, f64)| {
            let z = (value - best) / width;
            z * z / 2.0
        };
        let strain = off(climate.temperature[cell], self.temperature) + off(climate.rain[cell], self.rain);
        // Whatever they prefer, hoverflies are fewer where it is cold.
        let warmth = 0.3 * (climate.temperature[cell] - 8.0);
        libm::exp(warmth + self.heath * (climate.heath[cell] - 0.3) - strain)
    }
}

/// All species, each with its own niche on the three environment fields.
pub fn invent(climate: &Climate, cells: &[usize]) -> Vec<Species> {
    let mut dice = Dice::new(4);
    let mut species = Vec::new();
    for name in GENERA.iter().flat_map(|genus| EPITHETS.map(|epithet| format!("{genus} {epithet}"))) {
        let home = *dice.pick(cells);
        let niche = Niche {
            temperature: (climate.temperature[home], dice.between(0.7, 2.2)),
            rain: (climate.rain[home], dice.between(90.0, 320.0)),
            heath: 1.3 * dice.normal(),
            commonness: dice.lognormal(1.0),
        };
        let mut rate = vec![0.0; CELLS];
        let mut total = 0.0;
        for &cell in cells {
            rate[cell] = niche.suitability(climate, cell);
            total += rate[cell];
        }
        let scale = niche.commonness * cells.len() as f64 / total;
        rate.iter_mut().for_each(|value| *value *= scale);
        species.push(Species { name, rate });
    }
    scale_to_hour(&mut species, cells);
    species
}

fn scale_to_hour(species: &mut [Species], cells: &[usize]) {
    let sum: f64 = species.iter().flat_map(|one| cells.iter().map(|&cell| one.rate[cell])).sum();
    let scale = FINDS_PER_HOUR * cells.len() as f64 / sum;
    for value in species.iter_mut().flat_map(|one| one.rate.iter_mut()) {
        *value *= scale;
    }
}
