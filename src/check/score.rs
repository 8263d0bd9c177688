//! The four scores of a candidate, by fold and pooled.

use crate::grid::Region;
use crate::maths::float;
use crate::records::{Blocks, HeldOut, Unit};

use super::auc::Background;
use super::boyce::{WINDOWS, Windows};
use super::calibration::Slope;

/// Four scores; `None` where a score is not defined (a flat surface has no slope).
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Scores {
    /// Mean log density over uniform at held-out units, nats.
    pub log_score: Option<f64>,
    /// Chance to outrank a cell drawn by area.
    pub auc: Option<f64>,
    /// Continuous Boyce index.
    pub boyce: Option<f64>,
    /// Calibration slope.
    pub calibration_slope: Option<f64>,
}

/// Scores of one fold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FoldScores {
    /// Fold, from 1.
    pub fold: usize,
    /// Weight of its held-out units.
    pub units: f64,
    /// Its scores.
    pub scores: Scores,
}

/// One held-out unit under its own fold's surface.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct UnitScore {
    /// Number of the unit among all units.
    pub unit: usize,
    /// Fold, from 1.
    pub fold: usize,
    /// The unit.
    pub what: Unit,
    /// Density over uniform at its cell.
    pub density: f64,
    /// ln of it.
    pub log_density: f64,
    /// Share of the area it outranks.
    pub placement: f64,
}

/// All that is known of a candidate on held-out units; what resampling needs, by block.
pub struct CandidateScores {
    /// By fold.
    pub folds: Vec<FoldScores>,
    /// Over all held-out units.
    pub pooled: Scores,
    /// Unit by unit, in the order of the units.
    pub units: Vec<UnitScore>,
    /// Weight of units by block with units.
    pub(super) weight: Vec<f64>,
    pub(super) log: Vec<f64>,
    pub(super) placement: Vec<f64>,
    pub(super) windows: Vec<Vec<f64>>,
    pub(super) expected: Vec<f64>,
    pub(super) slope: Slope,
}

/// Scores the surfaces of a candidate, one per fold, each on its own held-out units.
pub fn score(surfaces: &[Vec<f64>], held: &[HeldOut], region: &Region, blocks: &Blocks) -> CandidateScores {
    let folds: Vec<OneFold> =
        surfaces.iter().zip(held).enumerate().map(|(k, (s, h))| OneFold::new(k + 1, s, h, region)).collect();
    let mut units: Vec<UnitScore> = folds.iter().flat_map(|f| f.units.iter().copied()).collect();
    units.sort_unstable_by_key(|u| u.unit);
    let total: f64 = units.iter().map(|u| u.what.weight).sum();

    let (low, high) = range(surfaces.iter().flatten());
    let windows = Windows::over(low, high);
    let mut expected = vec![0.0; WINDOWS];
    if let Some(w) = windows {
        for (fold, surface) in folds.iter().zip(surfaces) {
            let share = fold.weight / total;
            let by_area = w.expected(surface, region.areas());
            expected.iter_mut().zip(by_area).for_each(|(e, a)| *e += share * a);
        }
    }
    let (folds, slope) = pooled_slope(folds);
    let by_block = ByBlock::new(&units, blocks, windows);
    let mean_log = by_block.log.iter().sum::<f64>() / total;
    let observed: Vec<f64> = (0..WINDOWS).map(|w| by_block.windows.iter().map(|b| b[w]).sum()).collect();
    let pooled = Scores {
        log_score: Some(mean_log),
        auc: Some(by_block.placement.iter().sum::<f64>() / total),
        boyce: windows.and_then(|_| Windows::index(&observed, &expected)),
        calibration_slope: slope.solve(mean_log),
    };
    CandidateScores {
        folds: folds.iter().map(|f| FoldScores { fold: f.fold, units: f.weight, scores: f.scores }).collect(),
        pooled,
        units,
        weight: by_block.weight,
        log: by_block.log,
        placement: by_block.placement,
        windows: by_block.windows,
        expected,
        slope: slope.compressed(),
    }
}

/// Smallest and largest of the values.
fn range<'a>(values: impl Iterator<Item = &'a f64>) -> (f64, f64) {
    values.fold((f64::MAX, f64::MIN), |(l, h), v| (l.min(*v), h.max(*v)))
}

/// Cells and areas of a fold's background for calibration: its own cells where blocks are held out.
/// A cell without weight has no logarithm, and no unit is expected there at any slope.
fn background(surface: &[f64], held: &HeldOut, region: &Region) -> (Vec<f64>, Vec<f64>) {
    (0..surface.len())
        .filter(|c| held.holds(*c) && surface[*c] > 0.0)
        .map(|c| (float::ln(surface[c]), region.areas()[c]))
        .unzip()
}

/// The backgrounds of all folds together.
fn pooled_slope(mut folds: Vec<OneFold>) -> (Vec<OneFold>, Slope) {
    let (mut logs, mut weights) = (Vec::new(), Vec::new());
    for fold in &mut folds {
        logs.append(&mut fold.background.0);
        weights.append(&mut fold.background.1);
    }
    (folds, Slope::new(logs, weights))
}

struct OneFold {
    fold: usize,
    weight: f64,
    scores: Scores,
    units: Vec<UnitScore>,
    /// Logarithms of the surface and areas, for calibration.
    background: (Vec<f64>, Vec<f64>),
}

impl OneFold {
    fn new(fold: usize, surface: &[f64], held: &HeldOut, region: &Region) -> Self {
        let sorted = Background::new(surface, region.areas());
        let units: Vec<UnitScore> = held
            .units()
            .iter()
            .map(|&(unit, what)| {
                let density = surface[what.cell as usize];
                let placement = sorted.placement(density);
                UnitScore { unit, fold, what, density, log_density: float::ln(density), placement }
            })
            .collect();
        let weight: f64 = units.iter().map(|u| u.what.weight).sum();
        let mean =
            |of: fn(&UnitScore) -> f64| units.iter().map(|u| u.what.weight * of(u)).sum::<f64>() / weight;
        let (low, high) = range(surface.iter());
        let boyce = Windows::over(low, high).and_then(|w| {
            let observed = w.fill(units.iter().map(|u| (u.density, u.what.weight)));
            Windows::index(&observed, &w.expected(surface, region.areas()))
        });
        let slope = {
            let (logs, areas) = background(surface, held, region);
            Slope::new(logs, areas)
        };
        let scores = Scores {
            log_score: Some(mean(|u| u.log_density)),
            auc: Some(mean(|u| u.placement)),
            boyce,
            calibration_slope: slope.solve(mean(|u| u.log_density)),
        };
        Self { fold, weight, scores, units, background: slope.into_parts() }
    }
}

/// Sums by block with units, in the order of the blocks.
struct ByBlock {
    weight: Vec<f64>,
    log: Vec<f64>,
    placement: Vec<f64>,
    windows: Vec<Vec<f64>>,
}

impl ByBlock {
    fn new(units: &[UnitScore], blocks: &Blocks, windows: Option<Windows>) -> Self {
        let mut lists: Vec<Vec<&UnitScore>> = vec![Vec::new(); blocks.count];
        units.iter().for_each(|u| lists[blocks.of_cell[u.what.cell as usize] as usize].push(u));
        lists.retain(|l| !l.is_empty());
        let sums = |of: &dyn Fn(&UnitScore) -> f64| {
            lists.iter().map(|l| l.iter().map(|u| u.what.weight * of(u)).sum()).collect()
        };
        Self {
            weight: sums(&|_| 1.0),
            log: sums(&|u| u.log_density),
            placement: sums(&|u| u.placement),
            windows: lists
                .iter()
                .map(|l| {
                    windows.map_or_else(
                        || vec![0.0; WINDOWS],
                        |w| w.fill(l.iter().map(|u| (u.density, u.what.weight))),
                    )
                })
                .collect(),
        }
    }
}
