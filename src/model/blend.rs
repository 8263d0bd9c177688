//! A mixture of candidates' surfaces, its weights learned on predictions for left-out outings.
//!
//! # Formula
//! f = Σ π_m f_m with Σ π_m = 1. The weights maximise Σ wᵢ ln Σ π_m f_m(i), each f_m(i) predicted by a
//! fit to the inner folds that hold unit i out; the criterion is concave, and
//! expectation–maximisation climbs it: π_m ← mean of π_m f_m(i) ÷ Σ π f(i).
//!
//! # Source
//! Dempster, A. P., Laird, N. M. & Rubin, D. B. (1977), Journal of the Royal Statistical Society B
//! 39, 1–38; stacking of densities as in Smyth, P. & Wolpert, D. (1999), Machine Learning 36, 59–83.

use crate::diag::Outcome;
use crate::maths::sum::sum;
use crate::proxies::ProxyStack;
use crate::records::Training;

use super::fitted::{Context, Fitted, Parameter, fit as fit_candidate};
use super::settings::CandidatePlan;

/// Inner folds on which the weights are learned.
const INNER: usize = 5;
/// Steps after which the weights are taken as they are; each step can only improve them.
const MOST_STEPS: usize = 2_000;
/// Change of the weights below which they have settled.
const SETTLED: f64 = 1e-9;

/// Fits the members to inner folds, learns the weights, fits the members to all of the training part.
pub(super) fn fit(
    name: &str,
    members: &[String],
    training: &Training,
    layers: &ProxyStack,
    context: Context,
) -> Outcome<Fitted> {
    let plans: Vec<&CandidatePlan> = members
        .iter()
        .map(|m| {
            context.candidates.iter().find(|c| c.name == *m).expect("the plan names only candidates it holds")
        })
        .collect();
    let inner = Context { blocks: None, ..context };
    let (mut predictions, mut weights): (Vec<Vec<f64>>, Vec<f64>) = (Vec::new(), Vec::new());
    for (part, left_out) in training.inner(INNER, context.seed) {
        let fits: Vec<Fitted> =
            plans.iter().map(|p| fit_candidate(p, &part, layers, inner)).collect::<Outcome<_>>()?;
        for unit in left_out {
            let at = |f: &Fitted| (1.0 - context.floor) * f.density[unit.cell as usize] + context.floor;
            predictions.push(fits.iter().map(at).collect());
            weights.push(unit.weight);
        }
    }
    let shares = learn(&predictions, &weights, plans.len());
    let fits: Vec<Fitted> =
        plans.iter().map(|p| fit_candidate(p, training, layers, inner)).collect::<Outcome<_>>()?;
    Ok(mix(name, members, &fits, &shares, training))
}

/// The shares of the mixture by expectation–maximisation.
fn learn(predictions: &[Vec<f64>], weights: &[f64], members: usize) -> Vec<f64> {
    let mut shares = vec![1.0 / members as f64; members];
    let total = sum(weights.iter().copied());
    for _ in 0..MOST_STEPS {
        let mut next = vec![0.0; members];
        for (p, w) in predictions.iter().zip(weights) {
            let mixed: f64 = p.iter().zip(&shares).map(|(p, s)| p * s).sum();
            if mixed > 0.0 {
                next.iter_mut().zip(p).zip(&shares).for_each(|((n, p), s)| *n += w * p * s / mixed);
            }
        }
        let all: f64 = next.iter().sum();
        if all <= 0.0 || total <= 0.0 {
            break;
        }
        next.iter_mut().for_each(|n| *n /= all);
        let moved = next.iter().zip(&shares).map(|(n, s)| (n - s).abs()).fold(0.0, f64::max);
        shares = next;
        if moved < SETTLED {
            break;
        }
    }
    shares
}

fn mix(name: &str, members: &[String], fits: &[Fitted], shares: &[f64], training: &Training) -> Fitted {
    let cells = training.region().len();
    let density: Vec<f64> =
        (0..cells).map(|c| fits.iter().zip(shares).map(|(f, s)| s * f.density[c]).sum()).collect();
    let places = training.places().len() as f64;
    let support = (0..cells).map(|c| carried_by(fits, shares, (c, density[c]), places)).collect();
    let parameters = members
        .iter()
        .zip(shares)
        .map(|(m, s)| Parameter { name: format!("weight.{m}"), value: *s, interval: None, fitted: true })
        .collect();
    let mut warnings = Vec::new();
    for fit in fits {
        warnings.extend(fit.warnings.iter().cloned().map(|mut w| {
            w.place = format!("candidate `{name}`, {}", w.place);
            w
        }));
    }
    let complexity = fits.iter().map(|f| f.complexity).sum::<usize>() + fits.len() - 1;
    Fitted { density, parameters, evidence: Vec::new(), support: Some(support), complexity, warnings }
}

/// Effective number of places behind a cell of the mixture: at least 1 ÷ (Σ sₘ/√nₘ)², sₘ the member's
/// share of the cell's weight and nₘ its own number of places (triangle inequality).
fn carried_by(fits: &[Fitted], shares: &[f64], (cell, density): (usize, f64), places: f64) -> f64 {
    if density <= 0.0 {
        return 0.0;
    }
    let part = |f: &Fitted, share: f64| {
        let own = f.support.as_ref().map_or(places, |s| s[cell]);
        let weight = share * f.density[cell] / density;
        if weight > 0.0 { weight / own.max(1.0).sqrt() } else { 0.0 }
    };
    let norm: f64 = fits.iter().zip(shares).map(|(f, s)| part(f, *s)).sum();
    1.0 / (norm * norm)
}

#[cfg(test)]
mod tests {
    use super::learn;

    /// Two densities over two halves, units split 3 : 1 between them: the shares are 3/4 and 1/4.
    #[test]
    fn finds_the_shares_of_a_plain_mixture() {
        let predictions = vec![vec![2.0, 0.0], vec![2.0, 0.0], vec![2.0, 0.0], vec![0.0, 2.0]];
        let shares = learn(&predictions, &[1.0; 4], 2);
        assert!((shares[0] - 0.75).abs() < 1e-6, "{shares:?}");
    }

    #[test]
    fn gives_a_useless_member_nothing() {
        let predictions: Vec<Vec<f64>> = (0..50).map(|i| vec![1.5 + f64::from(i % 3) * 0.1, 1.0]).collect();
        assert!(learn(&predictions, &[1.0; 50], 2)[1] < 1e-3);
    }
}
