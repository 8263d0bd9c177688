//! From visits to rows of a records table in Darwin Core terms, tidy as yet.

use crate::dice::{Dice, Urn};
use crate::fauna::Species;
use crate::frame::{Point, clamp_into};
use crate::observers::Observer;
use crate::visits::Visit;

/// Where a row says it was.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Whereabouts {
    /// At a place.
    At(Point),
    /// Nothing is said.
    Unknown,
    /// Longitude 0, latitude 0.
    Zero,
}

/// One row of the table.
#[derive(Clone, Debug)]
pub struct Row {
    /// basisOfRecord.
    pub basis: &'static str,
    /// scientificName.
    pub species: String,
    /// eventDate.
    pub date: String,
    /// recordedBy.
    pub observer: String,
    /// datasetName.
    pub dataset: &'static str,
    /// decimalLongitude and decimalLatitude.
    pub place: Whereabouts,
    /// coordinateUncertaintyInMeters.
    pub uncertainty: Option<u32>,
    /// occurrenceStatus.
    pub status: &'static str,
    /// individualCount.
    pub count: Option<u32>,
}

/// Uncertainties people write down, in metres, and how often each.
const UNCERTAINTIES: [(Option<u32>, f64); 9] = [
    (None, 0.12),
    (Some(5), 0.16),
    (Some(10), 0.22),
    (Some(25), 0.12),
    (Some(50), 0.10),
    (Some(100), 0.14),
    (Some(250), 0.07),
    (Some(500), 0.04),
    (Some(1000), 0.03),
];

/// The rows of each visit that found something, in the visits' order.
pub fn write_down(visits: &[Visit], observers: &[Observer], species: &[Species]) -> Vec<Vec<Row>> {
    let mut dice = Dice::new(7);
    let urn = Urn::new(UNCERTAINTIES.iter().map(|&(_, share)| share));
    let mut all = Vec::new();
    for visit in visits.iter().filter(|visit| !visit.finds.is_empty()) {
        let uncertainty = UNCERTAINTIES[urn.draw(&mut dice)].0;
        let basis = if dice.chance(0.04) { "PRESERVED_SPECIMEN" } else { "HUMAN_OBSERVATION" };
        let counted = dice.chance(0.7);
        let row = |&(number, count): &(usize, u32)| Row {
            basis,
            species: species[number].name.clone(),
            date: visit.day.to_string(),
            observer: names(visit, observers),
            dataset: visit.dataset,
            place: Whereabouts::At(near(&mut dice, visit)),
            uncertainty,
            status: "present",
            count: Some(count).filter(|_| counted),
        };
        all.push(visit.finds.iter().map(row).collect());
    }
    all
}

/// A find lies some tens of metres from the visit's place, in the same cell.
fn near(dice: &mut Dice, visit: &Visit) -> Point {
    clamp_into(visit.cell, visit.place.shifted(25.0 * dice.normal(), 25.0 * dice.normal()))
}

fn names(visit: &Visit, observers: &[Observer]) -> String {
    let first = &observers[visit.observer].name;
    match visit.companion {
        Some(other) => format!("{first} | {}", observers[other].name),
        None => first.clone(),
    }
}
