//! Caps: no observer, and no data set, weighs more than a share of the whole.
//!
//! Visits without an observer (or data set) are nobody's and are never capped.

use crate::diag::{Diagnostic, Outcome};

use super::settings::{CapPlan, Count};
use super::shares::{datasets_of, weight};
use super::units::Unit;
use super::visits::Sorted;

/// Rounds after which two caps that do not settle are given up.
const ROUNDS: usize = 2_000;
/// A share this much above its cap, relatively, is within it.
const SLACK: f64 = 1e-9;
/// As many capped groups are told one by one.
const TOLD: usize = 10;

/// Whose each unit is, and what it weighs before any cap.
#[derive(Debug)]
pub struct Groups {
    cap: CapPlan,
    base: Vec<f64>,
    /// Each unit's observer, one a unit; where it stands.
    observer: Vec<(u32, f64)>,
    single: Vec<u32>,
    /// Where a unit's data sets begin in `dataset`.
    starts: Vec<u32>,
    dataset: Vec<(u32, f64)>,
}

/// What a cap did.
#[derive(Debug, Clone, PartialEq)]
pub struct Capped {
    /// `observer` or `dataset`.
    pub what: &'static str,
    /// The cap, as a share.
    pub cap: f64,
    /// How many observers or data sets there are, and how many of them weigh less for the cap.
    pub groups: (usize, usize),
    /// Share of the weight that is nobody's, after.
    pub unknown: f64,
    /// The heaviest of those capped: weight before, and what each of their units counts on average.
    pub heaviest: Vec<(f64, f64)>,
}

/// One kind of groups: the cap, and the groups of each unit with their shares in it.
struct Kind<'a> {
    what: &'static str,
    cap: f64,
    starts: &'a [u32],
    of: &'a [(u32, f64)],
    /// Groups, the unknown (0) counted.
    count: usize,
}

impl Kind<'_> {
    fn groups(&self, unit: &Unit) -> &[(u32, f64)] {
        let n = unit.number as usize;
        &self.of[self.starts[n] as usize..self.starts[n + 1] as usize]
    }

    /// Weight by group.
    fn totals(&self, units: &[Unit]) -> Vec<f64> {
        let mut by = vec![0.0; self.count];
        for unit in units {
            self.groups(unit).iter().for_each(|(g, share)| by[*g as usize] += unit.weight * share);
        }
        by
    }
}

impl Groups {
    /// The groups of all visits; `None` where the plan caps nothing.
    pub(super) fn new(cap: CapPlan, sorted: &Sorted, count: Count) -> Option<Self> {
        cap.observer.or(cap.dataset)?;
        let visits = &sorted.visits;
        let (mut starts, mut dataset) = (vec![0], Vec::new());
        for visit in 0..visits.len() {
            dataset.extend(datasets_of(sorted, visit));
            starts.push(dataset.len() as u32);
        }
        Some(Self {
            cap,
            base: visits.iter().map(|v| weight(v, count)).collect(),
            single: (0..=visits.len() as u32).collect(),
            observer: visits.iter().map(|v| (v.key.1, 1.0)).collect(),
            starts,
            dataset,
        })
    }

    fn kinds(&self) -> Vec<Kind<'_>> {
        let kind = |what, cap: Option<f64>, starts, of: &'_ [(u32, f64)]| {
            let count = of.iter().map(|(g, _)| *g as usize + 1).max().unwrap_or(1);
            cap.map(|cap| (what, cap, starts, count))
        };
        let observer = kind("observer", self.cap.observer, &self.single, &self.observer);
        let dataset = kind("dataset", self.cap.dataset, &self.starts, &self.dataset);
        let made = |k: Option<(&'static str, f64, _, usize)>, of| {
            k.map(|(what, cap, starts, count): (_, _, &Vec<u32>, _)| Kind { what, cap, starts, of, count })
        };
        made(observer, &self.observer[..]).into_iter().chain(made(dataset, &self.dataset[..])).collect()
    }

    /// Weighs all units of a study.
    ///
    /// # Errors
    /// When a cap cannot be met.
    pub(super) fn cap(&self, units: &mut [Unit]) -> Outcome<Vec<Capped>> {
        let kinds = self.kinds();
        let before: Vec<Vec<f64>> = kinds.iter().map(|k| k.totals(units)).collect();
        for (kind, totals) in kinds.iter().zip(&before) {
            let least = smallest(totals);
            if kind.cap < least * (1.0 - SLACK) {
                return Err(impossible(kind, totals, least).into());
            }
        }
        if !settle(units, &kinds, None) {
            return Err(at_odds(self.cap).into());
        }
        Ok(kinds.iter().zip(&before).map(|(kind, before)| told(kind, before, units)).collect())
    }

    /// Weighs a part of the units anew, from that part alone; a cap that the part cannot meet is
    /// loosened to the smallest it can.
    pub(super) fn weigh(&self, units: &mut [Unit]) {
        units.iter_mut().for_each(|u| u.weight = self.base[u.number as usize]);
        let kinds = self.kinds();
        let loose: Vec<f64> = kinds.iter().map(|k| smallest(&k.totals(units)).max(k.cap)).collect();
        settle(units, &kinds, Some(&loose));
    }
}

/// Groups with a name that weigh something.
fn known(totals: &[f64]) -> usize {
    totals.iter().skip(1).filter(|w| **w > 0.0).count()
}

/// The smallest cap that can be met: any where some weight is nobody's, else equal shares.
fn smallest(totals: &[f64]) -> f64 {
    let known = known(totals);
    if known == 0 || totals[0] > 0.0 { 0.0 } else { 1.0 / known as f64 }
}

/// Caps one kind after the other until all hold; `false` when they never do.
fn settle(units: &mut [Unit], kinds: &[Kind], loose: Option<&[f64]>) -> bool {
    for _ in 0..ROUNDS {
        let mut held = true;
        for (k, kind) in kinds.iter().enumerate() {
            let by = kind.totals(units);
            let limit = loose.map_or(kind.cap, |l| l[k]);
            let most = limit * by.iter().sum::<f64>() * (1.0 + SLACK);
            if by.iter().skip(1).all(|w| *w <= most) {
                continue;
            }
            held = false;
            let factor = factors(&by, limit);
            for unit in units.iter_mut() {
                unit.weight *=
                    kind.groups(unit).iter().map(|(g, share)| share * factor[*g as usize]).sum::<f64>();
            }
        }
        if held {
            return true;
        }
    }
    false
}

/// What to multiply each group's weight by so that none has more than `cap` of what is left.
///
/// # Formula
/// With the m heaviest groups capped, the total is T = (weight of the others) ÷ (1 − m·cap), and each of
/// the m weighs cap·T; m is the smallest for which the next group weighs no more than that.
///
/// # Source
/// Algebra: m·cap·T + others = T.
fn factors(by: &[f64], cap: f64) -> Vec<f64> {
    let mut groups: Vec<f64> = by[1..].iter().copied().filter(|w| *w > 0.0).collect();
    groups.sort_by(|a, b| b.total_cmp(a));
    let mut others: f64 = by.iter().sum();
    let mut most = f64::INFINITY;
    for (m, w) in groups.iter().enumerate() {
        let left = 1.0 - m as f64 * cap;
        // equal shares use up the whole: the lightest group's weight is then everyone's
        most = if left > 1e-12 { cap * others / left } else { *w };
        if *w <= most * (1.0 + 1e-15) {
            break;
        }
        others -= w;
        if m + 1 == groups.len() {
            // all are capped: what is left is nobody's, or all weigh the same
            let left = 1.0 - (m + 1) as f64 * cap;
            most = if left > 1e-12 { cap * others.max(0.0) / left } else { *w };
        }
    }
    let named = by[1..].iter().map(|w| if *w <= most { 1.0 } else { most / w });
    std::iter::once(1.0).chain(named).collect()
}

fn told(kind: &Kind, before: &[f64], units: &[Unit]) -> Capped {
    let after = kind.totals(units);
    let total: f64 = after.iter().sum();
    let mut capped: Vec<(f64, f64)> = (1..before.len())
        .filter(|g| after[*g] < before[*g] * (1.0 - SLACK))
        .map(|g| (before[g], after[g] / before[g]))
        .collect();
    capped.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.total_cmp(&b.1)));
    let groups = (known(before), capped.len());
    capped.truncate(TOLD);
    Capped { what: kind.what, cap: kind.cap, groups, unknown: after[0] / total, heaviest: capped }
}

fn percent(share: f64) -> String {
    format!("{} %", (share * 10_000.0).round() / 100.0)
}

fn impossible(kind: &Kind, totals: &[f64], least: f64) -> Diagnostic {
    let known = known(totals);
    let what = match (kind.what, known) {
        ("observer", 1) => "observer",
        ("observer", _) => "observers",
        (_, 1) => "data set",
        _ => "data sets",
    };
    let text = format!(
        "{known} {what} cannot each weigh {} or less: the smallest cap that can be met is {}",
        percent(kind.cap),
        percent((least * 10_000.0).ceil() / 10_000.0)
    );
    Diagnostic::plan("cap_too_small", format!("[records] cap, {}", kind.what), text)
        .cure("raise the cap, or leave it out")
}

fn at_odds(cap: CapPlan) -> Diagnostic {
    let text = format!(
        "observers at {} and data sets at {} cannot both be met",
        percent(cap.observer.unwrap_or(1.0)),
        percent(cap.dataset.unwrap_or(1.0))
    );
    Diagnostic::plan("cap_too_small", "[records] cap", text).cure("raise one of them, or leave one out")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn check(weights: &[f64], cap: f64, expected: &[f64]) {
        let factor = factors(weights, cap);
        let after: Vec<f64> = weights.iter().zip(&factor).map(|(w, f)| w * f).collect();
        let close = after.iter().zip(expected).all(|(a, b)| (a - b).abs() < 1e-9);
        assert!(close, "{after:?} is not {expected:?}");
    }

    /// Worked by hand; the first weight is nobody's.
    #[test]
    fn the_heaviest_are_brought_down() {
        check(&[0.0, 100.0, 1.0, 1.0], 0.35, &[0.0, 0.35 * 2.0 / 0.65, 1.0, 1.0]);
        check(&[0.0, 60.0, 30.0, 10.0], 0.4, &[0.0, 10.0 / 0.2 * 0.4, 10.0 / 0.2 * 0.4, 10.0]);
        check(&[0.0, 60.0, 30.0, 10.0], 1.0 / 3.0, &[0.0, 10.0, 10.0, 10.0]);
        check(&[50.0, 40.0, 10.0], 0.25, &[50.0, 20.0, 10.0]);
        check(&[0.0, 3.0, 3.0, 4.0], 0.5, &[0.0, 3.0, 3.0, 4.0]);
        check(&[30.0, 40.0, 30.0], 0.2, &[30.0, 10.0, 10.0]);
    }
}
