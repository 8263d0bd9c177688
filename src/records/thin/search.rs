//! Local search for many places of which no two clash.
//!
//! One place is forced in and those that clash with it leave; places set free come in; then every
//! place near the change gives way to two others where it can. What keeps fewer places than before is
//! undone.
//!
//! # Source
//! Andrade, D. V., Resende, M. G. C. & Werneck, R. F. (2012), Fast local search for the maximum
//! independent set problem, Journal of Heuristics 18, 525–547. The distance between places is at hand
//! here, so that no lists of clashes are needed to tell whether two places can replace one.

use crate::maths::random::Stream;

use super::conflicts::Conflicts;
use super::ground::square_between;

/// No slot: the place is not kept.
const OUT: u32 = u32::MAX;
/// Places that clash with one kept place alone beyond which not every pair of them is tried.
const ALL_PAIRS: usize = 40;

/// What a change costs beside the places looked at.
const SHAKE: u64 = 50;

/// A choice of places, with what is needed to change it quickly.
pub struct Search<'a> {
    conflicts: &'a Conflicts<'a>,
    stream: Stream,
    /// The kept places, in no order.
    pub kept: Vec<u32>,
    slot: Vec<u32>,
    /// How many kept places clash with each place.
    against: Vec<u8>,
    /// The kept places that clash with each place, joined by exclusive or: with one, its number.
    joined: Vec<u32>,
    free: Vec<u32>,
    examine: Vec<u32>,
    queued: Vec<bool>,
    journal: Vec<u32>,
    looked: u64,
}

impl<'a> Search<'a> {
    /// Keeps the places of a list one after another where none kept before clashes.
    pub fn new(conflicts: &'a Conflicts<'a>, order: &[u32], stream: Stream) -> Self {
        let len = conflicts.len;
        let mut out = Self {
            conflicts,
            stream,
            kept: Vec::new(),
            slot: vec![OUT; len],
            against: vec![0; len],
            joined: vec![0; len],
            free: Vec::new(),
            examine: Vec::new(),
            queued: vec![false; len],
            journal: Vec::new(),
            looked: 0,
        };
        order.iter().for_each(|&place| out.enter(place));
        out
    }

    /// Improves the choice until `patience` changes for each kept place have brought nothing, or
    /// `effort` places have been looked at, or no more can be kept.
    pub fn improve(&mut self, patience: usize, effort: u64) {
        self.looked = 0;
        // every kept place stands in line to be examined
        self.stream.shuffle(&mut self.examine);
        self.settle(effort);
        let bound = self.conflicts.bound();
        let mut idle = 0;
        while self.kept.len() < bound && self.looked < effort && idle < patience * (self.kept.len() + 4) {
            let before = self.kept.len();
            self.journal.clear();
            self.looked += SHAKE;
            self.shake();
            self.settle(u64::MAX);
            idle = if self.kept.len() > before { 0 } else { idle + 1 };
            if self.kept.len() < before {
                self.undo();
            }
        }
    }

    /// Forces one place in beside a kept one, now and then several.
    fn shake(&mut self) {
        let beside = self.kept[self.stream.below(self.kept.len())];
        let Some(mut place) = self.conflicts.any_clashing(beside, &mut self.stream) else { return };
        self.force(place);
        while self.stream.below(4) == 0 {
            for _ in 0..3 {
                place = self.conflicts.any_clashing(place, &mut self.stream).unwrap_or(place);
            }
            self.force(place);
        }
    }

    /// Keeps a place and lets those that clash with it go.
    fn force(&mut self, place: u32) {
        if self.slot[place as usize] != OUT {
            return;
        }
        let mut leaving = Vec::new();
        match self.against[place as usize] {
            0 => {}
            1 => leaving.push(self.joined[place as usize]),
            _ => {
                let slot = &self.slot;
                self.looked += self.conflicts.each(place, |other| {
                    if slot[other as usize] != OUT {
                        leaving.push(other);
                    }
                }) as u64;
            }
        }
        leaving.into_iter().for_each(|other| self.leave(other));
        self.enter(place);
    }

    /// Keeps a place if nothing kept clashes with it.
    fn enter(&mut self, place: u32) {
        if self.slot[place as usize] != OUT || self.against[place as usize] > 0 {
            return;
        }
        self.slot[place as usize] = self.kept.len() as u32;
        self.kept.push(place);
        self.journal.push(place);
        if !std::mem::replace(&mut self.queued[place as usize], true) {
            self.examine.push(place);
        }
        let (against, joined) = (&mut self.against, &mut self.joined);
        self.looked += self.conflicts.each(place, |other| {
            against[other as usize] += 1;
            joined[other as usize] ^= place;
        }) as u64;
    }

    /// Lets a kept place go.
    fn leave(&mut self, place: u32) {
        let slot = std::mem::replace(&mut self.slot[place as usize], OUT) as usize;
        self.kept.swap_remove(slot);
        if let Some(&moved) = self.kept.get(slot) {
            self.slot[moved as usize] = slot as u32;
        }
        self.journal.push(place);
        let (against, joined, queued) = (&mut self.against, &mut self.joined, &mut self.queued);
        let (free, examine) = (&mut self.free, &mut self.examine);
        free.push(place);
        self.looked += self.conflicts.each(place, |other| {
            let o = other as usize;
            against[o] -= 1;
            joined[o] ^= place;
            match against[o] {
                0 => free.push(other),
                1 if !std::mem::replace(&mut queued[joined[o] as usize], true) => examine.push(joined[o]),
                _ => {}
            }
        }) as u64;
    }

    /// Lets in what is free, then lets single places give way to two, until neither is possible.
    fn settle(&mut self, effort: u64) {
        loop {
            self.fill();
            let Some(place) = self.examine.pop() else { return };
            self.queued[place as usize] = false;
            if self.slot[place as usize] != OUT && self.looked < effort {
                self.give_way(place);
            }
        }
    }

    /// Lets free places in, one drawn after another, until none is free.
    fn fill(&mut self) {
        loop {
            let (slot, against) = (&self.slot, &self.against);
            self.looked += self.free.len() as u64;
            self.free.retain(|&p| against[p as usize] == 0 && slot[p as usize] == OUT);
            if self.free.is_empty() {
                return;
            }
            let drawn = self.stream.below(self.free.len());
            self.enter(self.free[drawn]);
        }
    }

    /// Replaces a kept place by two that clash with it alone and not with each other.
    fn give_way(&mut self, place: u32) {
        let mut alone = Vec::new();
        let against = &self.against;
        self.looked += self.conflicts.each(place, |other| {
            if against[other as usize] == 1 {
                alone.push(other);
            }
        }) as u64;
        if let Some((one, two)) = self.apart(&alone) {
            self.leave(place);
            self.enter(one);
            self.enter(two);
        }
    }

    /// Two of the places that do not clash.
    fn apart(&mut self, places: &[u32]) -> Option<(u32, u32)> {
        let conflicts = self.conflicts;
        if places.len() < 2 || conflicts.huddled(places) {
            return None;
        }
        if places.len() > ALL_PAIRS {
            return self.far_apart(places);
        }
        self.looked += (places.len() * places.len() / 4) as u64;
        let turn = self.stream.below(places.len());
        let (later, earlier) = places.split_at(turn);
        let order = || earlier.iter().chain(later).copied();
        order().enumerate().find_map(|(i, one)| {
            order().skip(i + 1).find(|&two| !conflicts.clash(one, two)).map(|two| (one, two))
        })
    }

    /// Of many places, two that do not clash, sought from a few of them at the farthest other.
    fn far_apart(&mut self, places: &[u32]) -> Option<(u32, u32)> {
        let conflicts = self.conflicts;
        let farthest = |from: u32| {
            let line = |p: u32| square_between(conflicts.point(from), conflicts.point(p));
            places.iter().copied().map(|p| (line(p), p)).max_by(|a, b| a.0.total_cmp(&b.0)).map(|f| f.1)
        };
        for _ in 0..3 {
            let mut one = places[self.stream.below(places.len())];
            for _ in 0..3 {
                let two = farthest(one)?;
                self.looked += places.len() as u64;
                if !conflicts.clash(one, two) {
                    return Some((one, two));
                }
                one = two;
            }
        }
        None
    }

    /// Takes the changes since the journal was cleared back, last first.
    fn undo(&mut self) {
        for at in (0..self.journal.len()).rev() {
            let place = self.journal[at];
            if self.slot[place as usize] == OUT { self.enter(place) } else { self.leave(place) }
        }
        self.free.clear();
        let queued = &mut self.queued;
        self.examine.drain(..).for_each(|p| queued[p as usize] = false);
    }
}
