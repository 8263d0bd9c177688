//! Splits records into training and held-out parts.
//!
//! The two are types of their own, made only here: what is fitted takes the first, what scores
//! takes the second, so that a leak does not compile.

use std::sync::Arc;

use crate::diag::{Diagnostic, Outcome};
use crate::grid::Region;
use crate::maths::random::Stream;
use crate::units::Seed;

use super::blocks::Blocks;
use super::caps::Groups;
use super::holdout::Split;
use super::units::{Records, Unit};

/// What may be fitted to: units, and the cells in which they could have been.
#[derive(Debug, Clone)]
pub struct Training {
    region: Arc<Region>,
    units: Vec<Unit>,
    available: Option<Vec<bool>>,
    outings: bool,
    groups: Option<Arc<Groups>>,
}

impl Training {
    /// All records of the study.
    pub fn all(records: &Records, region: Arc<Region>) -> Self {
        let groups = records.groups.clone();
        Self { region, units: records.units.clone(), available: None, outings: records.outings, groups }
    }

    /// Caps are met inside the part alone.
    fn weighed(mut self) -> Self {
        if let Some(groups) = self.groups.clone() {
            groups.weigh(&mut self.units);
        }
        self
    }

    /// The region.
    pub fn region(&self) -> &Arc<Region> {
        &self.region
    }

    /// The units.
    pub fn units(&self) -> &[Unit] {
        &self.units
    }

    /// Whether a cell was observed; a held-out block was not.
    pub fn available(&self, cell: usize) -> bool {
        self.available.as_ref().is_none_or(|a| a[cell])
    }

    /// Whether every cell of the region was observed.
    pub fn whole(&self) -> bool {
        self.available.is_none()
    }

    /// Area in m² of a cell as far as it was observed.
    pub fn exposure(&self, cell: usize) -> f64 {
        if self.available(cell) { self.region.areas()[cell] } else { 0.0 }
    }

    /// Whether units of one outing can be told; else places take their part.
    pub fn outings(&self) -> bool {
        self.outings
    }

    /// Total weight of the units.
    pub fn weight(&self) -> f64 {
        crate::maths::sum::sum(self.units.iter().map(|u| u.weight))
    }

    /// Deals the units out once more, by outings (places where there are none), for what is tuned: each
    /// inner training part with the units left out of it. Nothing held out is touched.
    pub fn inner(&self, folds: usize, seed: Seed) -> Vec<(Self, Vec<Unit>)> {
        let group = |u: &Unit| if self.outings { u.outing } else { u.cell };
        let groups = self.units.iter().map(group).max().map_or(0, |m| m as usize + 1);
        let mut weights = vec![0.0; groups];
        self.units.iter().for_each(|u| weights[group(u) as usize] += u.weight);
        let of_group = balance(&weights, folds, &mut Stream::new(seed, "inner folds", 0));
        let part = |fold: usize| {
            let (left_out, units): (Vec<Unit>, Vec<Unit>) =
                self.units.iter().partition(|u| usize::from(of_group[group(u) as usize]) == fold);
            (Self { units, ..self.clone() }.weighed(), left_out)
        };
        (0..folds).map(part).filter(|(t, l)| !l.is_empty() && t.units.len() > 1).collect()
    }

    /// The cells that hold units, with the weight of the units in each, in the region's order.
    pub fn places(&self) -> Vec<(usize, f64)> {
        let mut units: Vec<(u32, f64)> = self.units.iter().map(|u| (u.cell, u.weight)).collect();
        units.sort_by_key(|u| u.0);
        units.chunk_by(|a, b| a.0 == b.0).map(|c| (c[0].0 as usize, c.iter().map(|u| u.1).sum())).collect()
    }
}

/// What may be scored on.
#[derive(Debug, Clone)]
pub struct HeldOut {
    units: Vec<(usize, Unit)>,
    cells: Option<Vec<bool>>,
}

impl HeldOut {
    /// The units, each with its number among all units of the study.
    pub fn units(&self) -> &[(usize, Unit)] {
        &self.units
    }

    /// Whether a cell belongs to the held-out part (every cell does, unless blocks are held out).
    pub fn holds(&self, cell: usize) -> bool {
        self.cells.as_ref().is_none_or(|c| c[cell])
    }
}

/// Which fold each unit, and for blocks each cell, is held out in; folds count from 0 here.
#[derive(Debug, Clone)]
pub struct Folds {
    /// Number of folds.
    pub count: usize,
    /// What was split: `random` takes the place of `outings` where there are none.
    pub split: Split,
    of_unit: Vec<u16>,
    of_cell: Option<Vec<u16>>,
}

impl Folds {
    /// Deals the records out to folds of about equal weight.
    ///
    /// # Errors
    /// When there are fewer outings, places or blocks with records than folds.
    pub fn deal(records: &Records, blocks: &Blocks, split: Split, count: usize, seed: Seed) -> Outcome<Self> {
        let split = if split == Split::Outings && !records.outings { Split::Random } else { split };
        if records.places < count {
            return Err(too_few(Split::Random, records.places, count).into());
        }
        let mut stream = Stream::new(seed, split.word(), 0);
        let group = |u: &Unit| match split {
            Split::Outings => u.outing,
            Split::Random => u.cell,
            Split::Blocks => blocks.of_cell[u.cell as usize],
        };
        let groups = records.units.iter().map(group).max().map_or(0, |m| m as usize + 1);
        let groups = if split == Split::Blocks { blocks.count } else { groups };
        let mut weights = vec![0.0; groups];
        records.units.iter().for_each(|u| weights[group(u) as usize] += u.weight);
        let filled = weights.iter().filter(|w| **w > 0.0).count();
        if filled < count {
            return Err(too_few(split, filled, count).into());
        }
        let of_group = balance(&weights, count, &mut stream);
        Ok(Self {
            count,
            split,
            of_unit: records.units.iter().map(|u| of_group[group(u) as usize]).collect(),
            of_cell: (split == Split::Blocks)
                .then(|| blocks.of_cell.iter().map(|&b| of_group[b as usize]).collect()),
        })
    }

    /// The fold a unit is held out in.
    pub fn of_unit(&self, unit: usize) -> usize {
        usize::from(self.of_unit[unit])
    }

    /// The fold a cell's block is held out in; `None` unless blocks are held out.
    pub fn of_cell(&self, cell: usize) -> Option<usize> {
        self.of_cell.as_ref().map(|f| usize::from(f[cell]))
    }

    /// The two parts of one fold.
    pub fn part(&self, fold: usize, records: &Records, region: &Arc<Region>) -> (Training, HeldOut) {
        let held = |i: usize| self.of_unit(i) == fold;
        let units = |keep: bool| records.units.iter().enumerate().filter(move |(i, _)| held(*i) == keep);
        let cells: Option<Vec<bool>> =
            self.of_cell.as_ref().map(|f| f.iter().map(|c| usize::from(*c) == fold).collect());
        let training = Training {
            region: Arc::clone(region),
            units: units(false).map(|(_, u)| *u).collect(),
            available: cells.as_ref().map(|c| c.iter().map(|held| !held).collect()),
            outings: records.outings,
            groups: records.groups.clone(),
        };
        (training.weighed(), HeldOut { units: units(true).map(|(i, u)| (i, *u)).collect(), cells })
    }
}

/// Deals groups to folds, heaviest first, each to the lightest fold so far.
fn balance(weights: &[f64], folds: usize, stream: &mut Stream) -> Vec<u16> {
    let mut order: Vec<usize> = (0..weights.len()).collect();
    stream.shuffle(&mut order);
    order.sort_by(|a, b| weights[*b].total_cmp(&weights[*a]));
    let mut load = vec![(0.0_f64, 0_u64); folds];
    let mut fold_of = vec![0; weights.len()];
    for group in order {
        // empty groups go where there are fewest groups
        let lightest = (0..folds)
            .min_by(|&a, &b| {
                let by_weight = load[a].0.total_cmp(&load[b].0);
                let by_number = load[a].1.cmp(&load[b].1);
                if weights[group] > 0.0 { by_weight.then(by_number) } else { by_number }
            })
            .expect("there is a fold");
        load[lightest].0 += weights[group];
        load[lightest].1 += 1;
        fold_of[group] = lightest as u16;
    }
    fold_of
}

fn too_few(split: Split, found: usize, folds: usize) -> Diagnostic {
    let (what, other) = match split {
        Split::Outings => ("outings (observer and date)", "choose another `split`"),
        Split::Random => ("places (cells with a record)", "use a finer grid"),
        Split::Blocks => ("blocks with records", "make `block` smaller"),
    };
    let text = match found {
        1 => format!(
            "the records make a single one of the {what}, so nothing can be held out ({folds} folds asked for)"
        ),
        _ => format!("{found} {what} cannot fill {folds} folds"),
    };
    let cure = match found {
        1 => format!("give more records, or {other}"),
        _ => format!("lower `folds` to {found} or fewer, or {other}"),
    };
    Diagnostic::input("too_few_to_hold_out", "[holdout] folds", text).cure(cure)
}

#[cfg(test)]
impl Training {
    /// A training part of units of weight 1 in these cells, each an outing of its own.
    pub(crate) fn of_cells(region: Arc<Region>, cells: &[u32]) -> Self {
        let unit = |(i, cell): (usize, &u32)| Unit {
            number: i as u32,
            cell: *cell,
            weight: 1.0,
            outing: i as u32,
            uncertainty: f32::NAN,
            offset: [0.0; 2],
        };
        let units = cells.iter().enumerate().map(unit).collect();
        Self { region, units, available: None, outings: true, groups: None }
    }

    /// The same units in other outings.
    pub(crate) fn with_outings(mut self, outing: impl Fn(usize) -> u32) -> Self {
        self.units.iter_mut().enumerate().for_each(|(i, u)| u.outing = outing(i));
        self
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn folds_are_balanced() {
        let weights: Vec<f64> = (0..200).map(|i| f64::from(i % 7)).collect();
        let folds = balance(&weights, 5, &mut Stream::new(Seed(3), "test", 0));
        let mut load = [0.0; 5];
        folds.iter().zip(&weights).for_each(|(f, w)| load[usize::from(*f)] += w);
        let (low, high) = load.iter().fold((f64::MAX, 0.0_f64), |(l, h), &v| (l.min(v), h.max(v)));
        assert!(high - low <= 6.0, "{load:?}");
    }
}
