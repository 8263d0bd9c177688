//! Sizes in bytes, as `--memory "4 GiB"` states them.

use std::fmt;

/// A number of bytes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Bytes(pub u64);

const UNITS: [(&str, u64); 7] = [
    ("GiB", 1 << 30),
    ("MiB", 1 << 20),
    ("KiB", 1 << 10),
    ("GB", 1_000_000_000),
    ("MB", 1_000_000),
    ("kB", 1_000),
    ("B", 1),
];

impl Bytes {
    /// Reads `"4 GiB"`, `"500 MiB"`, `"2 GB"`.
    ///
    /// # Errors
    /// The words to show when the text is no size.
    pub fn parse(text: &str) -> Result<Self, String> {
        let text = text.trim();
        UNITS
            .iter()
            .find_map(|(unit, factor)| {
                let number: f64 = text.strip_suffix(unit)?.trim().parse().ok()?;
                (number.is_finite() && number > 0.0).then_some(Self((number * *factor as f64) as u64))
            })
            .ok_or_else(|| format!("`{text}` is no size: write a number with a unit, such as \"4 GiB\""))
    }
}

impl fmt::Display for Bytes {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (unit, factor) =
            UNITS[..3].iter().find(|(_, factor)| self.0 >= *factor).copied().unwrap_or(("B", 1));
        write!(f, "{:.1} {unit}", self.0 as f64 / factor as f64)
    }
}

#[cfg(test)]
mod tests {
    use super::Bytes;

    #[test]
    fn reads_and_shows() {
        assert_eq!(Bytes::parse("4 GiB"), Ok(Bytes(4 << 30)));
        assert_eq!(Bytes::parse("1.5MB"), Ok(Bytes(1_500_000)));
        assert!(Bytes::parse("4").is_err());
        assert!(Bytes::parse("-1 GiB").is_err());
        assert_eq!(Bytes(3 << 29).to_string(), "1.5 GiB");
    }
}
