//! Coloured noise.

use super::{RATE, count, normalised};
use crate::filters;
use crate::random::Dice;

/// White noise.
pub fn white(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    normalised((0..count(duration_s)).map(|_| dice.normal()).collect())
}

/// Pink noise: first-order sections an octave and a half apart, about −10 dB a decade from 20 Hz to 15 kHz.
pub fn pink(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let corners_hz = [12.0, 34.0, 95.0, 270.0, 760.0, 2100.0, 6000.0, 17_000.0];
    let mut bands: Vec<_> = corners_hz.iter().map(|&f| (filters::low_pass(1, f, RATE), f.sqrt().recip())).collect();
    let mut next = || {
        bands
            .iter_mut()
            .map(|(chain, gain)| {
                let x = dice.normal();
                *gain * (RATE / 2.0).sqrt() * chain.iter_mut().fold(x, |x, s| s.step(x))
            })
            .sum()
    };
    normalised((0..count(duration_s)).map(|_| next()).collect())
}

/// Brown noise: −20 dB a decade above 20 Hz.
pub fn brown(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let mut sound = white(dice, duration_s);
    filters::run(&mut filters::low_pass(1, 20.0, RATE), &mut sound);
    normalised(sound)
}

/// Blue noise: rising with frequency.
pub fn blue(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let sound = white(dice, duration_s);
    normalised(sound.windows(2).map(|w| w[1] - w[0]).collect())
}
