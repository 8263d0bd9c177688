//! Forty invented observers, a few of them far more active than the rest.

use crate::dice::Dice;

/// An invented observer.
pub struct Observer {
    /// Invented name.
    pub name: String,
    /// How often out, relative to the others.
    pub activity: f64,
    /// Finds relative to an average observer.
    pub skill: f64,
    /// Where the records go.
    pub dataset: &'static str,
}

/// The observer who goes to the reserve, by rank of activity.
pub const RESERVE_OBSERVER: usize = 6;

/// Where chance sightings go.
pub const SIGHTINGS: &str = "Skerrow sightings box";
/// Where the records from the reserve go.
pub const RESERVE_LOG: &str = "Heath reserve log";

const DATASETS: [&str; 3] = ["Skerrow hoverfly survey", "Uplands garden watch", "Wayside insect diary"];
const FIRST: [&str; 10] =
    ["Yskarn", "Tolva", "Brenniac", "Maerel", "Odrick", "Fenwisa", "Halvane", "Quillon", "Ulbrit", "Dorrima"];
const LAST: [&str; 8] = [
    "Thackaddle",
    "Morrowpike",
    "Sedgeholt",
    "Quenderry",
    "Fallowick",
    "Ravelstone",
    "Hobmere",
    "Larkenfold",
];

/// The observers, the most active first.
pub fn invent(count: usize) -> Vec<Observer> {
    let mut dice = Dice::new(5);
    let names = dice.choose(count, FIRST.len() * LAST.len());
    let mut observer = |(rank, name): (usize, usize)| Observer {
        name: format!("{} {}", FIRST[name % FIRST.len()], LAST[name / FIRST.len()]),
        activity: 1.0 / (1.0 + rank as f64),
        skill: dice.lognormal(0.5),
        dataset: DATASETS[dice.below(DATASETS.len())],
    };
    names.into_iter().enumerate().map(&mut observer).collect()
}
