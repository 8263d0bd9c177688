//! Gaussian kernel taps and separable convolution on a regular lattice.

use ndarray::{Array2, ArrayView2, Axis};
use rayon::prelude::*;

use super::float;

/// How many standard deviations the kernel reaches; beyond lies 3.7e-6 of its mass in the plane.
pub const REACH: f64 = 5.0;

/// Below this many cells per standard deviation the kernel is averaged over the target cell
/// rather than sampled at its centre.
const SAMPLED_FROM: f64 = 1.5;

/// One-dimensional kernel values per cell at offsets 0, 1, … for a standard deviation in cells.
///
/// # Formula
/// φ(k/σ)/σ at σ ≥ 1.5 cells; below, Φ((k+½)/σ) − Φ((k−½)/σ), the average over the cell.
pub fn taps(sigma: f64) -> Vec<f64> {
    let reach = (REACH * sigma).ceil().max(1.0) as usize;
    (0..=reach)
        .map(|k| {
            let k = k as f64;
            if sigma >= SAMPLED_FROM {
                float::exp(-0.5 * float::square(k / sigma)) / (sigma * (2.0 * std::f64::consts::PI).sqrt())
            } else {
                let root = sigma * std::f64::consts::SQRT_2;
                0.5 * (float::erf((k + 0.5) / root) - float::erf((k - 0.5) / root))
            }
        })
        .collect()
}

/// Convolves with the product of two symmetric kernels; outside the array is zero.
pub fn convolve(values: ArrayView2<f64>, across: &[f64], down: &[f64]) -> Array2<f64> {
    let mut rows = Array2::zeros(values.dim());
    rows.axis_iter_mut(Axis(0)).into_par_iter().zip(values.axis_iter(Axis(0)).into_par_iter()).for_each(
        |(mut out, row)| {
            if row.iter().any(|&v| v != 0.0) {
                let row = row.to_vec();
                convolve_row(&row, across, out.as_slice_mut().expect("rows are contiguous"));
            }
        },
    );
    let (height, _) = rows.dim();
    let mut result = Array2::zeros(values.dim());
    result.axis_iter_mut(Axis(0)).into_par_iter().enumerate().for_each(|(i, mut out)| {
        let out = out.as_slice_mut().expect("rows are contiguous");
        let reach = down.len() - 1;
        for j in i.saturating_sub(reach)..=(i + reach).min(height - 1) {
            let weight = down[i.abs_diff(j)];
            let source = rows.row(j);
            let source = source.as_slice().expect("rows are contiguous");
            out.iter_mut().zip(source).for_each(|(o, s)| *o += weight * s);
        }
    });
    result
}

/// One row; written as shifted additions so that it runs on whole vectors.
fn convolve_row(row: &[f64], kernel: &[f64], out: &mut [f64]) {
    let n = row.len();
    for (k, &weight) in kernel.iter().enumerate().take(n) {
        out[k..].iter_mut().zip(&row[..n - k]).for_each(|(o, s)| *o += weight * s);
        if k > 0 {
            out[..n - k].iter_mut().zip(&row[k..]).for_each(|(o, s)| *o += weight * s);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The slow twin: the double sum as written.
    fn naive(values: &Array2<f64>, across: &[f64], down: &[f64]) -> Array2<f64> {
        let tap = |taps: &[f64], d: usize| taps.get(d).copied().unwrap_or(0.0);
        Array2::from_shape_fn(values.dim(), |(i, j)| {
            values
                .indexed_iter()
                .map(|((r, c), v)| v * tap(down, r.abs_diff(i)) * tap(across, c.abs_diff(j)))
                .sum()
        })
    }

    #[test]
    fn separable_equals_the_double_sum() {
        let values = Array2::from_shape_fn((13, 17), |(i, j)| ((i * 31 + j * 17) % 11) as f64);
        for (a, b) in [(0.6, 1.1), (1.5, 2.0), (4.0, 9.0)] {
            let (a, b) = (taps(a), taps(b));
            let fast = convolve(values.view(), &a, &b);
            let slow = naive(&values, &a, &b);
            fast.iter().zip(&slow).for_each(|(f, s)| assert!((f - s).abs() < 1e-12));
        }
    }

    #[test]
    fn taps_hold_the_whole_mass() {
        for sigma in [0.5, 1.0, 1.5, 3.0, 20.0] {
            let t = taps(sigma);
            let mass = t[0] + 2.0 * t[1..].iter().sum::<f64>();
            assert!((mass - 1.0).abs() < 1e-5, "{sigma}: {mass}");
        }
    }
}
