//! Fitted curves, evaluated for drawing.
//!
//! # Formula
//! One layer's curve alone, per unit of area over its mean: (1 − base)·g(x)/mean(g) + base, the mean
//! of g over the cells of the region, weighted by area; g as `model::terms` defines it.

use crate::maths::float;
use crate::maths::sum::par_sum;
use crate::model::{CandidateKind, CurveForm, Fitted, OddsBin, TermPlan};
use crate::proxies::Layer;

/// A term of a fitted candidate with its numbers.
pub(super) struct Curve {
    form: CurveForm,
    parameters: Vec<f64>,
    base: f64,
    /// ln of the mean of g.
    mean: f64,
}

impl Curve {
    /// The curve a candidate found for one of its layers.
    pub(super) fn new(term: &TermPlan, fitted: &Fitted, layer: &Layer) -> Self {
        let of = |name: &str| fitted.parameters.iter().find(|p| p.name == name).map_or(0.0, |p| p.value);
        let parameters = term.form.parameters().iter().map(|p| of(&format!("{}.{p}", term.layer))).collect();
        let mut curve = Self { form: term.form, parameters, base: of("base"), mean: 0.0 };
        let (low, _, high) = layer.field.summary();
        let top = curve.log(low).max(curve.log(high));
        let (values, areas) = (layer.field.values(), layer.field.region().areas());
        let mass = par_sum(values.len(), |i| areas[i] * float::exp(curve.log(values[i]) - top));
        curve.mean = top + float::ln(mass / layer.field.region().area());
        curve
    }

    /// ln g, up to a constant.
    fn log(&self, x: f64) -> f64 {
        let p = &self.parameters;
        match self.form {
            CurveForm::Exponential => -x / p[0],
            CurveForm::HalfNormal => -0.5 * float::square(x / p[0]),
            CurveForm::FallingPower => -p[1] * float::log1p(x / p[0]),
            CurveForm::RisingPower => p[0] * float::ln(x + p[1]),
            CurveForm::LogLinear => p[0] * x,
        }
    }

    /// Effort per unit of area at a value of the layer, times the even share.
    pub(super) fn at(&self, x: f64) -> f64 {
        (1.0 - self.base) * float::exp(self.log(x) - self.mean) + self.base
    }
}

/// Mean of a candidate's density in each class of a layer, weighted by area.
pub(super) fn class_means(layer: &Layer, classes: &[OddsBin], density: &[f64]) -> Vec<f64> {
    let mut sums = vec![(0.0_f64, 0.0_f64); classes.len()];
    let areas = layer.field.region().areas();
    for (i, v) in layer.field.values().iter().enumerate() {
        let class = classes.partition_point(|c| c.to < *v).min(classes.len() - 1);
        sums[class] = (sums[class].0 + density[i] * areas[i], sums[class].1 + areas[i]);
    }
    sums.into_iter().map(|(s, a)| if a > 0.0 { s / a } else { f64::NAN }).collect()
}

/// The terms of a candidate of `uses`.
pub(super) fn terms(kind: &CandidateKind) -> &[TermPlan] {
    match kind {
        CandidateKind::Uses { terms, .. } => terms,
        _ => &[],
    }
}

#[cfg(test)]
mod tests {
    use super::super::sample;
    use super::*;

    /// With one layer the curve alone is the whole candidate.
    #[test]
    fn repeats_what_the_model_fitted() {
        let finding = sample::finding(60, 40);
        let crowd = &finding.candidates[2];
        let term = &terms(&crowd.kind)[0];
        let layer = finding.layers.layer(&term.layer);
        let curve = Curve::new(term, &crowd.fitted, layer);
        for (x, d) in layer.field.values().iter().zip(&crowd.fitted.density) {
            assert!((curve.at(*x) / d - 1.0).abs() < 1e-9, "{x} {d}");
        }
        let means = class_means(layer, &crowd.odds[0].1, &crowd.fitted.density);
        let total: f64 = means.iter().zip(&crowd.odds[0].1).map(|(m, c)| m * c.area_share).sum();
        assert!((total - 1.0).abs() < 1e-9);
    }
}
