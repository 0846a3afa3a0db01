//! Machines: engine, fan, clock.

use super::{RATE, count, normalised};
use crate::filters;
use crate::random::Dice;
use std::f64::consts::TAU;

/// An engine: harmonics of the shaft with noise from cycle to cycle, speed that wanders, exhaust noise in step.
pub fn engine(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let shaft_hz = dice.log_uniform(10.0, 60.0);
    let cylinders = dice.whole(1, 6);
    let harmonics = dice.whole(8, 40);
    let fall = dice.uniform(0.6, 1.4);
    let parts: Vec<(f64, f64)> = (1..=harmonics)
        .map(|h| {
            let strong = if h % cylinders == 0 { 1.0 } else { dice.uniform(0.02, 0.3) };
            (strong * dice.uniform(0.4, 1.0) * (h as f64).powf(-fall), dice.phase())
        })
        .collect();
    let (unsteady, roughness, hiss) =
        (dice.log_uniform(0.002, 0.03), dice.uniform(0.03, 0.25), dice.uniform(0.02, 0.4));
    let (mut phase, mut gain, mut speed) = (0.0, 1.0, 1.0);
    let mut sound = Vec::with_capacity(count(duration_s));
    for _ in 0..count(duration_s) {
        phase += shaft_hz * speed / RATE;
        if phase >= 1.0 {
            phase -= 1.0;
            gain = 1.0 + roughness * dice.normal();
            speed = 1.0 + 0.9 * (speed - 1.0) + unsteady * dice.normal();
        }
        let turn = TAU * phase;
        let tone: f64 = parts.iter().enumerate().map(|(h, (a, p))| a * ((h as f64 + 1.0) * turn + p).sin()).sum();
        let stroke = 0.5 + 0.5 * (cylinders as f64 * turn).sin();
        sound.push(gain * tone + hiss * stroke * stroke * dice.normal());
    }
    filters::run(&mut filters::low_pass(1, dice.log_uniform(600.0, 4000.0), RATE), &mut sound);
    normalised(sound)
}

/// A fan: blade tone with harmonics in broad noise.
pub fn fan(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let blade_hz = dice.log_uniform(30.0, 400.0);
    let tone = dice.uniform(0.1, 0.8);
    let mut sound: Vec<f64> = (0..count(duration_s)).map(|_| dice.normal()).collect();
    filters::run(&mut filters::low_pass(1, dice.log_uniform(200.0, 2000.0), RATE), &mut sound);
    let rms = (sound.iter().map(|x| x * x).sum::<f64>() / sound.len() as f64).sqrt();
    for (i, x) in sound.iter_mut().enumerate() {
        let turn = TAU * (blade_hz * i as f64 / RATE).fract();
        *x = *x / rms * (1.0 + 0.3 * turn.cos())
            + tone * (turn.sin() + 0.5 * (2.0 * turn).sin() + 0.3 * (3.0 * turn).sin());
    }
    normalised(sound)
}

/// A clock: resonant ticks, alternately two kinds, in faint noise.
pub fn clock(dice: &mut Dice, duration_s: f64) -> Vec<f64> {
    let period_s = 1.0 / dice.pick(&[1.0, 2.0, 4.0, 5.0, 6.0]);
    let kinds = [dice.log_uniform(1500.0, 6000.0), dice.log_uniform(1500.0, 6000.0)];
    let (decay_s, limp) = (dice.log_uniform(0.001, 0.008), dice.uniform(-0.05, 0.05));
    let mut sound: Vec<f64> = (0..count(duration_s)).map(|_| 0.003 * dice.normal()).collect();
    for k in 0..(duration_s / period_s) as usize {
        let start = count((k as f64 + 0.5 + if k % 2 == 1 { limp } else { 0.0 }) * period_s);
        let end = (start + count(8.0 * decay_s)).min(sound.len());
        let size = 1.0 + 0.05 * dice.normal();
        for (i, x) in sound[start.min(end)..end].iter_mut().enumerate() {
            let t = i as f64 / RATE;
            *x += size * (-t / decay_s).exp() * ((TAU * kinds[k % 2] * t).sin() + 0.3 * dice.normal());
        }
    }
    normalised(sound)
}
