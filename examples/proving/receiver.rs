//! From complex baseband to audio: automatic gain, detector and audio band. Sample by sample, no state kept between clips.

use crate::channel::Shape;
use crate::filters;
use crate::random::Dice;
use rustfft::num_complex::Complex64;
use std::f64::consts::TAU;

/// Automatic gain control by a peak follower on the envelope.
#[derive(Clone, Copy)]
pub struct GainControl {
    /// Time constant while the envelope is above the held level, s.
    pub attack_s: f64,
    /// Time constant while it is below, s.
    pub decay_s: f64,
    /// Gain is 1/(1 + depth·level), level in units of a click's peak.
    pub depth: f64,
    /// The follower hurries in proportion to how far the envelope is from the level.
    pub level_dependent: bool,
}

/// The detector.
#[derive(Clone, Copy)]
pub enum Detector {
    /// Envelope with time constants of charge and discharge, s; zero: ideal.
    Envelope(f64, f64),
    /// Limiter and discriminator; output in units of this deviation, Hz.
    Discriminator(f64),
}

/// A receiver.
#[derive(Clone, Copy)]
pub struct Receiver {
    /// Two-sided 6 dB bandwidth of the channel, Hz.
    pub bandwidth_hz: f64,
    /// Selectivity.
    pub shape: Shape,
    /// Automatic gain control, if any.
    pub gain_control: Option<GainControl>,
    /// Detector.
    pub detector: Detector,
    /// Order and corner of the audio high-pass, Hz.
    pub audio_low: (usize, f64),
    /// Order and corner of the audio low-pass, Hz.
    pub audio_high: (usize, f64),
    /// Sign of the audio.
    pub polarity: f64,
}

impl Receiver {
    /// Draws a receiver; one in five is a wide one.
    pub fn draw(dice: &mut Dice) -> Self {
        let wide = dice.chance(0.2);
        let bandwidth_hz = if wide { dice.uniform(9e3, 16e3) } else { dice.log_uniform(4e3, 9e3) };
        let top_hz = if wide { dice.uniform(5e3, 1e4) } else { dice.log_uniform(2.4e3, 6e3) };
        Self {
            bandwidth_hz,
            shape: Shape::draw(dice),
            gain_control: dice.chance(0.4).then(|| GainControl::mild(dice)),
            detector: if dice.chance(0.5) {
                Detector::Envelope(0.0, 0.0)
            } else {
                Detector::Envelope(dice.uniform(2e-6, 15e-6), dice.uniform(20e-6, 100e-6))
            },
            audio_low: (dice.whole(1, 2), dice.log_uniform(50.0, 300.0)),
            audio_high: (dice.whole(2, 4), top_hz),
            polarity: dice.sign(),
        }
    }

    /// Detects and filters; `rate_hz` is the sample rate.
    pub fn detect(&self, baseband: &[Complex64], rate_hz: f64) -> Vec<f64> {
        let mut audio = match self.detector {
            Detector::Envelope(charge_s, discharge_s) => {
                let mut envelope: Vec<f64> = baseband.iter().map(|z| z.norm()).collect();
                if let Some(control) = &self.gain_control {
                    control.run(&mut envelope, rate_hz);
                }
                follow(&mut envelope, charge_s, discharge_s, rate_hz);
                envelope
            }
            Detector::Discriminator(deviation_hz) => discriminate(baseband, deviation_hz, rate_hz),
        };
        // The chain starts from rest: start it at the mean so that the high-pass does not thump.
        let head = audio.len().min((rate_hz * 0.5) as usize).max(1);
        let mean = audio[..head].iter().sum::<f64>() / head as f64;
        audio.iter_mut().for_each(|x| *x = (*x - mean) * self.polarity);
        filters::run(&mut filters::high_pass(self.audio_low.0, self.audio_low.1, rate_hz), &mut audio);
        filters::run(&mut filters::low_pass(self.audio_high.0, self.audio_high.1, rate_hz), &mut audio);
        audio
    }
}

impl GainControl {
    /// One that an ordinary receiver has.
    pub fn mild(dice: &mut Dice) -> Self {
        Self {
            attack_s: dice.log_uniform(3e-3, 50e-3),
            decay_s: dice.log_uniform(0.1, 1.0),
            depth: dice.log_uniform(0.3, 2.0),
            level_dependent: false,
        }
    }

    /// One that pumps.
    pub fn pumping(dice: &mut Dice) -> Self {
        Self {
            attack_s: dice.log_uniform(0.4e-3, 5e-3),
            decay_s: dice.log_uniform(0.03, 0.4),
            depth: dice.log_uniform(2.0, 12.0),
            level_dependent: false,
        }
    }

    fn run(&self, envelope: &mut [f64], rate_hz: f64) {
        // The receiver was on before the recording began: settle on the first second.
        let mut level = 0.0;
        for &x in envelope.iter().take(rate_hz as usize) {
            self.follow(&mut level, x, rate_hz);
        }
        for x in envelope.iter_mut() {
            self.follow(&mut level, *x, rate_hz);
            *x /= 1.0 + self.depth * level;
        }
    }

    fn follow(&self, level: &mut f64, x: f64, rate_hz: f64) {
        let time_constant_s = if x > *level { self.attack_s } else { self.decay_s };
        let mut speed = 1.0 / (time_constant_s * rate_hz);
        if self.level_dependent {
            speed *= ((x + 0.02) / (*level + 0.02)).clamp(0.2, 8.0);
        }
        *level += (x - *level) * speed.min(1.0);
    }
}

/// Diode and capacitor: fast up, slow down.
fn follow(envelope: &mut [f64], charge_s: f64, discharge_s: f64, rate_hz: f64) {
    if discharge_s == 0.0 {
        return;
    }
    let up = 1.0 - (-1.0 / (charge_s * rate_hz)).exp();
    let down = 1.0 - (-1.0 / (discharge_s * rate_hz)).exp();
    let mut held = 0.0;
    for x in envelope {
        held += (*x - held) * if *x > held { up } else { down };
        *x = held;
    }
}

fn discriminate(baseband: &[Complex64], deviation_hz: f64, rate_hz: f64) -> Vec<f64> {
    let mut last = Complex64::new(1.0, 0.0);
    let scale = rate_hz / (TAU * deviation_hz);
    let turn = |&z: &Complex64| {
        let angle = (z * last.conj()).arg();
        last = z;
        angle * scale
    };
    baseband.iter().map(turn).collect()
}
