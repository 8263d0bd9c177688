//! What each candidate found: its parameters in words, its curves over what was observed, the
//! criterion behind a fitted bandwidth.

use minijinja::{Value, context};

use crate::maths::{float, quantile};
use crate::model::{CandidateKind, CurveForm, Evidence, OddsBin, Parameter};
use crate::output::finding::{CandidateFinding, Finding};
use crate::proxies::{Layer, Measure};

use super::axis::{Axis, Shape};
use super::curves::{Curve, class_means, terms};
use super::plots::{self, CriterionChart, CurveChart, Observed};
use super::words;

/// Everything found by the candidates, the delivered one first; the flat baseline has nothing to say.
pub(super) fn candidates(f: &Finding) -> Value {
    let mut order: Vec<usize> = (0..f.candidates.len()).collect();
    order.sort_by_key(|i| *i != f.delivered);
    order
        .into_iter()
        .filter(|i| f.candidates[*i].kind != CandidateKind::Uniform)
        .map(|i| candidate(f, i))
        .collect()
}

fn candidate(f: &Finding, i: usize) -> Value {
    let c = &f.candidates[i];
    let parameters: Vec<Value> = c.fitted.parameters.iter().map(|p| parameter(f, c, p)).collect();
    let curves: Vec<Value> = c
        .odds
        .iter()
        .filter_map(|(name, classes)| {
            let term = terms(&c.kind).iter().find(|t| t.layer == *name)?;
            let layer = f.layers.layer(name);
            let curve = Curve::new(term, &c.fitted, layer);
            Some(curve_figure(f, c, &Shown { layer, form: term.form, classes, curve }))
        })
        .collect();
    let criteria: Vec<Value> =
        c.fitted.evidence.iter().filter(|e| e.tried.len() > 1).filter_map(|e| criterion(c, e)).collect();
    context! {
        name => words::name(&c.name), delivered => i == f.delivered, recommended => i == f.verdict.chosen, made_of => made_of(f, c), curves, criteria, parameters,
    }
}

/// A candidate's make in one phrase.
fn made_of(f: &Finding, c: &CandidateFinding) -> String {
    match &c.kind {
        CandidateKind::Uniform => "no pattern at all".into(),
        CandidateKind::Density(_) => {
            "where the records are, smoothed with a Gaussian kernel that keeps each one's whole weight inside the region".into()
        }
        CandidateKind::Uses { terms, remainder, .. } => {
            let parts: Vec<String> =
                terms.iter().map(|t| format!("{} ({})", words::name(&t.layer), form_words(t.form))).collect();
            let curves = match parts.as_slice() {
                [one] => format!("a curve over {one}, and an even share beside it"),
                _ => format!("curves over {}, multiplied, and an even share beside them", words::list(&parts)),
            };
            let field = "; all multiplied by a smooth field of what the layers leave unexplained";
            if remainder.is_some() { format!("{curves}{field}") } else { curves }
        }
        CandidateKind::Blend(members) => {
            let members: Vec<String> = members.iter().map(|m| format!("“{}”", words::name(m))).collect();
            format!(
                "a mixture of {}, its weights learned on {} left out of their fits",
                words::list(&members), words::nouns(f.records.count).1,
            )
        }
    }
}

/// What a form of curve does, in words.
pub(super) fn form_words(form: CurveForm) -> &'static str {
    match form {
        CurveForm::Exponential => "exponential, falling",
        CurveForm::HalfNormal => "half-normal, falling",
        CurveForm::FallingPower => "power, falling",
        CurveForm::RisingPower => "power, rising",
        CurveForm::LogLinear => "log-linear, rising",
    }
}

/// How a parameter is written.
#[derive(Clone, Copy)]
enum Written {
    Length,
    Share,
    Number,
}

impl Written {
    fn write(self, value: f64) -> String {
        match self {
            Self::Length => words::length(value),
            Self::Share => words::percent(value),
            Self::Number => words::digits(value, 3),
        }
    }
}

fn parameter(f: &Finding, c: &CandidateFinding, p: &Parameter) -> Value {
    let found = terms(&c.kind).iter().find_map(|t| {
        let rest = p.name.strip_prefix(t.layer.as_str())?.strip_prefix('.')?;
        Some((t.form, rest, f.layers.layer(&t.layer)))
    });
    let (written, unit, meaning) = match found {
        None => of_candidate(&p.name),
        Some((form, name, layer)) => of_layer((form, name), layer, p.value, c),
    };
    let interval =
        p.interval.map_or_else(String::new, |(l, h)| format!("{} to {}", written.write(l), written.write(h)));
    context! {
        name => words::name(&p.name), value => format!("{}{unit}", written.write(p.value)), interval,
        fitted => p.fitted, meaning,
    }
}

fn of_candidate(name: &str) -> (Written, String, String) {
    match name {
        "bandwidth" => (
            Written::Length,
            String::new(),
            "standard deviation of the kernel along each axis: 39 % of a record's weight falls within it, 86 % within twice as far".into(),
        ),
        "base" => (
            Written::Share,
            String::new(),
            "share of effort that no layer explains, spread evenly over the area".into(),
        ),
        "remainder.bandwidth" => (
            Written::Length,
            String::new(),
            "standard deviation along each axis of the field of what the layers leave unexplained".into(),
        ),
        "remainder.strength" => (
            Written::Number,
            String::new(),
            "how much evidence it takes to move that field from 1: it counts as much as so many units".into(),
        ),
        _ => match name.strip_prefix("weight.") {
            Some(member) => (Written::Share, String::new(), format!("part of “{}” in the mixture", words::name(member))),
            None => (Written::Number, String::new(), String::new()),
        },
    }
}

fn of_layer(
    (form, name): (CurveForm, &str),
    layer: &Layer,
    value: f64,
    c: &CandidateFinding,
) -> (Written, String, String) {
    let quoted = words::name(&layer.name);
    let other = |n: &str| {
        let wanted = format!("{}.{n}", layer.name);
        c.fitted.parameters.iter().find(|p| p.name == wanted).map_or(1.0, |p| p.value)
    };
    let scale = if layer.measure == Measure::Distance { Written::Length } else { Written::Number };
    let plain = |meaning: String| (Written::Number, String::new(), meaning);
    match (form, name) {
        (CurveForm::Exponential, _) => (
            scale,
            String::new(),
            "what the curve adds falls to 37 % at this distance, to 14 % at twice it".into(),
        ),
        (CurveForm::HalfNormal, _) => (
            scale,
            String::new(),
            "what the curve adds falls to 61 % at this distance, to 14 % at twice it".into(),
        ),
        (CurveForm::FallingPower, "scale") => {
            let left = words::percent(float::pow(2.0, -other("shape")));
            (scale, String::new(), format!("what the curve adds falls to {left} at this distance"))
        }
        (CurveForm::FallingPower, _) => plain("how steeply it falls off far away".into()),
        (CurveForm::RisingPower, "exponent") => {
            let factor = words::digits(float::pow(2.0, value), 3);
            plain(format!("where {quoted} doubles, what the curve adds is multiplied by {factor}"))
        }
        (CurveForm::RisingPower, _) => {
            let unit =
                if layer.unit.is_empty() { String::new() } else { format!(" {}", words::name(&layer.unit)) };
            (
                Written::Number,
                unit,
                "added to every value, so that a cell of none is not a cell of no effort".into(),
            )
        }
        (CurveForm::LogLinear, _) => {
            let (low, _, high) = layer.field.summary();
            let rise = words::times(float::exp(value * (high - low)));
            plain(format!(
                "from the lowest to the highest value of {quoted} what the curve adds grows {rise} times"
            ))
        }
    }
}

/// A term and what is to be shown of it.
struct Shown<'a> {
    layer: &'a Layer,
    form: CurveForm,
    classes: &'a [OddsBin],
    curve: Curve,
}

/// Unit a layer is shown in: divisor and name.
fn shown_unit(layer: &Layer, high: f64) -> (f64, String) {
    match layer.measure {
        Measure::Distance if high >= 3000.0 => (1000.0, "km".into()),
        Measure::Distance => (1.0, "m".into()),
        Measure::Value => (1.0, words::name(&layer.unit)),
    }
}

/// How a layer is best stretched along an axis: distances and counts crowd near zero.
fn across(classes: &[OddsBin], unit: f64) -> Axis {
    let (low, high) = (classes[0].from, classes[classes.len() - 1].to);
    let low = if low > 0.0 && low < 0.05 * high { 0.0 } else { low };
    let middle = classes[classes.len() / 2].from;
    let place = (middle - low) / (high - low);
    let smallest = classes.iter().map(|c| c.to).find(|v| *v > 0.0).unwrap_or(1.0);
    let shape = match () {
        () if classes.len() < 4 || low < 0.0 || place > 0.25 || place.is_nan() => Shape::Linear,
        () if place > 0.02 => Shape::Root,
        () => Shape::Shifted(smallest.max(high * 1e-4)),
    };
    Axis::new(shape, low, if high > low { high } else { low + 1.0 }, unit, 6)
}

fn observed(total: f64, class: &OddsBin, whole: f64, axis: &Axis) -> Observed {
    let ratio = class.ratio(total);
    let expected = total * class.area_share;
    let (low, high) = quantile::interval_95(class.units);
    let interval = (low / expected, high / expected);
    let at = axis.at(f64::midpoint(axis.along(class.from), axis.along(class.to)));
    Observed { class: (class.from, class.to), at, ratio, interval, whole }
}

/// The axis of ratios: all that is shown fits, but nothing far below the least observed.
fn up(points: &[Observed], line: &[(f64, f64)]) -> Axis {
    let least =
        points.iter().filter(|o| o.ratio > 0.0).map(|o| o.interval.0.min(o.whole)).fold(1.0, f64::min);
    let most = points.iter().map(|o| o.interval.1.max(o.whole)).fold(1.0, f64::max);
    let top = line.iter().map(|p| p.1).fold(most, f64::max).min(most * 4.0);
    let foot = line.iter().map(|p| p.1).fold(least, f64::min).max(least / 3.0).max(1e-3);
    let mut axis = Axis::new(Shape::Log, foot * 0.8, top * 1.25, 1.0, 7);
    axis.suffix = "×";
    axis
}

fn curve_figure(f: &Finding, c: &CandidateFinding, s: &Shown) -> Value {
    let total = f.records.weight();
    let whole = class_means(s.layer, s.classes, &c.fitted.density);
    let (divisor, unit) = shown_unit(s.layer, s.classes[s.classes.len() - 1].to);
    let across = across(s.classes, divisor);
    let points: Vec<Observed> =
        s.classes.iter().zip(&whole).map(|(b, w)| observed(total, b, *w, &across)).collect();
    let line: Vec<(f64, f64)> =
        (0..=160).map(|i| across.at(f64::from(i) / 160.0)).map(|x| (x, s.curve.at(x))).collect();
    let up = up(&points, &line);
    let name = words::name(&s.layer.name);
    let short: String = name.chars().take(28).collect();
    let title = match (s.layer.measure, unit.as_str()) {
        (Measure::Distance, u) => format!("distance from {short} ({u})"),
        (Measure::Value, "") => short,
        (Measure::Value, u) => format!("{short} ({})", u.chars().take(20).collect::<String>()),
    };
    let rows: Vec<Value> = s.classes.iter().zip(&points).map(|(b, o)| row(total, b, o, divisor)).collect();
    let (first, last) = (&points[0], &points[points.len() - 1]);
    let say = |o: &Observed| format!("{} times", words::times(o.ratio));
    let alt = format!(
        "{name}: observed share over available share is {} the even share in the lowest class and {} in the highest; the fitted curve ({}) runs from {} to {} times. The figures are in the table below.",
        say(first),
        say(last),
        form_words(s.form),
        words::times(line[0].1),
        words::times(line[line.len() - 1].1),
    );
    let below = line.iter().filter(|p| p.1 >= up.low && p.1 <= up.high).copied().collect();
    let chart = CurveChart {
        across,
        up,
        titles: (title, "effort per area, × even".into()),
        observed: points,
        line: below,
    };
    context! { name, form => form_words(s.form), unit, alt, rows, svg => plots::curve(&chart) }
}

fn row(total: f64, class: &OddsBin, o: &Observed, divisor: f64) -> Value {
    // a distance far below a metre in a kilometre is none
    let number = |v: f64| words::digits(if divisor > 1.0 && v < 1.0 { 0.0 } else { v / divisor }, 3);
    context! {
        class => if class.from == class.to { number(class.from) } else { format!("{} to {}", number(class.from), number(class.to)) },
        area => words::percent(class.area_share), units => words::weight(class.units),
        share => words::percent(class.units / total), ratio => words::times(o.ratio),
        interval => format!("{} to {}", words::times(o.interval.0), words::times(o.interval.1)),
        whole => words::times(o.whole),
    }
}

fn criterion(c: &CandidateFinding, e: &Evidence) -> Option<Value> {
    let chosen = c.fitted.parameters.iter().find(|p| p.name == e.parameter)?.value;
    let (low, high) = (e.tried.first()?.0, e.tried.last()?.0);
    let (least, most) = e.tried.iter().fold((f64::MAX, f64::MIN), |(l, h), t| (l.min(t.1), h.max(t.1)));
    let (unit, divisor) = if high >= 3000.0 { ("km", 1000.0) } else { ("m", 1.0) };
    let title = match e.parameter.as_str() {
        "remainder.bandwidth" => "bandwidth of the remainder".to_owned(),
        other => words::name(other),
    };
    let room = ((most - least) * 0.06).max(1e-6);
    let chart = CriterionChart {
        across: Axis::new(Shape::Log, low, high, divisor, 7),
        up: Axis::new(Shape::Linear, least - room, most + room, 1.0, 5),
        titles: (format!("{title} ({unit})"), "criterion (nats)".into()),
        tried: e.tried.clone(),
        chosen,
    };
    let rows: Vec<Value> = e
        .tried
        .iter()
        .map(|(x, v)| context! { at => words::length(*x), value => words::decimals(*v, 4) })
        .collect();
    let alt = format!(
        "Criterion over the bandwidths tried, {} to {}; it is highest, {} nats, at {}. The figures are in the table below.",
        words::length(low),
        words::length(high),
        words::decimals(most, 3),
        words::length(chosen),
    );
    Some(context! {
        title, criterion => e.criterion, chosen => words::length(chosen), alt,
        rows, svg => plots::criterion(&chart),
    })
}
