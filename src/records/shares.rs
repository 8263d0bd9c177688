//! How visits are shared out among observers, data sets and cells.

use std::collections::BTreeMap;

use super::settings::Count;
use super::units::{Unit, VisitFacts};
use super::visits::{Sorted, Visit};

/// What a visit weighs before any cap.
pub(super) fn weight(visit: &Visit, count: Count) -> f64 {
    if count == Count::Records { f64::from(visit.records) } else { 1.0 }
}

/// Weight by observer; 0 is the unknown.
pub(super) fn by_observer(visits: &[Visit], count: Count) -> BTreeMap<u32, f64> {
    let mut by = Vec::new();
    visits.iter().for_each(|v| add(&mut by, v.key.1, weight(v, count)));
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
pub(super) fn by_dataset(sorted: &Sorted, count: Count) -> BTreeMap<u32, f64> {
    let mut by = Vec::new();
    for (i, visit) in sorted.visits.iter().enumerate() {
        for (dataset, share) in datasets_of(sorted, i) {
            add(&mut by, dataset, weight(visit, count) * share);
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
    let mut sizes: Vec<f64> = visits.iter().map(|v| f64::from(v.records)).collect();
    sizes.sort_unstable_by(f64::total_cmp);
    let n = sizes.len() as f64;
    VisitFacts {
        count: visits.len() as u64,
        mean: sizes.iter().sum::<f64>() / n,
        median: crate::maths::rank::quantile(&sizes, 0.5),
        single_share: sizes.iter().take_while(|&&s| s == 1.0).count() as f64 / n,
    }
}
