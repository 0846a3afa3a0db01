//! Synthetic music: notes of decaying or sustained harmonics on a beat, chords, bass and a noise percussion.

use super::{RATE, count, normalised};
use crate::random::Dice;
use std::f64::consts::TAU;

/// Steps of a major and a minor scale, semitones.
const SCALES: [[i32; 7]; 2] = [[0, 2, 4, 5, 7, 9, 11], [0, 2, 3, 5, 7, 8, 10]];

/// A note to come.
struct Note {
    start: usize,
    length: usize,
    frequency_hz: f64,
    gain: f64,
}

/// Timbre of one instrument.
struct Instrument {
    harmonics: Vec<f64>,
    attack_s: f64,
    decay_s: f64,
    vibrato: f64,
}

impl Instrument {
    fn draw(dice: &mut Dice) -> Self {
        let fall = dice.uniform(0.7, 2.2);
        let harmonics = (1..=dice.whole(3, 12)).map(|h| dice.uniform(0.3, 1.0) * (h as f64).powf(-fall)).collect();
        Self {
            harmonics,
            attack_s: dice.log_uniform(0.002, 0.08),
            decay_s: dice.log_uniform(0.08, 2.0),
            vibrato: if dice.chance(0.4) { dice.uniform(0.002, 0.01) } else { 0.0 },
        }
    }

    fn play(&self, output: &mut [f64], note: &Note) {
        let end = (note.start + note.length).min(output.len());
        let release = 0.02 * RATE;
        let mut phase = 0.0;
        for (i, x) in output[note.start.min(end)..end].iter_mut().enumerate() {
            let t = i as f64 / RATE;
            let left = (end - note.start - i) as f64 / release;
            let envelope = (t / self.attack_s).min(1.0) * (-t / self.decay_s).exp() * left.min(1.0);
            phase += note.frequency_hz * (1.0 + self.vibrato * (TAU * 5.5 * t).sin()) / RATE;
            let turn = TAU * phase.fract();
            let value: f64 = self
                .harmonics
                .iter()
                .enumerate()
                .filter(|(h, _)| note.frequency_hz * (*h as f64 + 1.0) < 16e3)
                .map(|(h, a)| a * ((h as f64 + 1.0) * turn).sin())
                .sum();
            *x += note.gain * envelope * value;
        }
    }
}

/// A piece of music.
pub fn music(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let mut output = vec![0.0; count(duration_s)];
    let scale = dice.pick(&SCALES);
    let root_hz = dice.log_uniform(110.0, 330.0);
    let pitch = |degree: i32| {
        let semitones = scale[degree.rem_euclid(7) as usize] + 12 * degree.div_euclid(7);
        root_hz * 2f64.powf(f64::from(semitones) / 12.0)
    };
    let (melody, chords, bass) = (Instrument::draw(dice), Instrument::draw(dice), Instrument::draw(dice));
    let beat = count(60.0 / dice.uniform(70.0, 160.0));
    let percussion = if dice.chance(0.5) { dice.uniform(0.05, 0.5) } else { 0.0 };
    let (mut degree, mut start) = (7, 0);
    let mut step = 0_usize;
    while start < output.len() {
        let length = beat / dice.pick(&[1, 1, 2, 2, 4]);
        degree = (degree + dice.whole(0, 4) as i32 - 2).clamp(3, 16);
        if dice.chance(0.9) {
            melody
                .play(&mut output, &Note { start, length, frequency_hz: pitch(degree), gain: dice.uniform(0.6, 1.0) });
        }
        if step.is_multiple_of(4) {
            let chord = dice.whole(0, 6) as i32;
            for third in [0, 2, 4] {
                let note = Note { start, length: 2 * beat, frequency_hz: pitch(chord + third), gain: 0.35 };
                chords.play(&mut output, &note);
            }
            bass.play(&mut output, &Note { start, length: beat, frequency_hz: pitch(chord - 7), gain: 0.7 });
        }
        if percussion > 0.0 {
            strike(dice, &mut output, start, percussion);
        }
        start += length;
        step += 1;
    }
    normalised(output)
}

/// A burst of noise that dies away.
fn strike(dice: &mut Dice, output: &mut [f64], start: usize, gain: f64) {
    let decay_s = dice.log_uniform(0.01, 0.08);
    let end = (start + count(5.0 * decay_s)).min(output.len());
    for (i, x) in output[start..end].iter_mut().enumerate() {
        *x += gain * dice.normal() * (-(i as f64) / RATE / decay_s).exp();
    }
}
