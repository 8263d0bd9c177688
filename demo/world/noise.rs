//! Smooth random fields: gradient noise (Perlin 1985) in octaves, a function of place and purpose.

use crate::dice::SEED;
use crate::frame::Point;

/// A smooth field with mean near 0 and standard deviation near 0.3.
pub struct Noise {
    key: u64,
    wavelength: f64,
    octaves: u32,
}

impl Noise {
    /// A field for a purpose whose largest features are a wavelength (in metres) apart.
    pub fn new(purpose: u64, wavelength: f64, octaves: u32) -> Noise {
        Noise { key: scramble(SEED ^ scramble(purpose)), wavelength, octaves }
    }

    /// The field at a place.
    pub fn at(&self, place: Point) -> f64 {
        let mut sum = 0.0;
        let (mut weight, mut wavelength) = (1.0, self.wavelength);
        for octave in 0..self.octaves {
            let key = scramble(self.key.wrapping_add(u64::from(octave)));
            sum += weight * gradient_noise(key, place.x / wavelength, place.y / wavelength);
            weight *= 0.5;
            wavelength *= 0.5;
        }
        sum
    }
}

/// Mixes the bits of a number (the finaliser of SplitMix64, Steele et al. 2014).
pub fn scramble(number: u64) -> u64 {
    let mut z = number.wrapping_add(0x9e37_79b9_7f4a_7c15);
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

/// A number between 0 and 1 that belongs to a pair of whole numbers.
pub fn lot(key: u64, a: i64, b: i64) -> f64 {
    let mixed = scramble(scramble(key ^ a as u64) ^ (b as u64).rotate_left(32));
    (mixed >> 11) as f64 / (1u64 << 53) as f64
}

fn gradient_noise(key: u64, x: f64, y: f64) -> f64 {
    let (left, bottom) = (x.floor(), y.floor());
    let (u, v) = (x - left, y - bottom);
    let corner = |dx: f64, dy: f64| {
        let angle = core::f64::consts::TAU * lot(key, (left + dx) as i64, (bottom + dy) as i64);
        libm::cos(angle) * (u - dx) + libm::sin(angle) * (v - dy)
    };
    let (s, t) = (fade(u), fade(v));
    let low = corner(0.0, 0.0) * (1.0 - s) + corner(1.0, 0.0) * s;
    let high = corner(0.0, 1.0) * (1.0 - s) + corner(1.0, 1.0) * s;
    low * (1.0 - t) + high * t
}

fn fade(t: f64) -> f64 {
    t * t * t * (t * (t * 6.0 - 15.0) + 10.0)
}
