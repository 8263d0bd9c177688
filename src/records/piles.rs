//! Places that many records share to the last digit: found in bounded memory.
//!
//! # Source
//! Manku, G. S. & Motwani, R. (2002), Approximate frequency counts over data streams, VLDB 28, 346–357
//! (lossy counting). Counts are exact while no part holds more than [`WINDOW`] distinct places; beyond,
//! a count falls short by at most one in [`WINDOW`] of the rows of its part.

use std::hash::BuildHasher;

use super::visits::PARTS;
use hashbrown::{DefaultHashBuilder, HashTable};

/// Rows after which a part forgets the places that were seen least, once it holds as many.
const WINDOW: u64 = 8_192;
/// The largest piles that are told.
pub(super) const TOLD: usize = 10;

/// A place and how many records it has.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pile {
    /// Coordinates as written.
    pub xy: (f64, f64),
    /// Records there.
    pub records: u64,
}

#[derive(Clone, Copy)]
struct Entry {
    x: u64,
    y: u64,
    count: u64,
    /// How many may have been forgotten before.
    missed: u64,
}

/// One part of the places, by cell.
#[derive(Default)]
pub(super) struct Part {
    hasher: DefaultHashBuilder,
    entries: HashTable<Entry>,
    rows: u64,
    window: u64,
}

impl Part {
    pub(super) fn add(&mut self, (x, y): (f64, f64)) {
        let (x, y) = ((x + 0.0).to_bits(), (y + 0.0).to_bits());
        let (hasher, missed) = (&self.hasher, self.window);
        let entry = self.entries.entry(
            hasher.hash_one((x, y)),
            |e| (e.x, e.y) == (x, y),
            |e| hasher.hash_one((e.x, e.y)),
        );
        entry.and_modify(|e| e.count += 1).or_insert(Entry { x, y, count: 1, missed });
        self.rows += 1;
        if self.rows.is_multiple_of(WINDOW) && self.entries.len() as u64 > WINDOW {
            self.window += 1;
            let window = self.window;
            self.entries.retain(|e| e.count + e.missed > window);
        }
    }
}

/// All places.
#[derive(Default)]
pub(super) struct Piles([Part; PARTS]);

impl Piles {
    /// The parts, each for the places of one part of the cells.
    pub(super) fn parts(&mut self) -> &mut [Part] {
        &mut self.0
    }

    /// The largest piles of two records and more, in an order that does not depend on that of the rows.
    pub(super) fn largest(&self) -> Vec<Pile> {
        let entries = self.0.iter().flat_map(|p| p.entries.iter()).filter(|e| e.count > 1);
        let mut piles: Vec<Pile> = entries
            .map(|e| Pile { xy: (f64::from_bits(e.x), f64::from_bits(e.y)), records: e.count })
            .collect();
        let key = |a: &Pile, b: &Pile| {
            b.records.cmp(&a.records).then(a.xy.0.total_cmp(&b.xy.0)).then(a.xy.1.total_cmp(&b.xy.1))
        };
        piles.sort_unstable_by(key);
        piles.truncate(TOLD);
        piles
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A heavy place among a million light ones is counted to within the bound.
    #[test]
    fn heavy_places_are_never_forgotten() {
        let mut part = Part::default();
        for i in 0..1_000_000_u32 {
            let heavy = i % 50 == 0;
            part.add(if heavy { (1.0, 2.0) } else { (f64::from(i), 0.5) });
        }
        let heavy = part.entries.iter().max_by_key(|e| e.count).unwrap();
        assert_eq!((f64::from_bits(heavy.x), f64::from_bits(heavy.y)), (1.0, 2.0));
        assert!(heavy.count <= 20_000 && heavy.count + 1_000_000 / WINDOW >= 20_000, "{}", heavy.count);
        assert!(part.entries.len() < 100_000, "{}", part.entries.len());
    }
}
