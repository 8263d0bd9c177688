//! Refuses by name what a plan may ask of later versions only.

use toml::de::DeValue;

use super::keys::{Choice, Key, Kind, Since, listed};
use super::log::{Log, Span};
use super::table::Item;
use super::values::{elements, integer};
use crate::units::Length;

/// Reports a sound value that this version does not honour.
pub(super) fn refuse(log: &mut Log, known: &Key, item: &Item) {
    match known.since {
        Since::Later if belongs_to_later_measure(known) => {} // its measure is refused, once
        Since::Later => {
            not_supported(log, &item.at, &format!("`{}`", item.key), &format!("remove `{}`", item.key));
        }
        Since::Only(value) => refuse_others(log, item, value),
        Since::Now => refuse_words(log, known, item),
    }
}

/// Reports that this version does not support `what`.
pub(super) fn not_supported(log: &mut Log, span: &Span, what: &str, cure: &str) {
    let verb = if what.ends_with('s') { "are" } else { "is" };
    log.say(span, "not_supported", format!("{what} {verb} not supported by this version"), cure);
}

fn belongs_to_later_measure(known: &Key) -> bool {
    known.section.starts_with("layer")
        || matches!(known.section, "candidate.density.bandwidth" | "candidate.remainder.bandwidth")
        || known.section == "environment"
}

fn refuse_others(log: &mut Log, item: &Item, only: &str) {
    let honoured = match item.value.get_ref() {
        DeValue::Boolean(flag) => !flag,
        DeValue::Integer(_) => integer(item.value.get_ref()) == Some(1),
        DeValue::String(text) => Length::parse(text).is_ok_and(|length| length.number() == 0.0),
        DeValue::Array(list) => list.is_empty(),
        _ => false,
    };
    if honoured {
        return;
    }
    if item.key == "sensitive" {
        let text = "`sensitive = true` is not supported by this version, \
                    which cannot keep coordinates from leaving";
        let cure = "do not use this version on records whose coordinates must not leave; \
                    `false` is only right where they may";
        return log.say(&item.span(), "not_supported", text, cure);
    }
    let shown = log.snippet(&item.span()).unwrap_or("…");
    let what = format!("`{} = {shown}`", item.key);
    not_supported(log, &item.span(), &what, &format!("write `{} = {only}`, or leave it out", item.key));
}

fn refuse_words(log: &mut Log, known: &Key, item: &Item) {
    match &known.kind {
        Kind::Choice(choice) => refuse_choice(log, choice, item),
        Kind::Length(lengths) | Kind::Bandwidth(lengths) => {
            let Some(word) = item.text().filter(|word| lengths.later.contains(word)) else { return };
            let instead = match lengths.words {
                [] => "write a length, or leave it out".to_string(),
                words => format!("write a length or {}", listed(words.iter().copied(), "or")),
            };
            not_supported(log, &item.span(), &format!("`{} = \"{word}\"`", item.key), &instead);
        }
        Kind::RecordFiles if item.value.get_ref().is_array() => {
            elements(item).for_each(|element| refuse_file(log, &element));
        }
        Kind::RecordFiles => refuse_file(log, item),
        _ => {}
    }
}

fn refuse_choice(log: &mut Log, choice: &Choice, item: &Item) {
    let Some(word) = item.text().filter(|word| choice.later.contains(word)) else { return };
    let what = match choice.noun {
        "" => format!("`{} = \"{word}\"`", item.key),
        noun => format!("`{word}` {noun}"),
    };
    let cure = format!("write {}", listed(choice.now.iter().copied(), "or"));
    not_supported(log, &item.span(), &what, &cure);
}

/// Endings of packed files that are not read.
const PACKED: [&str; 8] = [".tgz", ".tar.gz", ".bz2", ".xz", ".zst", ".tar", ".7z", ".rar"];

fn refuse_file(log: &mut Log, item: &Item) {
    let Some(file) = item.text().map(str::to_lowercase) else { return };
    if PACKED.iter().any(|ending| file.ends_with(ending)) {
        let cure = "unpack it and give the file inside (zip and gzip are read as they are)";
        not_supported(log, &item.span(), "files packed in this way", cure);
    }
}
