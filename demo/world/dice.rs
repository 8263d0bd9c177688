//! Seeded chance: one stream of random numbers for each purpose, the same on every machine.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};

/// The seed of the whole world.
pub const SEED: u64 = 20_240_611;

/// A stream of random numbers.
pub struct Dice(ChaCha8Rng);

impl Dice {
    /// The stream for a purpose; purposes do not disturb one another.
    pub fn new(purpose: u64) -> Dice {
        let mut stream = ChaCha8Rng::seed_from_u64(SEED);
        stream.set_stream(purpose);
        Dice(stream)
    }

    /// Evenly between 0 (included) and 1 (excluded).
    pub fn share(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 / (1u64 << 53) as f64
    }

    /// Evenly between two numbers.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.share()
    }

    /// True with a chance.
    pub fn chance(&mut self, probability: f64) -> bool {
        self.share() < probability
    }

    /// A whole number below `count`.
    pub fn below(&mut self, count: usize) -> usize {
        ((self.share() * count as f64) as usize).min(count - 1)
    }

    /// One of a list.
    pub fn pick<'a, T>(&mut self, list: &'a [T]) -> &'a T {
        &list[self.below(list.len())]
    }

    /// Standard normal (Box and Muller 1958, the cosine half).
    pub fn normal(&mut self) -> f64 {
        let radius = libm::sqrt(-2.0 * libm::log(1.0 - self.share()));
        radius * libm::cos(core::f64::consts::TAU * self.share())
    }

    /// Lognormal with median 1.
    pub fn lognormal(&mut self, sd: f64) -> f64 {
        libm::exp(sd * self.normal())
    }

    /// Poisson, by multiplying shares; a large rate is taken in steps, so that nothing underflows.
    pub fn poisson(&mut self, rate: f64) -> u32 {
        let (mut left, mut count) = (rate, 0);
        while left > 0.0 {
            let step = left.min(50.0);
            let limit = libm::exp(-step);
            let mut product = self.share();
            while product > limit {
                product *= self.share();
                count += 1;
            }
            left -= step;
        }
        count
    }

    /// `count` different numbers below `total`, in random order.
    pub fn choose(&mut self, count: usize, total: usize) -> Vec<usize> {
        let mut all: Vec<usize> = (0..total).collect();
        let count = count.min(total);
        for k in 0..count {
            let other = k + self.below(total - k);
            all.swap(k, other);
        }
        all.truncate(count);
        all
    }
}

/// Draws positions of a list in proportion to their weights.
pub struct Urn(Vec<f64>);

impl Urn {
    /// An urn of weights, none of them negative.
    pub fn new(weights: impl IntoIterator<Item = f64>) -> Urn {
        let mut sum = 0.0;
        let running = weights.into_iter().map(|weight| {
            sum += weight;
            sum
        });
        Urn(running.collect())
    }

    /// A position; those of weight 0 are never drawn.
    pub fn draw(&self, dice: &mut Dice) -> usize {
        let total = self.0.last().copied().unwrap_or(0.0);
        let at = dice.share() * total;
        self.0.partition_point(|&running| running <= at).min(self.0.len() - 1)
    }
}
