//! Speech-like sound: glottal pulses with a pitch contour through moving formants, fricatives, stops and pauses.

use super::{RATE, count, normalised};
use crate::random::Dice;
use std::f64::consts::{PI, TAU};

/// Formant frequencies of vowels of an adult voice, Hz (common practice, rounded).
const VOWELS: [[f64; 3]; 7] = [
    [280.0, 2250.0, 2900.0],
    [400.0, 2000.0, 2550.0],
    [550.0, 1800.0, 2450.0],
    [720.0, 1150.0, 2450.0],
    [560.0, 880.0, 2400.0],
    [320.0, 870.0, 2250.0],
    [490.0, 1350.0, 1700.0],
];
/// Bandwidths of the formants and of a fixed fourth one, Hz.
const BANDWIDTHS: [f64; 4] = [70.0, 100.0, 150.0, 250.0];
/// The fourth formant, Hz.
const FOURTH_HZ: f64 = 3500.0;
/// Centres of fricative noise, Hz.
const FRICATIVES_HZ: [f64; 4] = [2500.0, 3500.0, 5000.0, 6500.0];
/// Samples between changes of the formant filters.
const UPDATE: usize = 48;

/// Second-order resonator with unit gain at zero frequency.
#[derive(Default, Clone, Copy)]
struct Formant {
    a: f64,
    b: f64,
    c: f64,
    past: [f64; 2],
}

impl Formant {
    fn tune(&mut self, frequency_hz: f64, bandwidth_hz: f64) {
        self.c = -(-TAU * bandwidth_hz / RATE).exp();
        self.b = 2.0 * (-PI * bandwidth_hz / RATE).exp() * (TAU * frequency_hz / RATE).cos();
        self.a = 1.0 - self.b - self.c;
    }

    fn step(&mut self, x: f64) -> f64 {
        let y = self.a * x + self.b * self.past[0] + self.c * self.past[1];
        self.past = [y, self.past[0]];
        y
    }
}

/// What the voice does for a while.
#[derive(Clone, Copy)]
enum Sound {
    Vowel([f64; 3]),
    Fricative(f64),
    Stop,
    Pause,
}

/// Speech-like sound of one voice.
pub fn speech(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let n = count(duration_s);
    let mut voice = Voice::new(dice);
    let mut output = Vec::with_capacity(n + 48_000);
    while output.len() < n {
        let syllables = dice.whole(3, 12);
        voice.start_phrase(dice);
        for _ in 0..syllables {
            match dice.whole(0, 3) {
                0 => {
                    let centre_hz = dice.pick(&FRICATIVES_HZ);
                    voice.say(dice, &mut output, Sound::Fricative(centre_hz), 0.05, 0.13);
                }
                1 => voice.say(dice, &mut output, Sound::Stop, 0.04, 0.09),
                _ => {}
            }
            let vowel = dice.pick(&VOWELS);
            voice.say(dice, &mut output, Sound::Vowel(vowel), 0.07, 0.24);
        }
        voice.say(dice, &mut output, Sound::Pause, 0.15, 0.7);
    }
    output.truncate(n);
    normalised(output)
}

struct Voice {
    base_hz: f64,
    pitch_hz: f64,
    size: f64,
    breath: f64,
    phase: f64,
    cycle_gain: f64,
    loudness: f64,
    target: [f64; 3],
    current: [f64; 3],
    formants: [Formant; 4],
    hiss: Formant,
}

impl Voice {
    fn new(dice: &mut Dice) -> Self {
        let base_hz = dice.log_uniform(85.0, 260.0);
        Self {
            base_hz,
            pitch_hz: base_hz,
            size: dice.uniform(0.95, 1.2),
            breath: dice.uniform(0.005, 0.05),
            phase: 0.0,
            cycle_gain: 1.0,
            loudness: 0.0,
            target: VOWELS[3],
            current: VOWELS[3],
            formants: [Formant::default(); 4],
            hiss: Formant::default(),
        }
    }

    fn start_phrase(&mut self, dice: &mut Dice) {
        self.pitch_hz = self.base_hz * dice.uniform(1.05, 1.35);
    }

    fn say(&mut self, dice: &mut Dice, output: &mut Vec<f64>, sound: Sound, shortest_s: f64, longest_s: f64) {
        let length = count(dice.uniform(shortest_s, longest_s));
        if let Sound::Vowel(formants) = sound {
            self.target = formants.map(|f| f * self.size);
        }
        if let Sound::Fricative(centre_hz) = sound {
            self.hiss.tune(centre_hz, 0.25 * centre_hz);
        }
        let accent = dice.uniform(0.6, 1.0);
        let slope = dice.uniform(-0.25, 0.12) / (length as f64);
        for i in 0..length {
            if i % UPDATE == 0 {
                self.glide();
            }
            self.pitch_hz = (self.pitch_hz * (1.0 + slope)).clamp(0.6 * self.base_hz, 2.0 * self.base_hz);
            let voiced = matches!(sound, Sound::Vowel(_));
            self.loudness += (f64::from(u8::from(voiced)) * accent - self.loudness) / (0.012 * RATE);
            let mut x = self.glottis(dice) * self.loudness;
            for formant in &mut self.formants {
                x = formant.step(x);
            }
            output.push(x + self.noise(dice, sound, i, length));
        }
    }

    /// Moves the formants towards their targets.
    fn glide(&mut self) {
        for (now, goal) in self.current.iter_mut().zip(self.target) {
            *now += (goal - *now) * (UPDATE as f64 / (0.03 * RATE));
        }
        let frequencies = [self.current[0], self.current[1], self.current[2], FOURTH_HZ * self.size];
        for ((formant, f), bandwidth) in self.formants.iter_mut().zip(frequencies).zip(BANDWIDTHS) {
            formant.tune(f, bandwidth);
        }
    }

    /// Derivative of the glottal flow, with shimmer, jitter and breath.
    fn glottis(&mut self, dice: &mut Dice) -> f64 {
        self.phase += self.pitch_hz / RATE;
        if self.phase >= 1.0 {
            self.phase -= 1.0;
            self.cycle_gain = 1.0 + 0.05 * dice.normal();
            self.pitch_hz *= 1.0 + 0.006 * dice.normal();
        }
        let flow = match self.phase {
            p if p < 0.40 => (PI * p / 0.40).sin() * 0.5,
            p if p < 0.56 => -(PI * (p - 0.40) / 0.32).sin() * 1.25,
            p => -1.25 * (-(p - 0.56) / 0.02).exp(),
        };
        flow * self.cycle_gain + self.breath * dice.normal()
    }

    fn noise(&mut self, dice: &mut Dice, sound: Sound, i: usize, length: usize) -> f64 {
        let part = i as f64 / length as f64;
        match sound {
            Sound::Fricative(_) => self.hiss.step(dice.normal()) * 0.25 * (PI * part).sin(),
            // Closure, then a burst.
            Sound::Stop if part > 0.8 => 0.15 * dice.normal() * (1.0 - part) * 5.0,
            _ => 0.0,
        }
    }
}
