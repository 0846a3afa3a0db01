//! Mains hum in the audio: the mains frequency and, as buzz, its harmonics. It has nothing to do with when the gap fires.

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

/// Hum at work.
#[derive(Debug, Clone, PartialEq)]
pub struct HumSource {
    settings: Hum,
    sample_rate_hz: f64,
}

impl HumSource {
    /// Hum at an output rate in Hz.
    #[must_use]
    pub fn new(settings: Hum, sample_rate_hz: f64) -> Self {
        Self { settings, sample_rate_hz }
    }

    /// Hum at a sample counted from the start of the clip.
    #[must_use]
    pub fn at(&self, sample: i64) -> f64 {
        let cycles = sample as f64 * self.settings.frequency_hz / self.sample_rate_hz;
        let (sin, cos) = (TAU * cycles.fract()).sin_cos();
        let mut sum = sin;
        if self.settings.buzz > 0.0 {
            // sin kφ = 2·cos φ·sin (k−1)φ − sin (k−2)φ
            let (mut before, mut this) = (0.0, sin);
            for k in 2..=LAST_HARMONIC {
                (before, this) = (this, 2.0 * cos * this - before);
                sum += self.settings.buzz * this / f64::from(k);
            }
        }
        self.settings.amplitude * sum
    }
}
