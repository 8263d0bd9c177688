//! Chance that a held-out unit's cell outranks a cell drawn by area from the region, ties half.
//!
//! # Source
//! Hanley, J. A. & McNeil, B. J. (1982), Radiology 143, 29–36; with weights as in a weighted
//! Mann–Whitney statistic.

use rayon::prelude::*;

/// The values of a surface over the region, sorted, with the area at or below each.
pub struct Background {
    values: Vec<f64>,
    /// Area below each place in the order; one more than there are values.
    below: Vec<f64>,
}

impl Background {
    /// Sorts a surface.
    pub fn new(values: &[f64], areas: &[f64]) -> Self {
        let mut order: Vec<(f64, f64)> = values.iter().copied().zip(areas.iter().copied()).collect();
        order.par_sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)));
        let mut below = Vec::with_capacity(order.len() + 1);
        let mut total = 0.0;
        below.push(0.0);
        for (_, area) in &order {
            total += area;
            below.push(total);
        }
        Self { values: order.into_iter().map(|o| o.0).collect(), below }
    }

    /// Share of the area that a value outranks, ties half.
    pub fn placement(&self, value: f64) -> f64 {
        let low = self.values.partition_point(|v| *v < value);
        let high = self.values.partition_point(|v| *v <= value);
        0.5 * (self.below[low] + self.below[high]) / self.below[self.values.len()]
    }
}

/// AUC of weighted held-out values against weighted background values.
pub fn auc(held: &[(f64, f64)], values: &[f64], areas: &[f64]) -> f64 {
    let background = Background::new(values, areas);
    let weight: f64 = held.iter().map(|h| h.1).sum();
    held.iter().map(|(v, w)| w * background.placement(*v)).sum::<f64>() / weight
}

#[cfg(test)]
mod tests {
    use super::*;

    const P: [f64; 6] = [0.9, 0.8, 0.8, 0.6, 0.5, 0.3];
    const B: [f64; 8] = [0.7, 0.8, 0.5, 0.5, 0.4, 0.3, 0.2, 0.1];

    /// Computed with scikit-learn 1.9.1 `roc_auc_score(sample_weight=…)`.
    #[test]
    fn matches_the_reference_library() {
        let even: Vec<(f64, f64)> = P.iter().map(|p| (*p, 1.0)).collect();
        assert!((auc(&even, &B, &[1.0; 8]) - 0.760_416_667).abs() < 1e-9);
        let weighted: Vec<(f64, f64)> = P.iter().copied().zip([1.0, 2.0, 1.0, 1.0, 3.0, 1.0]).collect();
        let areas = [1.0, 1.0, 2.0, 1.0, 1.0, 4.0, 2.0, 1.0];
        assert!((auc(&weighted, &B, &areas) - 0.811_965_812).abs() < 1e-9);
    }
}
