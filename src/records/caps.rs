//! Caps: no observer, and no data set, weighs more than a share of the whole.
//!
//! Visits without an observer (or data set) are nobody's and are never capped.

use std::collections::BTreeMap;

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
    observer: Vec<u32>,
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

/// The groups of a unit with its share in each.
type Shares<'a> = Box<dyn Fn(&Unit) -> Vec<(u32, f64)> + 'a>;

/// One kind of groups: the cap, and the groups of each unit with their shares in it.
struct Kind<'a> {
    what: &'static str,
    cap: f64,
    of: Shares<'a>,
}

impl Groups {
    /// The groups of all visits; `None` where the plan caps nothing.
    pub(super) fn new(cap: CapPlan, sorted: &Sorted, count: Count) -> Option<Self> {
        cap.observer.or(cap.dataset)?;
        let mut groups = Self {
            cap,
            base: sorted.visits.iter().map(|v| weight(v, count)).collect(),
            observer: sorted.visits.iter().map(|v| v.key.1).collect(),
            starts: vec![0],
            dataset: Vec::new(),
        };
        for visit in 0..sorted.visits.len() {
            groups.dataset.extend(datasets_of(sorted, visit));
            groups.starts.push(groups.dataset.len() as u32);
        }
        Some(groups)
    }

    fn kinds(&self) -> Vec<Kind<'_>> {
        let datasets = |u: &Unit| {
            let n = u.number as usize;
            self.dataset[self.starts[n] as usize..self.starts[n + 1] as usize].to_vec()
        };
        let observer = self.cap.observer.map(|cap| Kind {
            what: "observer",
            cap,
            of: Box::new(|u: &Unit| vec![(self.observer[u.number as usize], 1.0)]),
        });
        let dataset = self.cap.dataset.map(|cap| Kind { what: "dataset", cap, of: Box::new(datasets) });
        observer.into_iter().chain(dataset).collect()
    }

    /// Weighs all units of a study.
    ///
    /// # Errors
    /// When a cap cannot be met.
    pub(super) fn cap(&self, units: &mut [Unit]) -> Outcome<Vec<Capped>> {
        let kinds = self.kinds();
        let before: Vec<BTreeMap<u32, f64>> = kinds.iter().map(|k| totals(units, &k.of)).collect();
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
        let loose: Vec<f64> = kinds.iter().map(|k| smallest(&totals(units, &k.of)).max(k.cap)).collect();
        settle(units, &kinds, Some(&loose));
    }
}

/// Weight by group.
fn totals(units: &[Unit], of: &dyn Fn(&Unit) -> Vec<(u32, f64)>) -> BTreeMap<u32, f64> {
    let mut by = BTreeMap::new();
    for unit in units {
        of(unit).iter().for_each(|(g, share)| *by.entry(*g).or_insert(0.0) += unit.weight * share);
    }
    by
}

/// The smallest cap that can be met: any where some weight is nobody's, else equal shares.
fn smallest(totals: &BTreeMap<u32, f64>) -> f64 {
    let known = totals.iter().filter(|(g, w)| **g > 0 && **w > 0.0).count();
    if known == 0 || totals.get(&0).is_some_and(|w| *w > 0.0) { 0.0 } else { 1.0 / known as f64 }
}

/// Caps one kind after the other until all hold; `false` when they never do.
fn settle(units: &mut [Unit], kinds: &[Kind], loose: Option<&[f64]>) -> bool {
    let cap = |k: usize| loose.map_or(kinds[k].cap, |l| l[k]);
    for _ in 0..ROUNDS {
        let mut held = true;
        for (k, kind) in kinds.iter().enumerate() {
            let by = totals(units, &kind.of);
            let total: f64 = by.values().sum();
            let limit = cap(k);
            if by.iter().all(|(g, w)| *g == 0 || *w <= limit * total * (1.0 + SLACK)) {
                continue;
            }
            held = false;
            let factor = factors(&by, limit);
            for unit in units.iter_mut() {
                unit.weight *= (kind.of)(unit).iter().map(|(g, share)| share * factor[g]).sum::<f64>();
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
fn factors(by: &BTreeMap<u32, f64>, cap: f64) -> BTreeMap<u32, f64> {
    let mut groups: Vec<(u32, f64)> = by.iter().filter(|(g, _)| **g > 0).map(|(g, w)| (*g, *w)).collect();
    groups.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.cmp(&b.0)));
    let mut others: f64 = by.values().sum();
    let mut most = f64::INFINITY;
    for (m, (_, w)) in groups.iter().enumerate() {
        let left = 1.0 - m as f64 * cap;
        // equal shares use up the whole: the lightest group's weight is then everyone's
        most = if left > 1e-12 { cap * others / left } else { *w };
        if *w <= most * (1.0 + 1e-15) {
            break;
        }
        others -= w;
    }
    by.iter().map(|(g, w)| (*g, if *g == 0 || *w <= most { 1.0 } else { most / w })).collect()
}

fn told(kind: &Kind, before: &BTreeMap<u32, f64>, units: &[Unit]) -> Capped {
    let after = totals(units, &kind.of);
    let total: f64 = after.values().sum();
    let known = |by: &BTreeMap<u32, f64>| by.iter().filter(|(g, _)| **g > 0).count();
    let mut capped: Vec<(f64, f64)> = before
        .iter()
        .filter(|(g, w)| **g > 0 && after[g] < **w * (1.0 - 1e-9))
        .map(|(g, w)| (*w, after[g] / w))
        .collect();
    capped.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.total_cmp(&b.1)));
    let groups = (known(before), capped.len());
    capped.truncate(TOLD);
    Capped {
        what: kind.what,
        cap: kind.cap,
        groups,
        unknown: after.get(&0).map_or(0.0, |w| w / total),
        heaviest: capped,
    }
}

fn percent(share: f64) -> String {
    format!("{} %", (share * 10_000.0).round() / 100.0)
}

fn impossible(kind: &Kind, totals: &BTreeMap<u32, f64>, least: f64) -> Diagnostic {
    let known = totals.iter().filter(|(g, _)| **g > 0).count();
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
        let by: BTreeMap<u32, f64> = weights.iter().enumerate().map(|(i, w)| (i as u32, *w)).collect();
        let factor = factors(&by, cap);
        let after: Vec<f64> = by.iter().map(|(g, w)| w * factor[g]).collect();
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
    }
}
