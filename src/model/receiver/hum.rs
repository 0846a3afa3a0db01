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

/// Points of the table of one period: between them the straight line is 110 dB off in the tenth harmonic.
const POINTS: usize = 8192;

/// Hum at work.
#[derive(Debug, Clone, PartialEq)]
pub struct HumSource {
    /// One period, its first point once more at the end.
    period: Vec<f64>,
    cycles_per_sample: f64,
}

impl HumSource {
    /// Hum at an output rate in Hz.
    #[must_use]
    pub fn new(settings: Hum, sample_rate_hz: f64) -> Self {
        let at = |point: usize| {
            let phase = TAU * point as f64 / POINTS as f64;
            let buzz = |k: u32| settings.buzz / f64::from(k) * (f64::from(k) * phase).sin();
            settings.amplitude * (phase.sin() + (2..=LAST_HARMONIC).map(buzz).sum::<f64>())
        };
        let period = (0..=POINTS).map(at).collect();
        Self { period, cycles_per_sample: settings.frequency_hz / sample_rate_hz }
    }

    /// Hum at a sample counted from the start of the clip.
    #[inline]
    #[must_use]
    pub fn at(&self, sample: u64) -> f64 {
        let cycles = sample as f64 * self.cycles_per_sample;
        let place = (cycles - cycles as u64 as f64) * POINTS as f64;
        let point = (place as usize).min(POINTS - 1);
        let (from, to) = (self.period[point], self.period[point + 1]);
        from + (to - from) * (place - point as f64)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_table_is_the_sum_of_the_harmonics_at_any_rate() {
        let hum = Hum { amplitude: 0.3, frequency_hz: 50.0, buzz: 0.5 };
        for rate_hz in [48_000.0, 44_100.0, 7919.0] {
            let source = HumSource::new(hum, rate_hz);
            for sample in (0..3_000_000u64).step_by(997) {
                let phase = TAU * (sample as f64 * 50.0 / rate_hz).fract();
                let buzz = (2..=10).map(|k| 0.5 / f64::from(k) * (f64::from(k) * phase).sin()).sum::<f64>();
                let expected = 0.3 * (phase.sin() + buzz);
                assert!((source.at(sample) - expected).abs() < 1e-6, "{sample} at {rate_hz}");
            }
        }
    }
}
