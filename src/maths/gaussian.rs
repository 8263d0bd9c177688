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
    let (height, width) = values.dim();
    let mut rows = Array2::zeros((height, width));
    let reach = (across.len() - 1).min(width);
    let across = &across[..=reach];
    let lines = rows.axis_iter_mut(Axis(0)).into_par_iter().zip(values.axis_iter(Axis(0)).into_par_iter());
    lines.for_each_init(
        || vec![0.0; width + 2 * reach],
        |padded, (mut out, row)| {
            if row.iter().any(|&v| v != 0.0) {
                padded[reach..reach + width].iter_mut().zip(row).for_each(|(p, v)| *p = *v);
                let sources = Sources { centre: &padded[reach..], before: padded, row: 1, reach };
                widest(&sources, across, out.as_slice_mut().expect("rows are contiguous"));
            }
        },
    );
    let flat = rows.as_slice().expect("rows are contiguous");
    let mut result = Array2::zeros((height, width));
    result.axis_iter_mut(Axis(0)).into_par_iter().enumerate().for_each(|(i, mut out)| {
        // within `inner` rows both neighbours exist; farther ones have one at the most
        let inner = i.min(height - 1 - i).min(down.len() - 1);
        let sources = Sources {
            centre: &flat[i * width..],
            before: &flat[(i - inner) * width..],
            row: width,
            reach: inner,
        };
        let out = out.as_slice_mut().expect("rows are contiguous");
        widest(&sources, &down[..=inner], out);
        for (k, weight) in down.iter().enumerate().skip(inner + 1) {
            let far = if i >= k { Some(i - k) } else { Some(i + k).filter(|r| *r < height) };
            if let Some(row) = far {
                out.iter_mut().zip(&flat[row * width..]).for_each(|(o, s)| *o += weight * s);
            }
        }
    });
    result
}

/// Where the values at distance k before and after an output stand: `before[(reach − k)·row + j]` and
/// `centre[k·row + j]`.
struct Sources<'a> {
    centre: &'a [f64],
    before: &'a [f64],
    row: usize,
    reach: usize,
}

/// Outputs worked out together, so that their sums stay in registers.
const TOGETHER: usize = 16;

/// out[j] = w₀·c[j] + Σ w_k·(before_k[j] + after_k[j]).
#[inline(always)]
fn weigh(sources: &Sources, weights: &[f64], out: &mut [f64]) {
    let n = out.len();
    let mut from = 0;
    while from < n {
        let span = TOGETHER.min(n - from);
        let mut sums = [0.0; TOGETHER];
        if span == TOGETHER {
            let at = |list: &[f64], start: usize| -> [f64; TOGETHER] {
                list[start..start + TOGETHER].try_into().expect("the span is whole")
            };
            let centre = at(sources.centre, from);
            (0..TOGETHER).for_each(|b| sums[b] = weights[0] * centre[b]);
            for (k, &w) in weights.iter().enumerate().skip(1) {
                let before = at(sources.before, (sources.reach - k) * sources.row + from);
                let after = at(sources.centre, k * sources.row + from);
                (0..TOGETHER).for_each(|b| sums[b] += w * (before[b] + after[b]));
            }
        } else {
            for (b, sum) in sums.iter_mut().enumerate().take(span) {
                *sum = weights[0] * sources.centre[from + b];
                for (k, &w) in weights.iter().enumerate().skip(1) {
                    let before = sources.before[(sources.reach - k) * sources.row + from + b];
                    *sum += w * (before + sources.centre[k * sources.row + from + b]);
                }
            }
        }
        out[from..from + span].copy_from_slice(&sums[..span]);
        from += span;
    }
}

/// [`weigh`] with the widest vectors of the machine; additions and products in the same order, so the
/// same bits.
fn widest(sources: &Sources, weights: &[f64], out: &mut [f64]) {
    #[cfg(target_arch = "x86_64")]
    {
        #[target_feature(enable = "avx2")]
        fn with_avx2(sources: &Sources, weights: &[f64], out: &mut [f64]) {
            weigh(sources, weights, out);
        }
        if std::arch::is_x86_feature_detected!("avx2") {
            // SAFETY: the machine has been found to have the feature
            unsafe { with_avx2(sources, weights, out) };
            return;
        }
    }
    weigh(sources, weights, out);
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

    /// Wide vectors give the bits of narrow ones, also where rows are no multiple of a vector.
    #[test]
    fn wide_and_narrow_agree_to_the_bit() {
        let padded: Vec<f64> = (0..77).map(|i| ((i * 37) % 23) as f64 / 7.0).collect();
        let sources = Sources { centre: &padded[9..], before: &padded, row: 1, reach: 9 };
        let weights: Vec<f64> = taps(1.8);
        let (mut wide, mut narrow) = (vec![0.0; 59], vec![0.0; 59]);
        widest(&sources, &weights, &mut wide);
        weigh(&sources, &weights, &mut narrow);
        assert!(wide.iter().zip(&narrow).all(|(a, b)| a.to_bits() == b.to_bits()));
    }

    #[test]
    fn kernels_wider_than_the_array_are_cut() {
        let values = Array2::from_shape_fn((5, 3), |(i, j)| (i + j) as f64);
        let (a, b) = (taps(4.0), taps(6.0));
        let slow = naive(&values, &a, &b);
        convolve(values.view(), &a, &b).iter().zip(&slow).for_each(|(f, s)| assert!((f - s).abs() < 1e-12));
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
