//! Writes the reference of a plan's keys from the one list of them.

use super::keys::{Bounds, Key, Kind, SECTIONS, Since, heading, keys_of};

const HEAD: &str = "# The keys of a plan

A plan is a TOML file. Paths are relative to its folder. `★` marks what must be there. What this
version refuses is marked *not in this version*. Lengths are text with a unit (`\"250 m\"`,
`\"1.5 km\"`, `\"2 cells\"`); a share is a number from 0 to below 1.

This page is made from the program's own list of keys.
";

/// The reference as a Markdown page.
pub fn reference() -> String {
    let mut page = HEAD.to_string();
    for (section, _) in SECTIONS {
        let rows: Vec<String> = keys_of(section).map(row).collect();
        if !rows.is_empty() {
            let heading = heading(section);
            let heading = if section.is_empty() { "At the top" } else { heading };
            page += &format!("\n## {}\n\n", heading.strip_prefix("a ").unwrap_or(heading));
            page += "| key | value | default | meaning |\n|---|---|---|---|\n";
            page += &rows.concat();
        }
    }
    page
}

fn row(key: &Key) -> String {
    let star = if key.required { " ★" } else { "" };
    let default = if key.default.is_empty() { "–" } else { key.default };
    let later = match key.since {
        Since::Now => String::new(),
        Since::Later => "; *not in this version*".into(),
        Since::Only(value) => format!("; *this version takes only* `{value}`"),
    };
    format!("| `{}`{star} | {} | {default} | {}{later} |\n", key.name, value(&key.kind), key.meaning)
}

fn value(kind: &Kind) -> String {
    match kind {
        Kind::Text => "text".into(),
        Kind::Crs => "text, such as `\"EPSG:3035\"`".into(),
        Kind::Name => "letters, digits, `-` and `_`".into(),
        Kind::Path => "path".into(),
        Kind::RecordFiles => "path, or list of paths".into(),
        Kind::PathList => "list of paths".into(),
        Kind::Words => "list of texts".into(),
        Kind::Flag => "`true` or `false`".into(),
        Kind::Whole(0, i64::MAX) => "whole number, not below 0".into(),
        Kind::Whole(from, to) => format!("whole number from {from} to {to}"),
        Kind::Number(bounds) => number(*bounds).into(),
        Kind::Fitted(bounds) => format!("{}, or `\"fit\"`", number(*bounds)),
        Kind::Share => "share".into(),
        Kind::FittedShare => "share, or `\"fit\"`".into(),
        Kind::Length(lengths) => {
            format!("length in {}{}", lengths.units.join(", "), words(lengths.words, lengths.later))
        }
        Kind::Bandwidth(lengths) => {
            let words = words(lengths.words, lengths.later);
            format!("length in {}{words} or a table (*not in this version*)", lengths.units.join(", "))
        }
        Kind::Scale => "length in m, km, or `\"fit\"`".into(),
        Kind::Choice(choice) => words(choice.now, choice.later).trim_start_matches(", ").into(),
        Kind::Dates => "ISO 8601 date or range, in quotes".into(),
        Kind::Values => "table of columns with a value or a list of them".into(),
        Kind::Shares => "table of `observer`, `dataset` with `\"10 %\"`".into(),
        Kind::Speed => "speed, such as `\"5 km/h\"`".into(),
        Kind::Speeds => "table of classes with their speeds".into(),
        Kind::Table => "table".into(),
        Kind::Tables => "list of tables".into(),
        Kind::Terms => "table of layers, each with a table of its curve".into(),
    }
}

fn number(bounds: Bounds) -> &'static str {
    match bounds {
        Bounds::Any => "number",
        Bounds::NotNegative => "number, not below 0",
        Bounds::Positive => "number above 0",
    }
}

fn words(now: &[&str], later: &[&str]) -> String {
    let now = now.iter().map(|word| format!(", `\"{word}\"`"));
    let later = later.iter().map(|word| format!(", `\"{word}\"` (*not in this version*)"));
    now.chain(later).collect()
}
