//! The standing of the candidates: scores with intervals, differences from the best, the choice.

use crate::maths::rank::central_95;
use crate::units::Seed;

use super::bootstrap::{Resamples, total};
use super::boyce::{WINDOWS, Windows};
use super::score::{CandidateScores, Scores};

/// A figure with its 95 % interval; `None` where it is not defined.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Estimate {
    /// The figure.
    pub value: Option<f64>,
    /// Its interval.
    pub interval: Option<(f64, f64)>,
}

/// Where one candidate stands.
#[derive(Debug, Clone, PartialEq)]
pub struct Standing {
    /// Number in the order given.
    pub candidate: usize,
    /// Rank by log score, from 1.
    pub rank: usize,
    /// Log score, AUC, Boyce index, calibration slope.
    pub scores: [Estimate; 4],
    /// Difference in log score from the best.
    pub versus_best: Estimate,
    /// Whether the interval of that difference leaves out 0.
    pub distinguishable: bool,
}

/// The standing of all candidates, and which to use.
#[derive(Debug, Clone, PartialEq)]
pub struct Verdict {
    /// In the order given.
    pub standings: Vec<Standing>,
    /// The candidate to use: the simplest of those not distinguishable from the best.
    pub chosen: usize,
}

/// Ranks candidates; `complexity` is the number of fitted parameters of each.
pub fn judge(candidates: &[&CandidateScores], complexity: &[usize], resamples: usize, seed: Seed) -> Verdict {
    let draws = Resamples::draw(candidates[0].weight.len(), resamples, seed);
    let log = |c: &CandidateScores| c.pooled.log_score.unwrap_or(f64::NEG_INFINITY);
    let mut order: Vec<usize> = (0..candidates.len()).collect();
    order.sort_by(|a, b| log(candidates[*b]).total_cmp(&log(candidates[*a])));
    let best = order[0];
    let standings: Vec<Standing> = candidates
        .iter()
        .enumerate()
        .map(|(i, c)| {
            let versus_best = difference(c, candidates[best], &draws);
            // a surface that gave a held-out unit no weight at all is infinitely worse
            let apart = versus_best.value == Some(f64::NEG_INFINITY)
                || versus_best.interval.is_some_and(|(low, high)| high < 0.0 || low > 0.0);
            Standing {
                candidate: i,
                rank: order.iter().position(|o| *o == i).map_or(0, |r| r + 1),
                scores: intervals(c, &draws),
                versus_best,
                distinguishable: i != best && apart,
            }
        })
        .collect();
    let chosen = *order
        .iter()
        .filter(|i| !standings[**i].distinguishable)
        .min_by_key(|i| complexity[**i])
        .expect("the best is among them");
    Verdict { standings, chosen }
}

/// Difference in log score, resampled on the same blocks.
fn difference(a: &CandidateScores, b: &CandidateScores, draws: &Resamples) -> Estimate {
    let by_block: Vec<f64> = a.log.iter().zip(&b.log).map(|(a, b)| a - b).collect();
    let weight: f64 = a.weight.iter().sum();
    Estimate {
        value: Some(by_block.iter().sum::<f64>() / weight),
        interval: central_95(draws.each(|n| total(n, &by_block) / total(n, &a.weight))),
    }
}

/// Each score with its interval.
fn intervals(c: &CandidateScores, draws: &Resamples) -> [Estimate; 4] {
    let resampled: Vec<Scores> = draws.each(|n| resampled(c, n));
    let estimate = |value: Option<f64>, of: fn(&Scores) -> Option<f64>| Estimate {
        value,
        interval: value.and_then(|_| central_95(resampled.iter().filter_map(of).collect())),
    };
    [
        estimate(c.pooled.log_score, |s| s.log_score),
        estimate(c.pooled.auc, |s| s.auc),
        estimate(c.pooled.boyce, |s| s.boyce),
        estimate(c.pooled.calibration_slope, |s| s.calibration_slope),
    ]
}

fn resampled(c: &CandidateScores, drawn: &[u16]) -> Scores {
    let weight = total(drawn, &c.weight);
    let mean_log = total(drawn, &c.log) / weight;
    let mut observed = vec![0.0; WINDOWS];
    for (n, block) in drawn.iter().zip(&c.windows).filter(|(n, _)| **n > 0) {
        observed.iter_mut().zip(block).for_each(|(o, b)| *o += f64::from(*n) * b);
    }
    Scores {
        log_score: Some(mean_log),
        auc: Some(total(drawn, &c.placement) / weight),
        boyce: c.pooled.boyce.and_then(|_| Windows::index(&observed, &c.expected)),
        calibration_slope: c.pooled.calibration_slope.and_then(|_| c.slope.solve(mean_log)),
    }
}
