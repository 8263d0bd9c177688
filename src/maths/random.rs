//! Random streams keyed by purpose, so that one use never shifts another.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};

use crate::units::Seed;

/// A stream of random numbers for one purpose.
pub struct Stream(ChaCha8Rng);

impl Stream {
    /// The stream of this seed for this purpose and index (a fold, a repeat).
    pub fn new(seed: Seed, purpose: &str, index: u64) -> Self {
        let mut key = [0_u8; 32];
        let mut state = seed.0 ^ 0x9E37_79B9_7F4A_7C15;
        for byte in purpose.bytes().chain(index.to_le_bytes()) {
            state = mix(state ^ u64::from(byte));
        }
        for part in key.chunks_exact_mut(8) {
            state = mix(state);
            part.copy_from_slice(&state.to_le_bytes());
        }
        Self(ChaCha8Rng::from_seed(key))
    }

    /// A number in [0, 1) with 53 random bits.
    pub fn unit(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 * (1.0 / (1_u64 << 53) as f64)
    }

    /// A whole number below `n` (`n` > 0), each equally likely.
    ///
    /// # Source
    /// Lemire, D. (2019), ACM Transactions on Modeling and Computer Simulation 29(1), 3.
    pub fn below(&mut self, n: usize) -> usize {
        let n = n as u64;
        let threshold = n.wrapping_neg() % n;
        loop {
            let wide = u128::from(self.0.next_u64()) * u128::from(n);
            if wide as u64 >= threshold {
                return (wide >> 64) as usize;
            }
        }
    }

    /// Puts the items in random order (Fisher–Yates).
    pub fn shuffle<T>(&mut self, items: &mut [T]) {
        for i in (1..items.len()).rev() {
            items.swap(i, self.below(i + 1));
        }
    }
}

/// One step of the splitmix64 generator (Steele, Lea & Flood 2014).
fn mix(state: u64) -> u64 {
    let z = state.wrapping_add(0x9E37_79B9_7F4A_7C15);
    let z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    let z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    z ^ (z >> 31)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn streams_differ_by_purpose_and_repeat_by_seed() {
        let draw = |seed, purpose: &str, index| Stream::new(Seed(seed), purpose, index).unit();
        assert_eq!(draw(1, "a", 0), draw(1, "a", 0));
        assert_ne!(draw(1, "a", 0), draw(1, "b", 0));
        assert_ne!(draw(1, "a", 0), draw(1, "a", 1));
        assert_ne!(draw(1, "a", 0), draw(2, "a", 0));
    }

    #[test]
    fn below_is_even() {
        let mut stream = Stream::new(Seed(7), "test", 0);
        let mut seen = [0_u32; 6];
        (0..60_000).for_each(|_| seen[stream.below(6)] += 1);
        // chi-square with 5 degrees of freedom: 99.9 % quantile 20.5
        let chi: f64 = seen.iter().map(|&n| (f64::from(n) - 1e4).powi(2) / 1e4).sum();
        assert!(chi < 20.5, "{seen:?}");
    }
}
