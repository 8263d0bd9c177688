//! How visits are shared out among observers, data sets and cells.

use std::collections::BTreeMap;

use super::settings::Count;
use super::units::{Unit, VisitFacts};
use super::visits::{Sorted, Visit};

/// What a visit weighs before any cap.
pub(super) fn weight(visit: &Visit, count: Count) -> f64 {
    if count == Count::Records { f64::from(visit.records) } else { 1.0 }
}

/// Weight by observer; 0 is the unknown. The units are those of the visits, one each.
pub(super) fn by_observer(visits: &[Visit], units: &[Unit]) -> BTreeMap<u32, f64> {
    let mut by = Vec::new();
    visits.iter().zip(units).for_each(|(v, u)| add(&mut by, v.key.1, u.weight));
    numbered(&by)
}

/// Adds to the weight of a number.
fn add(by: &mut Vec<f64>, number: u32, weight: f64) {
    let number = number as usize;
    if number >= by.len() {
        by.resize(number + 1, 0.0);
    }
    by[number] += weight;
}

/// The numbers that weigh anything.
fn numbered(by: &[f64]) -> BTreeMap<u32, f64> {
    by.iter().enumerate().filter(|(_, w)| **w > 0.0).map(|(n, w)| (n as u32, *w)).collect()
}

/// The data sets of a visit, with the share of its records in each.
pub(super) fn datasets_of(sorted: &Sorted, visit: usize) -> Vec<(u32, f64)> {
    let v = &sorted.visits[visit];
    let all = f64::from(v.records);
    let mut first = v.records;
    let mut shares = Vec::with_capacity(1);
    if !sorted.others.is_empty() {
        for ((_, dataset), records) in sorted.others.range((v.number, 0)..=(v.number, u32::MAX)) {
            shares.push((*dataset, f64::from(*records) / all));
            first -= records;
        }
    }
    shares.push((v.dataset, f64::from(first) / all));
    shares.sort_unstable_by_key(|s| s.0);
    shares
}

/// Weight by data set; a visit with records of several is divided among them.
pub(super) fn by_dataset(sorted: &Sorted, units: &[Unit]) -> BTreeMap<u32, f64> {
    let mut by = Vec::new();
    if sorted.others.is_empty() {
        sorted.visits.iter().zip(units).for_each(|(v, u)| add(&mut by, v.dataset, u.weight));
        return numbered(&by);
    }
    for (i, unit) in units.iter().enumerate() {
        for (dataset, share) in datasets_of(sorted, i) {
            add(&mut by, dataset, unit.weight * share);
        }
    }
    numbered(&by)
}

/// Inverse Simpson number.
pub(super) fn effective(by: &BTreeMap<u32, f64>) -> f64 {
    let total: f64 = by.values().sum();
    1.0 / by.values().map(|v| (v / total).powi(2)).sum::<f64>()
}

/// The largest share and whose it is; the lower number among equals.
pub(super) fn top(by: &BTreeMap<u32, f64>) -> (u32, f64) {
    let total: f64 = by.values().sum();
    let largest = by.iter().fold((0, 0.0), |best, (k, v)| if *v > best.1 { (*k, *v) } else { best });
    (largest.0, largest.1 / total)
}

/// The cell with the largest share; units are sorted by cell.
pub(super) fn top_cell(units: &[Unit]) -> (u32, f64) {
    let weight = |c: &[Unit]| c.iter().map(|u| u.weight).sum::<f64>();
    let total = weight(units);
    let cells = units.chunk_by(|a, b| a.cell == b.cell).map(|c| (c[0].cell, weight(c)));
    let largest = cells.fold((0, 0.0), |best, c| if c.1 > best.1 { c } else { best });
    (largest.0, largest.1 / total)
}

pub(super) fn facts(visits: &[Visit]) -> VisitFacts {
    let mut by_size: BTreeMap<u32, u64> = BTreeMap::new();
    visits.iter().for_each(|v| *by_size.entry(v.records).or_insert(0) += 1);
    let n = visits.len() as u64;
    // the size of the visit of this rank, from 0
    let size = |rank: u64| {
        let mut before = 0;
        let found = by_size.iter().find(|(_, count)| {
            before += **count;
            before > rank
        });
        f64::from(*found.expect("ranks are below the count").0)
    };
    VisitFacts {
        count: n,
        mean: by_size.iter().map(|(size, count)| f64::from(*size) * *count as f64).sum::<f64>() / n as f64,
        median: (size((n - 1) / 2) + size(n / 2)) / 2.0,
        single_share: by_size.get(&1).map_or(0.0, |count| *count as f64 / n as f64),
    }
}
