//! What the layers leave unexplained: a smooth field by which a fitted access surface is multiplied.
//!
//! # Formula
//! r(u) = (α + N(u)) / (α + E(u)), N the units and E the units the access surface expects, both in a
//! Gaussian window of peak 1 around u: the mean of the ratio under a gamma prior of mean 1 and
//! strength α, so that r stays near 1 where there is little evidence. Bandwidth and strength
//! maximise the mean log density of left-out outings.
//!
//! # Source
//! Clayton, D. & Kaldor, J. (1987), Biometrics 43, 671–681 (gamma shrinkage of observed over
//! expected); the smooth window is our choice.

use ndarray::Array2;
use rayon::prelude::*;

use crate::diag::Outcome;
use crate::maths::float;
use crate::maths::optimise::maximise;
use crate::maths::sum::sum;
use crate::records::Training;
use crate::units::Length;

use super::density::{STEPS, at_end};
use super::fitted::{Evidence, Fitted, Parameter, normalise};
use super::groups::{Groups, Levels, logs};
use super::lattice::{Power, Spot};
use super::settings::Fit;

/// Strengths tried, in units.
const STRENGTHS: [f64; 7] = [0.25, 0.5, 1.0, 2.0, 4.0, 8.0, 32.0];

/// Multiplies an access surface by its remainder.
pub(super) fn add(
    name: &str,
    mut fitted: Fitted,
    width: Fit<Length>,
    training: &Training,
) -> Outcome<Fitted> {
    let mut levels = Levels::new(training);
    let (bandwidth, given) = match width {
        Fit::Given(length) => {
            let cell = training.region().grid().cell_side();
            (length.metres(cell).expect("the plan refuses degrees").get(), true)
        }
        Fit::Fitted => {
            let (low, high) = logs(levels.range());
            let found = maximise(low, high, STEPS, |x| {
                best_strength(levels.at(float::exp(x)), training, &fitted.density, float::exp(x)).1
            });
            fitted.warnings.extend(at_end(&format!("{name}`, remainder of `{name}"), &found));
            fitted.evidence.push(Evidence {
                parameter: "remainder.bandwidth".into(),
                criterion: "mean log density of left-out outings over that without a remainder (nats)",
                tried: found.tried.iter().map(|(x, v)| (float::exp(*x), *v)).collect(),
            });
            (float::exp(found.best), false)
        }
    };
    let groups = levels.at(bandwidth);
    let (strength, _) = best_strength(groups, training, &fitted.density, bandwidth);
    multiply(&mut fitted, training, bandwidth, strength);
    let parameter =
        |name: &str, value, fitted| Parameter { name: name.into(), value, interval: None, fitted };
    fitted.parameters.push(parameter("remainder.bandwidth", bandwidth, !given));
    fitted.parameters.push(parameter("remainder.strength", strength, true));
    fitted.complexity += 1 + usize::from(!given);
    Ok(fitted)
}

/// Units and expected units in the window around every spot of the lattice.
struct Windows {
    observed: Array2<f64>,
    expected: Array2<f64>,
    /// Expected units of each spot itself, as shares of all.
    shares: Vec<(Spot, f64)>,
    peak: f64,
}

impl Windows {
    fn new(groups: &Groups, training: &Training, density: &[f64], bandwidth: f64) -> Self {
        let lattice = &groups.lattice;
        let taps = lattice.taps(bandwidth);
        let peak = lattice.kernel(&taps, groups.spots[0], groups.spots[0]);
        let mut masses = lattice.blank();
        for (cell, d) in density.iter().enumerate() {
            masses[lattice.spot(training, cell)] += d * training.exposure(cell);
        }
        let all = sum(masses.iter().copied());
        let held = masses.indexed_iter().filter(|(_, m)| **m > 0.0);
        let shares: Vec<(Spot, f64)> = held.map(|(s, m)| (s, m / all)).collect();
        let total = sum(groups.weights.iter().copied());
        let (spots, masses): (Vec<Spot>, Vec<f64>) = shares.iter().map(|(s, m)| (*s, m * total)).unzip();
        let window = |spots: &[Spot], weights: &[f64]| {
            let mut field = lattice.spread(bandwidth, spots, weights, Power::One);
            field.par_mapv_inplace(|v| v / peak);
            field
        };
        Self {
            observed: window(&groups.spots, &groups.weights),
            expected: window(&spots, &masses),
            shares,
            peak,
        }
    }

    fn ratio(&self, spot: Spot, strength: f64) -> f64 {
        (strength + self.observed[spot]) / (strength + self.expected[spot])
    }
}

/// The strength that best foretells left-out outings at a bandwidth, and how well it does.
fn best_strength(groups: &Groups, training: &Training, density: &[f64], bandwidth: f64) -> (f64, f64) {
    let windows = Windows::new(groups, training, density, bandwidth);
    let taps = groups.lattice.taps(bandwidth);
    let ones = vec![1.0; groups.spots.len()];
    let own: Vec<Vec<f64>> = groups
        .groups
        .par_iter()
        .map(|g| groups.own(g, &ones, &taps).into_iter().map(|o| o / windows.peak).collect())
        .collect();
    let total = sum(groups.weights.iter().copied());
    let value = |strength: f64| {
        let mean = sum(windows.shares.iter().map(|(s, m)| m * windows.ratio(*s, strength)));
        let terms = groups.groups.iter().zip(&own).map(|(group, own)| {
            let left = 1.0 - sum(group.iter().map(|g| g.1)) / total;
            sum(group.iter().zip(own).map(|((i, w), own)| {
                let spot = groups.spots[*i];
                let observed = (windows.observed[spot] - own).max(0.0);
                w * float::ln((strength + observed) / (strength + windows.expected[spot] * left) / mean)
            }))
        });
        sum(terms) / total
    };
    STRENGTHS
        .iter()
        .map(|s| (*s, value(*s)))
        .fold((STRENGTHS[0], f64::NEG_INFINITY), |best, tried| if tried.1 > best.1 { tried } else { best })
}

/// Multiplies the surface by the field, on the cells themselves.
fn multiply(fitted: &mut Fitted, training: &Training, bandwidth: f64, strength: f64) {
    let groups = Groups::new(training, 1);
    let windows = Windows::new(&groups, training, &fitted.density, bandwidth);
    let squares = squared(&groups, bandwidth, windows.peak);
    let places = groups.spots.len() as f64;
    let mut support = Vec::with_capacity(fitted.density.len());
    for (cell, density) in fitted.density.iter_mut().enumerate() {
        let spot = groups.lattice.spot(training, cell);
        *density *= windows.ratio(spot, strength);
        // part of the weight rests on the units in the window, the rest on all places alike
        let local = windows.observed[spot] / (strength + windows.observed[spot]);
        let own =
            if squares[spot] > 0.0 { float::square(windows.observed[spot]) / squares[spot] } else { 1.0 };
        let norm = local / own.max(1.0).sqrt() + (1.0 - local) / places.sqrt();
        support.push(1.0 / (norm * norm));
    }
    normalise(&mut fitted.density, training.region().areas());
    fitted.support = Some(support);
}

/// Squared weights of the places in the window around every spot.
fn squared(groups: &Groups, bandwidth: f64, peak: f64) -> Array2<f64> {
    let squares: Vec<f64> = groups.weights.iter().map(|w| w * w).collect();
    let mut field = groups.lattice.spread(bandwidth, &groups.spots, &squares, Power::Two);
    field.par_mapv_inplace(|v| v / (peak * peak));
    field
}
