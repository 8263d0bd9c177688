//! Checks texts with a unit: lengths, durations, speeds, percentages.

use super::keys::{Lengths, listed};
use super::log::Log;
use super::table::Item;
use super::values::{found, wrong_type};
use crate::units::{Length, Share};

/// What kind of quantity is due, and in which units.
struct Due<'u> {
    what: &'u str,
    units: &'u [&'u str],
    zero: bool,
    words: &'u [&'u str],
}

/// Reports a length that is none, has the wrong unit or is out of range.
pub(super) fn length(log: &mut Log, item: &Item, lengths: &Lengths) {
    let later = item.text().is_some_and(|text| lengths.later.contains(&text));
    let due = Due { what: "length", units: lengths.units, zero: lengths.zero, words: lengths.words };
    if !later && quantity(log, item, &due) {
        let text = item.text().unwrap_or_default();
        let finite = lengths.words.contains(&text)
            || Length::parse(text).is_ok_and(|length| length.number().is_finite() && length.number() < 1e12);
        if !finite {
            let text = format!("`{}` is {}, which is longer than the earth", item.key, found(log, item));
            log.say(&item.span(), "out_of_range", text, "write a smaller length");
        }
    }
}

/// Reports a duration that is none.
pub(super) fn duration(log: &mut Log, item: &Item) {
    let due = Due { what: "duration", units: &["min", "h"], zero: false, words: &["fit"] };
    quantity(log, item, &due);
}

/// Reports a speed that is none.
pub(super) fn speed(log: &mut Log, item: &Item) {
    let closed: &[&str] = if item.key == "walk" { &[] } else { &["closed"] };
    quantity(log, item, &Due { what: "speed", units: &["km/h"], zero: false, words: closed });
}

/// Reports a percentage that is none.
pub(super) fn percent(log: &mut Log, item: &Item) {
    if !["observer", "dataset"].contains(&item.key) {
        let text = format!("`{}` is no key of `cap`", item.key);
        return log.say(&item.at, "unknown_key", text, "`cap` knows `observer` and `dataset`");
    }
    let due = Due { what: "share", units: &["%"], zero: false, words: &[] };
    if quantity(log, item, &due) && Share::parse_percent(item.text().unwrap_or_default()).is_err() {
        let text = format!("`{}` is {}, which is more than the whole", item.key, found(log, item));
        log.say(&item.span(), "out_of_range", text, "write at most \"100 %\"");
    }
}

/// Reports what is wrong with a quantity; `true` when nothing is.
fn quantity(log: &mut Log, item: &Item, due: &Due) -> bool {
    let before = log.count();
    match item.text().map(str::trim) {
        Some(text) if due.words.contains(&text) => {}
        Some(text) => text_quantity(log, item, due, text),
        None => match log.snippet(&item.span()) {
            Some(shown) if super::values::real(item.value.get_ref()).is_some() => {
                missing_unit(log, item, due, shown);
            }
            _ => wrong_type(log, item, &due.words(), &due.cure("1")),
        },
    }
    log.count() == before
}

fn text_quantity(log: &mut Log, item: &Item, due: &Due, text: &str) {
    let split = text.rfind(|c: char| c.is_ascii_digit() || c == '.').map_or(0, |at| at + 1);
    let (number, unit) = (text[..split].trim(), text[split..].trim());
    let Some(value) = number.parse::<f64>().ok().filter(|value| value.is_finite()) else {
        let problem = format!("`{text}` is no {}", due.what);
        return log.say(&item.span(), "bad_quantity", problem, &due.cure("1.5"));
    };
    let singular = |known: &&str| *known == unit || (*known == "cells" && unit == "cell");
    if unit.is_empty() {
        missing_unit(log, item, due, number);
    } else if !due.units.iter().any(singular) {
        let problem = format!("`{}` is {}, and the unit `{unit}` does not fit", item.key, found(log, item));
        log.say(&item.span(), "wrong_unit", problem, &due.cure(number));
    } else if value < 0.0 || (value == 0.0 && !due.zero) {
        let bound = if due.zero { "not below zero" } else { "above zero" };
        let problem = format!("`{}` is {}, where a {} {bound} is due", item.key, found(log, item), due.what);
        log.say(&item.span(), "out_of_range", problem, &due.cure("1"));
    }
}

fn missing_unit(log: &mut Log, item: &Item, due: &Due, number: &str) {
    let text = format!("`{}` is the bare number `{number}`, where {} is due", item.key, due.words());
    log.say(&item.span(), "missing_unit", text, &due.cure(number));
}

impl Due<'_> {
    fn words(&self) -> String {
        let units = listed(self.units.iter().copied(), "or");
        let words: String = self.words.iter().map(|word| format!(" or `\"{word}\"`")).collect();
        format!("a {} in {units}{words}", self.what)
    }

    /// How to write `number` in each unit that fits.
    fn cure(&self, number: &str) -> String {
        let number = number.trim_start_matches(['-', '+']);
        let forms: Vec<String> = self.units.iter().map(|unit| format!("`\"{number} {unit}\"`")).collect();
        let words: String = self.words.iter().map(|word| format!(" or `\"{word}\"`")).collect();
        format!("write {}{words}", forms.join(" or "))
    }
}
