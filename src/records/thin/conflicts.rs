//! The places of one component and which of them clash: stored where that is small, else looked up.

use crate::maths::random::Stream;

use super::cells::{Cells, corners};
use super::ground::{Space, square_between};

/// Pairs of places a component may have for its clashes to be stored.
const STORED: u64 = 8_000_000;

/// The clashes within one component; places are numbered from zero.
pub struct Conflicts<'a> {
    space: &'a Space,
    cells: &'a Cells,
    first: u32,
    /// Number of places.
    pub len: usize,
    /// Number of cubes.
    pub cubes: usize,
    stored: Option<(Vec<u32>, Vec<u32>)>,
}

impl<'a> Conflicts<'a> {
    /// The component of this number; its clashes are stored when at most `affordable` pairs are to be tried.
    pub fn new(space: &'a Space, cells: &'a Cells, component: usize, affordable: u64) -> Self {
        let own = cells.components[component]..cells.components[component + 1];
        let first = cells.starts[own.start as usize];
        let len = (cells.starts[own.end as usize] - first) as usize;
        let mut out = Self { space, cells, first, len, cubes: own.len(), stored: None };
        let pairs: u64 = own
            .map(|c| {
                let around: u64 = cells.around(c).map(|(o, _)| u64::from(cells.size(o))).sum();
                u64::from(cells.size(c)) * around
            })
            .sum();
        if pairs <= STORED.min(affordable) {
            out.stored = Some(out.listed());
        }
        out
    }

    fn listed(&self) -> (Vec<u32>, Vec<u32>) {
        let (mut heads, mut clashing) = (vec![0], Vec::new());
        for place in 0..self.len as u32 {
            self.each(place, |other| clashing.push(other));
            heads.push(clashing.len() as u32);
        }
        (heads, clashing)
    }

    /// The places that clash with one, when they are stored.
    pub fn list(&self, place: u32) -> Option<&[u32]> {
        let (heads, clashing) = self.stored.as_ref()?;
        Some(&clashing[heads[place as usize] as usize..heads[place as usize + 1] as usize])
    }

    /// Calls `found` for every place that clashes with this one; gives how many were looked at.
    #[inline]
    pub fn each(&self, place: u32, mut found: impl FnMut(u32)) -> usize {
        if let Some(list) = self.list(place) {
            list.iter().for_each(|&other| found(other));
            return list.len();
        }
        let own = self.first + place;
        let mut looked = 0;
        for (cell, whole) in self.cells.around(self.cells.cell_of[own as usize]) {
            let range = self.cells.starts[cell as usize]..self.cells.starts[cell as usize + 1];
            looked += range.len();
            for other in range {
                if other != own && (whole || self.space.clash(own as usize, other as usize)) {
                    found(other - self.first);
                }
            }
        }
        looked
    }

    /// Whether two places clash.
    pub fn clash(&self, a: u32, b: u32) -> bool {
        self.space.clash((self.first + a) as usize, (self.first + b) as usize)
    }

    /// Whether places lie so close together that all of them surely clash.
    pub fn huddled(&self, places: &[u32]) -> bool {
        let (low, high) = corners(places.iter().map(|&p| self.point(p)));
        square_between(&low, &high) < self.space.settling.0
    }

    /// The point of a place.
    pub fn point(&self, place: u32) -> &[f64; 3] {
        &self.space.points[(self.first + place) as usize]
    }

    /// A place that clashes with this one, drawn at random; `None` when a few draws find none.
    pub fn any_clashing(&self, place: u32, stream: &mut Stream) -> Option<u32> {
        if let Some(list) = self.list(place) {
            return (!list.is_empty()).then(|| list[stream.below(list.len())]);
        }
        let own = self.first + place;
        let home = self.cells.cell_of[own as usize];
        (0..8).find_map(|_| {
            let cell = self.cells.any_around(home, stream);
            let other =
                self.cells.starts[cell as usize] + stream.below(self.cells.size(cell) as usize) as u32;
            (other != own && self.space.clash(own as usize, other as usize)).then_some(other - self.first)
        })
    }

    /// More places than this no choice can keep.
    pub fn bound(&self) -> usize {
        if self.cells.tight { self.cubes } else { self.len }
    }
}
