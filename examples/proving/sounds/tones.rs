//! Tones: whistles, warbles, chords, keyed tones, data, sweeps, dialling tones.

use super::{RATE, count, normalised};
use crate::random::Dice;
use std::f64::consts::TAU;

/// Sound of an instantaneous frequency and amplitude, both functions of time in seconds.
fn oscillator(duration_s: f64, mut law: impl FnMut(f64) -> (f64, f64)) -> Vec<f64> {
    let mut phase = 0.0_f64;
    (0..count(duration_s))
        .map(|i| {
            let (frequency_hz, amplitude) = law(i as f64 / RATE);
            phase = (phase + frequency_hz / RATE).fract();
            amplitude * (TAU * phase).sin()
        })
        .collect()
}

/// A slow random walk through smoothing; standard deviation one, correlation time in seconds.
fn wander(dice: &mut Dice, time_s: f64) -> impl FnMut() -> f64 + '_ {
    let keep = (-1.0 / (time_s * RATE)).exp();
    let push = (1.0 - keep * keep).sqrt();
    let mut state = dice.normal();
    move || {
        state = keep * state + push * dice.normal();
        state
    }
}

/// A heterodyne whistle that drifts and fades, with a harmonic or two.
pub fn whistle(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let frequency_hz = dice.log_uniform(250.0, 4000.0);
    let drift = dice.pick(&[0.0, 1e-4, 1e-3, 5e-3]);
    let fade = dice.uniform(0.0, 0.4);
    let second = dice.pick(&[0.0, 0.05, 0.3]);
    let (time_s, start) = (dice.log_uniform(0.05, 2.0), dice.phase());
    let mut walk = wander(dice, time_s);
    let sound =
        oscillator(duration_s, |t| (frequency_hz * (1.0 + drift * walk()), 1.0 + fade * (TAU * 0.4 * t + start).sin()));
    normalised(sound.iter().map(|x| x + second * (2.0 * x * x - 1.0)).collect())
}

/// A tone whose frequency swings.
pub fn warble(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let (centre_hz, swing) = (dice.log_uniform(300.0, 3000.0), dice.log_uniform(0.01, 0.4));
    let (speed_hz, square) = (dice.log_uniform(0.5, 40.0), dice.chance(0.4));
    normalised(oscillator(duration_s, |t| {
        let turn = (TAU * speed_hz * t).sin();
        (centre_hz * (1.0 + swing * if square { turn.signum() } else { turn }), 1.0)
    }))
}

/// Two to six steady tones, harmonic or not.
pub fn chord(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let root_hz = dice.log_uniform(110.0, 900.0);
    let ratios = if dice.chance(0.5) { [1.0, 1.25, 1.5, 2.0, 2.5, 3.0] } else { [1.0, 1.19, 1.41, 1.68, 2.37, 3.13] };
    let mut output = vec![0.0; count(duration_s)];
    for ratio in ratios.iter().take(dice.whole(2, 6)) {
        let (amplitude, swell) = (dice.uniform(0.3, 1.0), dice.uniform(0.0, 0.3));
        let part =
            oscillator(duration_s, |t| (root_hz * ratio, amplitude * (1.0 + swell * (TAU * 0.7 * ratio * t).sin())));
        output.iter_mut().zip(part).for_each(|(o, p)| *o += p);
    }
    normalised(output)
}

/// A tone keyed by hand, in dots and dashes.
pub fn keyed(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let (pitch_hz, unit_s) = (dice.log_uniform(350.0, 1200.0), 1.2 / dice.uniform(12.0, 30.0));
    let edge_s = dice.log_uniform(0.0005, 0.008);
    let mut marks = Vec::new();
    let mut t = 0.1;
    while t < duration_s {
        let length = unit_s * dice.pick(&[1.0, 1.0, 3.0]) * (1.0 + 0.08 * dice.normal());
        marks.push((t, t + length));
        t += length + unit_s * dice.pick(&[1.0, 1.0, 1.0, 3.0, 7.0]) * (1.0 + 0.08 * dice.normal());
    }
    let mut index = 0;
    normalised(oscillator(duration_s, |t| {
        while index + 1 < marks.len() && t > marks[index].1 + 4.0 * edge_s {
            index += 1;
        }
        let (from, to) = marks[index];
        let rise = 1.0 / (1.0 + (-(t - from) / edge_s * 4.0).exp());
        (pitch_hz, rise / (1.0 + ((t - to) / edge_s * 4.0).exp()))
    }))
}

/// Two-tone data at 45 to 300 symbols a second.
pub fn data(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let (low_hz, shift_hz) = (dice.uniform(600.0, 2200.0), dice.pick(&[85.0, 170.0, 200.0, 850.0]));
    let symbol_s = 1.0 / dice.pick(&[45.45, 50.0, 75.0, 100.0, 300.0]);
    let bits: Vec<bool> = (0..=(duration_s / symbol_s) as usize).map(|_| dice.chance(0.5)).collect();
    normalised(oscillator(duration_s, |t| {
        (low_hz + shift_hz * f64::from(u8::from(bits[(t / symbol_s) as usize])), 1.0)
    }))
}

/// A sweep, once or again and again.
pub fn sweep(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let (low_hz, high_hz) = (dice.log_uniform(50.0, 400.0), dice.log_uniform(1500.0, 8000.0));
    let length_s = if dice.chance(0.5) { duration_s } else { dice.log_uniform(0.02, 3.0) };
    let rising = dice.chance(0.5);
    normalised(oscillator(duration_s, |t| {
        let part = (t / length_s).fract();
        let part = if rising { part } else { 1.0 - part };
        (low_hz * (high_hz / low_hz).powf(part), 1.0)
    }))
}

/// Rise and fall of a dialling tone, s.
const DIAL_EDGE_S: f64 = 0.002;

/// Dialling tones: pairs of tones, a tenth of a second each.
pub fn dial(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let (rows, columns) = ([697.0, 770.0, 852.0, 941.0], [1209.0, 1336.0, 1477.0, 1633.0]);
    let (tone_s, gap_s) = (dice.uniform(0.06, 0.2), dice.uniform(0.04, 0.2));
    let keys: Vec<(f64, f64)> =
        (0..=(duration_s / (tone_s + gap_s)) as usize).map(|_| (dice.pick(&rows), dice.pick(&columns))).collect();
    let sound = |i: usize| {
        let t = i as f64 / RATE;
        let (row, column) = keys[(t / (tone_s + gap_s)) as usize];
        let within = t % (tone_s + gap_s);
        let gate = (within / DIAL_EDGE_S).min((tone_s - within) / DIAL_EDGE_S).clamp(0.0, 1.0);
        gate * ((TAU * row * t).sin() + (TAU * column * t).sin())
    };
    normalised((0..count(duration_s)).map(sound).collect())
}

/// Mains harmonics up to a highest order.
pub fn mains(dice: &mut Dice, duration_s: f64, orders: usize) -> Vec<f64> {
    let mains_hz = dice.pick(&[50.0, 60.0]) * (1.0 + 3e-4 * dice.normal());
    let fall = dice.uniform(0.3, 1.5);
    let parts: Vec<(f64, f64)> =
        (1..=orders).map(|h| (dice.uniform(0.1, 1.0) * (h as f64).powf(-fall), dice.phase())).collect();
    let sound = |i: usize| {
        let turn = TAU * (mains_hz * i as f64 / RATE).fract();
        parts.iter().enumerate().map(|(h, (a, p))| a * ((h as f64 + 1.0) * turn + p).sin()).sum()
    };
    normalised((0..count(duration_s)).map(sound).collect())
}
