//! Everything that makes one recording, and its rendering by brute force at four times the audio rate or more.

use crate::channel::Channel;
use crate::firings::Strike;
use crate::kernel::Placer;
use crate::random::Dice;
use crate::receiver::Receiver;
use crate::recorder::Recorder;
use rustfft::num_complex::Complex64;
use std::f64::consts::TAU;

/// Sample rate inside, Hz.
const INNER_RATE_HZ: u32 = 192_000;
/// The same for recordings longer than [`LONG_S`], Hz.
const INNER_RATE_LONG_HZ: u32 = 96_000;
/// From this length on the lower inner rate serves, s.
const LONG_S: f64 = 25.0;
/// Sample rate of a programme, Hz; both inner rates are multiples of it.
pub const PROGRAMME_RATE_HZ: u32 = 48_000;

/// A carrier in the channel.
pub struct Carrier {
    /// Amplitude on tune over the peak of a click.
    pub ratio: f64,
    /// Distance from the tuned frequency, Hz.
    pub offset_hz: f64,
    /// Programme at [`PROGRAMME_RATE_HZ`] within −1..1, if it is modulated.
    pub programme: Option<Vec<f64>>,
    /// Depth of amplitude modulation.
    pub depth: f64,
    /// Deviation of frequency modulation, Hz.
    pub deviation_hz: f64,
}

impl Carrier {
    /// A bare carrier.
    pub fn bare(ratio: f64, offset_hz: f64) -> Self {
        Self { ratio, offset_hz, programme: None, depth: 0.0, deviation_hz: 0.0 }
    }
}

/// A sine added to the audio.
#[derive(Clone, Copy)]
pub struct Tone {
    /// Frequency, Hz.
    pub frequency_hz: f64,
    /// Amplitude over the peak of a click.
    pub amplitude: f64,
    /// Phase, radians.
    pub phase: f64,
}

/// One recording to be.
pub struct Scene {
    /// Length, s.
    pub duration_s: f64,
    /// Strikes, in any order.
    pub strikes: Vec<Strike>,
    /// Receiver.
    pub receiver: Receiver,
    /// Peak of a typical click over the channel's rms noise, dB.
    pub click_over_noise_db: f64,
    /// Carrier in the channel.
    pub carrier: Option<Carrier>,
    /// Sines added behind the receiver.
    pub tones: Vec<Tone>,
    /// Recorder.
    pub recorder: Recorder,
}

impl Scene {
    /// An ordinary scene of the given strikes: quiet channel, nothing in the way.
    pub fn ordinary(dice: &mut Dice, duration_s: f64, strikes: Vec<Strike>) -> Self {
        Self {
            duration_s,
            strikes,
            receiver: Receiver::draw(dice),
            click_over_noise_db: dice.uniform(22.0, 45.0),
            carrier: None,
            tones: Vec::new(),
            recorder: Recorder::draw(dice),
        }
    }

    /// Renders the recording.
    pub fn render(&self, dice: &mut Dice) -> Vec<f32> {
        let rate_hz = if self.duration_s > LONG_S { INNER_RATE_LONG_HZ } else { INNER_RATE_HZ };
        let rate = f64::from(rate_hz);
        let mut channel = Channel::new(self.receiver.shape, self.receiver.bandwidth_hz, rate);
        let mut line = vec![Complex64::default(); (self.duration_s * rate) as usize];
        self.add_noise(dice, &mut line, channel.noise_gain);
        self.add_strikes(dice, &mut line, rate);
        if let Some(carrier) = &self.carrier {
            carrier.add(dice, &mut line, rate, channel.carrier_gain);
        }
        channel.run(&mut line);
        let mut audio = self.receiver.detect(&line, rate);
        drop(line);
        let click = self.typical_click(&audio, rate);
        for tone in &self.tones {
            tone.add(&mut audio, rate, click);
        }
        self.recorder.record(dice, audio, rate_hz, click)
    }

    fn add_noise(&self, dice: &mut Dice, line: &mut [Complex64], noise_gain: f64) {
        let rms = 10f64.powf(-self.click_over_noise_db / 20.0) / noise_gain * 0.5f64.sqrt();
        for z in line {
            z.re += rms * dice.normal();
            z.im += rms * dice.normal();
        }
    }

    fn add_strikes(&self, dice: &mut Dice, line: &mut [Complex64], rate: f64) {
        let placer = Placer::new();
        for strike in self.strikes.iter().filter(|s| s.size != 0.0) {
            // Jitter is many carrier cycles: the carrier phase of a click is anything.
            placer.add(line, strike.time_s * rate, Complex64::from_polar(strike.size, dice.phase()));
        }
    }

    /// Median peak of the audio just behind the strikes; without strikes the highest peak.
    fn typical_click(&self, audio: &[f64], rate: f64) -> f64 {
        let peak = |part: &[f64]| part.iter().fold(0.0_f64, |m, x| m.max(x.abs()));
        let mut peaks: Vec<f64> = self
            .strikes
            .iter()
            .filter(|s| s.size > 0.5)
            .map(|s| {
                let from = ((s.time_s * rate) as usize).min(audio.len());
                let to = (from + (1.2e-3 * rate) as usize).min(audio.len());
                peak(&audio[from..to])
            })
            .collect();
        if peaks.is_empty() {
            return peak(audio).max(1e-9);
        }
        peaks.sort_by(f64::total_cmp);
        peaks[peaks.len() / 2].max(1e-9)
    }
}

impl Carrier {
    fn add(&self, dice: &mut Dice, line: &mut [Complex64], rate: f64, carrier_gain: f64) {
        let amplitude = self.ratio / carrier_gain;
        let stride = rate / f64::from(PROGRAMME_RATE_HZ);
        let mut phase = dice.phase();
        for (n, z) in line.iter_mut().enumerate() {
            let sound = self.programme.as_deref().map_or(0.0, |p| interpolate(p, n as f64 / stride));
            *z += Complex64::from_polar(amplitude * (1.0 + self.depth * sound).max(0.0), phase);
            phase = (phase + TAU * (self.offset_hz + self.deviation_hz * sound) / rate) % TAU;
        }
    }
}

fn interpolate(samples: &[f64], position: f64) -> f64 {
    let index = position as usize;
    let at = |i: usize| samples.get(i).copied().unwrap_or(0.0);
    at(index) + (at(index + 1) - at(index)) * position.fract()
}

impl Tone {
    fn add(&self, audio: &mut [f64], rate: f64, click: f64) {
        let mut turn = Complex64::from_polar(self.amplitude * click, self.phase);
        let step = Complex64::from_polar(1.0, TAU * self.frequency_hz / rate);
        for x in audio {
            *x += turn.im;
            turn *= step;
        }
    }
}
