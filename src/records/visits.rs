//! Distinct visits, told by observer, date and cell.
//!
//! They are kept in parts by cell, so that several threads can count at once; the parts, and the
//! order within them, do not depend on how many there are.

use std::collections::BTreeMap;
use std::hash::BuildHasher;

use hashbrown::{DefaultHashBuilder, HashTable};
use rayon::prelude::*;

use super::batch::{Batch, Placed};
use super::dates::DateRange;
use super::names::Names;
use super::piles::Piles;
use super::row::trimmed;

/// Parts in which visits are counted.
pub(super) const PARTS: usize = 8;

/// The part a cell belongs to.
pub(super) fn part_of(cell: u32) -> usize {
    (cell.wrapping_mul(0x9E37_79B1) >> 29) as usize
}

/// First and last day as numbers; `None` where the date is unknown.
pub(super) type Days = Option<(i32, i32)>;

/// What distinguishes a visit: cell, observer, first and last day.
pub(super) type VisitKey = (u32, u32, Days);

/// A record that was kept, of those who want to check: file, line, and its visit in its part.
#[derive(Clone, Copy)]
pub(super) struct KeptRow {
    pub(super) file: u32,
    pub(super) line: u64,
    pub(super) visit: u32,
}

#[derive(Clone, Copy)]
pub(super) struct Visit {
    /// The number under which it was gathered.
    pub(super) number: u32,
    pub(super) key: VisitKey,
    pub(super) records: u32,
    pub(super) dataset: u32,
    pub(super) uncertainty: f32,
    /// Sum of the records' offsets, in whole parts so that no order of adding changes it.
    pub(super) offset: [i64; 2],
}

/// The visits of one part.
#[derive(Default)]
pub(super) struct Part {
    hasher: DefaultHashBuilder,
    numbers: HashTable<u32>,
    pub(super) found: Vec<Visit>,
    /// Records of a visit that belong to another data set than its first, by visit and data set.
    pub(super) others: BTreeMap<(u32, u32), u32>,
    pub(super) kept: Vec<KeptRow>,
}

impl Part {
    fn add(&mut self, row: &Placed, observer: u32, dataset: u32) -> u32 {
        let key = (row.cell, observer, row.days);
        let hash = self.hasher.hash_one(key);
        let known = self.numbers.find(hash, |&n| self.found[n as usize].key == key).copied();
        let n = known.unwrap_or_else(|| self.open(hash, key, dataset, row.radius));
        let visit = &mut self.found[n as usize];
        visit.records += 1;
        visit.offset[0] += i64::from(row.offset[0]);
        visit.offset[1] += i64::from(row.offset[1]);
        if visit.dataset != dataset {
            *self.others.entry((n, dataset)).or_insert(0) += 1;
        }
        visit.uncertainty = visit.uncertainty.min(row.radius); // a number beats not-a-number
        n
    }

    fn open(&mut self, hash: u64, key: VisitKey, dataset: u32, uncertainty: f32) -> u32 {
        let n = self.found.len() as u32;
        self.found.push(Visit { number: n, key, records: 0, dataset, uncertainty, offset: [0; 2] });
        let (hasher, found) = (&self.hasher, &self.found);
        self.numbers.insert_unique(hash, n, |&n| hasher.hash_one(found[n as usize].key));
        n
    }
}

/// A batch whose names have numbers among all names, and the line its rows are counted from.
pub(super) struct Numbered {
    pub(super) batch: Batch,
    pub(super) observers: Vec<u32>,
    pub(super) datasets: Vec<u32>,
    pub(super) line: u64,
}

/// Counts the visits and the places of batches, in their order, all parts at once; `keep`: remembers each
/// row.
pub(super) fn count(parts: &mut [Part], piles: &mut Piles, batches: &[Numbered], keep: bool) {
    parts.par_iter_mut().zip(piles.parts()).enumerate().for_each(|(p, (part, places))| {
        for numbered in batches {
            for row in &numbered.batch.placed[p] {
                places.add(row.xy);
                let observer = numbered.observers[row.observer as usize];
                let visit = part.add(row, observer, numbered.datasets[row.dataset as usize]);
                if keep {
                    let (file, line) = (numbered.batch.file, numbered.line + row.line);
                    part.kept.push(KeptRow { file, line, visit });
                }
            }
        }
    });
}

/// All visits in an order that does not depend on the order of rows.
pub(super) struct Sorted {
    /// The visits; observers and data sets are numbered by the order of their names.
    pub(super) visits: Vec<Visit>,
    /// Records of a visit (by the number under which it was gathered) in other data sets than its first.
    pub(super) others: BTreeMap<(u32, u32), u32>,
    /// Kept rows with their visit's place in the order.
    pub(super) kept: Vec<KeptRow>,
}

/// Brings the parts together.
pub(super) fn sorted(parts: Vec<Part>, observers: &Names, datasets: &Names) -> Sorted {
    let (observers, datasets) = (observers.order(), datasets.order());
    let mut visits: Vec<Visit> = Vec::with_capacity(parts.iter().map(|p| p.found.len()).sum());
    let (mut others, mut kept) = (BTreeMap::new(), Vec::new());
    for part in parts {
        let first = visits.len() as u32;
        visits.extend(part.found.iter().map(|v| {
            let key = (v.key.0, observers[v.key.1 as usize], v.key.2);
            Visit { number: v.number + first, key, dataset: datasets[v.dataset as usize], ..*v }
        }));
        others.extend(part.others.iter().map(|((v, d), n)| ((v + first, datasets[*d as usize]), *n)));
        kept.extend(part.kept.iter().map(|k| KeptRow { visit: k.visit + first, ..*k }));
    }
    visits.par_sort_unstable_by_key(|v| v.key);
    if !kept.is_empty() {
        let mut place = vec![0; visits.len()];
        visits.iter().enumerate().for_each(|(rank, v)| place[v.number as usize] = rank as u32);
        kept.iter_mut().for_each(|k: &mut KeptRow| k.visit = place[k.visit as usize]);
        kept.par_sort_unstable_by_key(|k| (k.file, k.line));
    }
    Sorted { visits, others, kept }
}

/// The outing (observer and date) of each visit, numbered by the first visit of each.
pub(super) fn outings(visits: &[Visit]) -> Vec<u32> {
    let key = |v: &Visit| (v.key.1, v.key.2);
    let hasher = DefaultHashBuilder::default();
    let mut leaders: HashTable<(u32, u32)> = HashTable::new();
    let of_leader = |&(leader, _): &(u32, u32)| key(&visits[leader as usize]);
    let number = |(i, visit): (usize, &Visit)| {
        let next = (i as u32, leaders.len() as u32);
        let same = |known: &(u32, u32)| of_leader(known) == key(visit);
        let rehash = |known: &(u32, u32)| hasher.hash_one(of_leader(known));
        leaders.entry(hasher.hash_one(key(visit)), same, rehash).or_insert(next).get().1
    };
    visits.iter().enumerate().map(number).collect()
}

/// An observer list as a set: its names, trimmed, sorted, each once.
pub(super) fn observer_set(text: &str) -> std::borrow::Cow<'_, str> {
    if !text.as_bytes().contains(&b'|') {
        return trimmed(text).into();
    }
    let names: std::collections::BTreeSet<&str> =
        text.split('|').map(str::trim).filter(|n| !n.is_empty()).collect();
    names.into_iter().collect::<Vec<_>>().join(" | ").into()
}

/// First and last day of all dated visits.
pub(super) fn days(visits: &[Visit]) -> Option<(jiff::civil::Date, jiff::civil::Date)> {
    let dated = || visits.iter().filter_map(|v| v.key.2);
    let (first, last) = (dated().map(|d| d.0).min()?, dated().map(|d| d.1).max()?);
    let day = |n: i32| {
        let (year, rest) = (n.div_euclid(512), n.rem_euclid(512));
        jiff::civil::Date::new(year as i16, (rest / 32) as i8, (rest % 32) as i8).ok()
    };
    Some((day(first)?, day(last)?))
}

/// First and last day as numbers that order days.
pub(super) fn day_numbers(range: DateRange) -> (i32, i32) {
    let number =
        |d: jiff::civil::Date| i32::from(d.year()) * 512 + i32::from(d.month()) * 32 + i32::from(d.day());
    (number(range.first), number(range.last))
}
