//! Distinct visits, told by observer, date and cell, and how they are shared out.

use std::collections::BTreeMap;

use super::dates::DateRange;
use super::settings::Count;
use super::units::{Unit, VisitFacts};

/// What distinguishes a visit: cell, observer, first and last day.
pub(super) type VisitKey = (u32, u32, Option<(i32, i32)>);

/// Text interned as numbers; 0 is the unknown.
#[derive(Default)]
#[allow(clippy::disallowed_types, reason = "looked up only, never iterated")]
pub(super) struct Names {
    numbers: std::collections::HashMap<String, u32>,
    names: Vec<String>,
}

impl Names {
    pub(super) fn number(&mut self, name: &str) -> u32 {
        if name.is_empty() {
            return 0;
        }
        if let Some(&n) = self.numbers.get(name) {
            return n;
        }
        self.names.push(name.to_owned());
        let n = self.names.len() as u32;
        self.numbers.insert(name.to_owned(), n);
        n
    }

    /// Rank of each number in the order of the names, so that results do not depend on row order.
    pub(super) fn order(&self) -> Vec<u32> {
        let mut by_name: Vec<u32> = (1..=self.names.len() as u32).collect();
        by_name.sort_unstable_by_key(|&n| &self.names[n as usize - 1]);
        let mut order = vec![0; self.names.len() + 1];
        by_name.iter().enumerate().for_each(|(rank, &n)| order[n as usize] = rank as u32 + 1);
        order
    }
}

/// The distinct visits and how many records each has.
#[derive(Default)]
#[allow(clippy::disallowed_types, reason = "looked up only, never iterated")]
pub(super) struct Visits {
    numbers: std::collections::HashMap<VisitKey, u32>,
    pub(super) found: Vec<Visit>,
    /// Records of a visit that belong to another data set than its first, by visit and data set.
    pub(super) others: BTreeMap<(u32, u32), u32>,
}

#[derive(Clone, Copy)]
pub(super) struct Visit {
    pub(super) key: VisitKey,
    pub(super) records: u32,
    pub(super) dataset: u32,
    pub(super) uncertainty: f32,
    /// Sum of the records' offsets, in whole parts so that no order of adding changes it.
    pub(super) offset: [i64; 2],
}

impl Visits {
    pub(super) fn add(&mut self, key: VisitKey, (dataset, uncertainty, offset): (u32, f32, [i64; 2])) -> u32 {
        let next = self.found.len() as u32;
        let n = *self.numbers.entry(key).or_insert(next);
        if n == next {
            self.found.push(Visit { key, records: 0, dataset, uncertainty, offset: [0; 2] });
        }
        let visit = &mut self.found[n as usize];
        visit.records += 1;
        visit.offset[0] += offset[0];
        visit.offset[1] += offset[1];
        if visit.dataset != dataset {
            *self.others.entry((n, dataset)).or_insert(0) += 1;
        }
        visit.uncertainty = visit.uncertainty.min(uncertainty); // a number beats not-a-number
        n
    }
}

/// An observer list as a set: its names, trimmed, sorted, each once.
pub(super) fn observer_set(text: &str) -> String {
    if !text.contains('|') {
        return text.trim().to_owned();
    }
    let names: std::collections::BTreeSet<&str> =
        text.split('|').map(str::trim).filter(|n| !n.is_empty()).collect();
    names.into_iter().collect::<Vec<_>>().join(" | ")
}

/// First and last day as numbers.
pub(super) fn day_numbers(range: DateRange) -> (i32, i32) {
    let number = |d: jiff::civil::Date| i32::from(d.year()) * 512 + i32::from(d.day_of_year());
    (number(range.first), number(range.last))
}

/// What a visit weighs.
fn weight(visit: &Visit, count: Count) -> f64 {
    if count == Count::Records { f64::from(visit.records) } else { 1.0 }
}

fn as_shares(by: &BTreeMap<u32, f64>) -> Vec<f64> {
    let total: f64 = by.values().sum();
    by.values().map(|v| v / total).collect()
}

/// Share of the units by observer.
pub(super) fn observer_shares(visits: &[Visit], count: Count) -> Vec<f64> {
    let mut by: BTreeMap<u32, f64> = BTreeMap::new();
    visits.iter().for_each(|v| *by.entry(v.key.1).or_insert(0.0) += weight(v, count));
    as_shares(&by)
}

/// Share of the units by data set; a visit with records of several is divided among them. `numbers`
/// gives the number under which each visit was gathered.
pub(super) fn dataset_shares(
    visits: &[Visit],
    numbers: &[u32],
    others: &BTreeMap<(u32, u32), u32>,
    count: Count,
) -> Vec<f64> {
    let mut by: BTreeMap<u32, f64> = BTreeMap::new();
    for (visit, number) in visits.iter().zip(numbers) {
        let part = weight(visit, count) / f64::from(visit.records);
        let mut first = visit.records;
        for ((_, dataset), records) in others.range((*number, 0)..=(*number, u32::MAX)) {
            *by.entry(*dataset).or_insert(0.0) += part * f64::from(*records);
            first -= records;
        }
        *by.entry(visit.dataset).or_insert(0.0) += part * f64::from(first);
    }
    as_shares(&by)
}

/// Inverse Simpson number.
pub(super) fn effective(shares: &[f64]) -> f64 {
    1.0 / shares.iter().map(|s| s * s).sum::<f64>()
}

pub(super) fn top(shares: &[f64]) -> f64 {
    shares.iter().copied().fold(0.0, f64::max)
}

/// Largest share of one cell; units are sorted by cell.
pub(super) fn top_cell(units: &[Unit]) -> f64 {
    let weight = |c: &[Unit]| c.iter().map(|u| u.weight).sum::<f64>();
    let total = weight(units);
    units.chunk_by(|a, b| a.cell == b.cell).map(weight).fold(0.0, f64::max) / total
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
