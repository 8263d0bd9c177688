//! Standard errors of an access fit that allow the records of one block to depend on each other.
//!
//! # Formula
//! Sandwich: I⁻¹ (Σ_blocks s_b s_bᵀ) I⁻¹ · B/(B − 1), I the Fisher information, s_b the scores of the
//! units of block b less what the fit expects there.
//!
//! # Source
//! Liang, K.-Y. & Zeger, S. L. (1986), Biometrika 73, 13–22.

use crate::maths::linear;
use crate::maths::quantile::student_975;
use crate::maths::sum::sum;
use crate::records::Blocks;

use super::access::{Cells, MOST, Model};

impl Model<'_> {
    /// Standard errors of the parameters from sums of scores by block; `None` where a parameter is
    /// given or lies at a bound.
    pub(super) fn standard_errors(&self, at: &[f64], blocks: &Blocks) -> Vec<Option<f64>> {
        let n = self.width();
        let ranges = self.ranges(1.0);
        let inner: Vec<usize> =
            (0..n).filter(|&k| ranges[k].is_some_and(|r| at[k] > r.low && at[k] < r.high)).collect();
        let (information, sums) = self.block_scores(at, blocks, &inner);
        let m = inner.len();
        let mut meat = vec![0.0; m * m];
        for block in sums.chunks_exact(m.max(1)) {
            for a in 0..m {
                for b in 0..m {
                    meat[a * m + b] += block[a] * block[b];
                }
            }
        }
        let mut errors = vec![None; n];
        if blocks.count < 2 {
            return errors;
        }
        let correction = blocks.count as f64 / (blocks.count - 1) as f64;
        if let Some(bread) = linear::inverse(&information, m) {
            for (a, &k) in inner.iter().enumerate() {
                let row = &bread[a * m..(a + 1) * m];
                let variance: f64 = (0..m)
                    .flat_map(|i| (0..m).map(move |j| (i, j)))
                    .map(|(i, j)| row[i] * meat[i * m + j] * row[j])
                    .sum();
                errors[k] = Some((variance * correction).sqrt());
            }
        }
        errors
    }

    /// How many standard errors the half of a 95 % interval spans: Student's t with one degree of freedom
    /// less than there are blocks with units, as few blocks tell their own variance badly.
    pub(super) fn width_of_interval(&self, blocks: &Blocks) -> f64 {
        let mut filled: Vec<u32> = self.places.iter().map(|(c, _)| blocks.of_cell[*c]).collect();
        filled.sort_unstable();
        filled.dedup();
        student_975(filled.len().max(2) - 1)
    }

    /// Fisher information, and by block the sum of scores of its units less what was expected.
    fn block_scores(&self, at: &[f64], blocks: &Blocks, inner: &[usize]) -> (Vec<f64>, Vec<f64>) {
        let ready = self.ready(at);
        let moments = self.moments(&ready, &Cells::All(self.exposure.len()));
        let (m, base) = (inner.len(), at[self.width() - 1]);
        let area = sum(self.exposure.iter().copied());
        let mut information = vec![0.0; m * m];
        let mut sums = vec![0.0; m * blocks.count];
        let mut scores = [0.0; MOST];
        for cell in 0..self.exposure.len() {
            let f = self.score(cell, base, (&ready, &moments), &mut scores);
            let expected = self.total * self.exposure[cell] * f / area;
            let block = blocks.of_cell[cell] as usize * m;
            for (a, &k) in inner.iter().enumerate() {
                sums[block + a] -= expected * scores[k];
                for (b, &l) in inner.iter().enumerate() {
                    information[a * m + b] += expected * scores[k] * scores[l];
                }
            }
        }
        for &(cell, weight) in &self.places {
            self.score(cell, base, (&ready, &moments), &mut scores);
            let block = blocks.of_cell[cell] as usize * m;
            inner.iter().enumerate().for_each(|(a, &k)| sums[block + a] += weight * scores[k]);
        }
        (information, sums)
    }
}
