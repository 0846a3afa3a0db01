//! A carrier in the channel under the clicks, with or without a programme.
//!
//! It enters the channel filter as impulses at the internal rate, so that the filter shapes its side bands. Amplitudes are those
//! behind the filter, in click peaks; frequencies in Hz from the tuned frequency.

use super::turning::Turning;
use super::{AudioBand, AudioFilter, Complex, Draw, Normals};
use serde::{Deserialize, Serialize};
use std::sync::Arc;

/// What the carrier is modulated with.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", tag = "kind")]
pub enum Programme {
    /// A tone.
    Tone {
        /// Frequency, Hz.
        frequency_hz: f64,
        /// Depth of modulation, 0..=1.
        depth: f64,
    },
    /// Something like speech: noise of 300 to 3000 Hz that swells and fades a few times a second.
    Speech {
        /// Depth of modulation at the loudest, 0..=1.
        depth: f64,
    },
    /// Sound that the caller supplies, over and over again.
    Sound {
        /// Depth of modulation at the loudest, 0..=1.
        depth: f64,
        /// The sound; it is not written into a truth, so that what is read back from there is silent.
        #[serde(skip)]
        sound: Option<Sound>,
    },
}

/// Mono sound for a carrier.
#[derive(Debug, Clone, PartialEq)]
pub struct Sound {
    /// Samples, of any scale: the loudest modulates to the full depth.
    pub samples: Arc<[f32]>,
    /// Samples per second, Hz.
    pub sample_rate_hz: f64,
}

impl Programme {
    /// Depth of modulation at the loudest.
    #[must_use]
    pub fn depth(&self) -> f64 {
        match self {
            Self::Tone { depth, .. } | Self::Speech { depth } | Self::Sound { depth, .. } => *depth,
        }
    }
}

/// A co-channel carrier.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Carrier {
    /// Amplitude behind the channel filter, in click peaks.
    pub amplitude: f64,
    /// Distance from the tuned frequency, Hz.
    pub offset_hz: f64,
    /// Programme; none is a bare carrier.
    pub programme: Option<Programme>,
}

/// Band of the made-up speech.
const SPEECH_BAND: AudioBand = AudioBand { low_hz: 300.0, low_poles: 2, high_hz: 3000.0, high_poles: 2 };
/// Rates of three turning vectors whose sum swells and fades as syllables do, Hz.
const SYLLABLES_HZ: [f64; 3] = [1.7, 3.1, 4.9];
/// Rms of the speech against its limit: 3 standard deviations are near full modulation in a loud syllable.
const SPEECH_RMS: f64 = 0.3;

/// Steps between two values of the loudness of speech; it changes a thousand times more slowly and runs straight between them.
const SWELL_STEPS: u32 = 32;

/// How loud the speech is: the length of a sum of turning vectors.
#[derive(Debug, Clone)]
struct Swell {
    syllables: [Turning; 3],
    now: f64,
    slope: f64,
    /// Value at the end of the straight stretch.
    to: f64,
    /// Steps that are left of it.
    left: u32,
}

impl Swell {
    fn new(step_s: f64, draw: &mut Draw) -> Self {
        let mut syllables = SYLLABLES_HZ.map(|f| Turning::new(draw.phase(), f, f64::from(SWELL_STEPS) * step_s));
        let to = length(&mut syllables);
        Self { syllables, now: to, slope: 0.0, to, left: 0 }
    }

    #[inline]
    fn next(&mut self) -> f64 {
        if self.left == 0 {
            self.now = self.to;
            self.to = length(&mut self.syllables);
            self.slope = (self.to - self.now) / f64::from(SWELL_STEPS);
            self.left = SWELL_STEPS;
        }
        let now = self.now;
        self.now += self.slope;
        self.left -= 1;
        now
    }
}

fn length(syllables: &mut [Turning; 3]) -> f64 {
    syllables.iter_mut().map(Turning::next).sum::<Complex>().norm()
}

#[derive(Debug, Clone)]
enum Modulation {
    None,
    Tone { depth: f64, tone: Turning },
    Speech { depth: f64, filter: AudioFilter, scale: f64, swell: Swell, normals: Normals },
    Sound { scale: f64, sound: Sound, place: f64, pace: f64 },
}

/// A carrier at work.
#[derive(Debug, Clone)]
pub struct CarrierSource {
    /// Strength of the impulse of one step of the unmodulated carrier.
    strength: f64,
    carrier: Turning,
    modulation: Modulation,
}

impl CarrierSource {
    /// A carrier stepped by `step_s`, for a channel whose gain at the carrier's offset is `gain`.
    pub(crate) fn new(settings: &Carrier, gain: f64, step_s: f64, mut draw: Draw) -> Self {
        let carrier = Turning::new(draw.phase(), settings.offset_hz, step_s);
        let modulation = match &settings.programme {
            None => Modulation::None,
            Some(Programme::Tone { frequency_hz, depth }) => {
                Modulation::Tone { depth: *depth, tone: Turning::new(draw.phase(), *frequency_hz, step_s) }
            }
            Some(Programme::Speech { depth }) => {
                let filter = AudioFilter::new(SPEECH_BAND, 1.0 / step_s);
                let scale = SPEECH_RMS / noise_gain(filter.clone(), 1.0 / step_s);
                let swell = Swell::new(step_s, &mut draw);
                Modulation::Speech { depth: *depth, filter, scale, swell, normals: draw.normals() }
            }
            Some(Programme::Sound { depth, sound }) => sounding(*depth, sound.as_ref(), step_s),
        };
        Self { strength: settings.amplitude * step_s / gain, carrier, modulation }
    }

    /// Strength of the impulse of this step.
    #[inline]
    pub fn next_impulse(&mut self) -> Complex {
        self.carrier.next() * (self.strength * (1.0 + self.modulation.next()))
    }

    /// The unit phasor of the carrier ahead of the channel, from the coming step on.
    pub(super) fn phasor(&self) -> Turning {
        self.carrier.clone()
    }
}

/// Modulation with a sound: silent if there is none.
fn sounding(depth: f64, sound: Option<&Sound>, step_s: f64) -> Modulation {
    let loudest = sound.map_or(0.0, |sound| sound.samples.iter().fold(0.0f32, |top, x| top.max(x.abs())));
    match sound {
        Some(sound) if loudest > 0.0 && loudest.is_finite() && sound.sample_rate_hz > 0.0 => Modulation::Sound {
            scale: depth / f64::from(loudest),
            sound: sound.clone(),
            place: 0.0,
            pace: sound.sample_rate_hz * step_s,
        },
        _ => Modulation::None,
    }
}

impl Modulation {
    /// Relative change of the amplitude in this step, within ± the depth.
    #[inline]
    fn next(&mut self) -> f64 {
        match self {
            Self::None => 0.0,
            Self::Tone { depth, tone } => *depth * tone.next().im,
            Self::Speech { depth, filter, scale, swell, normals } => {
                let voice = filter.step(normals.real()) * *scale * swell.next();
                *depth * voice.clamp(-1.0, 1.0)
            }
            Self::Sound { scale, sound, place, pace } => {
                let count = sound.samples.len();
                let (at, part) = (*place as usize, place.fract());
                let [now, next] = [at, at + 1].map(|n| f64::from(sound.samples[n % count]));
                *place = (*place + *pace) % count as f64;
                *scale * (now + (next - now) * part)
            }
        }
    }
}

/// Rms of the output of a filter for white noise of rms 1: the root of the energy of its impulse response.
fn noise_gain(mut filter: AudioFilter, rate_hz: f64) -> f64 {
    // The slowest part, 300 Hz, has died away after 30 ms.
    let samples = (0.03 * rate_hz) as usize;
    (0..samples).map(|k| filter.step(if k == 0 { 1.0 } else { 0.0 }).powi(2)).sum::<f64>().sqrt()
}
