//! Visits: who went where, when, for how long, and what was found.

use jiff::civil::{Date, Weekday, date};

use crate::dice::{Dice, Urn};
use crate::effort::{Effort, ORDINARY_VISITS, RESERVE_VISITS};
use crate::fauna::Species;
use crate::frame::{CELL, Point, centre, clamp_into};
use crate::observers::{Observer, RESERVE_LOG, RESERVE_OBSERVER, SIGHTINGS};

/// One visit of one observer to one place.
#[derive(Clone)]
pub struct Visit {
    /// The cell visited.
    pub cell: usize,
    /// The place within it.
    pub place: Point,
    /// The observer, by number.
    pub observer: usize,
    /// A second observer who came along.
    pub companion: Option<usize>,
    /// The day.
    pub day: Date,
    /// Hours in the field times the observer's skill.
    pub work: f64,
    /// A chance sighting reports at most one species.
    pub chance_sighting: bool,
    /// Where its records go.
    pub dataset: &'static str,
    /// Species found, by number, and how many of each.
    pub finds: Vec<(usize, u32)>,
}

/// Share of visits that are chance sightings.
const CHANCE_SIGHTINGS: f64 = 0.3;
/// Share of visits with two observers.
const IN_COMPANY: f64 = 0.03;
/// Standard deviation of the logarithm of a visit's duration, whose median is an hour.
const DURATION_SD: f64 = 1.0;

/// All visits, by date; those that found nothing are among them.
pub fn make(effort: &Effort, observers: &[Observer], species: &[Species]) -> Vec<Visit> {
    let mut dice = Dice::new(6);
    let anybody = Urn::new(observers.iter().map(|observer| observer.activity));
    let anywhere = Urn::new(effort.ordinary.iter().copied());
    let in_reserve = Urn::new(effort.reserve.iter().copied());
    let mut visits = Vec::new();
    for _ in 0..ORDINARY_VISITS {
        let (cell, observer) = (anywhere.draw(&mut dice), anybody.draw(&mut dice));
        let mut visit = set_out(&mut dice, cell, observer, observers);
        visit.companion = Some(anybody.draw(&mut dice)).filter(|&other| other != observer);
        visit.companion = visit.companion.filter(|_| dice.chance(IN_COMPANY));
        visits.push(visit);
    }
    for _ in 0..RESERVE_VISITS {
        let cell = in_reserve.draw(&mut dice);
        let visit = set_out(&mut dice, cell, RESERVE_OBSERVER, observers);
        visits.push(Visit { dataset: RESERVE_LOG, ..visit });
    }
    for visit in &mut visits {
        search(&mut dice, visit, species);
    }
    visits.sort_by_key(|visit| visit.day);
    visits
}

/// The chance that a visit of this much work finds anything, when all species together are found at
/// a rate.
pub fn chance_of_a_find(rate: f64, work: f64) -> f64 {
    1.0 - libm::exp(-rate * work)
}

fn set_out(dice: &mut Dice, cell: usize, observer: usize, observers: &[Observer]) -> Visit {
    let (dx, dy) = (dice.between(-0.5, 0.5), dice.between(-0.5, 0.5));
    let chance_sighting = dice.chance(CHANCE_SIGHTINGS);
    Visit {
        cell,
        place: clamp_into(cell, centre(cell).shifted(dx * CELL, dy * CELL)),
        observer,
        companion: None,
        day: day_out(dice),
        work: dice.lognormal(DURATION_SD) * observers[observer].skill,
        chance_sighting,
        dataset: if chance_sighting { SIGHTINGS } else { observers[observer].dataset },
        finds: Vec::new(),
    }
}

/// A day between 2005 and 2024: more of them in later years, in summer and at weekends.
fn day_out(dice: &mut Dice) -> Date {
    loop {
        let since = 20.0 * (libm::sqrt(1.0 + 8.0 * dice.share()) - 1.0) / 2.0;
        let day_of_year = 187.0 + 36.0 * dice.normal();
        if !(75.0..305.0).contains(&day_of_year) {
            continue;
        }
        let year = 2005 + (since as i16).min(19);
        let new_year = date(year, 1, 1);
        let Ok(day) = new_year.with().day_of_year(day_of_year as i16).build() else { continue };
        let weekend = matches!(day.weekday(), Weekday::Saturday | Weekday::Sunday);
        if weekend || dice.chance(0.45) {
            return day;
        }
    }
}

/// Looks for every species; a chance sighting keeps one find, the more numerous the likelier.
fn search(dice: &mut Dice, visit: &mut Visit, species: &[Species]) {
    for (number, one) in species.iter().enumerate() {
        let count = dice.poisson(visit.work * one.rate[visit.cell]);
        if count > 0 {
            visit.finds.push((number, count));
        }
    }
    if visit.chance_sighting && visit.finds.len() > 1 {
        let kept = Urn::new(visit.finds.iter().map(|&(_, count)| f64::from(count))).draw(dice);
        visit.finds = vec![visit.finds[kept]];
    }
}
