//! What follows the channel in the plain receiver.

use crate::model::receiver::{AgcLaw, AgcSettings, AudioBand, Complex};
use std::f64::consts::{PI, TAU};

/// Reach of the sinc down to the output rate, in output samples.
pub(super) const REACH: usize = 40;
/// Pieces of a fine step for the diode.
const PIECES: usize = 8;

/// Gain control: dg/dt of each law, with the mean level of a fine step.
pub(super) fn gain_control(z: &mut [Complex], agc: AgcSettings, step_s: f64) {
    let (mut gain, mut level, mut before) = (agc.greatest_gain.min(1.0), 0.0f64, 0.0);
    for z in z {
        let now = z.norm();
        let r = 0.5 * (before + now);
        before = now;
        let share = |attacks: bool| step_s / if attacks { agc.attack_s } else { agc.decay_s };
        let attacks = (r - agc.margin) * gain > agc.threshold;
        match agc.law {
            AgcLaw::Forward => {
                let share = share(r > level);
                level += (r - level) * share * (1.0 - 0.5 * share);
                gain = (agc.threshold / level).min(agc.greatest_gain);
            }
            AgcLaw::Feedback => {
                let aim = (agc.threshold / r).min(agc.greatest_gain);
                gain += (aim - gain) * share(attacks) * (1.0 - 0.5 * share(attacks));
            }
            AgcLaw::LevelDependent => {
                gain += (agc.threshold - r * gain) * share(attacks) * (1.0 - 0.5 * r * share(attacks));
                gain = gain.clamp(0.0, agc.greatest_gain);
            }
        }
        *z *= gain;
    }
}

/// Diode, capacitor and resistor in small pieces.
pub(super) fn diode(level: &[f64], charge_s: f64, discharge_s: f64, step_s: f64) -> Vec<f64> {
    let piece_s = step_s / PIECES as f64;
    let (mut voltage, mut from) = (0.0f64, 0.0f64);
    let mut all = Vec::new();
    for &to in level {
        for piece in 1..=PIECES {
            let at = |p: f64| from + (to - from) * p / PIECES as f64;
            let (a, b) = (at(piece as f64 - 1.0), at(piece as f64));
            voltage = if voltage <= a && (b >= a || charge_s > 0.0 && voltage < b) {
                let x = if charge_s > 0.0 { piece_s / charge_s } else { f64::INFINITY };
                if x.is_finite() { voltage + (0.5 * (a + b) - voltage) * (1.0 - (-x).exp()) } else { b }
            } else {
                (voltage * (-piece_s / discharge_s).exp()).max(b)
            };
        }
        from = to;
        all.push(voltage);
    }
    all
}

/// Quasi-peak detector of band B: S·C is 1 ms/3.937, R·C 160 ms; scaled to its voltage under a steady envelope.
pub(super) fn quasi_peak_b(level: &[f64], step_s: f64) -> Vec<f64> {
    let conduction = |ratio: f64| ((1.0 - ratio * ratio).sqrt() - ratio.acos() * ratio) / PI;
    let slope = |a: f64, u: f64| (if a > u { a * conduction(u / a) / (1e-3 / 3.937) } else { 0.0 }) - u / 0.16;
    let (mut steady, mut above) = (0.0f64, 1.0f64);
    while above - steady > 1e-12 {
        let middle = 0.5 * (steady + above);
        if slope(1.0, middle) > 0.0 { steady = middle } else { above = middle }
    }
    let (mut voltage, mut before) = (0.0, 0.0);
    level
        .iter()
        .map(|&a| {
            // Heun's rule: the envelope goes along a straight line.
            let first = slope(before, voltage);
            let second = slope(a, voltage + step_s * first);
            voltage += 0.5 * step_s * (first + second);
            before = a;
            voltage / steady
        })
        .collect()
}

/// The critically damped instrument of 160 ms.
pub(super) fn instrument(input: &[f64], step_s: f64) -> Vec<f64> {
    let (mut first, mut second) = (0.0, 0.0);
    input
        .iter()
        .map(|x| {
            first += (x - first) * step_s / 0.16;
            second += (first - second) * step_s / 0.16;
            second
        })
        .collect()
}

/// Butterworth circuits and de-emphasis, each pole pair by the trapezoidal rule at the high rate.
pub(super) fn audio_band(input: &[f64], band: AudioBand, de_emphasis_s: f64, rate_hz: f64) -> Vec<f64> {
    let mut y = input.to_vec();
    let mut cut = |poles: u8, corner_hz: f64, low: bool| {
        let w = 2.0 * rate_hz * (PI * corner_hz / rate_hz).tan();
        for k in 0..poles / 2 {
            let q = 0.5 / (PI * (2.0 * f64::from(k) + 1.0) / (2.0 * f64::from(poles))).sin();
            second_order(&mut y, w, q, low, rate_hz);
        }
        if poles % 2 == 1 {
            first_order(&mut y, w, low, rate_hz);
        }
    };
    if band.low_hz > 0.0 {
        cut(band.low_poles, band.low_hz, true);
    }
    cut(band.high_poles, band.high_hz, false);
    if de_emphasis_s > 0.0 {
        cut(1, 1.0 / (TAU * de_emphasis_s), false);
    }
    y
}

/// y'' + w/q·y' + w²·y = w²·x, or the x'' of it for a low cut; s stands for 2·rate·(1 − z⁻¹)/(1 + z⁻¹).
fn second_order(y: &mut [f64], w: f64, q: f64, low: bool, rate_hz: f64) {
    let c = 2.0 * rate_hz;
    let a = [c * c + c * w / q + w * w, 2.0 * (w * w - c * c), c * c - c * w / q + w * w];
    let b = if low { [c * c, -2.0 * c * c, c * c] } else { [w * w, 2.0 * w * w, w * w] };
    let (mut x1, mut x2, mut y1, mut y2) = (0.0, 0.0, 0.0, 0.0);
    for value in y {
        let x = *value;
        *value = (b[0] * x + b[1] * x1 + b[2] * x2 - a[1] * y1 - a[2] * y2) / a[0];
        (x2, x1, y2, y1) = (x1, x, y1, *value);
    }
}

fn first_order(y: &mut [f64], w: f64, low: bool, rate_hz: f64) {
    let c = 2.0 * rate_hz;
    let b = if low { [c, -c] } else { [w, w] };
    let (mut x1, mut y1) = (0.0, 0.0);
    for value in y {
        let x = *value;
        *value = (b[0] * x + b[1] * x1 - (w - c) * y1) / (c + w);
        (x1, y1) = (x, *value);
    }
}

/// Value at a fine place below half the output rate: a sinc under a Blackman window.
pub(super) fn down(fine: &[f64], place: f64, ratio: usize) -> f64 {
    let middle = place.round() as i64;
    debug_assert!((place - middle as f64).abs() < 1e-9);
    let reach = (REACH * ratio) as i64;
    let mut sum = 0.0;
    for k in -reach..=reach {
        let Some(&y) = usize::try_from(middle + k).ok().and_then(|at| fine.get(at)) else { continue };
        let x = k as f64 / reach as f64;
        let t = PI * k as f64 / ratio as f64;
        let sinc = if k == 0 { 1.0 } else { t.sin() / t };
        sum += y * sinc * (0.42 + 0.5 * (PI * x).cos() + 0.08 * (TAU * x).cos());
    }
    sum / ratio as f64
}
