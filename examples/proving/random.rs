//! Random draws of the generator: one seeded stream a case, so that a case is a function of its kind and seed.

use rand::rngs::Xoshiro256PlusPlus;
use rand::{Rng, SeedableRng};
use std::f64::consts::TAU;

/// Source of all draws of one case.
pub struct Dice {
    stream: Xoshiro256PlusPlus,
    spare_normal: Option<f64>,
}

impl Dice {
    /// The stream that belongs to a kind and a seed.
    pub fn new(kind: &str, seed: u64) -> Self {
        // FNV-1a over the name keeps kinds with equal seeds independent.
        let hash =
            kind.bytes().fold(0xcbf2_9ce4_8422_2325_u64, |h, b| (h ^ u64::from(b)).wrapping_mul(0x0100_0000_01b3));
        let stream = Xoshiro256PlusPlus::seed_from_u64(hash ^ seed.wrapping_mul(0x9e37_79b9_7f4a_7c15));
        Self { stream, spare_normal: None }
    }

    /// Uniform in 0..1, never 0.
    pub fn unit(&mut self) -> f64 {
        ((self.stream.next_u64() >> 11) as f64 + 0.5) * 2f64.powi(-53)
    }

    /// Uniform between two bounds.
    pub fn uniform(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.unit()
    }

    /// Uniform in the logarithm between two positive bounds.
    pub fn log_uniform(&mut self, low: f64, high: f64) -> f64 {
        self.uniform(low.ln(), high.ln()).exp()
    }

    /// True with the given probability.
    pub fn chance(&mut self, probability: f64) -> bool {
        self.unit() < probability
    }

    /// A whole number from `low` to `high`, both included.
    pub fn whole(&mut self, low: usize, high: usize) -> usize {
        low + ((high - low + 1) as f64 * self.unit()) as usize
    }

    /// One of the given values.
    pub fn pick<T: Copy>(&mut self, values: &[T]) -> T {
        values[self.whole(0, values.len() - 1)]
    }

    /// +1 or −1.
    pub fn sign(&mut self) -> f64 {
        if self.chance(0.5) { 1.0 } else { -1.0 }
    }

    /// A phase, radians.
    pub fn phase(&mut self) -> f64 {
        self.uniform(0.0, TAU)
    }

    /// Standard normal (Box and Muller).
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare_normal.take() {
            return spare;
        }
        let radius = (-2.0 * self.unit().ln()).sqrt();
        let (sine, cosine) = self.phase().sin_cos();
        self.spare_normal = Some(radius * sine);
        radius * cosine
    }

    /// Exponential of mean 1.
    pub fn exponential(&mut self) -> f64 {
        -self.unit().ln()
    }

    /// Gamma of mean 1 and the given shape of at least 1 (Marsaglia and Tsang).
    pub fn gamma(&mut self, shape: f64) -> f64 {
        let d = shape - 1.0 / 3.0;
        let c = 1.0 / (9.0 * d).sqrt();
        loop {
            let x = self.normal();
            let v = (1.0 + c * x).powi(3);
            if v > 0.0 && self.unit().ln() < 0.5 * x * x + d * (1.0 - v + v.ln()) {
                return d * v / shape;
            }
        }
    }
}
