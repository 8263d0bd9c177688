//! The mess that real tables bring along: what is missing, vague, wrong or not a find at all.

use crate::dice::Dice;
use crate::frame::{CELL, SIDES, centre, clamp_into, neighbour};
use crate::land::Land;
use crate::rows::{Row, Whereabouts};
use crate::visits::Visit;

/// Rows that lose their coordinates.
const NO_COORDINATE: usize = 120;
/// Rows placed at longitude 0, latitude 0.
const ZERO_ZERO: usize = 15;
/// Rows vaguer than 5 km.
const VAGUE: usize = 100;
/// Rows from years before the survey.
const OUT_OF_TIME: usize = 50;
/// Rows without a date.
const NO_DATE: usize = 30;
/// Visits dated to a few days.
const A_FEW_DAYS: usize = 45;
/// Visits dated to a month.
const A_MONTH: usize = 40;
/// Rows, whole visits of them, that a position error puts off the coast.
const OFF_COAST: usize = 150;
/// Extra rows that say a species was absent.
const ABSENT: usize = 60;
/// Extra rows that count no individual.
const COUNT_ZERO: usize = 40;

/// Makes a mess of the rows of each visit; `visits` are those that found something, in order.
pub fn make(table: &mut [Vec<Row>], visits: &[&Visit], land: &Land) {
    let mut dice = Dice::new(8);
    wash_off_the_coast(&mut dice, table, visits, land);
    blur_dates(&mut dice, table, visits);
    damage_rows(&mut dice, table);
    add_non_finds(&mut dice, table);
}

fn wash_off_the_coast(dice: &mut Dice, table: &mut [Vec<Row>], visits: &[&Visit], land: &Land) {
    let is_sea = |&cell: &usize| land.sea[cell];
    let out_to_sea = |cell: usize, steps: isize| {
        let mut ways = SIDES.iter().filter(|way| neighbour(cell, way.0, way.1).is_some_and(|c| land.sea[c]));
        ways.find_map(|way| neighbour(cell, steps * way.0, steps * way.1).filter(is_sea))
    };
    let mut moved = 0;
    for number in dice.choose(visits.len(), visits.len()) {
        let steps = if dice.chance(0.25) { 3 } else { 1 };
        let Some(cell) = out_to_sea(visits[number].cell, steps) else { continue };
        let place = centre(cell).shifted(dice.between(-0.5, 0.5) * CELL, dice.between(-0.5, 0.5) * CELL);
        for row in &mut table[number] {
            let off = place.shifted(15.0 * dice.normal(), 15.0 * dice.normal());
            row.place = Whereabouts::At(clamp_into(cell, off));
        }
        moved += table[number].len();
        if moved >= OFF_COAST {
            break;
        }
    }
}

/// Some outings are dated to a range of days, some to a month.
fn blur_dates(dice: &mut Dice, table: &mut [Vec<Row>], visits: &[&Visit]) {
    for (k, number) in dice.choose(A_FEW_DAYS + A_MONTH, visits.len()).into_iter().enumerate() {
        let day = visits[number].day;
        let written = if k < A_FEW_DAYS {
            let last = day.saturating_add(jiff::Span::new().days(1 + dice.below(4) as i64));
            format!("{day}/{last}")
        } else {
            format!("{:04}-{:02}", day.year(), day.month())
        };
        for row in &mut table[number] {
            row.date.clone_from(&written);
        }
    }
}

/// What may happen to a row.
type Damage = fn(&mut Dice, &mut Row);

/// Each row suffers one damage at most.
fn damage_rows(dice: &mut Dice, table: &mut [Vec<Row>]) {
    let mut rows: Vec<&mut Row> = table.iter_mut().flatten().collect();
    let damages: [(usize, Damage); 5] = [
        (NO_COORDINATE, |_, row| row.place = Whereabouts::Unknown),
        (ZERO_ZERO, |_, row| row.place = Whereabouts::Zero),
        (VAGUE, |dice, row| row.uncertainty = Some(*dice.pick(&[5_500, 7_071, 10_000, 25_000]))),
        (OUT_OF_TIME, |dice, row| {
            let (year, month, day) = (1976 + dice.below(29), 4 + dice.below(6), 1 + dice.below(28));
            row.date = format!("{year}-{month:02}-{day:02}");
        }),
        (NO_DATE, |_, row| row.date.clear()),
    ];
    let total = damages.iter().map(|&(count, _)| count).sum();
    let mut chosen = dice.choose(total, rows.len()).into_iter();
    for (count, damage) in damages {
        for number in chosen.by_ref().take(count) {
            damage(dice, rows[number]);
        }
    }
}

/// Absences and counts of nothing: rows that are no finds, added to visits that made some.
fn add_non_finds(dice: &mut Dice, table: &mut [Vec<Row>]) {
    for (k, number) in dice.choose(ABSENT + COUNT_ZERO, table.len()).into_iter().enumerate() {
        let other = &table[dice.below(table.len())][0];
        let species = other.species.clone();
        let mut row = table[number][0].clone();
        if table[number].iter().any(|found| found.species == species) {
            row.species.clone_from(&table[number][0].species);
        } else {
            row.species = species;
        }
        row.count = Some(0).filter(|_| k >= ABSENT);
        row.status = if k < ABSENT { "absent" } else { "present" };
        table[number].push(row);
    }
}
