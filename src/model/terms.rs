//! One layer's part in a candidate: a curve, its parameters, their derivatives.
//!
//! # Formula
//! Logarithms of the curves, up to a constant: exponential −d/scale; half-normal −d²/2·scale²;
//! falling power −shape·ln(1+d/scale); rising power exponent·ln(x+offset); log-linear rate·x.
//! Scales and shapes are fitted as logarithms, exponents and rates as they are, from 0 up.
//!
//! # Source
//! Buckland, S. T. et al. (2001), Introduction to Distance Sampling, ch. 3 (half-normal); the
//! others are common practice, no source.

use crate::diag::{Diagnostic, Outcome};
use crate::maths::float;
use crate::proxies::Layer;

use super::settings::{CurveForm, Fit, TermPlan};

/// Smallest and largest shape of a falling power.
const SHAPES: (f64, f64) = (0.05, 50.0);
/// Largest exponent of a rising power.
const MOST_EXPONENT: f64 = 20.0;
/// Largest rise of a log-linear term over the region, on the log scale.
const MOST_RISE: f64 = 30.0;

/// A parameter in the units in which it is fitted.
#[derive(Debug, Clone, Copy)]
pub(super) struct Free {
    /// Value the search starts from.
    pub start: f64,
    /// Smallest value.
    pub low: f64,
    /// Largest value.
    pub high: f64,
}

/// A term ready to be evaluated.
pub(super) struct Term {
    pub layer: String,
    pub form: CurveForm,
    /// The layer's values, transformed as the curve wants them: distances as they are, ln(x+offset)
    /// less its largest, or x less its mean over its standard deviation.
    pub column: Vec<f64>,
    /// Given parameters in fitted units; `None` where free.
    given: Vec<Option<f64>>,
    /// What the fitted numbers are divided by to get the user's (log-linear: the deviation).
    unit: f64,
    offset: f64,
    reach: f64,
    typical: f64,
}

impl Term {
    /// Prepares a layer for its curve.
    pub(super) fn new(plan: &TermPlan, layer: &Layer, place: &str) -> Outcome<Self> {
        let values = layer.field.values();
        let (low, typical, high) = layer.field.summary();
        if low == high {
            let text =
                format!("layer `{}` is {low} everywhere in the region: it explains nothing", layer.name);
            return Err(Diagnostic::input("constant_layer", place, text)
                .cure("take it out of `uses`")
                .into());
        }
        let given = plan.parameters.iter().map(|p| match p {
            Fit::Given(v) => Some(internal(plan.form, *v)),
            Fit::Fitted => None,
        });
        let mut given: Vec<Option<f64>> = match plan.form {
            CurveForm::FallingPower => plan.parameters.iter().map(|p| log_given(*p)).collect(),
            CurveForm::RisingPower => given.take(1).collect(),
            _ => given.collect(),
        };
        let (column, unit, offset) = match plan.form {
            CurveForm::RisingPower => rising(plan, layer, place)?,
            CurveForm::LogLinear => standardised(values),
            _ => (values.to_vec(), 1.0, 0.0),
        };
        if plan.form == CurveForm::LogLinear {
            given.iter_mut().flatten().for_each(|rate| *rate *= unit);
        }
        Ok(Self {
            layer: layer.name.clone(),
            form: plan.form,
            column,
            given,
            unit,
            offset,
            reach: high,
            typical,
        })
    }

    /// Number of parameters, given ones included.
    pub(super) fn width(&self) -> usize {
        self.given.len()
    }

    /// A given parameter, in fitted units.
    pub(super) fn given(&self, k: usize) -> Option<f64> {
        self.given[k]
    }

    /// Bounds and start of a free parameter; `spread` stretches the start.
    pub(super) fn free(&self, k: usize, spread: f64) -> Free {
        match (self.form, k) {
            (CurveForm::RisingPower, _) => Free { start: 0.3 * spread, low: 0.0, high: MOST_EXPONENT },
            (CurveForm::LogLinear, _) => {
                let rise = self.column.iter().copied().fold(f64::MIN, f64::max)
                    - self.column.iter().copied().fold(f64::MAX, f64::min);
                Free { start: 0.3 * spread, low: 0.0, high: MOST_RISE / rise }
            }
            (CurveForm::FallingPower, 1) => {
                Free { start: 0.5, low: float::ln(SHAPES.0), high: float::ln(SHAPES.1) }
            }
            _ => {
                let typical = if self.typical > 0.0 { self.typical } else { self.reach / 2.0 };
                Free {
                    start: float::ln(typical * spread),
                    low: float::ln(self.reach * 1e-5),
                    high: float::ln(self.reach * 1e3),
                }
            }
        }
    }

    /// Log of the curve in a cell, and its derivatives by the parameters into `slopes`.
    #[inline]
    pub(super) fn log_curve(&self, cell: usize, p: &[f64], slopes: &mut [f64]) -> f64 {
        let x = self.column[cell];
        match self.form {
            CurveForm::Exponential => {
                let v = x * p[2];
                slopes[0] = v;
                -v
            }
            CurveForm::HalfNormal => {
                let v = x * p[2];
                slopes[0] = v * v;
                -0.5 * v * v
            }
            CurveForm::FallingPower => {
                let v = x * p[2];
                let log = float::log1p(v);
                slopes[0] = p[3] * v / (1.0 + v);
                slopes[1] = -p[3] * log;
                -p[3] * log
            }
            CurveForm::RisingPower | CurveForm::LogLinear => {
                slopes[0] = x;
                p[0] * x
            }
        }
    }

    /// The parameters with what the curve needs of them worked out: two as fitted, then 1/scale and
    /// shape.
    pub(super) fn ready(&self, p: &[f64]) -> [f64; 4] {
        let second = p.get(1).copied().unwrap_or(0.0);
        match self.form {
            CurveForm::RisingPower | CurveForm::LogLinear => [p[0], second, 0.0, 0.0],
            _ => [p[0], second, float::exp(-p[0]), float::exp(second)],
        }
    }

    /// A parameter in the user's units.
    pub(super) fn external(&self, value: f64) -> f64 {
        match self.form {
            CurveForm::RisingPower | CurveForm::LogLinear => value / self.unit,
            _ => float::exp(value),
        }
    }

    /// The offset of a rising power.
    pub(super) fn offset(&self) -> Option<f64> {
        (self.form == CurveForm::RisingPower).then_some(self.offset)
    }
}

/// A given parameter in fitted units, before standardising.
fn internal(form: CurveForm, value: f64) -> f64 {
    match form {
        CurveForm::RisingPower | CurveForm::LogLinear => value,
        _ => float::ln(value),
    }
}

fn log_given(p: Fit<f64>) -> Option<f64> {
    match p {
        Fit::Given(v) => Some(float::ln(v)),
        Fit::Fitted => None,
    }
}

/// ln(x + offset) less its largest value; the offset is given or the smallest positive value.
fn rising(plan: &TermPlan, layer: &Layer, place: &str) -> Outcome<(Vec<f64>, f64, f64)> {
    let values = layer.field.values();
    let offset = match plan.parameters.get(1) {
        Some(Fit::Given(v)) => *v,
        _ => values.iter().copied().filter(|v| *v > 0.0).fold(f64::INFINITY, f64::min),
    };
    let low = values.iter().copied().fold(f64::INFINITY, f64::min);
    if low < 0.0 || low + offset <= 0.0 {
        let count = values.iter().filter(|v| **v + offset <= 0.0 || **v < 0.0).count();
        let text = format!(
            "layer `{}` has {count} cells below zero (smallest {low}), which a power curve cannot take",
            layer.name
        );
        return Err(Diagnostic::input("negative_value", place, text)
            .cure("mend the raster, or use a \"log-linear\" curve")
            .into());
    }
    let logs: Vec<f64> = values.iter().map(|v| float::ln(v + offset)).collect();
    let top = logs.iter().copied().fold(f64::MIN, f64::max);
    Ok((logs.into_iter().map(|l| l - top).collect(), 1.0, offset))
}

/// Values less their mean, over their standard deviation.
fn standardised(values: &[f64]) -> (Vec<f64>, f64, f64) {
    let n = values.len() as f64;
    let mean = crate::maths::sum::par_sum(values.len(), |i| values[i]) / n;
    let deviation =
        (crate::maths::sum::par_sum(values.len(), |i| float::square(values[i] - mean)) / n).sqrt();
    (values.iter().map(|v| (v - mean) / deviation).collect(), deviation, 0.0)
}
