//! Axes: how values are stretched along them and where their ticks stand.

use std::ops::Range;

use plotters::coord::ranged1d::{KeyPointHint, NoDefaultFormatting, Ranged, ValueFormatter};

use crate::maths::float;

/// How values are stretched.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Shape {
    /// As they are.
    Linear,
    /// By their square root: for distances, which crowd near zero.
    Root,
    /// By their logarithm.
    Log,
    /// By ln(1 + v/c): a logarithm that can bear zero.
    Shifted(f64),
}

/// An axis from its low to its high end.
#[derive(Debug, Clone)]
pub(super) struct Axis {
    pub shape: Shape,
    pub low: f64,
    pub high: f64,
    pub ticks: Vec<f64>,
    /// What a value is divided by to be shown (1000: metres as kilometres).
    pub unit: f64,
    /// What follows a number.
    pub suffix: &'static str,
}

impl Axis {
    /// An axis with about so many ticks.
    pub(super) fn new(shape: Shape, low: f64, high: f64, unit: f64, most: usize) -> Self {
        let mut axis = Self { shape, low, high, ticks: Vec::new(), unit, suffix: "" };
        axis.ticks = match shape {
            Shape::Linear => linear(low / unit, high / unit, most),
            Shape::Log => logarithmic(low / unit, high / unit, most),
            Shape::Root | Shape::Shifted(_) => axis.by_place(most),
        }
        .into_iter()
        .map(|t| t * unit)
        .collect();
        axis
    }

    /// A value on the stretched scale.
    fn stretch(&self, value: f64) -> f64 {
        match self.shape {
            Shape::Linear => value,
            Shape::Root => value.max(0.0).sqrt(),
            Shape::Log => float::ln(value.max(f64::MIN_POSITIVE)),
            Shape::Shifted(c) => float::log1p((value / c).max(-0.999)),
        }
    }

    /// The value at a place on the axis, 0 to 1.
    pub(super) fn at(&self, along: f64) -> f64 {
        let (low, high) = (self.stretch(self.low), self.stretch(self.high));
        let stretched = low + along * (high - low);
        match self.shape {
            Shape::Linear => stretched,
            Shape::Root => stretched * stretched,
            Shape::Log => float::exp(stretched),
            Shape::Shifted(c) => float::expm1(stretched) * c,
        }
    }

    /// The place of a value on the axis, 0 to 1 inside.
    pub(super) fn along(&self, value: f64) -> f64 {
        let (low, high) = (self.stretch(self.low), self.stretch(self.high));
        (self.stretch(value) - low) / (high - low)
    }

    /// Round numbers near equal places along the axis, in shown units.
    fn by_place(&self, most: usize) -> Vec<f64> {
        let gap = 0.7 / most as f64;
        let mut out: Vec<f64> = if self.low <= 0.0 { vec![0.0] } else { Vec::new() };
        for i in 1..=most {
            let near = self.at(i as f64 / most as f64) / self.unit;
            let tick = round(near);
            let place = self.along(tick * self.unit);
            let clear = out.last().is_none_or(|l| place - self.along(l * self.unit) >= gap);
            if clear && (0.0..=1.0 + 1e-9).contains(&place) {
                out.push(tick);
            }
        }
        out
    }

    /// A tick as text.
    pub(super) fn label(&self, value: f64) -> String {
        format!("{}{}", super::words::digits(value / self.unit, 3), self.suffix)
    }
}

/// The nearest of 1, 2, 3, 5 times a power of ten.
fn round(value: f64) -> f64 {
    if value <= 0.0 {
        return 0.0;
    }
    let power = float::pow(10.0, float::log10(value).floor());
    let near = |m: f64| (float::ln(value / (m * power))).abs();
    let best = [1.0, 2.0, 3.0, 5.0, 10.0].into_iter().min_by(|a, b| near(*a).total_cmp(&near(*b)));
    // the product of 3 and 0.1 is not 0.3: go by way of text
    let text = format!("{:.*}", 12, best.unwrap_or(1.0) * power);
    text.parse().unwrap_or(value)
}

/// Even round steps.
fn linear(low: f64, high: f64, most: usize) -> Vec<f64> {
    let span = high - low;
    if span <= 0.0 || !span.is_finite() {
        return vec![low];
    }
    let rough = span / most as f64;
    let power = float::pow(10.0, float::log10(rough).floor());
    let step = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|m| m * power)
        .find(|s| span / s <= most as f64 + 1e-9)
        .unwrap_or(10.0 * power);
    let first = (low / step - 1e-9).ceil() as i64;
    let last = (high / step + 1e-9).floor() as i64;
    (first..=last).map(|i| i as f64 * step).collect()
}

/// Powers of ten with as many steps between as there is room for.
fn logarithmic(low: f64, high: f64, most: usize) -> Vec<f64> {
    let (from, to) = (float::log10(low).floor() as i32, float::log10(high).ceil() as i32);
    let inside = |v: &f64| *v >= low * (1.0 - 1e-9) && *v <= high * (1.0 + 1e-9);
    let with = |steps: &[f64], every: i32| -> Vec<f64> {
        (from..=to)
            .filter(|p| p % every == 0)
            .flat_map(|p| steps.iter().map(move |s| s * float::pow(10.0, f64::from(p))))
            .filter(inside)
            .collect()
    };
    let rules: [(&[f64], i32); 5] =
        [(&[1.0, 2.0, 5.0], 1), (&[1.0, 3.0], 1), (&[1.0], 1), (&[1.0], 2), (&[1.0], 4)];
    let found = rules.iter().map(|(s, e)| with(s, *e)).find(|t| t.len() <= most && t.len() >= 2);
    found.unwrap_or_else(|| linear(low, high, most.min(4)).into_iter().filter(|v| *v > 0.0).collect())
}

impl Ranged for Axis {
    type FormatOption = NoDefaultFormatting;
    type ValueType = f64;

    fn map(&self, value: &f64, limit: (i32, i32)) -> i32 {
        let along = self.along(*value).clamp(-0.5, 1.5);
        limit.0 + (along * f64::from(limit.1 - limit.0)).round() as i32
    }

    fn key_points<H: KeyPointHint>(&self, _hint: H) -> Vec<f64> {
        self.ticks.clone()
    }

    fn range(&self) -> Range<f64> {
        self.low..self.high
    }
}

impl ValueFormatter<f64> for Axis {
    fn format_ext(&self, value: &f64) -> String {
        self.label(*value)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn labels(shape: Shape, low: f64, high: f64, unit: f64) -> Vec<String> {
        let axis = Axis::new(shape, low, high, unit, 6);
        axis.ticks.iter().map(|t| axis.label(*t)).collect()
    }

    #[test]
    fn ticks_are_round_and_few() {
        assert_eq!(labels(Shape::Linear, 0.0, 1.13, 1.0), ["0", "0.2", "0.4", "0.6", "0.8", "1"]);
        assert_eq!(labels(Shape::Linear, -0.2, 0.4, 1.0).len(), 7);
        assert_eq!(labels(Shape::Log, 0.01, 40.0, 1.0), ["0.01", "0.1", "1", "10"]);
        assert_eq!(labels(Shape::Log, 0.3, 4.0, 1.0), ["0.5", "1", "2"]);
        assert_eq!(labels(Shape::Log, 800.0, 62_000.0, 1000.0), ["1", "2", "5", "10", "20", "50"]);
        assert!(labels(Shape::Log, 1.0, 1.4, 1.0).len() >= 2);
        assert_eq!(labels(Shape::Root, 0.0, 37_200.0, 1000.0), ["0", "1", "5", "10", "20", "30"]);
    }

    #[test]
    fn stretching_can_be_undone() {
        for shape in [Shape::Linear, Shape::Root, Shape::Log, Shape::Shifted(3.0)] {
            let axis = Axis::new(shape, 0.5, 80.0, 1.0, 6);
            for value in [0.5, 2.0, 33.0, 80.0] {
                assert!((axis.at(axis.along(value)) - value).abs() < 1e-9, "{shape:?} {value}");
            }
        }
    }
}
