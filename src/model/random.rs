//! Random numbers that are the same on every machine.
//!
//! The generator is xoshiro256++ seeded through SplitMix64 (Blackman and Vigna 2018), whose integer stream is fixed for
//! ever. Every draw takes exactly one number of it through an inverse distribution function of our own, so a
//! last-bit difference of `ln`, `exp` or `sqrt` between machines moves one value in its last bits and never shifts the
//! stream behind it: the same seed gives the same firing times, to about 1e-15 of their size.

mod gamma;
mod normal;

pub use gamma::{gamma_probability, gamma_quantile};
pub use normal::{normal_probability, normal_quantile};

use rand::rngs::Xoshiro256PlusPlus;
use rand::{Rng, SeedableRng};

/// A stream of random numbers.
#[derive(Debug, Clone)]
pub struct Random {
    generator: Xoshiro256PlusPlus,
}

impl Random {
    /// The stream of a seed.
    #[must_use]
    pub fn seeded(seed: u64) -> Self {
        Self { generator: Xoshiro256PlusPlus::seed_from_u64(seed) }
    }

    /// One of several independent streams of a seed. Streams keep apart what must not disturb each other: a fault that
    /// is added must not move the firings.
    #[must_use]
    pub fn stream(seed: u64, number: u64) -> Self {
        // Seeding steps on by a constant for each word of state. Without mixing first, a seed and its stream could
        // be another such pair some words on.
        Self::seeded(mix(mix(seed) ^ number))
    }

    /// Uniform between 0 and 1, both excluded; 53 bits.
    #[inline]
    pub fn uniform(&mut self) -> f64 {
        // The signed conversion is one instruction where the unsigned one is several; 53 bits are never negative.
        ((self.generator.next_u64() >> 11) as i64 as f64 + 0.5) * 2f64.powi(-53)
    }

    /// Normal with mean 0 and standard deviation 1.
    pub fn normal(&mut self) -> f64 {
        normal_quantile(self.uniform())
    }

    /// Exponential with mean 1.
    pub fn exponential(&mut self) -> f64 {
        -self.uniform().ln()
    }

    /// Gamma with the given shape and mean 1; its standard deviation is 1/√shape.
    pub fn gamma(&mut self, shape: f64) -> f64 {
        gamma_quantile(shape, self.uniform()) / shape
    }
}

/// Bijective mixing of 64 bits (finalizer of MurmurHash3), so that neighbouring seeds and streams have unrelated states.
pub(crate) fn mix(value: u64) -> u64 {
    let mut z = value.wrapping_add(0x2545_f491_4f6c_dd1d);
    z = (z ^ (z >> 33)).wrapping_mul(0xff51_afd7_ed55_8ccd);
    z = (z ^ (z >> 33)).wrapping_mul(0xc4ce_b9fe_1a85_ec53);
    z ^ (z >> 33)
}
