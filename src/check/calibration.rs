//! Whether a surface is too steep or too flat: the slope of held-out counts on its logarithm.
//!
//! # Formula
//! Counts by cell are Poisson with mean area·exp(a + s·ln f). Given the background, the likelihood
//! depends on the counts only through Σn and Σn·ln f, so s solves mean of ln f over units =
//! Σ area·fˢ·ln f ÷ Σ area·fˢ.
//!
//! # Source
//! Miller, M. E., Hui, S. L. & Tierney, W. M. (1991), Statistics in Medicine 10, 1213–1226 (the
//! calibration slope, there for logistic regression); the reduction is algebra.

use crate::maths::float;
use crate::maths::sum::par_sums;

/// Bins of the compressed background used for resampling.
const BINS: usize = 2048;

/// The background against which a slope is found.
pub struct Slope {
    logs: Vec<f64>,
    weights: Vec<f64>,
}

impl Slope {
    /// A background of logarithms of the surface and cell areas.
    pub fn new(logs: Vec<f64>, weights: Vec<f64>) -> Self {
        Self { logs, weights }
    }

    /// The slope for a mean logarithm over held-out units; `None` when the surface is flat or no
    /// finite slope fits.
    pub fn solve(&self, mean: f64) -> Option<f64> {
        if self.logs.len() <= BINS {
            return self.newton(mean, 1.0);
        }
        // the bins bring the search so near that one or two looks at all cells are enough
        let near = self.compressed().newton(mean, 1.0)?;
        self.newton(mean, near)
    }

    /// Newton's method from a first slope.
    fn newton(&self, mean: f64, from: f64) -> Option<f64> {
        let mut slope = from;
        let (low, high) = (self.logs.iter().copied().fold(f64::MAX, f64::min), self.highest());
        if !(mean > low && mean < high) {
            return None;
        }
        for _ in 0..100 {
            let [mass, first, second] = par_sums(self.logs.len(), |i, sums| {
                // relative to the top, so that no power overflows
                let reference = if slope > 0.0 { high } else { low };
                let w = self.weights[i] * float::exp(slope * (self.logs[i] - reference));
                sums[0] += w;
                sums[1] += w * self.logs[i];
                sums[2] += w * self.logs[i] * self.logs[i];
            });
            let centre = first / mass;
            let variance = second / mass - centre * centre;
            let step = ((mean - centre) / variance.max(1e-12)).clamp(-1.0, 1.0);
            slope += step;
            if step.abs() < 1e-10 * slope.abs().max(1.0) {
                return Some(slope);
            }
        }
        None
    }

    /// The logarithms and areas it was made of.
    pub(super) fn into_parts(self) -> (Vec<f64>, Vec<f64>) {
        (self.logs, self.weights)
    }

    fn highest(&self) -> f64 {
        self.logs.iter().copied().fold(f64::MIN, f64::max)
    }

    /// The same background in bins, each with its mean logarithm: fast enough for resampling.
    pub fn compressed(&self) -> Self {
        let (low, high) = (self.logs.iter().copied().fold(f64::MAX, f64::min), self.highest());
        let width = ((high - low) / BINS as f64).max(f64::MIN_POSITIVE);
        let (mut mass, mut first) = (vec![0.0; BINS], vec![0.0; BINS]);
        for (log, weight) in self.logs.iter().zip(&self.weights) {
            let bin = (((log - low) / width) as usize).min(BINS - 1);
            mass[bin] += weight;
            first[bin] += weight * log;
        }
        let filled: Vec<usize> = (0..BINS).filter(|b| mass[*b] > 0.0).collect();
        Self {
            logs: filled.iter().map(|&b| first[b] / mass[b]).collect(),
            weights: filled.iter().map(|&b| mass[b]).collect(),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Computed with statsmodels 0.15.0, Poisson GLM of the counts on ln(prediction).
    #[test]
    fn matches_the_reference_library() {
        let predictions = [0.5, 1.0, 2.0, 4.0, 8.0, 3.0, 1.5, 0.8];
        let counts = [1.0, 0.0, 3.0, 5.0, 6.0, 2.0, 2.0, 0.0];
        let logs: Vec<f64> = predictions.iter().map(|p| float::ln(*p)).collect();
        let total: f64 = counts.iter().sum();
        let mean = counts.iter().zip(&logs).map(|(n, l)| n * l).sum::<f64>() / total;
        let slope = Slope::new(logs, vec![1.0; 8]);
        assert!((slope.solve(mean).unwrap() - 0.930_086).abs() < 1e-6);
        assert!((slope.compressed().solve(mean).unwrap() - 0.930_086).abs() < 1e-6);
    }
}
