//! Numbers as nearly all tables write them, read faster than any number could be.
//!
//! # Source
//! Clinger, W. D. (1990), How to read floating point numbers accurately, PLDI 25(6), 92–101: a whole number
//! below 2⁵³ divided by a power of ten up to 10²² is rounded once, so correctly. All else is left to the
//! standard library, the twin in the tests.

/// Powers of ten that are exact.
const POWERS: [f64; 16] =
    [1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15];

/// The number that a text stands for; `None` where it is none.
pub fn decimal(text: &str) -> Option<f64> {
    plain(text.as_bytes()).or_else(|| text.parse().ok())
}

/// Up to 15 digits, with or without a sign and a point.
fn plain(bytes: &[u8]) -> Option<f64> {
    let (negative, digits) = match bytes {
        [b'-', rest @ ..] => (true, rest),
        _ => (false, bytes),
    };
    let (mut whole, mut seen, mut after) = (0_u64, 0_usize, None);
    for byte in digits {
        match byte {
            b'0'..=b'9' => {
                whole = whole * 10 + u64::from(byte - b'0');
                seen += 1;
                after = after.map(|n: usize| n + 1);
            }
            b'.' if after.is_none() => after = Some(0),
            _ => return None,
        }
        if seen > 15 {
            return None;
        }
    }
    let value = whole as f64 / POWERS[after.unwrap_or(0)];
    (seen > 0).then_some(if negative { -value } else { value })
}

#[cfg(test)]
mod tests {
    use super::decimal;
    use proptest::prelude::*;

    fn same(text: &str) {
        assert_eq!(decimal(text).map(f64::to_bits), text.parse::<f64>().ok().map(f64::to_bits), "{text}");
    }

    #[test]
    fn odd_texts_are_read_as_the_standard_library_does() {
        let odd = [
            "", "-", ".", "-.", "5.", ".5", "-0", "0.0", "+5", "1e400", "1e-3", "inf", "12,5", "1.2.3", " 1",
        ];
        odd.iter().for_each(|text| same(text));
        ["999999999999999", "9999999999999999", "0.000000000000001", "0.3", "147.26359"]
            .iter()
            .for_each(|t| same(t));
    }

    proptest! {
        #[test]
        fn any_number_is_read_as_the_standard_library_does(text in "-?[0-9]{0,17}\\.?[0-9]{0,17}", value: f64) {
            same(&text);
            same(&value.to_string());
        }
    }
}
