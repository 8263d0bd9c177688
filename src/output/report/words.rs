//! Numbers and names as people read them: sensible digits, units, nothing that could upset a page.
//!
//! Works out nothing new; it only spells what it is given.

use crate::check::Estimate;
use crate::maths::float;
use crate::records::Count;

/// Longest name shown in full, in characters.
const LONGEST_NAME: usize = 120;

/// Whether a character may stand on the page: no controls beside line breaks and tabs, no marks that
/// turn the direction of text, no invisible ones.
fn shown(c: char) -> bool {
    let turns =
        matches!(c, '\u{61c}' | '\u{200e}' | '\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{206f}');
    let hidden =
        matches!(c, '\u{200b}'..='\u{200d}' | '\u{2028}' | '\u{2029}' | '\u{feff}' | '\u{fff9}'..='\u{fffb}');
    let control = c.is_control() && c != '\n' && c != '\t';
    !(turns || hidden || control)
}

/// Text without the characters that must not reach a page; escaping is the template's part.
pub(super) fn clean(text: &str) -> String {
    text.chars().filter(|c| shown(*c)).collect()
}

/// A cleaned name on one line, cut when it is very long.
pub(super) fn name(text: &str) -> String {
    let line: Vec<char> = clean(text).chars().map(|c| if c == '\n' || c == '\t' { ' ' } else { c }).collect();
    if line.len() <= LONGEST_NAME {
        return line.into_iter().collect();
    }
    line[..LONGEST_NAME].iter().chain(['…'].iter()).collect()
}

/// A number with so many decimals, thousands set off, and a true minus.
pub(super) fn decimals(value: f64, digits: usize) -> String {
    if !value.is_finite() {
        return if value.is_nan() { "–" } else { if value > 0.0 { "∞" } else { "−∞" } }.into();
    }
    let text = format!("{:.digits$}", value.abs());
    let (whole, part) = text.split_once('.').map_or((text.as_str(), None), |(w, p)| (w, Some(p)));
    let zero = text.chars().all(|c| c == '0' || c == '.');
    let mut out = String::from(if value < 0.0 && !zero { "−" } else { "" });
    for (i, c) in whole.chars().enumerate() {
        if i > 0 && (whole.len() - i).is_multiple_of(3) {
            out.push(',');
        }
        out.push(c);
    }
    if let Some(part) = part {
        out.push('.');
        out.push_str(part);
    }
    out
}

/// A time in UTC, ISO 8601, easier on the eye.
pub(super) fn time(iso: &str) -> String {
    name(iso).replacen('T', " ", 1).replacen('Z', " UTC", 1)
}

/// A count.
pub(super) fn count(value: u64) -> String {
    decimals(value as f64, 0)
}

/// A weight of units: whole where it is whole.
pub(super) fn weight(value: f64) -> String {
    decimals(value, usize::from((value - value.round()).abs() > 1e-9 && value < 1000.0))
}

/// A number with so many significant digits, trailing zeros after the point dropped; very large and
/// very small ones as a power of ten.
pub(super) fn digits(value: f64, significant: usize) -> String {
    if value == 0.0 || !value.is_finite() {
        return decimals(value, 0);
    }
    let power = float::log10(value.abs()).floor();
    if !(-4.0..=9.0).contains(&power) {
        let text = format!("{:.*e}", significant - 1, value.abs());
        let (mantissa, exponent) = text.split_once('e').unwrap_or((&text, "0"));
        let sign = if value < 0.0 { "−" } else { "" };
        let raised: String = exponent.chars().map(raised).collect();
        return format!("{sign}{mantissa} × 10{raised}");
    }
    let places = (significant as f64 - 1.0 - power).max(0.0) as usize;
    let text = decimals(value, places);
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').into() } else { text }
}

/// A sign or figure of an exponent.
fn raised(c: char) -> char {
    let figures = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    c.to_digit(10).map_or('⁻', |d| figures[d as usize])
}

/// A length in metres, as metres or kilometres.
pub(super) fn length(metres: f64) -> String {
    if metres.abs() >= 1000.0 {
        format!("{}\u{a0}km", digits(metres / 1000.0, 3))
    } else {
        format!("{}\u{a0}m", digits(metres, 3))
    }
}

/// An area in m², as km².
pub(super) fn area(square_metres: f64) -> String {
    format!("{}\u{a0}km²", digits(square_metres / 1e6, 4))
}

/// A share as a percentage.
pub(super) fn percent(share: f64) -> String {
    let value = 100.0 * share;
    let places = usize::from(value < 10.0) + usize::from(value > 0.0 && value < 0.095);
    let text = decimals(value, places);
    let text = if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.') } else { &text };
    format!("{text}\u{a0}%")
}

/// How many times as much.
pub(super) fn times(factor: f64) -> String {
    if factor > 0.0 && factor < 0.001 {
        return "under 0.001".into();
    }
    digits(factor, if factor < 100.0 { 2 } else { 3 })
}

/// A figure that may not be defined.
pub(super) fn value(e: &Estimate, places: usize) -> String {
    e.value.map_or_else(|| "not defined".into(), |v| decimals(v, places))
}

/// The interval of a figure; empty where there is none.
pub(super) fn interval(e: &Estimate, places: usize) -> String {
    e.interval
        .map_or_else(String::new, |(l, h)| format!("[{}, {}]", decimals(l, places), decimals(h, places)))
}

/// A figure and its interval in one.
pub(super) fn both(e: &Estimate, places: usize) -> String {
    format!("{} {}", value(e, places), interval(e, places)).trim_end().to_owned()
}

/// One unit, and several, of what is counted.
pub(super) fn nouns(count: Count) -> (&'static str, &'static str) {
    match count {
        Count::Visits => ("visit", "visits"),
        Count::Records => ("record", "records"),
        Count::Places => ("place", "places"),
    }
}

/// `a, b and c`.
pub(super) fn list(items: &[String]) -> String {
    match items {
        [] => String::new(),
        [one] => one.clone(),
        [first @ .., last] => format!("{} and {last}", first.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_have_sensible_digits() {
        assert_eq!(decimals(-1_234_567.891, 2), "−1,234,567.89");
        assert_eq!(decimals(-0.001, 2), "0.00");
        assert_eq!(digits(0.012_345, 3), "0.0123");
        assert_eq!(digits(12.0, 3), "12");
        assert_eq!(digits(3.2e-9, 2), "3.2 × 10⁻⁹");
        assert_eq!(digits(9.999, 2), "10");
        assert_eq!(length(12_345.0), "12.3\u{a0}km");
        assert_eq!(length(250.0), "250\u{a0}m");
        assert_eq!(percent(0.4567), "46\u{a0}%");
        assert_eq!(percent(0.0123), "1.2\u{a0}%");
        assert_eq!((percent(0.01), percent(0.0)), ("1\u{a0}%".into(), "0\u{a0}%".into()));
        assert_eq!(time("2026-01-02T03:04:05Z"), "2026-01-02 03:04:05 UTC");
        assert_eq!(count(25_000), "25,000");
        assert_eq!(list(&["a".into(), "b".into(), "c".into()]), "a, b and c");
    }

    #[test]
    fn hostile_characters_are_dropped() {
        assert_eq!(clean("a\u{202e}b\u{0}c\u{1b}[31m\nd\u{2066}"), "abc[31m\nd");
        assert_eq!(name("a\nb\tc"), "a b c");
        assert_eq!(name(&"x".repeat(10_000)).chars().count(), 121);
    }
}
