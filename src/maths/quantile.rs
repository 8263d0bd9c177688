//! Quantiles behind intervals: of Poisson means, and Student's t.

use statrs::distribution::{ContinuousCDF, Gamma, StudentsT};

/// Exact 95 % interval for the mean of a Poisson count.
///
/// # Formula
/// Half of the 2.5 % quantile of χ² with 2n degrees of freedom, half of the 97.5 % quantile with
/// 2n + 2; here as quantiles of gamma distributions of shape n and n + 1, so that weights that are no
/// whole numbers have an interval too.
///
/// # Source
/// Garwood, F. (1936), Biometrika 28, 437–442.
pub fn interval_95(count: f64) -> (f64, f64) {
    let quantile = |shape: f64, p: f64| Gamma::new(shape, 1.0).map_or(0.0, |g| g.inverse_cdf(p));
    let low = if count > 0.0 { quantile(count, 0.025) } else { 0.0 };
    (low, quantile(count + 1.0, 0.975))
}

/// 97.5 % quantile of Student's t.
pub fn student_975(degrees: usize) -> f64 {
    StudentsT::new(0.0, 1.0, degrees as f64).map_or(f64::INFINITY, |t| t.inverse_cdf(0.975))
}

#[cfg(test)]
mod tests {
    use super::{interval_95, student_975};

    /// scipy.stats.chi2.ppf: 0 → (0, 3.688879454); 5 → (1.623486390, 11.668332); 100 → (81.363991, 121.626794).
    #[test]
    fn matches_the_reference_library() {
        for (n, low, high) in
            [(0.0, 0.0, 3.688_879_454), (5.0, 1.623_486_390, 11.668_332_08), (100.0, 81.363_991, 121.626_794)]
        {
            let (l, h) = interval_95(n);
            assert!((l - low).abs() < 1e-4 && (h - high).abs() < 1e-4, "{n}: {l} {h}");
        }
    }

    /// scipy.stats.t.ppf(0.975, n): 1 → 12.70620474, 10 → 2.228138852, 100 → 1.983971519.
    #[test]
    fn student_matches_the_reference_library() {
        for (n, t) in [(1, 12.706_204_74), (10, 2.228_138_852), (100, 1.983_971_519)] {
            assert!((student_975(n) - t).abs() < 1e-6, "{n}: {}", student_975(n));
        }
    }
}
