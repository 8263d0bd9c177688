//! The rules that need nothing but the row itself.

use crate::maths::decimal::decimal;

use super::dates::{DateRange, Precision};
use super::ledger::Rule;
use super::row::{Fields, Place, trimmed};
use super::settings::{ColumnValues, RecordsPlan};

/// What is left of a row that passed.
pub struct Passed {
    /// Coordinates as written.
    pub xy: (f64, f64),
    /// Its date, where readable.
    pub date: Option<DateRange>,
    /// Its radius of uncertainty.
    pub radius: Radius,
}

/// What a row says of its radius of uncertainty.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Radius {
    /// So many metres.
    Metres(f64),
    /// Nothing.
    Unknown,
    /// Zero or less, which no place can be: treated as unknown.
    NotPositive,
    /// Something that is no number: treated as unknown.
    Unreadable,
}

impl Radius {
    /// The radius, where it is known.
    pub fn metres(self) -> Option<f64> {
        if let Self::Metres(m) = self { Some(m) } else { None }
    }

    fn read(text: &str) -> Self {
        let text = trimmed(text);
        if text.is_empty() {
            return Self::Unknown;
        }
        match decimal(text) {
            Some(m) if m > 0.0 && m.is_finite() => Self::Metres(m),
            Some(m) if m <= 0.0 => Self::NotPositive,
            _ => Self::Unreadable,
        }
    }
}

/// Applies the rules from `absent` to `not_kept`; the first that applies counts.
pub fn screen(
    fields: &Fields,
    plan: &RecordsPlan,
    degrees: bool,
    date: Option<DateRange>,
) -> Result<Passed, (Rule, String)> {
    if let Some(why) = absent(fields) {
        return Err((Rule::Absent, why));
    }
    let xy = coordinates(fields.place, degrees)?;
    let uncertainty = Radius::read(fields.uncertainty);
    if let (Some(limit), Some(radius)) = (plan.max_uncertainty, uncertainty.metres())
        && radius > limit.get()
    {
        return Err((Rule::TooVague, format!("{radius} m")));
    }
    if let Some(range) = plan.dates {
        let date = date.ok_or_else(|| (Rule::NoDate, fields.date.to_owned()))?;
        if !range.contains(&date) {
            return Err((Rule::OutsideDates, fields.date.to_owned()));
        }
    }
    let (keep, leave_out) = fields.filters.split_at(plan.keep.len());
    if let Some(i) = (0..leave_out.len()).find(|&i| names(&plan.leave_out[i], leave_out[i])) {
        return Err((Rule::LeftOut, format!("{}={}", plan.leave_out[i].column, leave_out[i])));
    }
    if let Some(i) = (0..keep.len()).find(|&i| !names(&plan.keep[i], keep[i])) {
        return Err((Rule::NotKept, format!("{}={}", plan.keep[i].column, keep[i])));
    }
    Ok(Passed { xy, date, radius: uncertainty })
}

/// The row's date, from its date column or else from year, month and day.
pub fn date_of(fields: &Fields) -> Option<DateRange> {
    if !trimmed(fields.date).is_empty() {
        return DateRange::parse(fields.date);
    }
    let [y, m, d] = fields.year_month_day.map(str::trim);
    match (y, m, d) {
        ("", _, _) => None,
        (y, "", _) => DateRange::parse(y),
        (y, m, "") => DateRange::parse(&format!("{y}-{m:0>2}")),
        (y, m, d) => DateRange::parse(&format!("{y}-{m:0>2}-{d:0>2}")),
    }
}

/// How finely a row's date column is written: day, range, month, year, or nothing readable.
pub fn precision(date: Option<DateRange>) -> usize {
    match date.map(|d| d.precision) {
        Some(Precision::Day) => 0,
        Some(Precision::Range) => 1,
        Some(Precision::Month) => 2,
        Some(Precision::Year) => 3,
        None => 4,
    }
}

/// Letters and digits only, lower case: values are matched blind to case and underscores.
fn folded(text: &str) -> impl Iterator<Item = char> + '_ {
    text.chars().filter(|c| c.is_alphanumeric()).flat_map(char::to_lowercase)
}

/// Whether the value is one of those named, blind to case and punctuation.
fn names(filter: &ColumnValues, value: &str) -> bool {
    filter.values.iter().any(|v| v == value || folded(v).eq(folded(value)))
}

/// Why the record is an absence; `None` when it is a presence.
fn absent(fields: &Fields) -> Option<String> {
    if !fields.status.is_empty()
        && !fields.status.eq_ignore_ascii_case("present")
        && ["absent", "notdetected"].iter().any(|w| folded(fields.status).eq(w.chars()))
    {
        return Some(format!("status {}", fields.status));
    }
    let none = || fields.individuals.trim().parse::<f64>().is_ok_and(|n| n == 0.0);
    (fields.individuals.contains('0') && none()).then(|| "individual count 0".to_owned())
}

/// Coordinates as numbers within their legal range.
fn coordinates(place: Place, degrees: bool) -> Result<(f64, f64), (Rule, String)> {
    let (x, y) = match place {
        Place::Missing => return Err((Rule::NoCoordinate, String::new())),
        Place::Point(x, y) => (x, y),
        Place::Text { x, y } => {
            let (x, y) = (trimmed(x), trimmed(y));
            if x.is_empty() || y.is_empty() {
                return Err((Rule::NoCoordinate, String::new()));
            }
            let number = |t: &str| decimal(t).ok_or_else(|| (Rule::ImpossibleCoordinate, format!("{x} {y}")));
            (number(x)?, number(y)?)
        }
    };
    let legal = if degrees {
        (-180.0..=180.0).contains(&x) && (-90.0..=90.0).contains(&y)
    } else {
        x.is_finite() && y.is_finite()
    };
    if !legal {
        let written = match place {
            Place::Text { x, y } => format!("{} {}", x.trim(), y.trim()),
            _ => format!("{x} {y}"),
        };
        return Err((Rule::ImpossibleCoordinate, written));
    }
    if x == 0.0 && y == 0.0 {
        return Err((Rule::ZeroZero, String::new()));
    }
    Ok((x, y))
}
