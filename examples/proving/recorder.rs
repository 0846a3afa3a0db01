//! The recorder: level, clipping, its own noise, sample rate and format.

use crate::codec::Codec;
use crate::kernel;
use crate::random::Dice;

/// A recorder.
#[derive(Clone, Copy)]
pub struct Recorder {
    /// Sample rate of the recording, Hz.
    pub sample_rate_hz: u32,
    /// Peak level, full scale = 1.
    pub peak: f64,
    /// Level, in units of a typical click, at which the audio clips ahead of the recorder; none: it does not.
    pub clip: Option<f64>,
    /// Rms noise of the recorder, full scale = 1.
    pub noise: f64,
    /// What happens to the samples on the way to the file.
    pub codec: Codec,
}

impl Recorder {
    /// Draws a recorder, mostly of the two common sample rates.
    pub fn draw(dice: &mut Dice) -> Self {
        let sample_rate_hz = match dice.unit() {
            u if u < 0.42 => 48_000,
            u if u < 0.80 => 44_100,
            u if u < 0.86 => 22_050,
            u if u < 0.91 => 16_000,
            u if u < 0.95 => 8_000,
            _ => 96_000,
        };
        Self { sample_rate_hz, ..Self::common(dice) }
    }

    /// Draws a recorder of one of the two common sample rates.
    pub fn common(dice: &mut Dice) -> Self {
        Self {
            sample_rate_hz: dice.pick(&[48_000, 44_100]),
            peak: if dice.chance(0.6) { 1.0 } else { dice.log_uniform(0.1, 1.0) },
            clip: None,
            noise: dice.log_uniform(1e-5, 1e-3),
            codec: Codec::None,
        }
    }

    /// Records audio of sample rate `rate_hz` whose typical click has the peak `click`.
    pub fn record(&self, dice: &mut Dice, mut audio: Vec<f64>, rate_hz: u32, click: f64) -> Vec<f32> {
        if let Some(clip) = self.clip {
            let limit = clip * click;
            audio.iter_mut().for_each(|x| *x = x.clamp(-limit, limit));
        }
        let mut samples = kernel::resample(&audio, rate_hz, self.sample_rate_hz);
        let highest = samples.iter().fold(1e-12_f64, |m, x| m.max(x.abs()));
        let gain = self.peak / highest;
        samples.iter_mut().for_each(|x| *x = *x * gain + self.noise * dice.normal());
        let coded = self.codec.pass(samples, self.sample_rate_hz);
        // Sixteen bits.
        coded.iter().map(|x| ((x * 32767.0).round().clamp(-32768.0, 32767.0) / 32768.0) as f32).collect()
    }
}
