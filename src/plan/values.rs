//! Checks single values of a plan: their kind, their unit and their range.

use toml::de::{DeArray, DeValue};

use super::keys::{Bounds, Choice, Key, Kind, Lengths, listed, nearest};
use super::log::Log;
use super::measures;
use super::table::{Item, entries};
use crate::gate::is_remote;
use crate::records::DateRange;
use crate::units::Share;

/// Reports what is wrong with the value of a key.
pub(super) fn validate(log: &mut Log, known: &Key, item: &Item) {
    match &known.kind {
        Kind::Text => not_empty(log, item),
        Kind::Crs | Kind::Path => path(log, item),
        Kind::Name => name(log, item),
        Kind::RecordFiles => files(log, item),
        Kind::PathList => list(log, item, path),
        Kind::Words => list(log, item, not_empty),
        Kind::Flag if item.value.get_ref().is_bool() => {}
        Kind::Flag => wrong_type(log, item, "`true` or `false`", "write `true` or `false`, without quotes"),
        Kind::Whole(from, to) => whole(log, item, *from, *to),
        Kind::Number(bounds) => number(log, item, *bounds, ""),
        Kind::Fitted(bounds) => number(log, item, *bounds, " or `\"fit\"`"),
        Kind::Share => share(log, item, ""),
        Kind::FittedShare => share(log, item, " or `\"fit\"`"),
        Kind::Length(lengths) => measures::length(log, item, lengths),
        Kind::Bandwidth(lengths) => bandwidth(log, item, lengths),
        Kind::Scale => {} // depends on the layer: checked where the curve is read
        Kind::Choice(choice) => word(log, item, choice),
        Kind::Dates => dates(log, item),
        Kind::Values => columns(log, item),
        Kind::Shares => each(log, item, measures::percent),
        Kind::Speed => measures::speed(log, item),
        Kind::Speeds => each(log, item, measures::speed),
        Kind::Table if item.value.get_ref().is_table() => {}
        Kind::Table => table_due(log, item, &format!("write `[{0}]` or `{0} = {{ … }}`", item.key)),
        Kind::Tables => tables(log, item),
        Kind::Terms => each(log, item, term),
    }
}

/// A whole number, if the value is one and fits.
pub(super) fn integer(value: &DeValue) -> Option<i64> {
    let number = value.as_integer()?;
    i64::from_str_radix(number.as_str(), number.radix()).ok()
}

/// A number, if the value is one (whole or not).
pub(super) fn real(value: &DeValue) -> Option<f64> {
    match value {
        DeValue::Integer(_) => integer(value).map(|whole| whole as f64),
        DeValue::Float(number) => number.as_str().parse().ok(),
        _ => None,
    }
}

/// What was found, in words: "the text `"5"`".
pub(super) fn found(log: &Log, item: &Item) -> String {
    let kind = match item.value.get_ref() {
        DeValue::String(_) => "text",
        DeValue::Integer(_) | DeValue::Float(_) => "number",
        DeValue::Boolean(_) => "flag",
        DeValue::Datetime(_) => "bare date",
        DeValue::Array(_) => "list",
        DeValue::Table(_) => "table",
    };
    match log.snippet(&item.span()) {
        Some(shown) => format!("the {kind} `{shown}`"),
        None => format!("a {kind}"),
    }
}

/// Reports a value of the wrong kind.
pub(super) fn wrong_type(log: &mut Log, item: &Item, due: &str, cure: &str) {
    let text = format!("`{}` is {}, where {due} is due", item.key, found(log, item));
    log.say(&item.span(), "wrong_type", text, cure);
}

/// Reports a number that is not legal.
pub(super) fn out_of_range(log: &mut Log, item: &Item, due: &str) {
    let text = format!("`{}` is {}, where {due} is due", item.key, found(log, item));
    log.say(&item.span(), "out_of_range", text, &format!("write {due}"));
}

fn not_empty(log: &mut Log, item: &Item) {
    text(log, item);
}

/// A text that is not empty, or `None` with a report.
pub(super) fn text<'t>(log: &mut Log, item: &Item<'t>) -> Option<&'t str> {
    let Some(text) = item.text() else {
        wrong_type(log, item, "text", "write it in double quotes");
        return None;
    };
    if text.trim().is_empty() {
        let cure = format!("write something between the quotes, or remove `{}`", item.key);
        log.say(&item.span(), "empty", format!("`{}` is empty", item.key), &cure);
        return None;
    }
    Some(text)
}

fn path(log: &mut Log, item: &Item) {
    if let Some(path) = text(log, item).filter(|path| is_remote(path)) {
        let text = format!("`{path}` would open a network connection, which this program never does");
        log.say(&item.span(), "remote_path", text, "copy what it names to this machine and name that file");
    }
}

/// Longest name, so that the files made of it have legal names everywhere.
const LONGEST_NAME: usize = 60;

fn name(log: &mut Log, item: &Item) {
    let Some(name) = text(log, item) else { return };
    let legal = |c: char| c.is_alphanumeric() || c == '-' || c == '_';
    if !name.chars().all(legal) || name.chars().count() > LONGEST_NAME {
        let text = format!("the name `{name}` cannot be part of the name of a file");
        let cure = format!("use letters, digits, `-` and `_` only, {LONGEST_NAME} at most");
        log.say(&item.span(), "bad_name", text, &cure);
    }
}

fn files(log: &mut Log, item: &Item) {
    if item.value.get_ref().is_array() { list(log, item, path) } else { path(log, item) }
}

/// The elements of a list, each under the key of the list.
pub(super) fn elements<'t>(item: &Item<'t>) -> impl Iterator<Item = Item<'t>> {
    let list: Option<&'t DeArray<'t>> = item.value.get_ref().as_array();
    let (key, at) = (item.key, item.at.clone());
    list.into_iter().flat_map(|list| list.iter()).map(move |value| Item {
        key,
        at: at.clone(),
        value,
        sound: true,
    })
}

fn list(log: &mut Log, item: &Item, check: impl Fn(&mut Log, &Item)) {
    if !item.value.get_ref().is_array() {
        return wrong_type(log, item, "a list of texts", "write it in brackets, such as `[\"…\", \"…\"]`");
    }
    let optional = item.key == "also"; // an empty list of further formats is the default
    if elements(item).next().is_none() && !optional {
        let cure = format!("name at least one, or remove `{}`", item.key);
        log.say(&item.span(), "empty", format!("the list `{}` is empty", item.key), &cure);
    }
    elements(item).for_each(|element| check(log, &element));
}

fn whole(log: &mut Log, item: &Item, from: i64, to: i64) {
    let due = format!("a whole number from {from} to {to}");
    match item.value.get_ref() {
        DeValue::Integer(_) => {
            if !integer(item.value.get_ref()).is_some_and(|number| (from..=to).contains(&number)) {
                out_of_range(log, item, &due);
            }
        }
        _ => wrong_type(log, item, &due, "write it with neither quotes nor a decimal point"),
    }
}

fn number(log: &mut Log, item: &Item, bounds: Bounds, or_fit: &str) {
    let due = match bounds {
        Bounds::Any => "a number",
        Bounds::NotNegative => "a number not below 0",
        Bounds::Positive => "a number above 0",
    };
    real_within(log, item, &format!("{due}{or_fit}"), |number| match bounds {
        Bounds::Any => true,
        Bounds::NotNegative => number >= 0.0,
        Bounds::Positive => number > 0.0,
    });
}

fn share(log: &mut Log, item: &Item, or_fit: &str) {
    let due = format!("a share from 0 to below 1{or_fit}");
    real_within(log, item, &due, |number| Share::new(number).is_some() && number < 1.0);
}

fn real_within(log: &mut Log, item: &Item, due: &str, legal: impl Fn(f64) -> bool) {
    let or_fit = due.ends_with("`\"fit\"`");
    match item.value.get_ref() {
        DeValue::Integer(_) | DeValue::Float(_) => {
            if !real(item.value.get_ref()).is_some_and(|number| number.is_finite() && legal(number)) {
                out_of_range(log, item, due);
            }
        }
        DeValue::String(text) if or_fit && text == "fit" => {}
        _ => wrong_type(log, item, due, "write a number without quotes or unit"),
    }
}

fn bandwidth(log: &mut Log, item: &Item, lengths: &Lengths) {
    if !item.value.get_ref().is_table() {
        measures::length(log, item, lengths);
    } // a table is opened, and refused, where the bandwidth is read
}

fn word(log: &mut Log, item: &Item, choice: &Choice) {
    let known = || choice.now.iter().chain(choice.later).copied();
    let words = listed(choice.now.iter().copied(), "or");
    let Some(word) = item.text() else {
        let cure = format!("write {words} in double quotes");
        return wrong_type(log, item, &format!("one of the words {words}"), &cure);
    };
    if !known().any(|other| other == word) {
        let near = nearest(word, known()).unwrap_or_default();
        let text = format!("`{}` does not know the word `{word}`", item.key);
        let cure = format!("write {words}; the nearest word is `{near}`");
        log.say(&item.span(), "unknown_word", text, &cure);
    }
}

fn dates(log: &mut Log, item: &Item) {
    let cure =
        "write a date or a range of dates in quotes, such as `\"2005/2024\"` or `\"2004-03/2019-10-31\"`";
    match item.text() {
        None => wrong_type(log, item, "text with ISO 8601 dates", cure),
        Some(text) if DateRange::parse(text).is_none() => {
            let problem = format!("`{text}` is no ISO 8601 date or range of dates, the earlier end first");
            log.say(&item.span(), "bad_date", problem, cure);
        }
        Some(_) => {}
    }
}

/// Reports unless the value is a table; checks each of its entries.
fn each(log: &mut Log, item: &Item, check: impl Fn(&mut Log, &Item)) {
    let Some(table) = item.value.get_ref().as_table() else {
        return table_due(log, item, &format!("write `{} = {{ … = … }}`", item.key));
    };
    if table.is_empty() {
        let text = format!("`{}` is empty", item.key);
        log.say(&item.span(), "empty", text, &format!("name at least one entry, or remove `{}`", item.key));
    }
    entries(table).iter().for_each(|entry| check(log, entry));
}

fn term(log: &mut Log, item: &Item) {
    if !item.value.get_ref().is_table() {
        table_due(log, item, &format!("write `{} = {{ curve = \"…\" }}`", item.key));
    }
}

fn columns(log: &mut Log, item: &Item) {
    each(log, item, |log, column| {
        if column.key.trim().is_empty() {
            log.say(&column.at, "empty", "the name of a column is empty", "name a column of the records");
        }
        let value = column.value.get_ref();
        match value.as_array() {
            Some(list) if list.is_empty() => {
                let text = format!("the list of values for `{}` is empty", column.key);
                log.say(&column.span(), "empty", text, "name at least one value");
            }
            Some(_) => elements(column).for_each(|element| column_value(log, &element)),
            None => column_value(log, column),
        }
    });
}

/// A value may be empty: that is how rows without one are found.
fn column_value(log: &mut Log, item: &Item) {
    if item.text().is_none() {
        let cure = "write the value in double quotes, as it stands in the records";
        wrong_type(log, item, "text, or a list of texts,", cure);
    }
}

fn tables(log: &mut Log, item: &Item) {
    let each_is_table =
        item.value.get_ref().as_array().is_some_and(|l| l.iter().all(|v| v.get_ref().is_table()));
    if !each_is_table {
        table_due(log, item, &format!("write `[[{}]]` above each of them", item.key));
    }
}

fn table_due(log: &mut Log, item: &Item, cure: &str) {
    let due = if cure.contains("[[") { "a list of tables" } else { "a table" };
    wrong_type(log, item, due, cure);
}
