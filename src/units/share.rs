//! A part of a whole.

/// A number from 0 to 1.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct Share(f64);

impl Share {
    /// The words of the range.
    pub const EXPECTED: &'static str = "a share is a number from 0 to 1";

    /// Builds a share; `None` outside 0 to 1.
    pub fn new(value: f64) -> Option<Self> {
        (0.0..=1.0).contains(&value).then_some(Self(value))
    }

    /// The share as a number.
    pub fn get(self) -> f64 {
        self.0
    }

    /// Reads `"10 %"`.
    ///
    /// # Errors
    /// The words to show when the text is no percentage.
    pub fn parse_percent(text: &str) -> Result<Self, String> {
        text.trim()
            .strip_suffix('%')
            .and_then(|n| n.trim().parse::<f64>().ok())
            .and_then(|n| Self::new(n / 100.0))
            .ok_or_else(|| format!("`{text}` is no share of the whole: write it as \"10 %\""))
    }
}
