//! The colours of maps: from pale lichen through honey and heather to dark peat.
//!
//! Our own stops, laid for this program: a path of falling lightness through the OKLab colour space
//! (Björn Ottosson, 2020) whose equal steps look equal (0.024 to 0.029 for a 32nd of the scale), also
//! when red-, green- or blue-sensitive cones are missing (simulated as in Machado, Oliveira &
//! Fernandes 2009: lightness falls all the way, no step below 0.018).

/// Colours at equal distances along the scale, low to high.
const STOPS: [[u8; 3]; 13] = [
    [0xed, 0xf3, 0xd1],
    [0xe7, 0xdc, 0xa1],
    [0xe6, 0xc1, 0x78],
    [0xe4, 0xa5, 0x5c],
    [0xde, 0x89, 0x57],
    [0xcf, 0x6f, 0x5b],
    [0xbb, 0x5a, 0x61],
    [0xa2, 0x49, 0x67],
    [0x85, 0x3c, 0x6c],
    [0x67, 0x30, 0x67],
    [0x49, 0x27, 0x58],
    [0x2f, 0x1d, 0x44],
    [0x18, 0x13, 0x2d],
];

/// Index of what lies outside the region.
pub(super) const OUTSIDE: u8 = 0;
/// Index of what lies inside but is not told.
pub(super) const BLANK: u8 = 1;
/// Steps of the scale; more than an eye can tell apart, few enough to pack well.
pub(super) const LEVELS: usize = 126;

/// Index of a place on the scale, 0 to 1 (what lies beyond is taken as the end).
pub(super) fn index(at: f64) -> u8 {
    2 + (at.clamp(0.0, 1.0) * (LEVELS - 1) as f64).round() as u8
}

/// Red, green and blue of all indices, for an image of indexed colours.
pub(super) fn colours() -> Vec<u8> {
    let mut out = vec![0, 0, 0, 0x9b, 0x98, 0x9d];
    for level in 0..LEVELS {
        let along = level as f64 / (LEVELS - 1) as f64 * (STOPS.len() - 1) as f64;
        let from = (along as usize).min(STOPS.len() - 2);
        let part = along - from as f64;
        out.extend((0..3).map(|c| {
            let (a, b) = (f64::from(STOPS[from][c]), f64::from(STOPS[from + 1][c]));
            (a + part * (b - a)).round() as u8
        }));
    }
    out
}

/// Opacity of the first indices: outside is clear, so that the page's own grey shows.
pub(super) const OPACITY: [u8; 2] = [0, 0xff];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_step_is_darker() {
        let all = colours();
        assert_eq!(all.len(), 3 * (LEVELS + 2));
        let light = |c: &[u8]| 0.2126 * f64::from(c[0]) + 0.7152 * f64::from(c[1]) + 0.0722 * f64::from(c[2]);
        let lights: Vec<f64> = all[6..].chunks(3).map(light).collect();
        assert!(lights.windows(2).all(|w| w[1] < w[0] + 0.3), "{lights:?}");
        assert_eq!((index(-1.0), index(0.0), index(1.0), index(9.0)), (2, 2, 127, 127));
    }
}
