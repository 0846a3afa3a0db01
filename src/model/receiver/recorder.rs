//! The recorder: level, noise, clipping at full scale, resolution and drop-outs. In units of full scale, times in s.

use super::{Draw, Normals, ReceiverError, Stream, within};
use crate::bench::Bench;
use serde::{Deserialize, Serialize};

/// Stretches in which the recorder writes nothing but zeros.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct DropOuts {
    /// Drop-outs per second, Hz; they come independently of each other.
    pub rate_hz: f64,
    /// Length of each, s.
    pub length_s: f64,
}

/// What the recorder adds and takes away.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct RecorderSettings {
    /// Rms of its noise, in full scale.
    pub noise: f64,
    /// Bits of its converter; none for one so fine that it does not matter.
    pub bits: Option<u8>,
    /// Drop-outs.
    pub drop_outs: Option<DropOuts>,
}

/// Length of a drop-out where the bench gives only how often they come, s.
const DEFAULT_DROP_OUT_S: f64 = 0.05;

impl RecorderSettings {
    /// The recorder of a bench; what the bench does not say is without fault.
    #[must_use]
    pub fn from_bench(bench: &Bench) -> Self {
        let described = &bench.receiver;
        Self {
            noise: described.recorder_noise.map_or(0.0, |q| q.value),
            // Out of range is caught by the check, where a conversion to u8 would hide it.
            bits: described.recorder_bits.map(|q| q.value.round() as u8),
            drop_outs: described.dropout_rate.filter(|q| q.value > 0.0).map(|rate| DropOuts {
                rate_hz: rate.value,
                length_s: described.dropout_time.map_or(DEFAULT_DROP_OUT_S, |q| q.value),
            }),
        }
    }

    /// Checks every setting.
    ///
    /// # Errors
    /// Names the first setting that is out of range.
    pub fn check(&self) -> Result<(), ReceiverError> {
        within("recorder noise", self.noise, "of full scale", 0.0, 1.0)?;
        within("recorder resolution", self.bits.map_or(16.0, f64::from), "bit", 2.0, 24.0)?;
        if let Some(drop_outs) = self.drop_outs {
            within("drop-out rate", drop_outs.rate_hz, "Hz", 1e-6, 1000.0)?;
            within("drop-out time", drop_outs.length_s, "s", 0.0, 60.0)?;
        }
        Ok(())
    }
}

/// A recorder at work.
#[derive(Debug, Clone)]
pub(crate) struct Recorder {
    noise: Option<(Normals, f64)>,
    /// Steps of the converter from 0 to full scale.
    steps: Option<f64>,
    drop_outs: Option<Interruption>,
}

/// Drop-outs at work, in samples.
#[derive(Debug, Clone)]
struct Interruption {
    draw: Draw,
    mean_wait: f64,
    length: f64,
    /// Sample at which the next one begins.
    from: f64,
}

impl Interruption {
    /// True if this sample is lost.
    fn loses(&mut self, sample: f64) -> bool {
        while sample >= self.from + self.length {
            self.from += self.length - self.mean_wait * self.draw.uniform().ln();
        }
        sample >= self.from
    }
}

impl Recorder {
    pub(crate) fn new(settings: RecorderSettings, sample_rate_hz: f64, seed: u64) -> Self {
        let drop_outs = settings.drop_outs.map(|drop_outs| {
            let (mut draw, mean_wait) = (Draw::new(seed, Stream::DropOuts), sample_rate_hz / drop_outs.rate_hz);
            let from = -mean_wait * draw.uniform().ln();
            Interruption { draw, mean_wait, length: drop_outs.length_s * sample_rate_hz, from }
        });
        Self {
            noise: (settings.noise > 0.0).then(|| (Draw::new(seed, Stream::Recorder).normals(), settings.noise)),
            steps: settings.bits.map(|bits| 2f64.powi(i32::from(bits) - 1)),
            drop_outs,
        }
    }

    /// What is written for the audio at a sample counted from the start of the clip.
    #[inline]
    pub(crate) fn write(&mut self, mut audio: f64, sample: u64) -> f64 {
        if let Some((normals, rms)) = &mut self.noise {
            audio += normals.real() * *rms;
        }
        audio = audio.clamp(-1.0, 1.0);
        if let Some(steps) = self.steps {
            audio = (audio * steps).round().min(steps - 1.0) / steps;
        }
        let lost = self.drop_outs.as_mut().is_some_and(|drop_outs| drop_outs.loses(sample as f64));
        if lost { 0.0 } else { audio }
    }
}
