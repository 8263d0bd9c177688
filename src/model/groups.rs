//! Units on a kernel lattice, grouped by what is left out together when a bandwidth is tuned.

use std::collections::BTreeMap;

use crate::maths::float;
use crate::maths::sum::sum;
use crate::records::{Training, Unit, median_uncertainty};

use super::lattice::{Lattice, Power, Spot, Taps};

/// A lattice step is doubled while the bandwidth spans at least this many of the doubled steps.
const CELLS_PER_BANDWIDTH: f64 = 4.0;
/// Groups of more places than this are taken out by a pass of their own rather than pair by pair.
const PAIRWISE: usize = 256;

/// The units of a training part on one lattice.
pub(super) struct Groups {
    pub lattice: Lattice,
    /// The spots that hold units.
    pub spots: Vec<Spot>,
    /// Weight of the units at each.
    pub weights: Vec<f64>,
    /// Outings (places where there are none): number of the spot, and weight there.
    pub groups: Vec<Vec<(usize, f64)>>,
    /// Observed area, m².
    pub area: f64,
}

impl Groups {
    pub(super) fn new(training: &Training, step: usize) -> Self {
        let lattice = Lattice::new(training, step);
        let key = |u: &Unit| if training.outings() { u.outing } else { u.cell };
        let mut units: Vec<(u32, Spot, f64)> = training
            .units()
            .iter()
            .map(|u| (key(u), lattice.spot(training, u.cell as usize), u.weight))
            .collect();
        units.sort_by_key(|u| (u.0, u.1));
        let mut spots: Vec<Spot> = units.iter().map(|u| u.1).collect();
        spots.sort_unstable();
        spots.dedup();
        let number = |spot: &Spot| spots.binary_search(spot).expect("every spot is listed");
        let mut weights = vec![0.0; spots.len()];
        let groups: Vec<Vec<(usize, f64)>> = units
            .chunk_by(|a, b| a.0 == b.0)
            .map(|group| {
                let by_spot = group.chunk_by(|a, b| a.1 == b.1);
                by_spot.map(|same| (number(&same[0].1), same.iter().map(|u| u.2).sum())).collect()
            })
            .collect();
        groups.iter().flatten().for_each(|(i, w): &(usize, f64)| weights[*i] += w);
        let area = sum((0..training.region().len()).map(|c| training.exposure(c)));
        Self { lattice, spots, weights, groups, area }
    }

    /// What a group itself adds to the field at each of its spots, its weights over `divisors`.
    pub(super) fn own(&self, group: &[(usize, f64)], divisors: &[f64], taps: &Taps) -> Vec<f64> {
        if group.len() > PAIRWISE {
            let spots: Vec<Spot> = group.iter().map(|(i, _)| self.spots[*i]).collect();
            let weights: Vec<f64> = group.iter().map(|(i, w)| w / divisors[*i]).collect();
            let field = self.lattice.spread(taps.sigma, &spots, &weights, Power::One);
            return spots.iter().map(|s| field[*s]).collect();
        }
        let from = |i: usize| {
            group
                .iter()
                .map(|(j, w)| w / divisors[*j] * self.lattice.kernel(taps, self.spots[i], self.spots[*j]))
                .sum()
        };
        group.iter().map(|(i, _)| from(*i)).collect()
    }
}

/// The lattices of a search, coarser where the bandwidth is wide, each made once.
pub(super) struct Levels<'a> {
    training: &'a Training,
    cell: f64,
    made: BTreeMap<usize, Groups>,
}

impl<'a> Levels<'a> {
    pub(super) fn new(training: &'a Training) -> Self {
        Self { training, cell: training.region().grid().cell_side().get(), made: BTreeMap::new() }
    }

    /// The units on the lattice that suits a bandwidth in metres.
    pub(super) fn at(&mut self, bandwidth: f64) -> &Groups {
        let mut step = 1;
        while bandwidth / self.cell / (2 * step) as f64 >= CELLS_PER_BANDWIDTH {
            step *= 2;
        }
        self.made.entry(step).or_insert_with(|| Groups::new(self.training, step))
    }

    /// Bandwidths worth trying: from the larger of a cell and the median uncertainty to half the region.
    pub(super) fn range(&self) -> (f64, f64) {
        let half = self.training.region().larger_side() / 2.0;
        let least = median_uncertainty(self.training.units()).map_or(self.cell, |u| u.get().max(self.cell));
        let least = least.min(half);
        (least, half.max(least * 1.001))
    }
}

/// Logarithms of a range.
pub(super) fn logs((low, high): (f64, f64)) -> (f64, f64) {
    (float::ln(low), float::ln(high))
}
