//! Mains hum in the audio: the mains frequency and, as buzz, its harmonics. It has nothing to do with when the gap fires.

use super::Complex;
use super::turning::Turning;
use serde::{Deserialize, Serialize};
use std::f64::consts::TAU;

/// Hum in the audio.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Hum {
    /// Amplitude of the fundamental against the audio peak of a click.
    pub amplitude: f64,
    /// Frequency, Hz.
    pub frequency_hz: f64,
    /// Strength of the harmonics 2..=10: the k-th has `buzz`/k of the fundamental's amplitude; 0 is a plain sine.
    pub buzz: f64,
}

/// Number of the highest harmonic of buzz.
const LAST_HARMONIC: u32 = 10;

/// Samples after which the turning of the hum is set anew from its phase.
const ANEW: u64 = 1024;

/// Hum at work.
#[derive(Debug, Clone)]
pub struct HumSource {
    settings: Hum,
    sample_rate_hz: f64,
    /// Weight of each harmonic from the second on.
    harmonics: [f64; LAST_HARMONIC as usize - 1],
    turning: Turning,
}

impl HumSource {
    /// Hum at an output rate in Hz.
    #[must_use]
    pub fn new(settings: Hum, sample_rate_hz: f64) -> Self {
        let harmonics = std::array::from_fn(|k| settings.buzz / (k + 2) as f64);
        let turning = Turning::new(Complex::from(1.0), settings.frequency_hz, 1.0 / sample_rate_hz);
        Self { settings, sample_rate_hz, harmonics, turning }
    }

    /// Hum at a sample counted from the start of the clip; to be asked for sample after sample.
    #[inline]
    pub fn next(&mut self, sample: u64) -> f64 {
        if sample % ANEW == 0 {
            let cycles = sample as f64 * self.settings.frequency_hz / self.sample_rate_hz;
            self.turning.set(Complex::from_polar(1.0, TAU * cycles.fract()));
        }
        let Complex { re: cos, im: sin } = self.turning.next();
        let mut sum = sin;
        if self.settings.buzz > 0.0 {
            // sin kφ = 2·cos φ·sin (k−1)φ − sin (k−2)φ
            let (mut before, mut this) = (0.0, sin);
            for weight in self.harmonics {
                (before, this) = (this, 2.0 * cos * this - before);
                sum += weight * this;
            }
        }
        self.settings.amplitude * sum
    }
}
