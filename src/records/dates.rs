//! Calendar days and spans of them, as records and plans write them (ISO 8601-1:2019).
//!
//! Days are the days as written: a time zone does not move an outing to another day. A span
//! includes both ends.

use jiff::civil::{Date, ISOWeekDate};

use super::row::trimmed;

/// How finely a date was written.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Precision {
    /// A day, with or without a time.
    Day,
    /// A span with two ends.
    Range,
    /// A month.
    Month,
    /// A year (an ISO week counts as a range).
    Year,
}

/// A span of days, both ends included.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct DateRange {
    /// First day.
    pub first: Date,
    /// Last day.
    pub last: Date,
    /// How it was written.
    pub precision: Precision,
}

impl DateRange {
    /// Whether the other span lies wholly inside this one.
    pub fn contains(&self, other: &Self) -> bool {
        self.first <= other.first && other.last <= self.last
    }

    /// Reads one date or a range `A/B`; the second end may leave out what it shares with the
    /// first (`2007-11-13/15`). `None` when it is no date, or the ends are in the wrong order.
    ///
    /// # Source
    /// ISO 8601-1:2019, calendar, week and ordinal dates, basic and extended form.
    pub fn parse(text: &str) -> Option<Self> {
        let text = trimmed(text);
        if let Some(day) = plain_day(text) {
            return Some(day);
        }
        let Some((from, to)) = text.split_once('/') else {
            return single(text);
        };
        let (from, to) = (from.trim(), to.trim());
        let first = single(from)?;
        let last = single_completed(from, to)?;
        if last.last < first.first {
            return None;
        }
        let same = first.first == last.first && first.last == last.last;
        let precision = if same { first.precision } else { Precision::Range };
        Some(Self { first: first.first, last: last.last, precision })
    }
}

/// The second end of a range, completed from the first where it is abbreviated.
fn single_completed(from: &str, to: &str) -> Option<DateRange> {
    let day_part = from.split(['T', ' ']).next()?;
    let whole = to.get(..4).is_some_and(is_digits);
    if to.len() < day_part.len() && !to.contains('T') && is_digits(&to.replace('-', "")) && !whole {
        let head = day_part.get(..day_part.len() - to.len())?;
        return single(&format!("{head}{to}"));
    }
    if to.contains(':') && !to.contains('-') && !to.contains('T') {
        return single(day_part); // only a time: the same day
    }
    single(to)
}

/// One date without a slash.
fn single(text: &str) -> Option<DateRange> {
    let day_part = strip_time(text)?;
    if let Some(day) = plain_day(day_part) {
        return Some(day);
    }
    let span = |first: Date, last: Date, precision| Some(DateRange { first, last, precision });
    let day = |d: Option<Date>| d.and_then(|d| span(d, d, Precision::Day));
    let parts: Vec<&str> = day_part.split('-').collect();
    match parts.as_slice() {
        [y] if y.len() == 4 && is_digits(y) => {
            let y = y.parse().ok()?;
            span(Date::new(y, 1, 1).ok()?, Date::new(y, 12, 31).ok()?, Precision::Year)
        }
        [d] if d.len() == 8 && is_digits(d) => day(ymd(&d[..4], &d[4..6], &d[6..])),
        [d] if d.len() == 7 && is_digits(d) => day(ordinal(&d[..4], &d[4..])),
        [d] if d.is_ascii() && d.len() > 5 && &d[4..5] == "W" => match d.len() {
            7 => week(&d[..4], &d[5..7]),
            8 => day(weekday(&d[..4], &d[5..7], &d[7..])),
            _ => None,
        },
        [y, w] if y.len() == 4 && w.len() == 3 && w.starts_with('W') => week(y, &w[1..]),
        [y, d] if y.len() == 4 && d.len() == 3 => day(ordinal(y, d)),
        [y, m] if y.len() == 4 && m.len() == 2 => {
            let first = ymd(y, m, "01")?;
            span(first, first.last_of_month(), Precision::Month)
        }
        [y, w, d] if w.len() == 3 && w.starts_with('W') => day(weekday(y, &w[1..], d)),
        [y, m, d] if y.len() == 4 && m.len() <= 2 && d.len() <= 2 => day(ymd(y, m, d)),
        _ => None,
    }
}

/// A day written `YYYY-MM-DD`, as nearly all are.
fn plain_day(text: &str) -> Option<DateRange> {
    let [y1, y2, y3, y4, b'-', m1, m2, b'-', d1, d2] = *text.as_bytes() else { return None };
    let number = |digits: &[u8]| {
        let digit = |n: Option<i16>, b: &u8| Some(n? * 10 + i16::from(b.is_ascii_digit().then(|| b - b'0')?));
        digits.iter().fold(Some(0), digit)
    };
    let (year, month, day) = (number(&[y1, y2, y3, y4])?, number(&[m1, m2])?, number(&[d1, d2])?);
    let date = Date::new(year, month as i8, day as i8).ok()?;
    Some(DateRange { first: date, last: date, precision: Precision::Day })
}

/// The day part of a date-time; `None` when what follows the day is no time.
fn strip_time(text: &str) -> Option<&str> {
    let Some(at) = text.find(['T', ' ']) else {
        return Some(text);
    };
    let time = &text[at + 1..];
    let plausible = time.starts_with(|c: char| c.is_ascii_digit())
        && time.chars().all(|c| c.is_ascii_digit() || ":.,+-−Z ".contains(c));
    plausible.then_some(&text[..at])
}

fn is_digits(text: &str) -> bool {
    !text.is_empty() && text.bytes().all(|b| b.is_ascii_digit())
}

fn ymd(y: &str, m: &str, d: &str) -> Option<Date> {
    if ![y, m, d].iter().all(|t| is_digits(t)) {
        return None;
    }
    Date::new(y.parse().ok()?, m.parse().ok()?, d.parse().ok()?).ok()
}

fn ordinal(y: &str, d: &str) -> Option<Date> {
    let (year, day): (i16, i16) = (is_digits(y).then(|| y.parse().ok())??, d.parse().ok()?);
    let first = Date::new(year, 1, 1).ok()?;
    (1..=first.days_in_year()).contains(&day).then(|| first.with().day_of_year(day).build().ok())?
}

fn weekday(y: &str, w: &str, d: &str) -> Option<Date> {
    let weekday = jiff::civil::Weekday::from_monday_one_offset(d.parse().ok()?).ok()?;
    Some(ISOWeekDate::new(y.parse().ok()?, w.parse().ok()?, weekday).ok()?.date())
}

fn week(y: &str, w: &str) -> Option<DateRange> {
    Some(DateRange { first: weekday(y, w, "1")?, last: weekday(y, w, "7")?, precision: Precision::Range })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn check(text: &str, expected: Option<(&str, &str)>) {
        let got = DateRange::parse(text).map(|r| (r.first.to_string(), r.last.to_string()));
        assert_eq!(got, expected.map(|(a, b)| (a.into(), b.into())), "{text}");
    }

    /// Examples of the Darwin Core vocabulary (TDWG, term eventDate), both ends included.
    #[test]
    fn reads_the_vocabularys_examples() {
        check("1963-03-08T14:07-06:00", Some(("1963-03-08", "1963-03-08")));
        check("1809-02-12", Some(("1809-02-12", "1809-02-12")));
        check("1906-06", Some(("1906-06-01", "1906-06-30")));
        check("1971", Some(("1971-01-01", "1971-12-31")));
        check("2007-03-01T13:00:00Z/2008-05-11T15:30:00Z", Some(("2007-03-01", "2008-05-11")));
        check("1900/1909", Some(("1900-01-01", "1909-12-31")));
        check("2007-11-13/15", Some(("2007-11-13", "2007-11-15")));
    }

    #[test]
    fn reads_other_legal_forms() {
        check("20150317", Some(("2015-03-17", "2015-03-17")));
        check("2007-317", Some(("2007-11-13", "2007-11-13")));
        check("2007-W46-2", Some(("2007-11-13", "2007-11-13")));
        check("2007W462", Some(("2007-11-13", "2007-11-13")));
        check("2007-W46", Some(("2007-11-12", "2007-11-18")));
        check("2004-03/2019", Some(("2004-03-01", "2019-12-31")));
        check("2007-11-13T08:00/10:30", Some(("2007-11-13", "2007-11-13")));
        check("2004-03-15/2019-10", Some(("2004-03-15", "2019-10-31")));
        check("2007-11-28/12-03", Some(("2007-11-28", "2007-12-03")));
        check("2007-11-13 08:15:00", Some(("2007-11-13", "2007-11-13")));
    }

    #[test]
    fn refuses_what_is_no_date() {
        for text in [
            "",
            "/",
            "2007-13-01",
            "2007-02-30",
            "13/11/2007",
            "March 2007",
            "2007-366",
            "2008/2007",
            "2007-W54-1",
        ] {
            check(text, None);
        }
    }
}
