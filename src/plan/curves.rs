//! Reads one layer's curve in `uses` of a candidate.

use super::keys::{Lengths, listed};
use super::layers::Known;
use super::log::Log;
use super::measures;
use super::table::{Item, Table};
use super::values::{out_of_range, real, wrong_type};
use crate::model::{CurveForm, Fit};
use crate::units::Length;

/// The parameters of a curve over a falling and over a rising layer; `None` where it doesn't fit.
type Parameters = Option<&'static [&'static str]>;

/// All curves of the plan's language: word, parameters when falling, parameters when rising.
const FORMS: [(&str, Parameters, Parameters); 8] = [
    ("exponential", Some(&["scale"]), None),
    ("half-normal", Some(&["scale"]), None),
    ("hazard-rate", Some(&["scale", "shape"]), None),
    ("log-logistic", Some(&["scale", "shape"]), None),
    ("power", Some(&["scale", "shape"]), Some(&["exponent", "offset"])),
    ("saturating", None, Some(&["scale"])),
    ("log-linear", None, Some(&["rate"])),
    ("monotone", Some(&[]), Some(&[])),
];

/// Every parameter a curve may have.
const PARAMETERS: [&str; 5] = ["scale", "shape", "exponent", "offset", "rate"];

/// Reads a curve and its parameters; `None` when something that was reported is wrong.
pub(super) fn read(log: &mut Log, item: &Item, layer: Option<&Known>) -> Option<(CurveForm, Vec<Fit<f64>>)> {
    let table = Table::open(log, "candidate.uses", item.value)?;
    let layer = layer.filter(|layer| layer.measure.is_some());
    if let Some(scale) = table.item("scale") {
        check_scale(log, scale, layer?);
    }
    let layer = layer?;
    let curve = table.text("curve")?;
    let (_, falling, rising) = FORMS.iter().find(|(word, ..)| *word == curve)?;
    let Some(parameters) = (if layer.falls() { *falling } else { *rising }) else {
        wrong_direction(log, table.item("curve")?, layer);
        return None;
    };
    check_parameters(log, &table, curve, parameters);
    let form = form(curve, layer.falls())?;
    let given = |name: &&str| parameter(&table, name);
    Some((form, form.parameters().iter().map(given).collect()))
}

fn form(curve: &str, falls: bool) -> Option<CurveForm> {
    match (curve, falls) {
        ("exponential", _) => Some(CurveForm::Exponential),
        ("half-normal", _) => Some(CurveForm::HalfNormal),
        ("power", true) => Some(CurveForm::FallingPower),
        ("power", false) => Some(CurveForm::RisingPower),
        ("log-linear", _) => Some(CurveForm::LogLinear),
        _ => None, // refused as not supported
    }
}

fn wrong_direction(log: &mut Log, item: &Item, layer: &Known) {
    let fits = |falling: &Parameters, rising: &Parameters| match layer.falls() {
        true => falling.is_some(),
        false => rising.is_some(),
    };
    let fitting = FORMS.iter().filter(|(_, falling, rising)| fits(falling, rising)).map(|(word, ..)| *word);
    let fitting = fitting.filter(|word| super::known::CURVES.contains(word));
    let (curve, measure) = (item.text().unwrap_or_default(), layer.measure.unwrap_or_default());
    let way = if layer.falls() { "rises" } else { "falls" };
    let text = format!("the curve `{curve}` {way}, which does not fit `{}`, a `{measure}` layer", layer.name);
    log.say(&item.span(), "curve_direction", text, &format!("write {}", listed(fitting, "or")));
}

fn check_parameters(log: &mut Log, table: &Table, curve: &str, parameters: &[&str]) {
    let others: Vec<&str> = PARAMETERS.into_iter().filter(|name| !parameters.contains(name)).collect();
    let takes = match parameters {
        [] => "no parameters".to_string(),
        names => listed(names.iter().copied(), "and"),
    };
    table.misplaced(log, &others, |key| {
        format!("`{key}` is no parameter of the curve `{curve}` over this layer, which takes {takes}")
    });
}

/// A scale over distance is a length, over travel time a duration, over other layers a number.
fn check_scale(log: &mut Log, item: &Item, layer: &Known) {
    match layer.measure {
        Some("distance") => {
            let lengths = Lengths { units: &["m", "km"], zero: false, words: &["fit"], later: &[] };
            measures::length(log, item, &lengths);
        }
        Some("travel-time") => measures::duration(log, item),
        _ => {
            let due = "a number above 0 or `\"fit\"`";
            match real(item.value.get_ref()) {
                Some(number) if number.is_finite() && number > 0.0 => {}
                Some(_) => out_of_range(log, item, due),
                None if item.text() == Some("fit") => {}
                None => wrong_type(log, item, due, "write a number in the unit of the layer"),
            }
        }
    }
}

fn parameter(table: &Table, name: &str) -> Fit<f64> {
    let length = |text: &str| match Length::parse(text) {
        Ok(Length::Metres(metres)) => Some(metres.get()),
        _ => None, // "fit"
    };
    table.number(name).or_else(|| table.text(name).and_then(length)).map_or(Fit::Fitted, Fit::Given)
}
