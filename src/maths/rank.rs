//! Ranks, correlations, quantiles.

use super::sum::sum;

/// Mid-ranks from 1; tied values share the mean of their ranks.
pub fn ranks(values: &[f64]) -> Vec<f64> {
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_unstable_by(|&a, &b| values[a].total_cmp(&values[b]));
    let mut ranks = vec![0.0; values.len()];
    let mut start = 0;
    while start < order.len() {
        let ties = order[start..].iter().take_while(|&&i| values[i] == values[order[start]]).count();
        let rank = start as f64 + (ties as f64 + 1.0) / 2.0;
        order[start..start + ties].iter().for_each(|&i| ranks[i] = rank);
        start += ties;
    }
    ranks
}

/// Pearson's correlation; not a number when either side is constant.
pub fn pearson(x: &[f64], y: &[f64]) -> f64 {
    let n = x.len() as f64;
    let (mx, my) = (sum(x.iter().copied()) / n, sum(y.iter().copied()) / n);
    let product =
        |a: &[f64], ma: f64, b: &[f64], mb: f64| sum(a.iter().zip(b).map(|(a, b)| (a - ma) * (b - mb)));
    product(x, mx, y, my) / (product(x, mx, x, mx) * product(y, my, y, my)).sqrt()
}

/// Spearman's rank correlation, ties by mid-ranks.
pub fn spearman(x: &[f64], y: &[f64]) -> f64 {
    pearson(&ranks(x), &ranks(y))
}

/// Quantile of sorted values by linear interpolation (Hyndman & Fan 1996, type 7).
pub fn quantile(sorted: &[f64], p: f64) -> f64 {
    let at = p * (sorted.len() - 1) as f64;
    let (low, part) = (at.floor() as usize, at.fract());
    let high = (low + 1).min(sorted.len() - 1);
    sorted[low] + part * (sorted[high] - sorted[low])
}

/// 2.5 % and 97.5 % quantiles; `None` for fewer than two finite values.
pub fn central_95(mut values: Vec<f64>) -> Option<(f64, f64)> {
    values.retain(|v| v.is_finite());
    if values.len() < 2 {
        return None;
    }
    values.sort_unstable_by(f64::total_cmp);
    Some((quantile(&values, 0.025), quantile(&values, 0.975)))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ranks_share_ties() {
        assert_eq!(ranks(&[3.0, 1.0, 3.0, 2.0]), vec![3.5, 1.0, 3.5, 2.0]);
    }

    #[test]
    fn correlates() {
        assert!((spearman(&[1.0, 2.0, 3.0], &[1.0, 8.0, 27.0]) - 1.0).abs() < 1e-15);
        // scipy.stats.spearmanr([1,2,3,4,5],[5,6,7,8,7]) = 0.8207826816681233
        let r = spearman(&[1.0, 2.0, 3.0, 4.0, 5.0], &[5.0, 6.0, 7.0, 8.0, 7.0]);
        assert!((r - 0.820_782_681_668_123_3).abs() < 1e-15);
    }

    #[test]
    fn quantiles_interpolate() {
        assert_eq!(quantile(&[1.0, 2.0, 3.0, 4.0], 0.5), 2.5);
    }
}
