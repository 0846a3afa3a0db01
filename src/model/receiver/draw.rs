//! Random draws of the receiver, one stream for each purpose so that switching one thing on leaves the others as they were.

use super::Complex;
use rand::rngs::Xoshiro256PlusPlus;
use rand::{Rng, SeedableRng};
use std::f64::consts::TAU;

/// What a stream of draws is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Stream {
    /// Carrier phase of each click.
    ClickPhase = 1,
    /// Noise in the channel.
    ChannelNoise = 2,
    /// The co-channel carrier and its programme.
    Carrier = 3,
    /// Noise of the recorder.
    Recorder = 4,
}

/// A stream of draws.
#[derive(Debug, Clone)]
pub(crate) struct Draw(Xoshiro256PlusPlus);

impl Draw {
    pub(crate) fn new(seed: u64, stream: Stream) -> Self {
        Self(Xoshiro256PlusPlus::seed_from_u64(scramble(seed ^ scramble(stream as u64))))
    }

    /// Uniform in (0, 1), neither end reached.
    #[inline]
    pub(crate) fn uniform(&mut self) -> f64 {
        const UNIT: f64 = 1.0 / (1u64 << 53) as f64;
        ((self.0.next_u64() >> 11) as f64 + 0.5) * UNIT
    }

    /// A point on the unit circle.
    pub(crate) fn phase(&mut self) -> Complex {
        Complex::from_polar(1.0, TAU * self.uniform())
    }

    /// Complex normal number of mean square 1: both parts normal with variance 1/2 (Box and Muller 1958).
    #[inline]
    pub(crate) fn complex_normal(&mut self) -> Complex {
        let radius = (-self.uniform().ln()).sqrt();
        let (sin, cos) = (TAU * self.uniform()).sin_cos();
        Complex::new(radius * cos, radius * sin)
    }

    /// Normal number of variance 1; two uniform draws each.
    #[inline]
    pub(crate) fn normal(&mut self) -> f64 {
        self.complex_normal().re * std::f64::consts::SQRT_2
    }
}

/// Bijective mixing of 64 bits (finalizer of MurmurHash3), so that neighbouring seeds and streams have unrelated states.
fn scramble(value: u64) -> u64 {
    let mut z = value.wrapping_add(0x2545_f491_4f6c_dd1d);
    z = (z ^ (z >> 33)).wrapping_mul(0xff51_afd7_ed55_8ccd);
    z = (z ^ (z >> 33)).wrapping_mul(0xc4ce_b9fe_1a85_ec53);
    z ^ (z >> 33)
}
