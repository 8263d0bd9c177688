//! Continuous Boyce index.
//!
//! # Formula
//! 101 windows of one tenth of the range slide over the values of the surface; P is the share of
//! held-out units in a window (ends included), E the share of the region's area in it; the index is
//! Spearman's correlation of P/E with the window's position, windows without area left out.
//!
//! # Source
//! Boyce, M. S. et al. (2002), Ecological Modelling 157, 281–300; Hirzel, A. H. et al. (2006),
//! Ecological Modelling 199, 142–152. The number of windows is our convention.

use crate::maths::rank::spearman;
use crate::maths::sum::par_totals;

/// Number of windows.
pub const WINDOWS: usize = 101;

/// Windows over the range of a surface.
#[derive(Debug, Clone, Copy)]
pub struct Windows {
    low: f64,
    width: f64,
    step: f64,
}

impl Windows {
    /// Windows from the smallest to the largest value; `None` when they are equal.
    pub fn over(low: f64, high: f64) -> Option<Self> {
        let width = (high - low) / 10.0;
        let step = (high - low - width) / (WINDOWS - 1) as f64;
        (step > 0.0).then_some(Self { low, width, step })
    }

    /// The first and last window that hold a value.
    fn holding(&self, value: f64) -> (usize, usize) {
        // window edges tie with values written in decimals: a part in 1e9 counts as the edge
        let first = ((value - self.width - self.low) / self.step - 1e-9).ceil().max(0.0);
        let last = ((value - self.low) / self.step + 1e-9).floor().max(0.0);
        (first as usize, (last as usize).min(WINDOWS - 1))
    }

    /// Adds a weight to every window that holds a value, as differences between neighbours.
    fn note(&self, value: f64, weight: f64, differences: &mut [f64]) {
        let (first, last) = self.holding(value);
        if first <= last {
            differences[first] += weight;
            differences[last + 1] -= weight;
        }
    }

    /// Weight in each window.
    pub fn fill(&self, values: impl Iterator<Item = (f64, f64)>) -> Vec<f64> {
        let mut differences = vec![0.0; WINDOWS + 1];
        values.for_each(|(v, w)| self.note(v, w, &mut differences));
        running(&differences)
    }

    /// Share of the area in each window.
    pub fn expected(&self, values: &[f64], areas: &[f64]) -> Vec<f64> {
        let totals = par_totals(values.len(), WINDOWS + 2, |i, sums| {
            self.note(values[i], areas[i], sums);
            sums[WINDOWS + 1] += areas[i];
        });
        let total = totals[WINDOWS + 1];
        running(&totals[..=WINDOWS]).into_iter().map(|v| v / total).collect()
    }

    /// The index from the weight of held-out units and the expected share in each window.
    pub fn index(observed: &[f64], expected: &[f64]) -> Option<f64> {
        // what is left of cancelled sums is no area
        let least = expected.iter().copied().fold(0.0, f64::max) * 1e-12;
        let (position, ratio): (Vec<f64>, Vec<f64>) = observed
            .iter()
            .zip(expected)
            .enumerate()
            .filter(|(_, (_, e))| **e > least)
            .map(|(i, (o, e))| (i as f64, if *o > 1e-12 { o / e } else { 0.0 }))
            .unzip();
        Some(spearman(&position, &ratio)).filter(|r| r.is_finite())
    }
}

fn running(differences: &[f64]) -> Vec<f64> {
    let mut total = 0.0;
    differences[..WINDOWS]
        .iter()
        .map(|d| {
            total += d;
            total
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    const BACKGROUND: [f64; 35] = [
        0.01, 0.03, 0.05, 0.08, 0.10, 0.12, 0.15, 0.18, 0.20, 0.22, 0.25, 0.28, 0.30, 0.33, 0.35, 0.38, 0.40,
        0.42, 0.45, 0.48, 0.50, 0.52, 0.55, 0.58, 0.60, 0.62, 0.65, 0.68, 0.70, 0.75, 0.80, 0.85, 0.90, 0.95,
        0.99,
    ];
    const PRESENCES: [f64; 20] = [
        0.22, 0.35, 0.40, 0.45, 0.48, 0.55, 0.58, 0.62, 0.65, 0.68, 0.70, 0.75, 0.80, 0.85, 0.85, 0.90, 0.95,
        0.95, 0.99, 0.99,
    ];

    /// 0.9693 by a direct double loop in numpy with scipy's Spearman; ±0.005, as window edges tie.
    #[test]
    fn matches_the_worked_case() {
        let windows = Windows::over(0.01, 0.99).unwrap();
        let observed = windows.fill(PRESENCES.iter().map(|p| (*p, 1.0)));
        let expected = windows.expected(&BACKGROUND, &[1.0; 35]);
        let index = Windows::index(&observed, &expected).unwrap();
        assert!((index - 0.9693).abs() < 0.005, "{index}");
    }
}
