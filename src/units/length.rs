//! Lengths: metres inside the program, text with a unit in a plan.

use std::fmt;

/// A finite length in metres, zero or more.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct Metres(f64);

impl Metres {
    /// Builds a length; `None` when it is negative, infinite or not a number.
    pub fn new(value: f64) -> Option<Self> {
        (value.is_finite() && value >= 0.0).then_some(Self(value))
    }

    /// The length in metres.
    pub fn get(self) -> f64 {
        self.0
    }
}

/// A length as a plan states it, before the grid is known.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Length {
    /// Metres (kilometres and miles are converted on reading).
    Metres(Metres),
    /// A multiple of the grid's cell side.
    Cells(f64),
    /// Degrees of arc; only a cell size on a longitude/latitude grid.
    Degrees(f64),
}

impl Length {
    /// What a bare number or a wrong unit is answered with.
    pub const EXPECTED: &'static str =
        "a length is text with a unit, such as \"250 m\", \"1.5 km\" or \"2 cells\"";

    /// Reads `"250 m"`, `"1.5 km"`, `"2 cells"`, `"0.01 deg"`.
    ///
    /// ```
    /// use trodden::units::Length;
    /// assert_eq!(Length::parse("1.5 km"), Length::parse("1500 m"));
    /// assert!(Length::parse("1500").unwrap_err().contains("has no unit"));
    /// ```
    ///
    /// # Errors
    /// The words to show when the text is no such length.
    pub fn parse(text: &str) -> Result<Self, String> {
        let text = text.trim();
        let split = text
            .find(|c: char| c.is_alphabetic() && c != 'e' && c != 'E' || c.is_whitespace())
            .unwrap_or(text.len());
        let (number, unit) = text.split_at(split);
        let value: f64 =
            number.trim().parse().map_err(|_| format!("`{text}` is no length: {}", Self::EXPECTED))?;
        if !value.is_finite() || value < 0.0 {
            return Err(format!("`{text}` is no length: it must be finite and not negative"));
        }
        let metres = |factor: f64| Ok(Self::Metres(Metres(value * factor)));
        match unit.trim() {
            "m" => metres(1.0),
            "km" => metres(1000.0),
            "cell" | "cells" => Ok(Self::Cells(value)),
            "deg" => Ok(Self::Degrees(value)),
            "" => Err(format!("`{text}` has no unit: {}", Self::EXPECTED)),
            other => Err(format!("`{other}` is no unit of length: {}", Self::EXPECTED)),
        }
    }

    /// The bare number, whatever its unit.
    pub fn number(self) -> f64 {
        match self {
            Self::Metres(m) => m.0,
            Self::Cells(v) | Self::Degrees(v) => v,
        }
    }

    /// The length in metres on a grid whose cell side is `cell`; `None` for degrees.
    pub fn metres(self, cell: Metres) -> Option<Metres> {
        match self {
            Self::Metres(m) => Some(m),
            Self::Cells(n) => Metres::new(n * cell.0),
            Self::Degrees(_) => None,
        }
    }
}

impl fmt::Display for Metres {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.0 >= 1000.0 {
            write!(f, "{} km", trim(self.0 / 1000.0))
        } else {
            write!(f, "{} m", trim(self.0))
        }
    }
}

impl fmt::Display for Length {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Metres(m) => m.fmt(f),
            Self::Cells(n) => write!(f, "{n} cells"),
            Self::Degrees(d) => write!(f, "{d} deg"),
        }
    }
}

/// Four significant digits without trailing zeros.
fn trim(value: f64) -> String {
    if value == 0.0 {
        return "0".into();
    }
    let digits = (3.0 - libm::log10(value.abs()).floor()).clamp(0.0, 9.0) as usize;
    let text = format!("{value:.digits$}");
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').into() } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_units() {
        let m = |v| Ok(Length::Metres(Metres(v)));
        assert_eq!(Length::parse("250 m"), m(250.0));
        assert_eq!(Length::parse("1.5 km"), m(1500.0));
        assert_eq!(Length::parse("1e3m"), m(1000.0));
        assert_eq!(Length::parse("2 cells"), Ok(Length::Cells(2.0)));
        assert_eq!(Length::parse("0.01 deg"), Ok(Length::Degrees(0.01)));
        for bad in ["12", "", "km", "-3 km", "3 miles", "nan m", "inf m", "1,5 km"] {
            assert!(Length::parse(bad).is_err(), "{bad}");
        }
    }

    #[test]
    fn shows_short_numbers() {
        assert_eq!(Metres(1500.0).to_string(), "1.5 km");
        assert_eq!(Metres(12_345.6).to_string(), "12.35 km");
        assert_eq!(Metres(0.25).to_string(), "0.25 m");
        assert_eq!(Metres(0.0).to_string(), "0 m");
    }
}
